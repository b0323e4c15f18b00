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

    def rows(self, now: Now, lo: Array, hi: Array) -> None:
        dt = now.period_s
        np.multiply(now.a + self.kept_lo * dt, dt, out=lo)
        np.multiply(now.a + self.kept_hi * dt, dt, out=hi)

    def measure(self, fine: Fine) -> Array:
        return fine.change(fine.a, fine.a_before)

    def percent(self, now: Now) -> Array:
        return super().percent(now) * now.period_s**2
