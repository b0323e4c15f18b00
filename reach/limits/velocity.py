"""Joint velocity: reached so gently that its acceleration can still be taken back in time."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import Fine, Limit, Now

MANY = 4  # rows from which all of them at once cost less than one after the other


class Velocity(Limit):
    """Joint velocity, rad/s or m/s."""

    name = "velocity"
    family = "joint"
    field = "velocity"
    margin = "velocity_share"
    units = ("rad/s", "m/s")

    def __init__(self, cell: Cell):
        super().__init__(cell)
        self._near: list[int] = []

    def look(self, now: Now) -> bool:
        reach = now.brake.gain + now.brake.top * now.brake.horizon_s
        fast = np.concatenate([now.v + reach, reach - now.v])
        self._near = np.flatnonzero(fast > self.kept).tolist()
        return bool(self._near)

    def rows(self, now: Now, most: Array) -> None:
        # While the acceleration falls at rate β from a to zero the joint gains a²/2β more speed. Hence
        # a⁺ <= β dt (√(1 + 2 (v_max − v)/(β dt²)) − 1), the largest a⁺ with v + a⁺ dt + a⁺²/2β <= v_max.
        n = len(now.v)
        if len(self._near) > MANY:
            step = np.tile(now.brake.rate * now.period_s**2, 2)
            room = self.kept - np.concatenate([now.v, -now.v])
            gain = step * (np.sqrt(1 + np.maximum(room, 0.0) * (2 / step)) - 1)
            np.minimum(gain, room, out=most)
            return
        most.fill(np.inf)
        for row in self._near:
            i = row % n
            room = float(self.kept[row] - (now.v[i] if row < n else -now.v[i]))
            own = float(now.brake.rate[i]) * now.period_s**2
            most[row] = own * (math.sqrt(1 + 2 * room / own) - 1) if room > 0 else room

    def measure(self, fine: Fine) -> Array:
        return fine.v
