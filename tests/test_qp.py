"""The solvers against problems of known answer, the check that trusts none of them, and the steps built on both."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
import pytest
from builders import NO_MARGINS, robot_cell
from scipy.optimize import linprog, lsq_linear

from reach.arm import Arm, State
from reach.cell import Bound, Cell, Joint, JointLimits, SolverSpec
from reach.errors import SolverFailure
from reach.follow.direction import same_direction
from reach.follow.step import CALM_WEIGHT, POSTURE_WEIGHT, Step, Stepper, task_weight
from reach.limits.base import Brake, Now
from reach.limits.build import build_limits
from reach.qp.backends import BACKENDS, Solver
from reach.qp.problem import KKT_TOLERANCE, PRIMAL_TOLERANCE, QpBlock, QpProblem, QpStatus, residuals

ANSWER = 1e-6  # of a variable of order one


@dataclass(frozen=True, eq=False)
class Known:
    """A problem with its answer; x None where there is no feasible point. Multipliers where they are unique."""

    problem: QpProblem
    x: tuple[float, ...] | None
    z: tuple[float, ...] | None = None
    z_box: tuple[float, ...] | None = None
    answer: float = ANSWER


def qp(P, q, G=(), h=(), lb=-1e3, ub=1e3) -> QpProblem:
    """A problem from lists; bounds may be one number."""
    q = np.array(q, dtype=float)
    n = len(q)
    rows = np.array(G, dtype=float).reshape(-1, n)
    low, high = (np.broadcast_to(np.array(b, dtype=float), (n,)).copy() for b in (lb, ub))
    return QpProblem(np.array(P, dtype=float), q, rows, np.array(h, dtype=float), low, high)


# Each answer follows by hand from the optimality conditions (Karush 1939; Kuhn & Tucker 1951).
PROBLEMS = {
    "free": Known(qp([[2, 1], [1, 2]], [-3, -3]), (1, 1), (), (0, 0)),
    "projection on a half-plane": Known(qp(np.eye(2), [-1, -1], [[1, 1]], [1]), (0.5, 0.5), (0.5,), (0, 0)),
    "corner of a box": Known(qp(np.eye(2), [-3, 2], ub=1, lb=-1), (1, -1), (), (2, -1)),
    "box and row": Known(
        qp(np.eye(3), [-2, -2, -2], [[1, 1, 1]], [2.5], ub=[0.5, 9, 9], lb=-9), (0.5, 1, 1), (1,), (0.5, 0, 0)
    ),
    # linear programs, kept strictly convex by a curvature that moves no vertex
    "linear program": Known(qp(1e-3 * np.eye(2), [-1, -2], [[1, 1], [-1, 2]], [4, 2], lb=0, ub=10), (2, 2)),
    "linear program, one vertex five rows": Known(
        qp(1e-3 * np.eye(2), [-1, -1], [[1, 0], [0, 1], [1, 1], [2, 1], [1, 2]], [1, 1, 2, 3, 3]), (1, 1)
    ),
    "same row twice": Known(qp(np.eye(2), [-1, -1], [[1, 1], [1, 1]], [1, 1]), (0.5, 0.5)),
    "point by two rows": Known(qp(np.eye(2), [0, 0], [[1, 0], [-1, 0]], [0.3, -0.3]), (0.3, 0)),
    "lb = ub": Known(qp(np.eye(2), [-1, -1], lb=[0.25, -9], ub=[0.25, 9]), (0.25, 1)),
    "lb = ub but for rounding": Known(
        qp(np.eye(2), [-1, -1], lb=[0.25, -9], ub=[0.25 + 1e-13, 9]), (0.25, 1)
    ),
    # interior-point residuals of about 1e-9 over a curvature of 1e-4
    "weak curvature": Known(qp(np.diag([1, 1e-4]), [-1, -1e-4], [[1, 1]], [3]), (1, 1), answer=1e-4),
    "rows against each other": Known(qp(np.eye(2), [0, 0], [[1, 1], [-1, -1]], [-1, -1]), None),
    "row against box": Known(qp(np.eye(2), [0, 0], [[1, 1]], [-3], lb=-1, ub=1), None),
}


@pytest.mark.parametrize("name", BACKENDS)
@pytest.mark.parametrize("known", PROBLEMS.values(), ids=PROBLEMS)
def test_backend(name, known):
    solution = Solver(name, name).solve(known.problem)
    if known.x is None:
        assert solution.status is QpStatus.INFEASIBLE
        assert np.isnan(solution.x).all()
        return
    assert solution.status is QpStatus.SOLVED and not solution.fell_back
    np.testing.assert_allclose(solution.x, known.x, atol=known.answer)
    primal, kkt = residuals(known.problem, solution.x, solution.z, solution.z_box)
    assert primal <= PRIMAL_TOLERANCE and kkt <= KKT_TOLERANCE
    for mine, expected in ((solution.z, known.z), (solution.z_box, known.z_box)):
        if expected is not None:
            np.testing.assert_allclose(mine, expected, atol=1e-5)  # interior-point multipliers


@pytest.mark.parametrize("name", BACKENDS)
def test_backend_on_random_problems_against_least_squares(name):
    # A box alone: scipy's bounded least squares, another method.
    rng = np.random.default_rng(11)
    for _ in range(20):
        A, b = rng.normal(size=(9, 7)), rng.normal(size=9)
        low, high = -rng.uniform(0.01, 0.3, 7), rng.uniform(0.01, 0.3, 7)
        solution = Solver(name, name).solve(qp(A.T @ A, -A.T @ b, lb=low, ub=high))
        expected = lsq_linear(A, b, (low, high), tol=1e-14).x
        assert solution.status is QpStatus.SOLVED
        np.testing.assert_allclose(solution.x, expected, atol=ANSWER)


# --- The check itself
HALF = PROBLEMS["projection on a half-plane"].problem
RIGHT = (np.array([0.5, 0.5]), np.array([0.5]), np.zeros(2))
WRONG = {
    "infeasible point": (np.array([1.0, 1.0]), np.array([0.0]), np.zeros(2)),
    "outside the box": (np.array([0.5, -1e4]), np.array([0.5]), np.zeros(2)),
    "feasible, not the best": (np.array([0.0, 0.0]), np.array([0.0]), np.zeros(2)),
    "multiplier of the wrong sign": (np.array([0.5, 0.5]), np.array([-0.5]), np.zeros(2)),
    "multiplier of a slack row": (np.array([0.25, 0.25]), np.array([0.75]), np.zeros(2)),
    "multiplier of a free box": (np.array([0.4, 0.5]), np.array([0.5]), np.array([0.1, 0.0])),
    "nan": (np.array([np.nan, 0.5]), np.array([0.5]), np.zeros(2)),
    "nan multiplier": (np.array([0.5, 0.5]), np.array([np.nan]), np.zeros(2)),
    "infinite": (np.array([-np.inf, 0.5]), np.array([0.5]), np.zeros(2)),
}


def passes(x, z, z_box) -> bool:
    """The rule of Solver.solve."""
    primal, kkt = residuals(HALF, x, z, z_box)
    return bool(primal <= PRIMAL_TOLERANCE and kkt <= KKT_TOLERANCE)


def test_residuals_of_the_right_answer_are_zero():
    assert residuals(HALF, *RIGHT) == (0.0, 0.0)


@pytest.mark.parametrize("answer", WRONG.values(), ids=WRONG)
@pytest.mark.filterwarnings("ignore:invalid value encountered:RuntimeWarning")
def test_residuals_refuse(answer):
    assert not passes(*answer)
    assert passes(*RIGHT)


@pytest.mark.parametrize("answer", WRONG.values(), ids=WRONG)
@pytest.mark.filterwarnings("ignore:invalid value encountered:RuntimeWarning")
def test_block_finds_the_first_bad_answer(answer):
    block = QpBlock(8, 2, 1)
    for slot, problem in enumerate(block.problems):
        for name in ("P", "q", "G", "h", "lb", "ub"):
            getattr(problem, name)[:] = getattr(HALF, name)
        block.x[slot], block.z[slot], block.z_box[slot] = RIGHT
    assert block.first_bad(list(range(8))) is None
    for slot in (6, 3):
        block.x[slot], block.z[slot], block.z_box[slot] = answer
    assert block.first_bad(list(range(8))) == 3
    assert block.first_bad([0, 1, 2]) is None


def test_residuals_measure_what_is_wrong():
    primal, _ = residuals(HALF, np.array([1.0, 1.0]), np.zeros(1), np.zeros(2))
    assert primal == 1.0  # h - G x = -1
    # a minimum with a negative multiplier would be a maximum along the row: stationary, and refused by sign alone
    q = np.array([0.25, 0.25])
    far = QpProblem(np.eye(2), q, np.array([[1.0, 1.0]]), np.array([0.5]), *np.array([[-9.0, -9], [9, 9]]))
    primal, kkt = residuals(far, np.array([0.25, 0.25]), np.array([-0.5]), np.zeros(2))
    assert primal == 0.0 and kkt == pytest.approx(0.5 / 1.25, abs=1e-15)


# --- Two solvers and the check between them
def answering(monkeypatch, answers):
    """Make each solver give a fixed raw answer: (x, z, z_box), None for none, or "real" for its own."""
    real = Solver.attempt
    asked = []

    def attempt(self, problem, name):
        asked.append(name)
        answer = answers[name]
        return real(self, problem, name) if isinstance(answer, str) else answer

    monkeypatch.setattr(Solver, "attempt", attempt)
    return asked


@pytest.mark.parametrize("answer", WRONG.values(), ids=WRONG)
@pytest.mark.filterwarnings("ignore:invalid value encountered:RuntimeWarning")
def test_false_answer_goes_to_the_second_solver(monkeypatch, answer):
    asked = answering(monkeypatch, {"daqp": answer, "piqp": "real"})
    solution = Solver("daqp", "piqp").solve(HALF)
    assert asked == ["daqp", "piqp"]
    assert solution.status is QpStatus.SOLVED and solution.fell_back
    np.testing.assert_allclose(solution.x, (0.5, 0.5), atol=ANSWER)


def test_second_solver_is_not_asked_without_need(monkeypatch):
    asked = answering(monkeypatch, {"daqp": "real", "piqp": None})
    assert Solver("daqp", "piqp").solve(HALF).status is QpStatus.SOLVED
    assert asked == ["daqp"]


def test_first_solver_that_finds_nothing_is_not_believed_alone(monkeypatch):
    answering(monkeypatch, {"daqp": None, "piqp": "real"})
    solution = Solver("daqp", "piqp").solve(HALF)
    assert solution.status is QpStatus.SOLVED and solution.fell_back


@pytest.mark.parametrize("second", ["nothing", "false"])
def test_two_false_answers_are_failed_and_not_infeasible(monkeypatch, second):
    false = WRONG["infeasible point"]
    answering(monkeypatch, {"daqp": false, "piqp": None if second == "nothing" else false})
    solution = Solver("daqp", "piqp").solve(HALF)
    assert solution.status is QpStatus.FAILED
    assert np.isnan(solution.x).all()


def test_infeasible_takes_both(monkeypatch):
    answering(monkeypatch, {"daqp": None, "piqp": None})
    assert Solver("daqp", "piqp").solve(HALF).status is QpStatus.INFEASIBLE


def test_solvers_that_raise_prove_nothing(monkeypatch):
    def raising(*_args, **_options):
        raise RuntimeError("broken solver")

    monkeypatch.setattr("reach.qp.backends.qpsolvers.solve_problem", raising)
    assert Solver("daqp", "piqp").solve(HALF).status is QpStatus.FAILED


def test_absent_solver_is_named():
    with pytest.raises(SolverFailure, match='"nosuch" is not installed') as caught:
        Solver("daqp", "nosuch")
    assert caught.value.exit_code == 4


def test_workspace_is_read_anew():
    problem = qp(np.eye(2), [-1, -1], [[1, 1]], [1])
    solver = Solver("daqp", "piqp")
    first = solver.solve(problem).x.copy()
    problem.q[:] = -3, 0
    problem.h[:] = 2
    np.testing.assert_allclose(first, (0.5, 0.5), atol=ANSWER)
    np.testing.assert_allclose(solver.solve(problem).x, (2.5, -0.5), atol=ANSWER)


# --- Steps: scaled twists, and the closest one
PERIOD_S = 0.001


def velocity_cell(speeds) -> Cell:
    """A cell whose joints have velocity limits and nothing else."""
    joints = tuple(
        Joint(f"j{i + 1}", "revolute", JointLimits(velocity=Bound(-s, s, "test")))
        for i, s in enumerate(speeds)
    )
    cell = robot_cell("bench7")
    return replace(cell, arm=replace(cell.arm, joints=joints), margins=NO_MARGINS, period_s=PERIOD_S)


def standing(jacobian) -> Now:
    """A state at rest whose strike frame has the given linear rows."""
    n = jacobian.shape[1]
    rows = np.zeros((6, n))
    rows[: len(jacobian)] = jacobian
    zero = np.zeros(n)
    return Now(zero, zero, zero, zero, State(rows, np.zeros(6), np.eye(n), zero, zero), brake(n))


def brake(n: int) -> Brake:
    """Brakes so sharp that only |v| <= limit is left of the velocity rows, and every joint is watched."""
    return Brake(np.full(n, 1e9), np.full(n, 1e13), np.full(n, 1e9))


def solved(
    cell: Cell, now: Now, target, posture_velocity, keep_direction: bool = False
) -> tuple[Step, Stepper]:
    """One step from a state."""
    stepper = Stepper(cell, build_limits(cell))
    stepper.cost(now, target, posture_velocity, 0)
    problem = stepper.problem(now, 0)
    step = same_direction(stepper, problem, 0, target) if keep_direction else stepper.careful(problem)
    return step, stepper


PLANAR = np.array([[-1.0, -1, 0], [2, 1, 1]])  # three unit links at (0, 90°, -90°)


@pytest.mark.parametrize(
    ("jacobian", "task", "expected"),
    [
        # The largest s with J v = s ν under |v| <= 1, by hand, confirmed with a linear program; task scaling as in
        # Flacco, De Luca & Khatib, ICRA 2012 and IEEE T-RO 31(3) 2015 (which give no worked numbers).
        pytest.param([[2, 1, 1]], (3.5,), (1, 0.75, 0.75), id="saturated, exact"),
        pytest.param(PLANAR, (0, 1), (1 / 3, -1 / 3, 2 / 3), id="exact"),
        pytest.param(PLANAR, (0, 4), (1, -1, 1), id="half, up"),
        pytest.param(PLANAR, (-2, 0), (0, 1, -1), id="half, back"),
        pytest.param(PLANAR, (1, 1), (1 / 3, -1, 1), id="two thirds, aslant"),
    ],
)
def test_same_direction_on_hand_solved_arms(jacobian, task, expected):
    cell = velocity_cell((1.0, 1.0, 1.0))
    target = np.zeros(6)
    target[: len(task)] = task
    step, _ = solved(
        cell, standing(np.array(jacobian, dtype=float)), target, np.zeros(3), keep_direction=True
    )
    assert step.status == "solved"
    # The slow return to the posture weighs 1e-6 of the task, and the velocity row keeps about 5e-5 / (β dt²) back.
    np.testing.assert_allclose(step.change, expected, atol=2e-5)


def test_same_direction_is_the_largest_scale():
    cell = velocity_cell(np.linspace(0.5, 1.5, 7))
    top, weight = build_limits(cell)["velocity"].hi, task_weight(cell)
    rng = np.random.default_rng(12)
    scaled = 0
    for _ in range(40):
        rows, direction = rng.normal(size=(6, 7)), rng.normal(size=6)
        target = direction * rng.uniform(0.2, 3.0) / np.linalg.norm(direction)
        bounds = [*((-s, s) for s in top), (0, 1)]
        answer = linprog(
            np.r_[np.zeros(7), -1], A_eq=np.column_stack([rows, -target]), b_eq=np.zeros(6), bounds=bounds
        )
        now = standing(rows / weight[:, None])
        step, _ = solved(cell, now, target / weight, np.zeros(7), keep_direction=True)
        assert step.status == "solved"
        reached = rows @ step.change
        scale = float(reached @ target / (target @ target))
        assert scale == pytest.approx(answer.x[-1], abs=1e-4)
        assert np.linalg.norm(reached - scale * target) < 1e-4 * np.linalg.norm(target)
        scaled += answer.x[-1] < 0.99
    assert 5 < scaled < 40  # both kinds were there


def test_closest_step_is_bounded_least_squares():
    # With boxes alone the step is ‖W (J v⁺ + J̇ v dt - ν)‖² + ρ ‖v⁺ - v_posture‖² in a box: scipy's bounded least
    # squares. Box of velocity and acceleration, brakes without delay.
    source = robot_cell("bench7")
    joints = tuple(
        replace(j, limits=JointLimits(velocity=j.limits.velocity, acceleration=j.limits.acceleration))
        for j in source.arm.joints
    )
    cell = replace(source, arm=replace(source.arm, joints=joints), margins=NO_MARGINS)
    limits = build_limits(cell)
    arm, weight = Arm(cell.arm, cell.paddle), task_weight(cell)
    rng = np.random.default_rng(13)
    bound = 0
    for _ in range(60):
        q, v = rng.uniform(-1.5, 1.5, 7), rng.uniform(-0.9, 0.9, 7) * limits["velocity"].hi
        state = arm.at(q, v)
        now = Now(q, v, np.zeros(7), np.zeros(7), state, brake(7))
        target = state.jacobian @ v + rng.normal(size=6) * rng.choice([0.002, 0.05])
        posture = rng.uniform(-0.2, 0.2, 7)
        step, stepper = solved(cell, now, target, posture)
        A = weight[:, None] * state.jacobian
        share, calm = (w / 7 * np.trace(A.T @ A) for w in (POSTURE_WEIGHT, CALM_WEIGHT))
        wanted = weight * (target - state.drift * PERIOD_S - state.jacobian @ v)
        plain = np.vstack([A, np.sqrt(share) * np.eye(7)])
        ideal = np.linalg.lstsq(plain, np.r_[wanted, np.sqrt(share) * (posture - v)], rcond=None)[0]
        stacked = np.vstack([plain, np.sqrt(calm) * np.eye(7)])
        full = np.r_[wanted, np.sqrt(share) * (posture - v), np.sqrt(calm) * ideal]
        side = limits["acceleration"].hi * PERIOD_S
        low = np.maximum(-side, -limits["velocity"].hi - v)
        high = np.minimum(side, limits["velocity"].hi - v)
        expected = lsq_linear(stacked, full, (low, high), tol=1e-15, max_iter=500).x
        assert step.status == "solved"
        # The valley along the self-motion is 1e-6 as steep as the task: costs agree closer than places.
        mine, theirs = (np.sum((stacked @ x - full) ** 2) for x in (step.change, expected))
        assert mine <= theirs * (1 + 1e-6) + 1e-12
        np.testing.assert_allclose(A @ step.change, A @ expected, atol=1e-5)
        assert np.all(step.change <= high + 1e-6) and np.all(step.change >= low - 1e-6)
        short = stepper.error[0] + stepper.task[0] @ step.change
        np.testing.assert_allclose(short, A @ step.change - wanted, atol=1e-12)
        bound += bool(np.any(np.isclose(np.abs(step.change), side)))
    assert 10 < bound


@pytest.mark.parametrize("name", BACKENDS)
def test_step_with_every_solver(name):
    cell = replace(velocity_cell((1.0, 1.0, 1.0)), solver=SolverSpec(name, name))
    step, _ = solved(cell, standing(PLANAR), np.array([0.0, 4, 0, 0, 0, 0]), np.zeros(3))
    # By hand: v1 = v3 = 1 at their limits leave (-1 - v2)² + (3 + v2 - 4)², least at v2 = 0.
    # The free step is v2 = -2: leaving it weighs 1e-4 of the task, which shifts v2 by about that.
    assert step.status == "solved"
    np.testing.assert_allclose(step.change, (1, 0, 1), atol=4 * CALM_WEIGHT)
