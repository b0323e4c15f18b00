"""Joint position: the joint must always still be able to stop before its end."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import Fine, Limit, Now
from reach.limits.brake import largest_velocity

LOOSEST_FACTOR = 8  # times the largest acceleration: a change of velocity that other rows forbid anyway


class Position(Limit):
    """Joint position, rad or m."""

    name = "position"
    family = "joint"
    field = "position"
    units = ("rad", "m")

    def keep(self, cell: Cell) -> None:
        margins = cell.margins
        margin = np.array([margins.position_m if j.sliding else margins.position_rad for j in cell.arm.joints])
        self.kept_lo, self.kept_hi = self.lo + margin, self.hi - margin

    def rows(self, now: Now, lo: Array, hi: Array) -> None:
        lo.fill(-np.inf)
        hi.fill(np.inf)
        # A joint is looked at when it could not stop inside its room from the most speed that it may still gain.
        alpha, beta, top = now.brake
        most = np.maximum(np.abs(now.a), top)
        speed = np.abs(now.v) + most * (most / (2 * beta) + now.period_s)
        need = speed * (speed / (2 * alpha) + (most + alpha) / beta + now.period_s)
        room_up, room_down = self.kept_hi - now.q, now.q - self.kept_lo
        near = np.minimum(room_up, room_down) < need
        if near.any():
            for i in np.flatnonzero(near):
                self._exact(now, int(i), float(room_up[i]), float(room_down[i]), lo, hi)

    def _exact(self, now: Now, i: int, room_up: float, room_down: float, lo: Array, hi: Array) -> None:
        v, dt = float(now.v[i]), now.period_s
        alpha, beta = float(now.brake.deceleration[i]), float(now.brake.rate[i])
        loosest = LOOSEST_FACTOR * float(now.brake.top[i]) * dt
        hi[i] = largest_velocity(room_up, v, v + loosest, alpha, beta, dt) - v
        lo[i] = -(largest_velocity(room_down, -v, -v + loosest, alpha, beta, dt) + v)
        if hi[i] >= loosest:
            hi[i] = np.inf
        if lo[i] <= -loosest:
            lo[i] = -np.inf

    def measure(self, fine: Fine) -> Array:
        return fine.q

    def percent(self, now: Now) -> Array:
        span = np.where(np.isfinite(self.hi - self.lo), (self.hi - self.lo) / 2, 0.0)
        alpha = now.brake.deceleration
        return np.asarray(0.01 * span * alpha / np.maximum(np.abs(now.v), alpha * now.period_s))

    def utilisation(self, values: Array) -> Array:
        """Distance from the middle of the range as a share of half the range; 0 where there is no limit."""
        bounded = np.isfinite(self.hi) & np.isfinite(self.lo)
        middle = np.where(bounded, (self.hi + self.lo) / 2, 0.0)
        half = np.where(bounded, (self.hi - self.lo) / 2, np.inf)
        return np.where(self.known, np.abs(values - middle) / half, np.nan)
