"""A maker's cap on the speed of the tool."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Array, Cell
from reach.limits.base import Fine, Limit, Now

# Share of the cap that a step may turn the velocity aside; the rest, sqrt(1 - share²), is left along it. At 1.7 m/s
# and 1 ms that is 120 m/s² sideways, beyond any arm, for half a per cent of the cap.
ASIDE_SHARE = 0.1
CALM_SHARE = 0.25
CALM_STEPS = 5  # from a quarter to half of the cap in 5 ms takes more than 80 m/s² at 1.7 m/s
NEAR_SHARE = 0.5  # below this share of the cap no step can reach it: rows are left out


class ToolSpeed(Limit):
    """Speed of the strike point, m/s, against the cell's [tool] table."""

    name = "tool speed"
    family = "tool"
    units = ("m/s", "m/s")

    def __init__(self, cell: Cell):
        cap = cell.tool.speed_m_s if cell.tool else np.inf
        self.known = np.array([cell.tool is not None])
        self.lo, self.hi = np.array([-cap]), np.array([cap])
        self.sources = (cell.tool.source if cell.tool else "unknown",)
        self.joints, self.joint_units = (None,), ("m/s",)
        share = cell.margins.velocity_share
        self.kept_lo, self.kept_hi = self.lo * (1 - share), self.hi * (1 - share)
        self.kept = np.array([self.kept_hi, -self.kept_lo])
        self.period_s = cell.period_s

    def rows(self, now: Now, most: Array) -> None:
        """No bounds of its own: see `coefficients`."""

    def coefficients(self, now: Now) -> tuple[Array, Array] | None:
        """Rows (5, n) and bounds (5,) on the velocity change, or None where the cap is out of reach.

        The ball |v| <= cap is replaced by a box inside it that is turned along the present velocity: along it up to
        sqrt(1 - ASIDE_SHARE²) of the cap, aside up to ASIDE_SHARE / √2 on two axes, both ways. Along it, as
        for a joint's velocity, the acceleration must still be taken back in time.
        """
        cap = self.kept_hi[0]
        rows = now.state.jacobian[:3]
        velocity = rows.dot(now.v)
        speed = math.sqrt(velocity.dot(velocity))
        if speed < NEAR_SHARE * cap:
            return None
        along = velocity / speed
        box = _frame_along(*along.tolist()).dot(rows)
        ahead = now.state.drift[:3] * self.period_s
        gaining = float(along @ (rows @ now.change)) / self.period_s
        room = cap * np.sqrt(1 - ASIDE_SHARE**2) - speed - float(along @ ahead)
        if gaining > 0:
            slowest = float(np.max(np.abs(now.change) / now.brake.rate) / self.period_s)
            step = gaining / slowest * self.period_s**2
            room = min(room, step * (np.sqrt(1 + 2 * max(room, 0.0) / step) - 1)) if room > 0 else room
        aside = cap * ASIDE_SHARE / np.sqrt(2)
        return (
            np.vstack([box, -box[1:]]),
            np.array([room, aside, aside, aside, aside]),
        )

    def calm_for(self, now: Now) -> int:
        """Steps for which the cap stays out of reach, at most CALM_STEPS: while the speed is under a quarter of it."""
        velocity = now.state.jacobian[:3].dot(now.v)
        return CALM_STEPS if velocity.dot(velocity) < (CALM_SHARE * self.kept_hi[0]) ** 2 else 0

    def measure(self, fine: Fine) -> Array:
        return fine.speed[:, None]


def _frame_along(x: float, y: float, z: float) -> Array:
    """Orthonormal rows (3, 3), the first a given unit vector."""
    if abs(z) < 0.7:
        size = math.hypot(x, y)
        u, v, w = -y / size, x / size, 0.0
    else:
        size = math.hypot(y, z)
        u, v, w = 0.0, -z / size, y / size
    return np.array([[x, y, z], [u, v, w], [y * w - z * v, z * u - x * w, x * v - y * u]])
