"""Time stamps of a command log: what is wrong with them, and what can be mended when the cell asks for it."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.errors import FaultList

TIME_COLUMN = "t_s"
MAX_SHOWN = 20  # faults of one kind that are told one by one
MENDABLE_GAPS = 3.0  # a gap up to so many times max_gap_s can be mended
_ROUNDING = 1 + 1e-9  # stamps at exactly max_gap_s are no gap, whatever their last digit

Place = Callable[[int, str], str]
"""Where row i (from 0) and a column stand in the source."""

Marks = NDArray[np.bool_]


class ByKind:
    """Adds faults of each kind up to a number, and then says how many more there were."""

    def __init__(self, faults: FaultList):
        self.faults = faults
        self.count: dict[str, int] = {}

    def add(self, kind: str, where: str, what: str) -> None:
        """Note one fault of that kind."""
        self.count[kind] = self.count.get(kind, 0) + 1
        if self.count[kind] <= MAX_SHOWN:
            self.faults.add(where, what)

    def close(self) -> None:
        """Say what was left out."""
        for kind, count in self.count.items():
            if count > MAX_SHOWN:
                self.faults.add("whole log", f"… and {count - MAX_SHOWN} more: {kind}")


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
