"""Joint velocity: reached so gently that its acceleration can still be taken back in time."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import SIGNS, Ahead, Fine, Limit, Now


class Velocity(Limit):
    """Joint velocity, rad/s or m/s."""

    name = "velocity"
    family = "joint"
    field = "velocity"
    margin = "velocity_share"
    units = ("rad/s", "m/s")
    seldom = True

    def __init__(self, cell: Cell):
        super().__init__(cell)
        self._room = np.empty_like(self.kept)
        self._tighter = self.tighter

    def rows(self, now: Now, most: Array) -> None:
        # While the acceleration falls at rate β from a to zero the joint gains a²/2β more speed. Hence
        # a⁺ <= β dt (√(1 + 2 (v_max − v)/(β dt²)) − 1), the largest a⁺ with v + a⁺ dt + a⁺²/2β <= v_max.
        room, step = self._room, now.brake.rate * self.period_s**2
        np.multiply(SIGNS, now.v, out=room)
        np.subtract(self.kept, room, out=room)
        np.maximum(room, 0.0, out=most)
        most *= 2 / step
        most += 1
        np.sqrt(most, out=most)
        most -= 1
        most *= step
        np.minimum(most, room, out=most)  # where the joint is too fast already, room is below zero

    def clear(self, ahead: Ahead) -> bool:
        return not np.count_nonzero(ahead.speed >= self._tighter)

    def measure(self, fine: Fine) -> Array:
        return fine.v
