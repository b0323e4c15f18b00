"""Joint torque."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import DRIFT_SHARE, Fine, Limit, Now


class Torque(Limit):
    """Joint torque, N·m, or force of a sliding joint, N."""

    name = "torque"
    family = "torque"
    field = "torque"
    margin = "torque_share"
    units = ("N·m", "N")
    constant = True
    least_margin = DRIFT_SHARE

    def rows(self, now: Now, most: Array) -> None:
        np.copyto(most, self.kept)

    def measure(self, fine: Fine) -> Array:
        return fine.torque
