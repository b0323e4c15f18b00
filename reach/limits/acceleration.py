"""Joint acceleration, where its maker states one."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import Fine, Limit, Now


class Acceleration(Limit):
    """Joint acceleration, rad/s² or m/s²."""

    name = "acceleration"
    family = "joint"
    field = "acceleration"
    margin = "acceleration_share"
    units = ("rad/s²", "m/s²")
    constant = True

    def rows(self, now: Now, most: Array) -> None:
        np.multiply(self.kept, self.period_s, out=most)

    def measure(self, fine: Fine) -> Array:
        return fine.a

    def percent(self) -> Array:
        return super().percent() * self.period_s
