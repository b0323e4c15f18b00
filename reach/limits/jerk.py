"""Joint jerk: the change of acceleration from one control period to the next."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import SIGNS, Fine, Limit, Now


class Jerk(Limit):
    """Joint jerk over one control period, rad/s³ or m/s³."""

    name = "jerk"
    family = "joint"
    field = "jerk"
    margin = "jerk_share"
    units = ("rad/s³", "m/s³")

    def __init__(self, cell: Cell):
        super().__init__(cell)
        self._gain = self.kept * cell.period_s**2

    def rows(self, now: Now, most: Array) -> None:
        np.multiply(SIGNS, now.change, out=most)
        most += self._gain

    def measure(self, fine: Fine) -> Array:
        return fine.change(fine.a, fine.a_before)

    def percent(self) -> Array:
        return super().percent() * self.period_s**2
