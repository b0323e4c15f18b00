"""Every limit kind's two faces: what its rows allow a step, its measure must accept."""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache

import numpy as np
import pytest
from builders import NO_MARGINS, following, robot_cell
from scipy.optimize import linprog

from reach.arm import Arm, State
from reach.cell import Cell, Joint, Margins
from reach.evidence.measure import measure
from reach.evidence.motion import FINE, Motion
from reach.follow.commands import Replay
from reach.follow.reference import build_reference
from reach.follow.roll import roll
from reach.follow.rolled import Roll, now_at
from reach.follow.rows import Rows
from reach.kinematics import Chain
from reach.limits import LIMITS
from reach.limits.base import Fine, Limit, Now
from reach.limits.build import build_limits
from reach.qp.problem import QpProblem

PLANNED = [name for name, kind in LIMITS.items() if kind.family != "none"]
# Rows hold to the solver's check of them (1e-6 of a limit); drift inside a period is covered by what a kind keeps back.
ROUNDING = 2e-6
MARGINS = {"ordinary margins": Margins(), "no margins": NO_MARGINS}
# Without margins the rows have least to spare: the others are a long run.
TRIED = [pytest.param("ordinary margins", marks=pytest.mark.campaign), "no margins"]
VARIANTS = ("slow tool", "weak motors")
STARTS, OBJECTIVES = 4, 3


@dataclass(frozen=True, eq=False)
class Moment:
    """A legal state inside a motion: the period before it (q, v, a) and what the step knows."""

    q: np.ndarray
    v: np.ndarray
    a: np.ndarray
    now: Now


def weaker(joint: Joint) -> Joint:
    """The joint with half its torque, so that torque limits are met before all others."""
    torque = joint.limits.torque
    assert torque is not None
    return replace(
        joint, limits=replace(joint.limits, torque=replace(torque, lo=torque.lo / 2, hi=torque.hi / 2))
    )


@cache
def setting(margins: str, variant: str) -> tuple[Cell, Arm, list[Moment]]:
    """bench7 and states of violent motions on it; between the variants every limit is met somewhere."""
    speed = 1.2 if variant == "slow tool" else 20.0
    cell = replace(
        robot_cell("bench7", rest=f'[tool]\nspeed_m_s = {speed}\nsource = "test"\n'), margins=MARGINS[margins]
    )
    if variant == "weak motors":
        cell = replace(cell, arm=replace(cell.arm, joints=tuple(weaker(j) for j in cell.arm.joints)))
    arm, limits = Arm(cell.arm, cell.paddle), build_limits(cell)
    rng = np.random.default_rng(31)
    lo, hi = limits["position"].lo, limits["position"].hi
    moments: list[Moment] = []
    for number in range(STARTS):
        share = rng.uniform(0.3, 0.7, arm.n) if number % 2 else rng.choice([0.04, 0.96], arm.n)
        start = lo + share * (hi - lo)
        toward = np.where(share > 0.5, 1.0, -1.0) * limits["velocity"].hi * 2
        fast = arm.jacobian(start)[2] @ toward
        wild = rng.normal(size=6) * np.repeat([2.0, 6.0], 3)
        twists = np.repeat([fast if number % 2 == 0 else -fast, wild], 150, axis=0)
        held = replace(cell, arm=replace(cell.arm, start=tuple(start)))
        tried = following(held, np.arange(300) * 0.001, twists)
        reference = build_reference(tried, tried.follow, *arm.pose(start))
        rolled = roll(tried, arm, limits, Replay(reference, arm, tried.period_s, 0.0), start)
        last = len(rolled.sent.q) - 2
        rows = set(np.r_[1, 2, np.linspace(3, last, 8).astype(int)].tolist())
        rows -= {what.step for what in rolled.gave_way}  # there the rows had no common point
        moments += [moment(arm, rolled, k) for k in sorted(rows)]
    return cell, arm, moments


def moment(arm: Arm, rolled: Roll, k: int) -> Moment:
    """Step k of a roll as the step saw it."""
    q, v, a = rolled.sent.q, rolled.sent.v, rolled.sent.a
    dt = rolled.sent.period_s
    now = now_at(arm, q[k], v[k], a * dt, rolled.torque, rolled.brakes[k], k)
    state = State(*(part.copy() for part in now.state))
    return Moment(q[k - 1], v[k - 1], a[k - 1], now._replace(state=state))


def second_period(arm: Arm, limits: dict[str, Limit], item: Moment, change: np.ndarray) -> Fine:
    """The two periods around a state as a motion, measured."""
    dt = limits["position"].period_s
    q, v = item.now.q, item.now.v
    end = v + change
    motion = Motion(
        0.0,
        dt,
        np.array([item.q, q, q + (v + end) * dt / 2]),
        np.array([item.v, v, end]),
        np.array([item.a, change / dt, np.zeros(arm.n)]),
    )
    return measure(arm, Chain.of(arm), limits, motion).fine


def allowed(rows: Rows, now: Now, box: tuple[np.ndarray, np.ndarray]) -> tuple[np.ndarray, ...]:
    """Polytope (G, h, lo, hi) of a step's rows within a box."""
    n = len(now.q)
    blank = QpProblem(
        np.eye(n), np.zeros(n), np.zeros((rows.count, n)), np.zeros(rows.count), *np.zeros((2, n))
    )
    problem = rows.fill(now, blank)
    return problem.G.copy(), problem.h.copy(), np.maximum(problem.lb, box[0]), np.minimum(problem.ub, box[1])


def corner(polytope: tuple[np.ndarray, ...], objective: np.ndarray) -> np.ndarray:
    """The point of a polytope that is farthest along an objective."""
    G, h, lo, hi = polytope
    answer = linprog(
        -objective, G if len(G) else None, h if len(h) else None, bounds=np.column_stack([lo, hi])
    )
    assert answer.status == 0, answer.message
    return np.asarray(answer.x)


@cache
def largest_uses(margins: str, alone: str | None) -> dict[str, float]:
    """Largest use of each kind over corners of what the rows allow, all kinds' rows or one kind's alone.

    A kind alone still has the acceleration limits around it: without them a period of 1 ms may hold any motion at all.
    """
    found = [_largest_uses(margins, variant, alone) for variant in VARIANTS]
    return {name: max(uses[name] for uses in found) for name in found[0]}


def _largest_uses(margins: str, variant: str, alone: str | None) -> dict[str, float]:
    cell, arm, moments = setting(margins, variant)
    limits = build_limits(cell)
    rows = Rows(cell, limits if alone is None else {alone: limits[alone]})
    most = limits["acceleration"].hi * cell.period_s
    rng = np.random.default_rng(32)
    worst = dict.fromkeys(PLANNED, 0.0)
    for item in moments:
        polytope = allowed(rows, item.now, (-most, most))
        objectives = rng.normal(size=(OBJECTIVES, arm.n))
        speed = item.now.state.jacobian[:3] @ item.now.v
        objectives[0] = speed @ item.now.state.jacobian[:3]
        for objective in objectives:
            fine = second_period(arm, limits, item, corner(polytope, objective))
            for name in PLANNED if alone is None else [alone]:
                share = limits[name].utilisation(limits[name].measure(fine))
                worst[name] = max(worst[name], float(share[FINE : 2 * FINE].max()))
    return worst


@pytest.mark.parametrize("margins", TRIED)
@pytest.mark.parametrize("name", PLANNED)
def test_measure_accepts_what_all_rows_allow(name, margins):
    assert largest_uses(margins, None)[name] <= 1 + LIMITS[name].least_margin + ROUNDING


@pytest.mark.parametrize("margins", TRIED)
@pytest.mark.parametrize("name", PLANNED)
def test_measure_accepts_what_a_kinds_own_rows_allow(name, margins):
    assert largest_uses(margins, name)[name] <= 1 + LIMITS[name].least_margin + ROUNDING


@pytest.mark.parametrize("name", PLANNED)
def test_rows_reach_what_they_may(name):
    # Rows that allow nothing would pass the tests above: without margins some corner comes near each limit.
    assert max(largest_uses("no margins", None)[name], largest_uses("no margins", name)[name]) > 0.9


@pytest.mark.parametrize("name", LIMITS)
def test_kept_back_lies_inside_stated(name):
    for margins in MARGINS.values():
        limit = LIMITS[name](replace(setting("no margins", "slow tool")[0], margins=margins))
        assert limit.name == name
        assert limit.known.all()
        assert np.all(limit.kept_hi <= limit.hi) and np.all(limit.kept_lo >= limit.lo)
        n = len(limit.known)
        np.testing.assert_array_equal(limit.kept, [limit.kept_hi, -limit.kept_lo])
        assert n == len(limit.sources) == len(limit.joints) == len(limit.joint_units)


@pytest.mark.parametrize("name", LIMITS)
def test_unknown_is_neither_zero_nor_used(name):
    cell = setting("no margins", "slow tool")[0]
    bare = tuple(replace(j, limits=type(j.limits)()) for j in cell.arm.joints)
    limit = LIMITS[name](replace(cell, tool=None, arm=replace(cell.arm, joints=bare)))
    assert not limit.known.any()
    assert np.isinf(limit.hi).all() and np.isinf(limit.lo).all()
    assert np.isnan(limit.utilisation(np.ones((2, len(limit.known))))).all()


@pytest.mark.parametrize("name", LIMITS)
def test_use_is_one_at_either_end(name):
    limit = LIMITS[name](setting("no margins", "slow tool")[0])
    for end in (limit.lo, limit.hi):
        np.testing.assert_allclose(limit.utilisation(end[None]), 1.0, rtol=1e-12)
        assert np.all(
            limit.utilisation(end[None] + 0.01 * (limit.hi - limit.lo) * np.sign(end - limit.lo - 1e-9)) > 0
        )
