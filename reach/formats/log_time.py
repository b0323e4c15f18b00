"""Time stamps of a command log: what is wrong with them, and what can be mended when the cell asks for it."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, CommandLog
from reach.errors import FaultList
from reach.formats.capped import ByKind

TIME_COLUMN = "t_s"
MAX_PERIODS = 2_000_000  # control periods of a log; half an hour and more at 1 kHz
MENDABLE_GAPS = 3.0  # a gap up to so many times max_gap_s can be mended
_ROUNDING = 1 + 1e-9  # stamps at exactly max_gap_s are no gap, whatever their last digit

Place = Callable[[int, str], str]
"""Where row i (from 0) and a column stand in the source."""

Marks = NDArray[np.bool_]


def check_span(log: CommandLog, period_s: float, faults: FaultList, where: str = "follow.commands") -> None:
    """Add a fault at `where` when following the log would take more than MAX_PERIODS control periods."""
    span = float(log.t_s[-1] - log.t_s[0])
    if span / period_s > MAX_PERIODS:
        faults.add(
            where,
            f"the log spans {span:.6g} s, {math.ceil(span / period_s)} control periods of {period_s:g} s, "
            f"more than {MAX_PERIODS}; cut it or raise control.period_s",
        )


class TimeOrder:
    """Puts the rows of a log in time order, by refusing or by mending.

    Mending drops rows that go back by at most `max_gap_s`, keeps the last of rows of the same time, and lets
    the interpolation bridge gaps of up to MENDABLE_GAPS times `max_gap_s`; anything worse is a fault still.
    """

    def __init__(self, max_gap_s: float, mend: bool, place: Place, kinds: ByKind):
        self.max_gap_s, self.mend, self.place, self.kinds = max_gap_s, mend, place, kinds
        self.mends: list[str] = []

    def rows(self, times: Array, marks: Marks | None) -> tuple[NDArray[np.intp], Marks | None]:
        """Rows to keep, and the strike marks, with those of dropped repeats moved to the row kept."""
        marks = None if marks is None else marks.copy()
        keep = self._forward(times, marks)
        keep = self._once(times, marks, keep)
        self._gaps(times, keep)
        return keep, marks

    def _forward(self, times: Array, marks: Marks | None) -> NDArray[np.intp]:
        latest = np.maximum.accumulate(times)
        backward = times < latest
        for row in map(int, np.flatnonzero(backward)):
            back = float(latest[row] - times[row])
            where = self.place(row, TIME_COLUMN)
            if not self.mend:
                self.kinds.add("time goes back", where, f"time goes back by {back:.6g} s; {_cure('drop it')}")
            elif back > self.max_gap_s:
                told = f"time goes back by {back:.6g} s, as if the recording was restarted; cut it there"
                self.kinds.add("time goes back", where, told)
            else:
                lost = " and its strike mark lost" if marks is not None and marks[row] else ""
                self.mends.append(f"{where}: goes back by {back:.6g} s: row dropped{lost}")
        return np.flatnonzero(~backward)

    def _once(self, times: Array, marks: Marks | None, keep: NDArray[np.intp]) -> NDArray[np.intp]:
        again = np.flatnonzero(np.diff(times[keep]) == 0)
        for earlier, later in zip(keep[again].tolist(), keep[again + 1].tolist(), strict=True):
            where, time = self.place(later, TIME_COLUMN), f"time {times[later]:.6g} s again"
            if not self.mend:
                self.kinds.add("time repeated", where, f"{time}; {_cure('keep the last')}")
                continue
            self.mends.append(f"{where}: {time}: the earlier row dropped")
            if marks is not None:
                marks[later] |= marks[earlier]
        return np.delete(keep, again)

    def _gaps(self, times: Array, keep: NDArray[np.intp]) -> None:
        gaps = np.diff(times[keep])
        wide = np.flatnonzero(gaps > self.max_gap_s * _ROUNDING)
        for row, gap in zip(keep[wide + 1].tolist(), gaps[wide].tolist(), strict=True):
            where = self.place(row, TIME_COLUMN)
            if self.mend and gap <= MENDABLE_GAPS * self.max_gap_s * _ROUNDING:
                self.mends.append(f"{where}: gap of {gap:.6g} s bridged by the interpolation")
                continue
            cure = "" if self.mend else f"raise max_gap_s above {self.max_gap_s:g}, or "
            self.kinds.add("gap", where, f"gap of {gap:.6g} s before it; {cure}cut the log there")


def _cure(step: str) -> str:
    return f'correct it, or set time_faults = "mend" to {step}'
