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

    def rows(self, now: Now, most: Array) -> None:
        np.multiply(self.kept, now.period_s, out=most)
        n = len(now.torque)
        most[:n] += now.torque
        most[n:] -= now.torque

    def measure(self, fine: Fine) -> Array:
        return fine.change(fine.torque, fine.torque_before)

    def percent(self, period_s: float) -> Array:
        return super().percent(period_s) * period_s
