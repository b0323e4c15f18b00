"""Joint jerk: the change of acceleration from one control period to the next."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import Fine, Limit, Now


class Jerk(Limit):
    """Joint jerk over one control period, rad/s³ or m/s³."""

    name = "jerk"
    family = "joint"
    field = "jerk"
    margin = "jerk_share"
    units = ("rad/s³", "m/s³")

    def rows(self, now: Now, most: Array) -> None:
        np.multiply(self.kept, now.period_s**2, out=most)
        n = len(now.change)
        most[:n] += now.change
        most[n:] -= now.change

    def measure(self, fine: Fine) -> Array:
        return fine.change(fine.a, fine.a_before)

    def percent(self, period_s: float) -> Array:
        return super().percent(period_s) * period_s**2
