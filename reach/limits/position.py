"""Joint position: the joint must always still be able to stop before its end."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import SIGNS, Ahead, Fine, Limit, Now
from reach.limits.brake import BRAKE_SHARE, largest_velocity

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
    seldom = True

    def __init__(self, cell: Cell):
        super().__init__(cell)
        self._room = np.empty_like(self.kept)
        self._middle, self._half = _range(self.kept_lo, self.kept_hi)
        velocities = [joint.limits.velocity for joint in cell.arm.joints]
        self._fastest = np.array([max(-v.lo, v.hi) if v else np.inf for v in velocities])

    def keep(self, cell: Cell) -> None:
        margins = cell.margins
        margin = np.array(
            [margins.position_m if j.sliding else margins.position_rad for j in cell.arm.joints]
        )
        self.kept_lo, self.kept_hi = self.lo + margin, self.hi - margin

    def rows(self, now: Now, most: Array) -> None:
        # A joint is looked at closely when it could not stop inside its room from the most speed that it may have
        # after this period, plus what it gains while its acceleration is taken back.
        most.fill(np.inf)
        alpha, beta, top = now.brake
        speed = top * top
        speed /= 2 * beta
        speed += top * self.period_s
        pace = np.abs(now.v)
        speed += pace
        np.minimum(speed, np.maximum(pace, self._fastest), out=speed)
        need = speed / (2 * alpha)
        need += (top + alpha) / beta
        need *= speed
        room = self._room
        np.multiply(SIGNS, now.q, out=room)
        np.subtract(self.kept, room, out=room)
        near = room < need
        if near.any():
            for side, i in np.argwhere(near).tolist():
                self._close(now, side, i, float(room[side, i]), most)

    def _close(self, now: Now, side: int, i: int, room: float, most: Array) -> None:
        """The exact bound of one joint in one direction."""
        dt = self.period_s
        v = float(now.v[i]) if side == 0 else -float(now.v[i])
        alpha, beta = float(now.brake.deceleration[i]), float(now.brake.rate[i])
        loosest = LOOSEST_FACTOR * float(now.brake.top[i]) * dt
        change = largest_velocity(room, v, v + loosest, alpha, beta, dt) - v
        if change < loosest:
            # Never more than the ability itself, which another joint's load may shrink faster than the brake builds
            # up: rows that ask for more would only push jerk, torque rate or acceleration over their limits.
            before = float(now.change[i]) if side == 0 else -float(now.change[i])
            fastest = max(before - beta / BRAKE_SHARE * dt * dt, -float(now.brake.top[i]) * dt)
            most[side, i] = max(change, fastest)

    def clear(self, ahead: Ahead) -> bool:
        # The longest stop: the ramp at the highest speed, then braking from there.
        need = ahead.change * ahead.caution.ramp
        need += ahead.caution.base
        need += ahead.speed * ahead.caution.stop
        need *= ahead.speed
        off = np.abs(ahead.q - self._middle)
        off += need
        return not np.count_nonzero(off >= self._half)

    def measure(self, fine: Fine) -> Array:
        return fine.q

    def percent(self) -> Array:
        span = self.hi - self.lo
        return np.asarray(0.005 * APPROACH_PER_S * np.where(np.isfinite(span), span, 0.0))

    def utilisation(self, values: Array) -> Array:
        """Distance from the middle of the range as a share of half the range; 0 where there is no limit."""
        middle, half = _range(self.lo, self.hi)
        return np.where(self.known, np.abs(values - middle) / half, np.nan)


def _range(lo: Array, hi: Array) -> tuple[Array, Array]:
    """Middle and half of ranges (n,); 0 and inf where there is no limit."""
    bounded = np.isfinite(hi) & np.isfinite(lo)
    lo, hi = np.where(bounded, lo, 0.0), np.where(bounded, hi, 0.0)
    return (hi + lo) / 2, np.where(bounded, (hi - lo) / 2, np.inf)
