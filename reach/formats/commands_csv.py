"""Command logs as CSV: which columns a log has, and the checks on what stands in them."""

from __future__ import annotations

from reach.cell import CommandLog
from reach.errors import FaultList
from reach.formats.command_log import POSE_COLUMNS, STRIKE_COLUMN, TWIST_COLUMNS, check_arrays
from reach.formats.log_time import TIME_COLUMN
from reach.formats.table_csv import Columns, read_table

COLUMNS = Columns(
    (TIME_COLUMN, *TWIST_COLUMNS), (STRIKE_COLUMN,), (("pose", POSE_COLUMNS),), whole="whole log"
)


def read_csv(content: bytes, file: str, max_gap_s: float, time_faults: str) -> CommandLog:
    """Read a command log.

    Parameters
    ----------
    content : bytes
        See `read_table`.
    file : str
        Shown in faults.
    max_gap_s, time_faults
        See `check_arrays`.

    Raises
    ------
    InputError
        With every fault found.
    """
    table = read_table(content, COLUMNS, FaultList(file))
    return check_arrays(
        table.columns((TIME_COLUMN,))[:, 0],
        table.columns(TWIST_COLUMNS),
        table.columns((STRIKE_COLUMN,))[:, 0] if STRIKE_COLUMN in table.names else None,
        table.columns(POSE_COLUMNS) if POSE_COLUMNS[0] in table.names else None,
        max_gap_s,
        time_faults,
        file,
        table.place,
    )
