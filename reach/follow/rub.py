"""Dry friction over a control period, where it bends more than the rows' straight line does.

The rows hold friction by its slope at the period's start. Smoothed over 0.1 rad/s it bends within one period once a
joint's speed changes by a tenth of that or more. A step that passes its torque or its rate by that alone is solved
again with the chord from the start to the sample that passed most, which is exact there; two or three rounds settle.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from reach.arm import FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S
from reach.cell import Array, Cell
from reach.evidence.motion import FINE
from reach.limits.base import Limit, Now

BENT_SHARE = 0.01  # of a limit that the bend may cost, beside what is kept back for drift
CURVATURE = 0.77  # the most that tanh bends, 4/(3 √3)
PHASES = np.arange(FINE)[:, None] / FINE


class Chords(NamedTuple):
    """What the rows of a step solved again take.

    slope : (n,) of friction by change of velocity
    before : (n,) what the period before has of the bend, which its torque by the rows does not know
    """

    slope: Array
    before: Array


class Rub:
    """Dry friction of all joints.

    Parameters
    ----------
    phase : of the period at which the rows hold torque
    """

    def __init__(self, cell: Cell, limits: dict[str, Limit], phase: float):
        joints = cell.arm.joints
        self._friction = np.array([joint.limits.friction or 0.0 for joint in joints])
        self._width = np.array([FRICTION_WIDTH_M_S if j.sliding else FRICTION_WIDTH_RAD_S for j in joints])
        self._phase = phase
        none = np.full((2, len(joints)), np.inf)
        self._most = limits["torque"].kept if "torque" in limits else none
        self._change = limits["torque rate"].kept * cell.period_s if "torque rate" in limits else none
        self._leave = BENT_SHARE * np.array([self._most.min(axis=0), self._change.min(axis=0)])
        room = np.where(
            self._friction > 0, self._leave.min(axis=0) / np.maximum(self._friction, 1e-12), np.inf
        )
        # Half of the bend that is left to a step, since the period before has its own.
        self._small = self._width * np.sqrt(room / CURVATURE)

    def slope(self, v: Array) -> Array:
        """Friction's slope (n,) at joint velocities, N·m·s/rad."""
        return np.asarray(self._friction / self._width * (1 - np.tanh(v / self._width) ** 2))

    def chords(self, now: Now, change: Array, torque: Array) -> Chords | None:
        """None where a step's change of velocity (n,) keeps its rows in spite of the bend, else what to solve it with.

        Parameters
        ----------
        torque : (n,) of the step by the rows
        """
        if not ((np.abs(change) > self._small) | (np.abs(now.change) > self._small)).any():
            return None
        gained, bend = self._bend(now.v, change)
        _, before = self._bend(now.v - now.change, now.change)
        most = torque + bend
        moved = most - now.torque - before
        over = np.array([[most, -most], [moved, -moved]])  # (kind, side, sample, joint)
        over -= np.array([self._most, self._change])[:, :, None] + self._leave[:, None, None]
        worst = over.max(axis=(0, 1))
        passed = worst.max(axis=0) > 0
        if not passed.any():
            return None
        at = worst.argmax(axis=0), np.arange(len(change))
        tiny = np.abs(change) < 1e-9
        chord = np.where(tiny, self.slope(now.v), gained[at] / np.where(tiny, 1.0, change))
        slope = np.where(passed, chord, self._phase * self.slope(now.v))
        return Chords(slope, np.where(passed, before[at], 0.0))

    def _bend(self, v: Array, change: Array) -> tuple[Array, Array]:
        """What friction gains (FINE, n) by the period's samples, and how far that is off the rows' straight line."""
        gained = self._friction * (np.tanh((v + change * PHASES) / self._width) - np.tanh(v / self._width))
        return gained, gained - self._phase * change * self.slope(v)
