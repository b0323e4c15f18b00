"""Torque rate: the change of torque over one control period.

Differencing a four times finer grid would see the step at each period's edge as four times the rate; over one period a
legal motion measures 0.997 to 1.005 of the limit.
"""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import DRIFT_SHARE, Fine, Limit, Now


class TorqueRate(Limit):
    """Torque rate over one control period, N·m/s or N/s."""

    name = "torque rate"
    family = "torque"
    field = "torque_rate"
    margin = "torque_rate_share"
    units = ("N·m/s", "N/s")
    least_margin = DRIFT_SHARE

    def rows(self, now: Now, lo: Array, hi: Array) -> None:
        np.add(now.torque, self.kept_lo * now.period_s, out=lo)
        np.add(now.torque, self.kept_hi * now.period_s, out=hi)

    def measure(self, fine: Fine) -> Array:
        return fine.change(fine.torque, fine.torque_before)

    def percent(self, now: Now) -> Array:
        return super().percent(now) * now.period_s
