"""The rows of one step, gathered from the limit kinds into one quadratic program without allocation."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import Limit, Now
from reach.limits.tool_speed import ToolSpeed
from reach.qp.problem import QpProblem

FREE = 1e3  # rad/s or m/s: stands for "no bound" on a change of velocity, and binds nowhere


class Rows:
    """Joint boxes, torque rows and tool rows of a step.

    The variable is the change of joint velocity over the period, Δv = a dt. Torque and torque rate share one
    matrix, M / dt, so both become one interval; rows are scaled by the torque limit, or by the torque that
    one period's rate allows where only that is known.

    Attributes
    ----------
    joint_kinds, torque_kinds : tuple of Limit
        Lane order in the arrays `joint_lo`, `joint_hi` (k, n) and `torque_lo`, `torque_hi`.
    box_lo, box_hi : (n,) the tightest lanes
    problem : QpProblem with the torque rows, two a limited joint: upper ones first
    """

    def __init__(self, limits: dict[str, Limit], n: int, period_s: float):
        self.joint_kinds = tuple(k for k in limits.values() if k.family == "joint" and k.known.any())
        self.torque_kinds = tuple(k for k in limits.values() if k.family == "torque" and k.known.any())
        tool = [k for k in limits.values() if isinstance(k, ToolSpeed) and k.known.any()]
        self.tool = tool[0] if tool else None
        self.joint_lo, self.joint_hi = np.empty((2, len(self.joint_kinds), n))
        self.torque_lo, self.torque_hi = np.empty((2, len(self.torque_kinds), n))
        self._lo_views = list(zip(self.joint_kinds, self.joint_lo, self.joint_hi, strict=True))
        self._torque_views = list(zip(self.torque_kinds, self.torque_lo, self.torque_hi, strict=True))
        self.box_lo, self.box_hi = np.full((2, n), FREE)
        self.box_lo *= -1
        self.period_s = period_s
        known = [k.known for k in self.torque_kinds] or [np.zeros(n, bool)]
        self.limited = np.flatnonzero(np.any(known, axis=0))
        self.torque_scale = self._scale(n, period_s)
        m = len(self.limited)
        self._all = m == n
        self.tool_rows_active = False
        self.problem = QpProblem(
            np.eye(n), np.zeros(n), np.zeros((2 * m, n)), np.zeros(2 * m), self.box_lo, self.box_hi
        )

    def fill(self, now: Now) -> QpProblem:
        """Write the rows for a state; the cost is the caller's. Returns the problem to solve."""
        for kind, lo, hi in self._lo_views:
            kind.rows(now, lo, hi)
        if self._lo_views:
            np.maximum.reduce(self.joint_lo, axis=0, out=self.box_lo)
            np.minimum.reduce(self.joint_hi, axis=0, out=self.box_hi)
            np.maximum(self.box_lo, -FREE, out=self.box_lo)
            np.minimum(self.box_hi, FREE, out=self.box_hi)
        if self._torque_views:
            self._fill_torque(now)
        extra = self.tool.coefficients(now) if self.tool else None
        self.tool_rows_active = extra is not None
        if extra is None:
            return self.problem
        p = self.problem
        return QpProblem(p.P, p.q, np.vstack([p.G, extra[0]]), np.append(p.h, extra[1]), p.lb, p.ub)

    def _fill_torque(self, now: Now) -> None:
        for kind, lo, hi in self._torque_views:
            kind.rows(now, lo, hi)
        m, p = len(self.limited), self.problem
        bias, mass, scale = now.state.bias, now.state.mass, self.torque_scale
        high = (np.minimum.reduce(self.torque_hi, axis=0) - bias) * scale
        low = (bias - np.maximum.reduce(self.torque_lo, axis=0)) * scale
        if self._all:
            np.multiply(mass, (scale / self.period_s)[:, None], out=p.G[:m])
            p.h[:m], p.h[m:] = high, low
        else:
            p.G[:m] = (mass * (scale / self.period_s)[:, None])[self.limited]
            p.h[:m], p.h[m:] = high[self.limited], low[self.limited]
        np.negative(p.G[:m], out=p.G[m:])

    def _scale(self, n: int, period_s: float) -> Array:
        scale = np.ones(n)
        for kind in reversed(self.torque_kinds):
            reach = np.minimum(np.abs(kind.kept_lo), np.abs(kind.kept_hi))
            reach = reach * period_s if kind.name == "torque rate" else reach
            scale = np.where(kind.known & np.isfinite(reach) & (reach > 0), 1 / np.maximum(reach, 1e-12), scale)
        return np.asarray(scale)
