"""Command logs as CSV: columns found by name, numbers read at once, faults located line by line."""

from __future__ import annotations

import csv
import io
import re

import numpy as np

from reach.cell import Array, CommandLog
from reach.errors import FaultList, InputError, nearest
from reach.formats.capped import ByKind
from reach.formats.command_log import POSE_COLUMNS, STRIKE_COLUMN, TWIST_COLUMNS, check_arrays
from reach.formats.files import decode
from reach.formats.log_time import TIME_COLUMN

REQUIRED = (TIME_COLUMN, *TWIST_COLUMNS)
KNOWN = (*REQUIRED, STRIKE_COLUMN, *POSE_COLUMNS)


def read_csv(content: bytes, file: str, max_gap_s: float, time_faults: str) -> CommandLog:
    """Read a command log.

    Parameters
    ----------
    content : bytes
        UTF-8, with a header line; a byte order mark and any line ends are fine.
    file : str
        Shown in faults.
    max_gap_s, time_faults
        See `check_arrays`.

    Raises
    ------
    InputError
        With every fault found.
    """
    faults = FaultList(file)
    text, problem = decode(content)
    if text is None:
        faults.add(*problem)
        raise InputError(faults.faults)
    text = text.replace("\r\n", "\n").replace("\r", "\n")
    header, _, body = text.partition("\n")
    names = _header(header, faults)
    faults.raise_if_any()
    lines: list[int] = []
    table = _at_once(body, len(names))
    if table is None:
        table, lines = _line_by_line(body, names, faults)
        faults.raise_if_any()

    def place(row: int, column: str) -> str:
        if not lines:
            lines.extend(number for number, line in enumerate(body.split("\n"), 2) if line)
        return f"line {lines[row]}, column {column}"

    def columns(wanted: tuple[str, ...]) -> Array:
        return table[:, [names.index(name) for name in wanted]]

    return check_arrays(
        columns((TIME_COLUMN,))[:, 0],
        columns(TWIST_COLUMNS),
        columns((STRIKE_COLUMN,))[:, 0] if STRIKE_COLUMN in names else None,
        columns(POSE_COLUMNS) if POSE_COLUMNS[0] in names else None,
        max_gap_s,
        time_faults,
        file,
        place,
    )


def _header(line: str, faults: FaultList) -> list[str]:
    """Column names of the header line; faults when they don't say which column is which."""
    where, wanted = "line 1", ",".join(REQUIRED)
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
    kinds = ByKind(faults, where)
    for number, name in enumerate(names, 1):
        if name not in KNOWN:
            told = f'unknown column "{name}"' if name else f"column {number} has no name"
            kinds.add(
                "unknown columns", where, told + (nearest(name, KNOWN) if name else "; name or drop it")
            )
        elif name in names[: number - 1]:
            kinds.add("columns twice", where, f'column "{name}" stands twice; keep one')
    missing = [name for name in REQUIRED if name not in names]
    if missing:
        faults.add(where, f"column {', '.join(missing)} missing; add it, by name")
    posed = [name for name in POSE_COLUMNS if name in names]
    if posed and len(posed) < len(POSE_COLUMNS):
        lacking = ", ".join(name for name in POSE_COLUMNS if name not in names)
        faults.add(where, f"pose columns are incomplete, without {lacking}; give all seven or none")
    kinds.close()
    return names


def _at_once(body: str, width: int) -> Array | None:
    """The whole table in one go, None when any line needs a closer look."""
    if not body.strip():
        return np.empty((0, width))
    try:
        table = np.loadtxt(io.StringIO(body), delimiter=",", comments=None, ndmin=2, dtype=np.float64)
    except ValueError:
        return None
    return table if table.shape[1] == width else None


def _line_by_line(body: str, names: list[str], faults: FaultList) -> tuple[Array, list[int]]:
    """Every row with its line number; each field that is no number is a fault with its place."""
    rows: list[list[float]] = []
    lines: list[int] = []
    kinds = ByKind(faults, "whole log")
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
        faults.add(f"line {reader.line_num + 1}", f"can't be read: {_reason(error)}")
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
