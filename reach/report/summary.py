"""Parts of the terminal summary that every command's has: lines of plain text, 100 columns at most."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

from reach.evidence.record import Reason
from reach.report import needs
from reach.report.alike import alike, with_count
from reach.report.columns import shorten, table, width, wrap
from reach.report.wording import all_notes, plain, remedy_line, unknown_limits
from reach.result import Result

DECIDING_REASONS, OTHER_REASONS = 10, 5
NOTE_LINES = 8
NAME_COLUMNS = 24

Section = tuple[str, list[str]]
Unknown = Iterable[tuple[str, str | None]]


def written(result: Result, sections: Iterable[Section]) -> str:
    """Return the verdict's sentence, and below it each section that has lines under its heading."""
    return headed(result.verdict.sentence, sections)


def headed(sentence: str, sections: Iterable[Section]) -> str:
    """Return a sentence, and below it each section that has lines under its heading."""
    lines = wrap(plain(sentence))
    for heading, content in sections:
        if content:
            lines += ["", *([heading] if heading else []), *content]
    return "\n".join(lines) + "\n"


def standing(result: Result, own: Iterable[str] = ()) -> list[str]:
    """Return how the verdict stands to margins and limits; `own` are a command's own lines."""
    texts = [f"without margins: {result.without_margins}", *own, f"headroom: {result.headroom_text}"]
    return [line for text in texts for line in wrap(plain(text), rest="  ")]


def deciding(result: Result) -> Section:
    """Return the reasons that decide."""
    return "What decides", _first([reason for reason in result.reasons if reason.decides], DECIDING_REASONS)


def other_reasons(result: Result) -> Section:
    """Return some of the reasons that do not."""
    others = [reason for reason in result.reasons if not reason.decides]
    return "What else fell short", _first(others, OTHER_REASONS)


def unknown_list(unknown: Unknown) -> Section:
    """Return the limits nobody stated."""
    return "Limits unknown", bullets(f"{limit}: {joints}" for limit, joints in unknown_limits(unknown))


def needed(result: Result, unknown: Unknown) -> Section:
    """Return what the limits would have to be."""
    sought, beyond = needs.split(result, unknown)
    lines = []
    if sought:
        cells = [
            (limit, shorten(joint, NAME_COLUMNS), *rest)
            for limit, joint, *rest in needs.rows(result.cell, sought)
        ]
        lines = table(needs.HEADER, cells, left=2) + wrap(needs.meaning(sought), "  ")
    lines += bullets([*needs.remarks(sought), needs.not_searched(beyond)])
    return "What the limits would have to be", lines


def remedies(result: Result) -> Section:
    """Return what would help, by number."""
    lines = []
    for place, remedy in enumerate(result.remedies, start=1):
        lines += wrap(plain(remedy_line(remedy)), f"  {place}. ")
    return "What would help", lines


def notes(result: Result) -> Section:
    """Return as many notes as a few lines hold, those that are alike told once."""
    found = all_notes(result)
    lines: list[str] = []
    told = 0
    for note, count in alike(found, [joint.name for joint in result.cell.arm.joints]):
        more = bullets([with_count(note, count)])
        if lines and len(lines) + len(more) > NOTE_LINES:
            break
        lines += more
        told += count
    more = [f"  … and {len(found) - told} more in verdict.json"] if told < len(found) else []
    return "Notes", lines + more


def bullets(texts: Iterable[str]) -> list[str]:
    """Return texts as items of a list, empty ones left out."""
    return [line for text in texts if text for line in wrap(plain(text), "  - ")]


def pairs(rows: Iterable[tuple[str, str]]) -> list[str]:
    """Return names with their values, the values one below the other."""
    found = [(name, text) for name, text in rows if text]
    columns = max((width(name) for name, _ in found), default=0)
    return [
        line
        for name, text in found
        for line in wrap(plain(text), f"  {name}{' ' * (columns - width(name))}  ")
    ]


def listed(header: Sequence[str], rows: Sequence[Sequence[str]], most: int, left: int = 0) -> list[str]:
    """Return a table of the first rows and how many are left out, or nothing without rows.

    Parameters
    ----------
    header : the page's, whose marks of columns that hold numbers are taken off
    left : how many leading columns are flush left
    """
    if not rows:
        return []
    shown = [[*(shorten(cell, 2 * NAME_COLUMNS) for cell in row[:-1]), row[-1]] for row in rows[:most]]
    over = len(rows) - len(shown)
    more = [f"  … and {over} more in verdict.json"] if over > 0 else []
    return table([name.removeprefix("#") for name in header], shown, left=left) + more


def _first(reasons: list[Reason], count: int) -> list[str]:
    left = len(reasons) - count
    more = [f"  … and {left} more in verdict.json"] if left > 0 else []
    return bullets(reason.text for reason in reasons[:count]) + more
