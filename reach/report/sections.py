"""Sections of report.html that every command's page has; the texts are escaped here."""

from __future__ import annotations

from collections.abc import Iterable

from reach.evidence.items import AGREE, DIFFER
from reach.evidence.record import Reason
from reach.report import needs
from reach.report.alike import once
from reach.report.document import versions
from reach.report.figures import Picture
from reach.report.page import bullets, details, esc, paragraph, picture, section, table
from reach.report.wording import NOTHING, all_notes, number, remedy_line, span, unknown_limits
from reach.result import Result
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, Verdict

Unknown = Iterable[tuple[str, str | None]]
FRAMES = {DELIVERABLE: "good", AGREE: "good", NOT_DELIVERABLE: "bad", DIFFER: "bad"}  # any other is "open"


def heading(question: str, result: Result) -> str:
    """Return the page's first line: the question and the cell it is asked of."""
    return f"<h1>{esc(question)} {esc(result.cell.path)}</h1>"


def verdict_box(result: Result, lines: Iterable[str] = ()) -> str:
    """Return the framed verdict; `lines` are a command's own, before the headroom."""
    texts = [f"Without margins: {result.without_margins}.", *lines, f"Headroom: {result.headroom_text}"]
    return framed(result.verdict, texts)


def framed(verdict: Verdict, lines: Iterable[str]) -> str:
    """Return a verdict in the frame of its kind, with its sentence and further lines."""
    content = "".join(paragraph(text) for text in (verdict.sentence, *lines))
    look = FRAMES.get(verdict.verdict, "open")
    return f'<div class="verdict {look}"><strong>{esc(verdict.verdict)}</strong>{content}</div>'


def deciding(result: Result) -> str:
    """Return the section on the reasons that decide."""
    return section("What decides", _reasons([reason for reason in result.reasons if reason.decides]))


def other_reasons(result: Result) -> str:
    """Return the section on the reasons that do not."""
    return section(
        "What else fell short", _reasons([reason for reason in result.reasons if not reason.decides])
    )


def advice(result: Result, unknown: Unknown) -> str:
    """Return the sections on what would help and on what the limits would have to be."""
    remedies = bullets((remedy_line(remedy) for remedy in result.remedies), "ol")
    return section("What would help", remedies) + section(
        "What the limits would have to be", _needs(result, unknown)
    )


def unknown_list(unknown: Unknown) -> str:
    """Return the limits nobody stated, or nothing."""
    found = unknown_limits(unknown)
    if not found:
        return ""
    texts = (f"{kind}: {joints}" for kind, joints in found)
    return paragraph("Unknown, because nobody stated them:") + bullets(texts)


def figures(drawn: list[Picture], without: str) -> str:
    """Return the section of the drawings, or why there are none."""
    parts = [picture(*drawing.caption, drawing.svg) for drawing in drawn]
    return section("Figures", *(parts or [paragraph(without)]))


def foot(result: Result, cautions: tuple[str, ...]) -> str:
    """Return what every page ends with: what was not checked, notes, inputs, versions and cautions."""
    used = [(name, version or "not installed") for name, version in versions().items()]
    return "\n".join(
        (
            section("Not checked", bullets(result.not_checked)),
            section("Notes", _notes(result)),
            section("Inputs", table(("file", "SHA-256"), [(i.path, i.sha256) for i in result.cell.inputs])),
            section("Versions", table(("program", "version"), used)),
            section("Caution", f'<div class="caution">{bullets(cautions)}</div>'),
        )
    )


def _reasons(reasons: list[Reason]) -> str:
    header = ("what", "limit", "phase", "#when s", "#value", "#bound", "unit", "basis")
    rows = [
        (
            reason.text,
            f"{reason.limit} of {reason.joint}" if reason.joint else reason.limit,
            reason.phase or NOTHING,
            span(reason),
            number(reason.value),
            number(reason.bound),
            reason.unit,
            reason.basis,
        )
        for reason in reasons
    ]
    return table(header, rows)


def _needs(result: Result, unknown: Unknown) -> str:
    sought, beyond = needs.split(result, unknown)
    header = [f"#{name}" if name in ("now", "necessary", "sufficient") else name for name in needs.HEADER]
    found = table(header, needs.rows(result.cell, sought))
    if found:
        found += paragraph(f"{needs.meaning(sought)}.") + bullets(needs.remarks(sought))
    return found + details(needs.not_searched(beyond), bullets(need.text for need in beyond))


def _notes(result: Result) -> str:
    """The notes, those that are alike told once, and all of them behind a click where that leaves some out."""
    notes = all_notes(result)
    short = once(notes, [joint.name for joint in result.cell.arm.joints])
    return bullets(short) + (
        details(f"all {len(notes)} notes", bullets(notes)) if len(short) < len(notes) else ""
    )
