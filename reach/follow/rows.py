"""The rows of one step, gathered from the limit kinds into one quadratic program without allocation."""

from __future__ import annotations

import numpy as np

from reach.arm import State
from reach.cell import Array, Cell
from reach.follow.rub import Chords, Rub
from reach.limits.base import SIGNS, Ahead, Caution, Limit, Now
from reach.limits.tool_speed import ToolSpeed
from reach.qp.problem import QpProblem

PHASE = 0.375  # of a period: midway between its first and its last fine sample, so that drift errs equally at both
COARSE = 1e3  # times what one period's rate allows: solvers round at 1e-6 of a row's scale
FREE = 1e3  # rad/s or m/s: stands for "no bound" on a change of velocity, and binds nowhere


class Lanes:
    """The bounds of one family of kinds, one lane (2, n) each, and the tightest of them.

    Attributes
    ----------
    kinds : tuple of Limit in lane order
    values : (k, 2, n) how far a step may go, positive directions first
    """

    def __init__(self, limits: dict[str, Limit], family: str, n: int, widest: float):
        self.kinds = tuple(k for k in limits.values() if k.family == family and k.known.any())
        self.values = np.full((len(self.kinds), 2, n), np.inf)
        lanes = list(zip(self.kinds, self.values, strict=True))
        self._constant = [(kind, lane) for kind, lane in lanes if kind.constant]
        self._always = [(kind, lane) for kind, lane in lanes if not kind.constant and not kind.seldom]
        self._seldom = [(kind, lane) for kind, lane in lanes if kind.seldom]
        self._widest, self._most = np.full((2, n), widest), np.empty((2, n))
        self._fresh = True

    def tightest(self, now: Now, close: bool = True) -> Array:
        """Write the lanes for a state; the tightest in each direction (2, n), to be read before the next call.

        `close` False leaves out the kinds whose rows seldom matter.
        """
        if self._fresh:
            self._fresh = False
            for kind, lane in self._constant:
                kind.rows(now, lane)
                np.minimum(self._widest, lane, out=self._widest)
        most = self._most
        np.copyto(most, self._widest)
        for kind, lane in (self._always + self._seldom) if close else self._always:
            kind.rows(now, lane)
            np.minimum(most, lane, out=most)
        return most

    def clear(self, ahead: Ahead) -> bool:
        """Whether a step made without the seldom kinds surely keeps them."""
        for kind, _ in self._seldom:
            if not kind.clear(ahead):
                return False
        return True


class Rows:
    """Joint boxes, torque rows and tool rows of a step.

    The variable is the change of joint velocity over the period, Δv = a dt. Torque and torque rate share one
    matrix, so both become one interval; rows are scaled by the torque limit, or by the torque that one
    period's rate allows where only that is known.

    Torque moves inside a period while the rows hold one instant of it. What it does because of the step's own change of
    velocity (Coriolis torque, damping, dry friction) is put into the matrix, (M + PHASE dt S)/dt with their slope S: so
    the rows hold the torque midway between the period's first and last fine sample.

    Attributes
    ----------
    joint, torque : Lanes
    limited : joints that have torque rows, two each: upper ones first
    scale : (n,) factor on each joint's torque rows
    """

    def __init__(self, cell: Cell, limits: dict[str, Limit]):
        n, period_s = len(cell.arm.joints), cell.period_s
        self._rub = Rub(cell, limits, PHASE)
        self.joint = Lanes(limits, "joint", n, FREE)
        self.torque = Lanes(limits, "torque", n, np.inf)
        tool = [k for k in limits.values() if isinstance(k, ToolSpeed) and k.known.any()]
        self.tool = tool[0] if tool else None
        known = [k.known for k in self.torque.kinds] or [np.zeros(n, bool)]
        self.limited = np.flatnonzero(np.any(known, axis=0))
        self.scale = self._scale(n, period_s)
        self._tool_calm = 0  # steps for which the tool's cap is surely out of reach
        self._all, self._period_s = len(self.limited) == n, period_s
        self._matrix_scale = (self.scale / period_s)[:, None]
        self._signed = np.empty((2, n))
        self.matrix = np.empty((n, n))

    @property
    def count(self) -> int:
        """Torque rows of a step."""
        return 2 * len(self.limited)

    def inside(self, now: Now, change: Array, close: bool) -> bool:
        """Whether a change of velocity (n,) keeps all rows; says no where the tool's cap is near."""
        if self.tool is not None and self._tool_calm <= 0:
            return False
        signed = self._signed
        np.multiply(SIGNS, change, out=signed)
        if np.count_nonzero(signed > self.joint.tightest(now, close)):
            return False
        self._sum_inertia(now)
        if self.limited.size:
            np.multiply(SIGNS, self.torque_of(now.state, change), out=signed)
            if np.count_nonzero(signed > self.torque.tightest(now)):
                return False
        self._tool_calm -= 1
        return True

    def fill(self, now: Now, p: QpProblem, close: bool = True, chords: Chords | None = None) -> QpProblem:
        """Write the rows for a state into a problem; the cost is the caller's. `close` as in Lanes.tightest.

        With `chords` friction goes along them. Returns that problem, or where the tool's cap is near another one with
        its rows added.
        """
        most = self.joint.tightest(now, close)
        p.ub[:] = most[0]
        np.negative(most[1], out=p.lb)
        self._sum_inertia(now)
        if self.limited.size:
            if chords is not None:
                own = chords.slope - PHASE * self._rub.slope(now.v)
                self.matrix[np.diag_indices_from(self.matrix)] += own * self._period_s
                now = now._replace(torque=now.torque + chords.before)
            self._fill_torque(now, p)
        extra = None
        if self.tool is not None:
            self._tool_calm -= 1
            if self._tool_calm < 0:
                extra = self.tool.coefficients(now)
                self._tool_calm = 0 if extra is not None else self.tool.calm_for(now)
        if extra is None:
            return p
        return QpProblem(p.P, p.q, np.vstack([p.G, extra[0]]), np.append(p.h, extra[1]), p.lb, p.ub)

    def clear(self, caution: Caution, q: Array, next_v: Array, change: Array) -> bool:
        """Whether a step made with `close` False keeps the rows that were left out."""
        speed = change * change
        speed *= caution.gain
        speed += np.abs(next_v)
        return self.joint.clear(Ahead(q, np.abs(change), speed, caution))

    def chords(self, now: Now, change: Array) -> Chords | None:
        """What to solve a step again with, since friction bends more than its rows know; None where it need not be."""
        self._sum_inertia(now)
        return self._rub.chords(now, change, self.torque_of(now.state, change)) if self.limited.size else None

    def torque_of(self, state: State, change: Array) -> Array:
        """Torque (n,) that the rows of the last `fill` or `inside` hold, for a change of velocity (n,)."""
        torque = self.matrix.dot(change / self._period_s)
        torque += state.bias
        return np.asarray(torque)

    def _sum_inertia(self, now: Now) -> None:
        np.multiply(now.state.slope, PHASE * self._period_s, out=self.matrix)
        self.matrix += now.state.mass

    def _fill_torque(self, now: Now, p: QpProblem) -> None:
        m = len(self.limited)
        most = self.torque.tightest(now)
        np.multiply(SIGNS, now.state.bias, out=self._signed)
        most -= self._signed
        most *= self.scale
        if self._all:
            p.h[:] = most.reshape(-1)
            np.multiply(self.matrix, self._matrix_scale, out=p.G[:m])
        else:
            p.h[:] = most[:, self.limited].reshape(-1)
            p.G[:m] = (self.matrix * self._matrix_scale)[self.limited]
        np.negative(p.G[:m], out=p.G[m:])

    def _scale(self, n: int, period_s: float) -> Array:
        """By the torque limit, unless it is so large beside what one period's rate allows that rounding matters."""
        scale, least = np.ones(n), np.full(n, np.inf)
        for kind in reversed(self.torque.kinds):
            reach = kind.tighter * (period_s if kind.name == "torque rate" else 1.0)
            usable = kind.known & np.isfinite(reach) & (reach > 0)
            least = np.where(usable, np.minimum(least, reach), least)
            own = np.minimum(reach, COARSE * least)
            scale = np.where(usable, 1 / np.where(usable, own, 1.0), scale)
        return np.asarray(scale)
