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

    def rows(self, now: Now, lo: Array, hi: Array) -> None:
        np.multiply(self.kept_lo, now.period_s, out=lo)
        np.multiply(self.kept_hi, now.period_s, out=hi)

    def measure(self, fine: Fine) -> Array:
        return fine.a

    def percent(self, now: Now) -> Array:
        return super().percent(now) * now.period_s
