"""The rows of one step, gathered from the limit kinds into one quadratic program without allocation."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.limits.base import Limit, Now
from reach.limits.tool_speed import ToolSpeed
from reach.qp.problem import QpProblem

FREE = 1e3  # rad/s or m/s: stands for "no bound" on a change of velocity, and binds nowhere


class Lanes:
    """The bounds of one family of kinds, one lane (2n,) each, and the tightest of them.

    Attributes
    ----------
    kinds : tuple of Limit in lane order
    values : (k, 2n) how far a step may go, positive directions first
    """

    def __init__(self, limits: dict[str, Limit], family: str, n: int, widest: float):
        self.kinds = tuple(k for k in limits.values() if k.family == family and k.known.any())
        self.values = np.full((len(self.kinds), 2 * n), np.inf)
        self._views = list(zip(self.kinds, self.values, strict=True))
        self._asked: list[tuple[Limit, Array]] = []
        self._constant = np.full(2 * n, widest)
        self._most = np.empty(2 * n)
        self._fresh = True

    def look(self, now: Now) -> None:
        """Ask each kind whether it has anything to say until the next look; constant ones once for all."""
        self._asked = []
        for kind, lane in self._views:
            if kind.constant:
                if self._fresh:
                    kind.rows(now, lane)
                    np.minimum(self._constant, lane, out=self._constant)
            elif kind.look(now):
                self._asked.append((kind, lane))
            else:
                lane.fill(np.inf)
        self._fresh = False

    def tightest(self, now: Now) -> Array:
        """Write the lanes for a state; the tightest of each row (2n,), to be read before the next call."""
        most = self._most
        np.copyto(most, self._constant)
        for kind, lane in self._asked:
            kind.rows(now, lane)
            np.minimum(most, lane, out=most)
        return most


class Rows:
    """Joint boxes, torque rows and tool rows of a step.

    The variable is the change of joint velocity over the period, Δv = a dt. Torque and torque rate share one
    matrix, M / dt, so both become one interval; rows are scaled by the torque limit, or by the torque that
    one period's rate allows where only that is known.

    Attributes
    ----------
    joint, torque : Lanes
    limited : joints that have torque rows, two each: upper ones first
    scale : (n,) factor on each joint's torque rows
    """

    def __init__(self, limits: dict[str, Limit], n: int, period_s: float):
        self.joint = Lanes(limits, "joint", n, FREE)
        self.torque = Lanes(limits, "torque", n, np.inf)
        tool = [k for k in limits.values() if isinstance(k, ToolSpeed) and k.known.any()]
        self.tool = tool[0] if tool else None
        known = [k.known for k in self.torque.kinds] or [np.zeros(n, bool)]
        self.limited = np.flatnonzero(np.any(known, axis=0))
        self.scale = self._scale(n, period_s)
        self._n, self._all = n, len(self.limited) == n
        self._both = np.concatenate([self.limited, self.limited + n])
        self._matrix_scale = (self.scale / period_s)[:, None]
        self._scale_twice = np.concatenate([self.scale, self.scale])

    @property
    def count(self) -> int:
        """Torque rows of a step."""
        return 2 * len(self.limited)

    def look(self, now: Now) -> None:
        """Let the kinds look ahead, with a new brake."""
        self.joint.look(now)
        self.torque.look(now)

    def fill(self, now: Now, p: QpProblem) -> QpProblem:
        """Write the rows for a state into a problem; the cost is the caller's.

        Returns that problem, or where the tool's cap is near another one with its rows added.
        """
        n = self._n
        most = self.joint.tightest(now)
        p.ub[:] = most[:n]
        np.negative(most[n:], out=p.lb)
        if self.limited.size:
            self._fill_torque(now, p)
        extra = self.tool.coefficients(now) if self.tool else None
        if extra is None:
            return p
        return QpProblem(p.P, p.q, np.vstack([p.G, extra[0]]), np.append(p.h, extra[1]), p.lb, p.ub)

    def _fill_torque(self, now: Now, p: QpProblem) -> None:
        n, m, bias = self._n, len(self.limited), now.state.bias
        most = self.torque.tightest(now)
        most[:n] -= bias
        most[n:] += bias
        if self._all:
            np.multiply(most, self._scale_twice, out=p.h)
            np.multiply(now.state.mass, self._matrix_scale, out=p.G[:m])
        else:
            p.h[:] = (most * self._scale_twice)[self._both]
            p.G[:m] = (now.state.mass * self._matrix_scale)[self.limited]
        np.negative(p.G[:m], out=p.G[m:])

    def _scale(self, n: int, period_s: float) -> Array:
        scale = np.ones(n)
        for kind in reversed(self.torque.kinds):
            reach = kind.tighter * (period_s if kind.name == "torque rate" else 1.0)
            usable = kind.known & np.isfinite(reach) & (reach > 0)
            scale = np.where(usable, 1 / np.where(usable, reach, 1.0), scale)
        return np.asarray(scale)
