"""Torque rate: the change of torque over one control period.

Differencing a four times finer grid would see the step at each period's edge as four times the rate; over one period a
legal motion measures 0.997 to 1.005 of the limit.
"""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import DRIFT_SHARE, SIGNS, Fine, Limit, Now


class TorqueRate(Limit):
    """Torque rate over one control period, N·m/s or N/s."""

    name = "torque rate"
    family = "torque"
    field = "torque_rate"
    margin = "torque_rate_share"
    units = ("N·m/s", "N/s")
    least_margin = 3 * DRIFT_SHARE  # at corners of the rows alone, without a jerk limit: 2.2 % measured

    def __init__(self, cell: Cell):
        super().__init__(cell)
        self._gain = self.kept * cell.period_s

    def rows(self, now: Now, most: Array) -> None:
        np.multiply(SIGNS, now.torque, out=most)
        most += self._gain

    def measure(self, fine: Fine) -> Array:
        return fine.change(fine.torque, fine.torque_before)

    def percent(self) -> Array:
        return super().percent() * self.period_s
