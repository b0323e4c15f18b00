"""recheck.csv: a row a comparison."""

from __future__ import annotations

import math
from collections.abc import Iterator

from reach.evidence.items import Item
from reach.report.recheck.numbers import NOTHING_COMPARED
from reach.report.rows import Cell, written
from reach.report.wording import plain
from reach.result import RecheckResult

COLUMNS = ("kind", "where", "status", "check", "difference", "allowed", "unit", "left_out")


def write(result: RecheckResult) -> str:
    """Return the comparisons as CSV; `status` and `left_out` are the item's.

    An item without a comparison has one row, its check empty. A difference that is no number is `nan`.
    """
    return written(COLUMNS, (row for item in result.items for row in _rows(item)))


def _rows(item: Item) -> Iterator[list[Cell]]:
    head: list[Cell] = [plain(item.kind), plain(item.where), item.status]
    why = plain(item.left_out)
    for check in item.checks:
        yield [
            *(*head, plain(check.name), _number(check.difference), _number(check.allowed)),
            *(plain(check.unit), why),
        ]
    if not item.checks:
        yield [*head, None, None, None, None, why or NOTHING_COMPARED]


def _number(value: float) -> Cell:
    return "nan" if math.isnan(value) else value
