"""A CSV of numbers with named columns: found by name, read at once, faults located line by line."""

from __future__ import annotations

import csv
import io
import re
from collections.abc import Sequence
from dataclasses import dataclass, field

import numpy as np

from reach.cell import Array
from reach.errors import FaultList, nearest
from reach.formats.capped import ByKind
from reach.formats.files import decode


@dataclass(frozen=True)
class Columns:
    """What columns a kind of table has.

    Attributes
    ----------
    required : in the order in which a header is proposed
    optional : each may be left out
    together : what a group is called -> its columns, all or none of which are there
    whole : what the table is called, where a fault is of no line
    """

    required: tuple[str, ...]
    optional: tuple[str, ...] = ()
    together: tuple[tuple[str, tuple[str, ...]], ...] = ()
    whole: str = "whole file"

    @property
    def known(self) -> tuple[str, ...]:
        """Every column."""
        return (*self.required, *self.optional, *(name for _, names in self.together for name in names))


@dataclass(frozen=True, eq=False)
class NumberTable:
    """A table as read; `values` is (rows, columns) in the order of `names`."""

    names: list[str]
    values: Array
    body: str
    lines: list[int] = field(default_factory=list)

    def place(self, row: int, column: str) -> str:
        """Where in the file a row's value stands."""
        if not self.lines:
            self.lines.extend(number for number, line in enumerate(self.body.split("\n"), 2) if line)
        return f"line {self.lines[row]}, column {column}"

    def columns(self, wanted: Sequence[str]) -> Array:
        """The (rows, wanted) values of columns that are there."""
        return self.values[:, [self.names.index(name) for name in wanted]]


def read_table(content: bytes, columns: Columns, faults: FaultList) -> NumberTable:
    """Read a table of numbers; they may be nan or infinite.

    Parameters
    ----------
    content : bytes
        UTF-8, with a header line; a byte order mark and any line ends are fine.
    columns : Columns
    faults : of this file

    Raises
    ------
    InputError
        With every fault found.
    """
    text, problem = decode(content)
    if text is None:
        faults.add(*problem)
        text = ""
    faults.raise_if_any()
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    header, _, body = text.partition("\n")
    names = _header(header, columns, faults)
    faults.raise_if_any()
    values = _at_once(body, len(names))
    if values is not None:
        return NumberTable(names, values, body)
    values, lines = _line_by_line(body, names, ByKind(faults, columns.whole))
    faults.raise_if_any()
    return NumberTable(names, values, body, lines)


def _header(line: str, columns: Columns, faults: FaultList) -> list[str]:
    """Column names of the header line; faults when they don't say which column is which."""
    where, wanted = "line 1", ",".join(columns.required)
    if not line.strip():
        faults.add(where, f"has no header; start with {wanted}")
        return []
    for mark, name in ((";", "semicolons"), ("\t", "tabs")):
        if mark in line and line.count(mark) > line.count(","):
            faults.add(where, f"columns are separated by {name}; save with commas, and points in numbers")
            return []
    try:
        names = [name.strip() for name in next(csv.reader([line], strict=True))]
    except csv.Error as error:
        faults.add(where, f"header can't be read: {_reason(error)}; start with {wanted}")
        return []
    if all(re.fullmatch(r"[-+.\deE]*|nan|inf", name) for name in names):
        faults.add(where, f"holds numbers, not names; columns are found by name: add the header {wanted}")
        return []
    _check_names(names, columns, where, faults)
    return names


def _check_names(names: list[str], columns: Columns, where: str, faults: FaultList) -> None:
    kinds = ByKind(faults, where)
    for number, name in enumerate(names, 1):
        if name not in columns.known:
            told = f'unknown column "{name}"' if name else f"column {number} has no name"
            told += nearest(name, columns.known) if name else "; name or drop it"
            kinds.add("unknown columns", where, told)
        elif name in names[: number - 1]:
            kinds.add("columns twice", where, f'column "{name}" stands twice; keep one')
    missing = [name for name in columns.required if name not in names]
    if missing:
        faults.add(where, f"column {', '.join(missing)} missing; add it, by name")
    for called, group in columns.together:
        lacking = [name for name in group if name not in names]
        if lacking and len(lacking) < len(group):
            told = f"{called} columns are incomplete, without {', '.join(lacking)}"
            faults.add(where, f"{told}; give all {len(group)} or none")
    kinds.close()


def _at_once(body: str, width: int) -> Array | None:
    """The whole table in one go, None when any line needs a closer look."""
    if not body.strip():
        return np.empty((0, width))
    try:
        table = np.loadtxt(io.StringIO(body), delimiter=",", comments=None, ndmin=2, dtype=np.float64)
    except ValueError:
        return None
    return table if table.shape[1] == width else None


def _line_by_line(body: str, names: list[str], kinds: ByKind) -> tuple[Array, list[int]]:
    """Every row with its line number; each field that is no number is a fault with its place."""
    rows: list[list[float]] = []
    lines: list[int] = []
    reader = csv.reader(io.StringIO(body), strict=True)
    try:
        for fields in reader:
            line = reader.line_num + 1
            if not fields or (len(fields) == 1 and not fields[0].strip()):
                continue
            if len(fields) != len(names):
                told = f"has {len(fields)} fields, the header {len(names)}; complete or drop the line"
                kinds.add("wrong number of fields", f"line {line}", told)
                continue
            lines.append(line)
            rows.append([_number(*pair, line, kinds) for pair in zip(fields, names, strict=True)])
    except csv.Error as error:
        kinds.faults.add(f"line {reader.line_num + 1}", f"can't be read: {_reason(error)}")
    kinds.close()
    return np.array(rows, dtype=np.float64).reshape(len(rows), len(names)), lines


def _reason(error: csv.Error) -> str:
    """The library's reason, but for the one that speaks of its own settings."""
    if "field limit" in str(error):
        return f"a field is longer than {csv.field_size_limit()} characters; is a quote left open?"
    return f"{error}; correct its quotes"


def _number(text: str, column: str, line: int, kinds: ByKind) -> float:
    try:
        if "_" not in text:
            return float(text)
    except ValueError:
        pass
    told = f'"{text[:40]}" is no number; correct it' if text.strip() else "is empty; give a number"
    kinds.add("no number", f"line {line}, column {column}", told)
    return 0.0
