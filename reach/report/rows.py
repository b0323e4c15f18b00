"""Tables of numbers and texts as CSV, where they are short enough to be written cell by cell."""

from __future__ import annotations

from collections.abc import Iterable, Sequence

import numpy as np

from reach.report.document import DIGITS, encodable

Cell = str | bool | int | float | None


def written(header: Sequence[str], rows: Iterable[Sequence[Cell]]) -> str:
    """Return rows under a header as CSV (RFC 4180): a cell is empty where there is nothing or a nan."""
    lines = [[_quoted(name) for name in header], *([cell(value) for value in row] for row in rows)]
    return "".join(",".join(line) + "\n" for line in lines)


def cell(value: Cell) -> str:
    """Return one cell: a bool as 0 or 1, a number to so many digits, no negative zero."""
    if value is None:
        return ""
    if isinstance(value, str):
        return _quoted(value)
    if isinstance(value, (bool, np.bool_, int, np.integer)):
        return str(int(value))
    return "" if np.isnan(value) else f"{float(value) + 0.0:.{DIGITS}g}"


def _quoted(text: str) -> str:
    """Return a text as a cell that holds it whole."""
    text = encodable(text)
    return '"' + text.replace('"', '""') + '"' if any(sign in text for sign in '",\n\r') else text
