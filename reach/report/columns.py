"""Plain text in columns: widths as a terminal shows them, wrapping, and tables."""

from __future__ import annotations

import unicodedata
from collections.abc import Sequence
from itertools import zip_longest

COLUMNS = 100
GAP = 2  # spaces before a column of a table
LAST = 18  # columns that a table's last one has at least
NARROWEST = 12  # columns to which others are taken back for that


def width(text: str) -> int:
    """Return how many columns of a terminal the text takes."""
    return sum(_cells(character) for character in text)


def _cells(character: str) -> int:
    if unicodedata.combining(character) or unicodedata.category(character) in ("Mn", "Me", "Cf"):
        return 0
    return 2 if unicodedata.east_asian_width(character) in ("W", "F") else 1


def wrap(text: str, first: str = "", rest: str | None = None, columns: int = COLUMNS) -> list[str]:
    """Break text at spaces into lines of at most `columns`, which begin with `first`, then with `rest`.

    A word longer than a line is cut.
    """
    rest = " " * width(first) if rest is None else rest
    lines: list[str] = []
    line = first
    empty = True
    for word in text.split():
        if not empty and width(line) + 1 + width(word) <= columns:
            line += " " + word
            continue
        if not empty:
            lines.append(line)
            line = rest
        while width(line) + width(word) > columns:
            head = _head(word, columns - width(line))
            lines.append(line + head)
            line, word = rest, word[len(head) :]
        line, empty = line + word, False
    return [*lines, line] if not empty or not lines else lines


def _head(word: str, columns: int) -> str:
    """Return the longest start of a word that fits, one character at least."""
    end, used = 0, 0
    while end < len(word) and used + _cells(word[end]) <= columns:
        used += _cells(word[end])
        end += 1
    return word[: max(end, 1)]


def shorten(text: str, columns: int) -> str:
    """Return the text, or its start and an ellipsis where it is wider than `columns`."""
    return text if width(text) <= columns else _head(text, columns - 1) + "…"


def table(header: Sequence[str], rows: Sequence[Sequence[str]], left: int = 0) -> list[str]:
    """Lay rows out under a header, two spaces apart; the last column wraps, and wide ones where it needs room.

    Parameters
    ----------
    left : int
        How many leading columns are flush left; the last column is always, the rest flush right.
    """
    count = len(header) - 1
    widths = _narrowed([max(width(row[i]) for row in (header, *rows)) for i in range(count)])
    last = COLUMNS - sum(widths) - GAP * len(header)
    lines: list[str] = []
    for row in (header, *rows):
        cells = [wrap(text, columns=room) for text, room in zip(row, (*widths, last), strict=True)]
        for parts in zip_longest(*cells, fillvalue=""):
            padded = [_pad(parts[i], widths[i], i < left) for i in range(count)]
            lines.append("".join(" " * GAP + part for part in (*padded, parts[count])).rstrip())
    return lines


def _narrowed(widths: list[int]) -> list[int]:
    """Widths with the widest taken back, one column at a time, until the last column has its room."""
    room = COLUMNS - LAST - GAP * (len(widths) + 1)
    found = list(widths)
    while sum(found) > room and max(found) > NARROWEST:
        found[found.index(max(found))] -= 1
    return found


def _pad(text: str, columns: int, left: bool) -> str:
    space = " " * (columns - width(text))
    return text + space if left else space + text
