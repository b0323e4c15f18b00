"""JUnit's XML: a suite of cases, of which some are alike for every command."""

from __future__ import annotations

import xml.etree.ElementTree as ET
from collections.abc import Iterable

from reach.report.wording import owner, plain
from reach.result import Result
from reach.verdict import DELIVERABLE


class Cases:
    """The cases of one run of a command.

    Parameters
    ----------
    command : str
    """

    def __init__(self, command: str) -> None:
        self._command = command
        self._root = ET.Element("testsuites")
        self._suite = ET.SubElement(self._root, "testsuite", name=f"strikecheck {command}")

    def add(self, name: str, kind: str = "") -> None:
        """Add a case that passes, of a kind where the command's cases have some."""
        classname = ".".join(("strikecheck", self._command, *([plain(kind)] if kind else [])))
        ET.SubElement(self._suite, "testcase", classname=classname, name=plain(name))

    def fail(self, message: str, kind: str, more: Iterable[str] = ()) -> None:
        """Make the last case a failure of a kind, with further lines."""
        failure = ET.SubElement(self._suite[-1], "failure", message=plain(message), type=plain(kind))
        failure.text = "\n".join(plain(line) for line in more) or None

    def skip(self, message: str) -> None:
        """Make the last case one that could not be looked at."""
        ET.SubElement(self._suite[-1], "skipped", message=plain(message))

    def written(self) -> bytes:
        """Return the whole as a file in UTF-8."""
        for tag, count in (("failure", "failures"), ("skipped", "skipped")):
            self._suite.set(count, str(len(self._suite.findall(f"testcase/{tag}"))))
        self._suite.set("tests", str(len(self._suite)))
        self._suite.set("errors", "0")
        ET.indent(self._root)
        text = ET.tostring(self._root, encoding="unicode")
        return f'<?xml version="1.0" encoding="UTF-8"?>\n{text}\n'.encode()


class Suite(Cases):
    """The cases of one run with a result on a cell, the verdict's first.

    Parameters
    ----------
    result : Result
    """

    def __init__(self, result: Result) -> None:
        super().__init__(result.command)
        self._result = result
        self.add("verdict")
        if result.verdict.verdict != DELIVERABLE:
            self.fail(
                result.verdict.sentence, result.verdict.verdict, (reason.text for reason in result.reasons)
            )

    def unknown(self, kind: str, unknown: Iterable[tuple[str, str | None]]) -> None:
        """Let the last case fail, or be skipped where nobody requires it, for a limit kind that is unknown."""
        owners = [owner(joint) for name, joint in unknown if name == kind]
        message = f"unknown for {', '.join(owners)}"
        if owners and kind in self._result.cell.accept.require:
            self.fail(message, "unknown limit")
        elif owners:
            self.skip(message)
