"""The terminal summary of a second opinion: plain text, no line wider than 100 columns."""

from __future__ import annotations

from reach.report.alike import once
from reach.report.columns import shorten, table
from reach.report.recheck.numbers import differing, kinds, left_out
from reach.report.recheck.wording import (
    about,
    cautions,
    install_hint,
    item_text,
    kind_row,
    left_text,
    told,
)
from reach.report.summary import NAME_COLUMNS, bullets, headed, pairs
from reach.report.wording import NOTHING
from reach.result import RecheckResult

DIFFERING = 12  # items told one by one
KINDS = 20
LEFT = 8
NOTES = 8
WHAT_COLUMNS = 120
HEADER = ("kind", "items", "agree", "differ", "not checkable", "worst", "allowed", "in what")


def write(result: RecheckResult) -> str:
    """Return the summary; the verdict's sentence comes first."""
    texts = [item_text(item) for item in differing(result.items)]
    left = [left_text(one) for one in left_out(result.items)]
    notes = [told(note) for note in once(result.notes)]
    return headed(
        result.verdict.sentence,
        (
            ("", pairs(about(result))),
            ("By kind, with the worst difference", _kinds(result)),
            ("What differs", _first(texts, DIFFERING, "in recheck.csv")),
            ("What was left out", [*_first(left, LEFT), *bullets([install_hint(result)])]),
            ("Notes", _first(notes, NOTES)),
            ("Caution", bullets(cautions())),
        ),
    )


def _kinds(result: RecheckResult) -> list[str]:
    """The kinds, the unit with what is allowed: names of joints need the room."""
    found = kinds(result.items)
    rows = []
    for kind in found[:KINDS]:
        name, *numbers, worst, allowed, unit, what = kind_row(kind)
        limit = allowed if unit == NOTHING else f"{allowed} {unit}"
        rows.append((shorten(name, NAME_COLUMNS), *numbers, worst, limit, shorten(what, WHAT_COLUMNS)))
    over = len(found) - KINDS
    more = [f"  … and {over} more in verdict.json"] if over > 0 else []
    return table(HEADER, rows, left=1) + more if rows else []


def _first(texts: list[str], most: int, place: str = "in verdict.json") -> list[str]:
    over = len(texts) - most
    return bullets(texts[:most]) + ([f"  … and {over} more {place}"] if over > 0 else [])
