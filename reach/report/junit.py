"""JUnit XML: a case for the verdict, one a strike and one a limit kind."""

from __future__ import annotations

import xml.etree.ElementTree as ET

from reach.report.wording import outcome, owner, percent, plain
from reach.result import FollowResult
from reach.verdict import DELIVERABLE, broken_limits

CLASS = "strikecheck.follow"


def write(result: FollowResult) -> bytes:
    """Return the result as a JUnit file in UTF-8."""
    suite = ET.Element("testsuite", name="strikecheck follow")
    _verdict(suite, result)
    for place, strike in enumerate(result.evidence.strikes, start=1):
        case = _case(suite, f"strike {place} at {strike.time_s:.3f} s")
        if not strike.delivered:
            _add(case, "failure", outcome(strike), "strike")
    for kind in dict.fromkeys(use.limit for use in result.evidence.uses):
        _limit_kind(suite, result, kind)
    for tag, count in (("failure", "failures"), ("skipped", "skipped")):
        suite.set(count, str(len(suite.findall(f"testcase/{tag}"))))
    suite.set("tests", str(len(suite)))
    suite.set("errors", "0")
    root = ET.Element("testsuites")
    root.append(suite)
    ET.indent(root)
    text = ET.tostring(root, encoding="unicode")
    return f'<?xml version="1.0" encoding="UTF-8"?>\n{text}\n'.encode()


def _verdict(suite: ET.Element, result: FollowResult) -> None:
    case = _case(suite, "verdict")
    if result.verdict.verdict != DELIVERABLE:
        _add(case, "failure", result.verdict.sentence, result.verdict.verdict)
        case[0].text = "\n".join(plain(reason.text) for reason in result.reasons) or None


def _limit_kind(suite: ET.Element, result: FollowResult, kind: str) -> None:
    case = _case(suite, f"limit {kind}")
    broken = [use for use in broken_limits(result.evidence) if use.limit == kind]
    unknown = ["tool" if joint is None else joint for name, joint in result.evidence.unknown if name == kind]
    if broken:
        texts = [f"{owner(use)} at {percent(use.utilisation)} %" for use in broken]
        _add(case, "failure", "; ".join(texts), "limit")
    elif unknown:
        required = kind in result.cell.accept.require
        _add(case, "failure" if required else "skipped", f"unknown for {', '.join(unknown)}", "unknown limit")


def _case(suite: ET.Element, name: str) -> ET.Element:
    return ET.SubElement(suite, "testcase", classname=CLASS, name=plain(name))


def _add(case: ET.Element, tag: str, message: str, kind: str) -> None:
    element = ET.SubElement(case, tag, message=plain(message))
    if tag == "failure":
        element.set("type", kind)
