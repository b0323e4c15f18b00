"""Which limits held a step back, read from its multipliers."""

from __future__ import annotations

from functools import cache
from typing import NamedTuple

import numpy as np

from reach.arm import Arm
from reach.cell import Cell
from reach.follow.rolled import Roll, now_at
from reach.follow.rows import Lanes, Rows
from reach.limits.base import SIGNS, Now
from reach.limits.build import build_limits

BLAME_FROM_M_S = 1e-3  # shortfall of a step from which its multipliers are looked at
ACTIVE = 1e-12  # multipliers up to here are none


class Blame(NamedTuple):
    """A limit that held a step back: by how much the shortfall (m/s) shrinks for one per cent more of it."""

    limit: str
    joint: int
    gain: float


class Blames:
    """Blames of a roll's steps, worked out when asked for: the rows of a step are made again from what it knew."""

    def __init__(self, cell: Cell, arm: Arm, roll: Roll):
        self._arm, self._roll, self._dt = arm, roll, cell.period_s
        limits = build_limits(cell)
        self._rows = Rows(cell, limits)
        self._percent = {name: limit.percent() for name, limit in limits.items()}
        self.of = cache(self._of)

    def _of(self, step: int) -> list[Blame]:
        roll, n = self._roll, self._arm.n
        if step >= len(roll.shortfall) or roll.shortfall[step] <= BLAME_FROM_M_S:
            return []
        z_box, z = roll.z_box[step], roll.z[step]
        found = []
        if (np.abs(z_box) > ACTIVE).any() or (z > ACTIVE).any():
            now = now_at(
                self._arm,
                roll.sent.q[step],
                roll.sent.v[step],
                roll.sent.a * self._dt,
                roll.torque,
                roll.brakes[step],
                step,
            )
            box = np.maximum(SIGNS * z_box, 0.0)
            found += self._tightest(self._rows.joint, now, box, np.ones(n), step)
            torque = np.zeros((2, n))
            torque[:, self._rows.limited] = z.reshape(2, -1)
            found += self._tightest(self._rows.torque, now, torque, self._rows.scale, step)
        if roll.z_tool[step] > ACTIVE:
            gain = roll.z_tool[step] * self._percent["tool speed"][0] / roll.shortfall[step]
            found.append(Blame("tool speed", 0, float(gain)))
        return [blame for blame in found if blame.gain > 0]

    def _tightest(
        self, lanes: Lanes, now: Now, multipliers: np.ndarray, scale: np.ndarray, step: int
    ) -> list[Blame]:
        """One blame for each row with a multiplier, on the kind whose lane is tightest there."""
        if not lanes.kinds:
            return []
        lanes.tightest(now)
        found = []
        for side, joint in np.argwhere(multipliers > ACTIVE).tolist():
            kind = lanes.kinds[int(np.argmin(lanes.values[:, side, joint]))].name
            gain = (
                multipliers[side, joint]
                * self._percent[kind][joint]
                * scale[joint]
                / self._roll.shortfall[step]
            )
            found.append(Blame(kind, joint, float(gain)))
        return found
