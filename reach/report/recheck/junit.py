"""JUnit XML: a case an item."""

from __future__ import annotations

from reach.evidence.items import DIFFER, NOT_CHECKABLE
from reach.report.cases import Cases
from reach.report.recheck.numbers import NOTHING_COMPARED, off
from reach.report.recheck.wording import check_text, item_text, place_text
from reach.result import RecheckResult


def write(result: RecheckResult) -> bytes:
    """Return the result as a JUnit file in UTF-8.

    A case's class is its kind. It fails where the item differs, and is skipped where the item is not checkable.
    Without any item there is one skipped case.
    """
    cases = Cases(result.command)
    for item in result.items:
        cases.add(place_text(item), item.kind)
        if item.status == DIFFER:
            left = [f"left out: {item.left_out}"] if item.left_out else []
            cases.fail(item_text(item), item.status, [*map(check_text, off(item)), *left])
        elif item.status == NOT_CHECKABLE:
            cases.skip(item.left_out or NOTHING_COMPARED)
    if not result.items:
        cases.add("verdict")
        cases.skip(result.verdict.sentence)
    return cases.written()
