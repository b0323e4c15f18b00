"""One control step: the joint acceleration that best delivers a twist under every limit."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from scipy.linalg.lapack import dposv

from reach.cell import Array, Cell
from reach.follow.rows import Rows
from reach.follow.rub import Chords
from reach.limits.base import Limit, Now
from reach.paddle import paddle_radius
from reach.qp.backends import Solver
from reach.qp.problem import QpBlock, QpProblem, QpStatus

# Weight of the null-space return relative to the mean squared gain of the task. It biases the twist by about this
# share at good postures and stands in for damping near singular ones.
POSTURE_WEIGHT = 1e-6
# Weight of staying with the step that no limit holds back, where one does. Without it the redundancy chatters for
# micrometres of tracking. Measured on the example bench as a weight of the posture: j1 moves at 2.4 rad/s² with 1e-6,
# at 0.6 with 1e-4, at 0.4 with 1e-3; the strike point is then 0.2, 3.4 and 34 µm off. It doesn't bias a free step.
CALM_WEIGHT = 1e-4
ELASTIC_WEIGHT = 1e-6  # what tracking is worth beside keeping limits, in the elastic solve
SLACK_CURVATURE = 1e-3  # keeps the elastic cost strictly convex; its linear part (weight 1) decides
BLOCK = 64  # steps whose answers are checked together


class Step(NamedTuple):
    """Outcome of one step.

    Attributes
    ----------
    change : (n,) change of joint velocity over the period
    status : "solved", "elastic" (some limit gave way), "failed" (no solver answered)
    z, z_box : multipliers of the torque (and tool) rows and of the box, None unless solved
    slack : (k,) by how much soft rows gave way: joint boxes, then the tool's rows if `tool`, then torque rows; or None
    tool : whether the tool's rows were there
    fell_back : whether the second solver was needed
    """

    change: Array
    status: str
    z: Array | None
    z_box: Array | None
    slack: Array | None
    tool: bool
    fell_back: bool


class Stepper:
    """Solves steps one after the other; owns the workspace.

    minimise ‖W (J v⁺ + J̇ v dt − ν)‖² + ρ ‖v⁺ − v_posture‖² under the rows of every known limit; where these hold it
    back, with a little for staying with what it would be without them. The J̇ term makes the twist right at the
    period's end. W weighs rotation by a length, so both parts are speeds of points.

    Steps live in the slots of a block. `quick` takes the first solver's word and leaves the check to the block;
    `careful` checks at once, falls back to the second solver and, where all rows together have no point, lets soft
    ones give way.

    Attributes
    ----------
    task : (BLOCK, 6, n) W J of each slot; error : (BLOCK, 6) W (J v + J̇ v dt − ν)
    ideal : (n,) change of velocity of the last cost without any row
    """

    def __init__(self, cell: Cell, limits: dict[str, Limit]):
        n = len(cell.arm.joints)
        self.rows = Rows(cell, limits)
        self.solver = Solver(cell.solver.name, cell.solver.fallback)
        self.block = QpBlock(BLOCK, n, self.rows.count)
        self.task, self.error = np.empty((BLOCK, 6, n)), np.empty((BLOCK, 6))
        flat = [task.reshape(-1) for task in self.task]
        diagonals = [P.reshape(-1)[:: n + 1] for P in self.block.P]
        self._slots = list(zip(self.block.problems, self.task, self.error, flat, diagonals, strict=True))
        self._period_s = cell.period_s
        self.weight = task_weight(cell)
        self._weight_column = self.weight[:, None]
        self.ideal, self._calm = np.zeros(n), 0.0

    def cost(self, now: Now, target: Array, posture_velocity: Array, slot: int) -> None:
        """Write the cost of a step toward a twist (6,) into a slot."""
        problem, task, error, flat, diagonal = self._slots[slot]
        np.multiply(now.state.jacobian, self._weight_column, out=task)
        np.multiply(now.state.drift, self._period_s, out=error)
        error -= target
        error *= self.weight
        error += task.dot(now.v)
        np.dot(task.T, task, out=problem.P)
        trace = flat.dot(flat) / len(diagonal)  # of P, a joint
        share = POSTURE_WEIGHT * trace
        diagonal += share
        np.dot(error, task, out=problem.q)
        problem.q += share * (now.v - posture_velocity)
        self._calm = CALM_WEIGHT * trace
        _, self.ideal, _ = dposv(problem.P, problem.q)
        np.negative(self.ideal, out=self.ideal)

    def free(self, now: Now, close: bool) -> Array | None:
        """The step of the last cost that no row holds back, None where it misses a row.

        Where it keeps every row it is the quadratic program's answer, with all multipliers zero, at a fraction of a
        solve. `close` as in Lanes.tightest.
        """
        return self.ideal if self.rows.inside(now, self.ideal, close) else None

    def problem(self, now: Now, slot: int, close: bool = True, chords: Chords | None = None) -> QpProblem:
        """The quadratic program of a slot whose cost was just written, its rows as in Rows.fill.

        The cost grows by that of leaving the step which no row holds back.
        """
        problem, diagonal = self.block.problems[slot], self._slots[slot][-1]
        diagonal += self._calm
        problem.q -= self._calm * self.ideal
        self._calm = 0.0  # once a cost
        return self.rows.fill(now, problem, close, chords)

    def quick(self, problem: QpProblem, slot: int) -> Array | None:
        """The change of velocity by the first solver's word, noted in the block; None where it has no answer."""
        answer = self.solver.first(problem)
        if answer is None:
            return None
        block = self.block
        block.x[slot], block.z[slot], block.z_box[slot] = answer
        return answer[0]

    def careful(self, problem: QpProblem) -> Step:
        """A step checked at once, elastic where it has to be."""
        solution = self.solver.solve(problem)
        if solution.status is QpStatus.SOLVED:
            tool = len(problem.h) > self.rows.count
            return Step(solution.x, "solved", solution.z, solution.z_box, None, tool, solution.fell_back)
        return self.elastic(problem)

    def elastic(self, problem: QpProblem) -> Step:
        """Second solve: torque and its rate stay hard, all else may give way at a high price.

        If even the torque rows have no common point (a static load above the limit) they give way too.
        """
        n, tool = len(problem.q), len(problem.h) > self.rows.count
        for soft_torque in (False, True):
            solution = self.solver.solve(_with_slack(problem, self.rows.count, soft_torque))
            if solution.status is QpStatus.SOLVED:
                slack = np.maximum(solution.x[n:], 0.0)
                return Step(solution.x[:n], "elastic", None, None, slack, tool, solution.fell_back)
        return Step(np.zeros(n), "failed", None, None, None, tool, True)


def start_velocity(cell: Cell) -> Array:
    """Joint velocity (n,) that a cell starts with; at rest where it says nothing."""
    n = len(cell.arm.joints)
    return np.array(cell.arm.start_velocity) if cell.arm.start_velocity else np.zeros(n)


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
