"""Joint velocity: reached so gently that its acceleration can still be taken back in time."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import Fine, Limit, Now


class Velocity(Limit):
    """Joint velocity, rad/s or m/s."""

    name = "velocity"
    family = "joint"
    field = "velocity"
    margin = "velocity_share"
    units = ("rad/s", "m/s")

    def rows(self, now: Now, lo: Array, hi: Array) -> None:
        # While the acceleration falls at rate β from a to zero the joint gains a²/2β more speed. Hence
        # a⁺ <= β dt (√(1 + 2 (v_max − v)/(β dt²)) − 1), the largest a⁺ with v + a⁺ dt + a⁺²/2β <= v_max.
        step = now.brake.rate * now.period_s**2
        for room, out, sign in ((self.kept_hi - now.v, hi, 1.0), (now.v - self.kept_lo, lo, -1.0)):
            gain = step * (np.sqrt(1 + np.maximum(room, 0.0) * (2 / step)) - 1)
            np.multiply(sign, np.where(room < 0, room, gain), out=out)

    def measure(self, fine: Fine) -> Array:
        return fine.v
