"""One control step: the joint acceleration that best delivers a twist under every limit."""

from __future__ import annotations

import math
from typing import NamedTuple

import numpy as np

from reach.arm import State
from reach.cell import Array, Cell
from reach.follow.rows import Rows
from reach.limits.base import Limit, Now
from reach.paddle import paddle_radius
from reach.qp.backends import Solver
from reach.qp.problem import QpProblem, QpSolution, QpStatus

# Weight of the null-space return relative to the mean squared gain of the task. It biases the twist by about this
# share at good postures and stands in for damping near singular ones.
POSTURE_WEIGHT = 1e-6
ELASTIC_WEIGHT = 1e-6  # what tracking is worth beside keeping limits, in the elastic solve
SLACK_CURVATURE = 1e-3  # keeps the elastic cost strictly convex; its linear part (weight 1) decides
GAVE_WAY = 1e-6  # of a limit: smaller slack is rounding


class Step(NamedTuple):
    """Outcome of one step.

    Attributes
    ----------
    change : (n,) change of joint velocity over the period
    status : "solved", "elastic" (some limit gave way), "failed" (no solver answered)
    solution : QpSolution of the solve that gave `change`, or None
    slack : (k,) by how much soft rows gave way, joint boxes first, then the tool's rows, then torque; or None
    shortfall : ‖W (J v⁺ + J̇ v dt − ν)‖ in m/s
    fell_back : whether the second solver was needed
    """

    change: Array
    status: str
    solution: QpSolution | None
    slack: Array | None
    shortfall: float
    fell_back: bool


class Stepper:
    """Solves steps one after the other; owns the workspace.

    minimise ‖W (J v⁺ + J̇ v dt − ν)‖² + ρ ‖v⁺ − v_posture‖² under the rows of every known limit. The J̇ term makes
    the twist right at the period's end. W weighs rotation by a length, so both parts are speeds of points.

    Parameters
    ----------
    cell : Cell
    limits : dict of Limit by name
    """

    def __init__(self, cell: Cell, limits: dict[str, Limit]):
        self.rows = Rows(limits, len(cell.arm.joints), cell.period_s)
        self.solver = Solver(cell.solver.name, cell.solver.fallback)
        self.period_s = cell.period_s
        self.weight = task_weight(cell)
        self._diagonal = np.arange(len(cell.arm.joints))
        self.task = np.zeros((6, len(cell.arm.joints)))
        self.error = np.zeros(6)

    def cost(self, state: State, v: Array, target: Array, posture_velocity: Array, problem: QpProblem) -> None:
        """Write the tracking cost in the change of velocity into a problem's P and q."""
        self.task = state.jacobian * self.weight[:, None]
        self.error = self.weight * (state.drift * self.period_s - target) + self.task @ v
        np.matmul(self.task.T, self.task, out=problem.P)
        share = POSTURE_WEIGHT / len(v) * problem.P.trace()
        problem.P[self._diagonal, self._diagonal] += share
        np.add(self.error @ self.task, share * (v - posture_velocity), out=problem.q)

    def closest(self, now: Now, target: Array, posture_velocity: Array) -> Step:
        """The step that comes closest to a twist (6,)."""
        problem = self.rows.fill(now)
        self.cost(now.state, now.v, target, posture_velocity, problem)
        solution = self.solver.solve(problem)
        if solution.status is QpStatus.SOLVED:
            return self.outcome(solution.x, "solved", solution, None, solution.fell_back)
        return self.elastic(problem)

    def elastic(self, problem: QpProblem) -> Step:
        """Second solve: torque and its rate stay hard, all else may give way at a high price.

        If even the torque rows have no common point (a static load above the limit) they give way too.
        """
        n, torque_rows = len(problem.q), 2 * len(self.rows.limited)
        for soft_torque in (False, True):
            solution = self.solver.solve(_with_slack(problem, torque_rows, soft_torque))
            if solution.status is QpStatus.SOLVED:
                slack = np.maximum(solution.x[n:], 0.0)
                return self.outcome(solution.x[:n], "elastic", None, slack, solution.fell_back)
        return self.outcome(np.zeros(n), "failed", None, None, True)

    def outcome(
        self, change: Array, status: str, solution: QpSolution | None, slack: Array | None, fell_back: bool
    ) -> Step:
        """A Step with its shortfall."""
        short = self.error + self.task @ change
        return Step(change, status, solution, slack, math.sqrt(short @ short), fell_back)


def task_weight(cell: Cell) -> Array:
    """Weights (6,) of the twist's rows: one for the linear ones, a length in m for the angular ones."""
    length = cell.solver.rotation_length_m or paddle_radius(cell.paddle)
    return np.array([1.0, 1.0, 1.0, length, length, length])


def _with_slack(problem: QpProblem, torque_rows: int, soft_torque: bool) -> QpProblem:
    """The problem with one slack per joint box, one for the tool's rows, and at need one for the torque rows."""
    n, m = len(problem.q), len(problem.h)
    tool = int(m > torque_rows)
    extra = n + tool + int(soft_torque)
    size = n + extra
    P = np.zeros((size, size))
    P[:n, :n] = ELASTIC_WEIGHT * problem.P
    P[range(n, size), range(n, size)] = SLACK_CURVATURE
    q = np.concatenate([ELASTIC_WEIGHT * problem.q, np.ones(extra)])
    G = np.zeros((m + 2 * n, size))
    G[:m, :n] = problem.G
    if tool:
        G[torque_rows:m, 2 * n] = -1.0
    if soft_torque:
        G[:torque_rows, size - 1] = -1.0
    G[m : m + n, :n], G[m + n :, :n] = np.eye(n), -np.eye(n)
    G[m : m + n, n : 2 * n] = G[m + n :, n : 2 * n] = -np.eye(n)
    h = np.concatenate([problem.h, problem.ub, -problem.lb])
    bound = np.full(size, 1e3)
    low = np.concatenate([-bound[:n], np.zeros(extra)])
    return QpProblem(P, q, G, h, low, bound)
