"""Faults of one kind are told up to a number, and beyond it counted."""

from __future__ import annotations

import re
from collections.abc import Callable, Iterable, Iterator, Sequence

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.errors import Fault, FaultList

MAX_SHOWN = 20  # faults of one kind in one file that are told one by one
_PARTICULARS = re.compile(r'"[^"]*"|\d[\d.e+-]*')  # what sets two faults of one kind apart: names and numbers


class ByKind:
    """Adds faults of each kind up to MAX_SHOWN, and then says at `whole` how many more there were."""

    def __init__(self, faults: FaultList, whole: str = "file"):
        self.faults, self.whole = faults, whole
        self.count: dict[str, int] = {}

    def add(self, kind: str, where: str, what: str | Callable[[], str]) -> None:
        """Note one fault of that kind; a callable is asked for its text only when that is shown."""
        self.count[kind] = self.count.get(kind, 0) + 1
        if self.count[kind] <= MAX_SHOWN:
            self.faults.add(where, what if isinstance(what, str) else what())

    def add_each(
        self,
        kind: str,
        bad: NDArray[np.bool_],
        array: Array,
        place: Callable[[int, str], str],
        columns: Sequence[str],
        told: str,
    ) -> None:
        """Note a fault of that kind for every bad element of an array of (rows, columns), its value told first."""
        found = np.argwhere(bad)
        for row, column in found[:MAX_SHOWN].tolist():
            self.add(kind, place(row, columns[column]), f"is {array[row, column]:g}; {told}")
        self.count[kind] = self.count.get(kind, 0) + max(0, len(found) - MAX_SHOWN)

    def close(self) -> None:
        """Say what was left out."""
        for kind, count in self.count.items():
            if count > MAX_SHOWN:
                self.faults.add(self.whole, f"… and {count - MAX_SHOWN} more: {kind}")


def cut_short(faults: Iterable[Fault]) -> Iterator[Fault]:
    """The faults in their order, at most MAX_SHOWN of a file that differ by names and numbers alone."""
    count: dict[tuple[str, str], int] = {}
    for fault in faults:
        kind = (fault.file, _PARTICULARS.sub("", fault.what[:200].partition(";")[0]))
        count[kind] = count.get(kind, 0) + 1
        if count[kind] <= MAX_SHOWN:
            yield fault
    for (file, said), number in count.items():
        if number > MAX_SHOWN:
            told = " ".join(said.split()).strip(" :,")
            yield Fault(file, "file", f"… and {number - MAX_SHOWN} more of a kind: {told}")
