"""Readers of command logs by file suffix. A new format is one module and one line here."""

from __future__ import annotations

from collections.abc import Callable

from reach.cell import CommandLog
from reach.formats.commands_csv import read_csv

Reader = Callable[[bytes, str, float, str], CommandLog]
"""reader(content, file, max_gap_s, time_faults) -> CommandLog, through check_arrays; raises InputError."""

READERS: dict[str, Reader] = {
    ".csv": read_csv,
}
