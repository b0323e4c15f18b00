"""Joint position: the joint must always still be able to stop before its end."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import Fine, Limit, Now
from reach.limits.brake import largest_velocity

LOOSEST_FACTOR = 8  # times the largest acceleration: a change of velocity that other rows forbid anyway
APPROACH_PER_S = (
    10.0  # deceleration over speed of a joint near its end, an order of magnitude, to rank reasons
)


class Position(Limit):
    """Joint position, rad or m."""

    name = "position"
    family = "joint"
    field = "position"
    units = ("rad", "m")

    def __init__(self, cell: Cell):
        super().__init__(cell)
        self._near: list[int] = []

    def keep(self, cell: Cell) -> None:
        margins = cell.margins
        margin = np.array(
            [margins.position_m if j.sliding else margins.position_rad for j in cell.arm.joints]
        )
        self.kept_lo, self.kept_hi = self.lo + margin, self.hi - margin

    def look(self, now: Now) -> bool:
        # A joint is watched when it could not stop inside its room from the most speed that it may have by the next
        # look, plus what it gains while its acceleration is taken back.
        alpha, beta, top, soon, gain, fastest, horizon = now.brake
        soon = np.minimum(soon, np.maximum(fastest, np.abs(now.v)))
        speed = np.minimum(soon + gain, np.maximum(fastest, soon))
        need = soon * horizon + speed * (speed / (2 * alpha) + (top + alpha) / beta)
        room = self.kept - np.concatenate([now.q, -now.q])
        self._near = np.flatnonzero(room < np.concatenate([need, need])).tolist()
        return bool(self._near)

    def rows(self, now: Now, most: Array) -> None:
        most.fill(np.inf)
        n, dt = len(now.q), now.period_s
        for row in self._near:
            i = row % n
            sign = 1.0 if row < n else -1.0
            v, room = sign * float(now.v[i]), float(self.kept[row]) - sign * float(now.q[i])
            alpha, beta = float(now.brake.deceleration[i]), float(now.brake.rate[i])
            loosest = LOOSEST_FACTOR * float(now.brake.top[i]) * dt
            change = largest_velocity(room, v, v + loosest, alpha, beta, dt) - v
            if change < loosest:
                most[row] = change

    def measure(self, fine: Fine) -> Array:
        return fine.q

    def percent(self, period_s: float) -> Array:
        span = self.hi - self.lo
        return np.asarray(0.005 * APPROACH_PER_S * np.where(np.isfinite(span), span, 0.0))

    def utilisation(self, values: Array) -> Array:
        """Distance from the middle of the range as a share of half the range; 0 where there is no limit."""
        bounded = np.isfinite(self.hi) & np.isfinite(self.lo)
        middle = np.where(bounded, (self.hi + self.lo) / 2, 0.0)
        half = np.where(bounded, (self.hi - self.lo) / 2, np.inf)
        return np.where(self.known, np.abs(values - middle) / half, np.nan)
