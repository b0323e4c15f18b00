"""Duty: the RMS torque of a motion against the continuous torque. Measured, never planned."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import Fine, Limit, Now


class Duty(Limit):
    """RMS joint torque over the motion, N·m or N; its measure (f, n) is the same in every row."""

    name = "duty"
    family = "none"
    field = "torque_continuous"
    units = ("N·m", "N")

    def rows(self, now: Now, most: Array) -> None:
        """Nothing: a step can't see the mean over a motion."""

    def measure(self, fine: Fine) -> Array:
        rms = np.sqrt(np.mean(fine.torque**2, axis=0))
        return np.broadcast_to(rms, fine.torque.shape)
