"""Upper bounds on strike speed against an outside linear program, closed forms and brute force."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from builders import NO_MARGINS, ROBOTS, WEIGHTLESS, WORKING, fer_cell, planar_point_masses, robot_cell
from scipy.optimize import linprog
from strike_case import SHARP, by_program, frames, near, postures, published, strikable, unit_vectors

from reach.arm import Arm
from reach.cell import Array, Bound, Tool
from reach.strike.bound import certified, covering_bound, maximisers, strike_rows, upper_bounds, world_dual
from reach.strike.setting import Setting
from reach.strike.sides import upper

EXACT = 1e-9  # relative, and m/s: both sides are vertices, solved to rounding
EACH = 125  # postures of each published arm
ARMS = ("panda", "ur5", "xarm7", "z1")
KINDS = ("disc", "plate", "free")
STRAIGHT_MOUNT = (
    '[paddle]\nmount = { xyz_m = [0.0, 0.0, 0.06] }\nshape = "disc"\nradius_m = 0.085\nmass_kg = 0.25\n'
)


@cache
def setting_of(name: str) -> Setting:
    return Setting.of(strikable(published(name)))


def rows_of(setting: Setting, q: Array, kind: str) -> Array:
    """The rows that a strike fixes, by Pinocchio's Jacobians."""
    rotation, jacobian = frames(setting, q)
    return jacobian[:, :3] if kind == "free" else strike_rows(jacobian, rotation, kind == "disc", 0.085)


def target_of(direction: Array, rows: Array) -> Array:
    return np.hstack([direction, np.zeros((len(rows), rows.shape[1] - 3))])


def random_box(m: int, n: int, seed: int) -> tuple[Array, Array]:
    """Asymmetric joint velocities."""
    rng = np.random.default_rng(seed)
    return -rng.uniform(0.3, 4.0, (m, n)), rng.uniform(0.3, 4.0, (m, n))


# --- Against HiGHS, through scipy.optimize.linprog: another implementation of the same linear program
@pytest.mark.parametrize("name", ARMS)
@pytest.mark.parametrize("kind", KINDS)
def test_bounds_of_published_arms_are_the_linear_programs(name: str, kind: str) -> None:
    setting = replace(setting_of(name), spin_free=kind != "plate", length_m=0.085)
    q, direction = postures(setting, EACH, seed=11), unit_vectors(EACH, seed=12)
    above = upper(setting, q, direction)
    speed, dual = (above.free, above.dual_free) if kind == "free" else (above.still, above.dual_still)
    rows = rows_of(setting, q, kind)
    expected, _ = by_program(rows, target_of(direction, rows), above.lo, above.hi)
    assert np.median(expected) > 0.3  # m/s: these are no idle postures
    assert speed == pytest.approx(expected, rel=EXACT)
    # The proof, re-checked by one product with Pinocchio's Jacobian.
    y = np.einsum("mij,mi->mj", frames(setting, q)[1], dual)
    proved = np.maximum(y * above.hi, y * above.lo).sum(axis=1)
    assert np.einsum("mi,mi->m", dual[:, :3], direction) == pytest.approx(np.ones(EACH), abs=EXACT)
    assert proved == pytest.approx(expected, rel=EXACT)
    if kind != "free":
        # What the dual asks of turning is nothing that the strike leaves free: spin of a disc is.
        spin = np.einsum("mi,mi->m", dual[:, 3:], frames(setting, q)[0][:, :, 2])
        assert (np.abs(spin) < EXACT).all() == (kind == "disc")


@pytest.mark.parametrize("kind", KINDS)
def test_asymmetric_limits(kind: str) -> None:
    setting = setting_of("panda")
    q, direction = postures(setting, EACH, seed=21), unit_vectors(EACH, seed=22)
    rows, (lo, hi) = rows_of(setting, q, kind), random_box(EACH, 7, seed=23)
    some = np.random.default_rng(24).uniform(size=(EACH, 7))
    lo, hi = np.where(some < 0.1, 0.0, lo), np.where(some > 0.9, 0.0, hi)  # joints at an end of their travel
    bounds = upper_bounds(rows, direction, lo, hi)
    expected, _ = by_program(rows, target_of(direction, rows), lo, hi)
    assert bounds.speed == pytest.approx(expected, rel=EXACT, abs=EXACT)
    assert certified(rows, direction, lo, hi, bounds.dual) == pytest.approx(expected, rel=EXACT, abs=EXACT)
    back = upper_bounds(rows, -direction, -hi, -lo)
    assert back.speed == pytest.approx(bounds.speed, rel=EXACT, abs=EXACT)


@pytest.mark.parametrize("n", [3, 5, 6, 8, 9])
@pytest.mark.parametrize("r", [3, 5, 6])
def test_any_number_of_joints(n: int, r: int) -> None:
    rng = np.random.default_rng(10 * n + r)
    rows, direction, (lo, hi) = rng.normal(size=(40, r, n)), unit_vectors(40, seed=31), random_box(40, n, 32)
    if n < r:
        # Fewer joints than rows reach a direction only where the rows say so: put it there.
        rows[:, 3:] = 0.0
        rows[:, :3, :3] = np.eye(3)
    bounds = upper_bounds(rows, direction, lo, hi)
    expected, _ = by_program(rows, target_of(direction, rows), lo, hi)
    assert bounds.speed == pytest.approx(expected, rel=EXACT)
    assert certified(rows, direction, lo, hi, bounds.dual) == pytest.approx(expected, rel=EXACT)


# --- The joint velocity that reaches the bound
TIES = {
    # Which joints stand at a side is not unique where more than r - 1 products of the dual with a column vanish.
    "panda": ("panda", "disc"),
    "panda, a plate": ("panda", "plate"),
    "panda, free: three axes meet in its shoulder": ("panda", "free"),
    "six axes, free: three of them are parallel": ("ur5", "free"),
    "z1, free": ("z1", "free"),
}


def assert_reached(rows: Array, direction: Array, lo: Array, hi: Array) -> None:
    bounds = upper_bounds(rows, direction, lo, hi)
    expected, _ = by_program(rows, target_of(direction, rows), lo, hi)
    assert bounds.speed == pytest.approx(expected, rel=EXACT, abs=EXACT)
    some = bounds.speed > 1e-6
    velocity = maximisers(rows, direction, lo, hi, bounds)
    assert np.isnan(velocity[bounds.speed == 0]).all()
    assert np.isfinite(velocity[some]).all()
    assert (velocity[some] <= (hi + EXACT)[some]).all() and (velocity[some] >= (lo - EXACT)[some]).all()
    made = np.einsum("mrn,mn->mr", rows, velocity)
    wanted = target_of(direction, rows) * bounds.speed[:, None]
    assert np.abs(made - wanted)[some].max() < EXACT


@pytest.mark.parametrize("case", TIES)
def test_the_maximiser_makes_the_strike(case: str) -> None:
    name, kind = TIES[case]
    setting = setting_of(name)
    q = postures(setting, EACH, seed=41)
    assert_reached(rows_of(setting, q, kind), unit_vectors(EACH, seed=42), *setting.velocities(q))


@pytest.mark.parametrize("kind", KINDS)
def test_the_maximiser_of_a_paddle_straight_on_the_last_axis(kind: str) -> None:
    # The last joint only spins the disc: its column is zero but for a plate.
    setting = Setting.of(strikable(robot_cell("bench7", paddle=STRAIGHT_MOUNT)))
    q = postures(setting, EACH, seed=43)
    assert_reached(rows_of(setting, q, kind), frames(setting, q)[0][:, :, 2], *setting.velocities(q))


@pytest.mark.parametrize("kind", KINDS)
def test_the_maximiser_where_the_arm_works_in_a_plane(kind: str) -> None:
    # The roll joints at zero: the arm is a planar one, and the others can't leave the plane at first order.
    setting = Setting.of(strikable(robot_cell("bench7", paddle=STRAIGHT_MOUNT)))
    q = near(setting, np.array(list(WORKING["bench7"].values())), 0.5, EACH, seed=44)
    q[:, [0, 2, 4, 6]] = 0.0
    assert_reached(rows_of(setting, q, kind), frames(setting, q)[0][:, :, 2], *setting.velocities(q))


# --- Any dual vector proves, wider limits never lower, nothing at an unlimited joint
def test_no_dual_vector_proves_less_than_the_bound() -> None:
    setting = setting_of("ur5")
    q, direction = postures(setting, EACH, seed=51), unit_vectors(EACH, seed=52)
    rows, (lo, hi) = rows_of(setting, q, "disc"), random_box(EACH, 6, seed=53)
    speed = upper_bounds(rows, direction, lo, hi).speed
    rng = np.random.default_rng(54)
    for _ in range(20):
        dual = rng.normal(size=(EACH, 5))
        dual *= np.sign(np.einsum("mi,mi->m", dual[:, :3], direction))[:, None]
        assert (certified(rows, direction, lo, hi, dual) >= speed * (1 - EXACT)).all()


@pytest.mark.parametrize("kind", KINDS)
def test_looser_limits_never_lower_a_bound(kind: str) -> None:
    setting = setting_of("xarm7")
    q, direction = postures(setting, EACH, seed=61), unit_vectors(EACH, seed=62)
    rows, (lo, hi) = rows_of(setting, q, kind), random_box(EACH, 7, seed=63)
    before = upper_bounds(rows, direction, lo, hi).speed
    rng, raised = np.random.default_rng(64), 0
    for _ in range(8):
        lo, hi = (side * np.where(rng.uniform(size=side.shape) < 0.3, 1.3, 1.0) for side in (lo, hi))
        now = upper_bounds(rows, direction, lo, hi).speed
        assert (now >= before * (1 - 1e-12)).all()
        raised += int((now > before * 1.001).sum())
        before = now
    assert raised > EACH  # most steps raise some
    scaled = upper_bounds(rows, direction, 3 * lo, 3 * hi).speed
    assert scaled == pytest.approx(3 * before, rel=EXACT)


@pytest.mark.parametrize("kind", KINDS)
@pytest.mark.parametrize("joint", [0, 3])
def test_one_joint_without_a_limit(kind: str, joint: int) -> None:
    setting = setting_of("panda")
    q, direction = postures(setting, EACH, seed=71), unit_vectors(EACH, seed=72)
    rows, (lo, hi) = rows_of(setting, q, kind), random_box(EACH, 7, seed=73)
    lo[:, joint], hi[:, joint] = -np.inf, np.inf
    expected, _ = by_program(rows, target_of(direction, rows), lo, hi)
    assert (expected < 100).all()  # the other joints still limit it
    bounds = upper_bounds(rows, direction, lo, hi)
    assert bounds.speed == pytest.approx(expected, rel=EXACT)
    assert certified(rows, direction, lo, hi, bounds.dual) == pytest.approx(expected, rel=EXACT)


def test_no_limits_at_all() -> None:
    setting = setting_of("panda")
    q, direction = postures(setting, 20, seed=74), unit_vectors(20, seed=75)
    for kind in KINDS:
        rows = rows_of(setting, q, kind)
        bounds = upper_bounds(rows, direction, np.full(7, -np.inf), np.full(7, np.inf))
        assert np.isposinf(bounds.speed).all()
        velocity = maximisers(rows, direction, np.full(7, -np.inf), np.full(7, np.inf), bounds)
        assert np.isnan(velocity).all()


def test_the_cap_on_the_tool_bounds_too() -> None:
    cell = replace(strikable(published("ur5")), tool=Tool(0.4, "made by the test"))
    setting = Setting.of(cell)
    q, direction = postures(setting, 50, seed=76), unit_vectors(50, seed=77)
    capped, plain = upper(setting, q, direction), upper(setting_of("ur5"), q, direction)
    cap = 0.4 * (1 - cell.margins.velocity_share)
    assert capped.still == pytest.approx(np.minimum(plain.still, cap), rel=EXACT)
    assert (capped.still < plain.still).sum() > 10
    assert capped.joints.speed == pytest.approx(plain.still, rel=EXACT)


# --- The bound that covers all postures at a place
@pytest.mark.parametrize("name", [*ARMS, "bench7"])
def test_no_posture_passes_the_covering_bound(name: str) -> None:
    setting = setting_of(name) if name in ARMS else Setting.of(strikable(robot_cell(name)))
    q, direction = postures(setting, 4 * EACH, seed=55), unit_vectors(4 * EACH, seed=56)
    velocity = setting.limits["velocity"]
    position = np.array([setting.arm.pose(x)[0] for x in q])
    fastest = np.maximum(velocity.kept_hi, -velocity.kept_lo)
    covering = covering_bound(setting.chain, fastest, position, direction)
    # Free rows and no travel to respect: the largest speed that any posture there has.
    free = upper_bounds(rows_of(setting, q, "free"), direction, velocity.kept_lo, velocity.kept_hi).speed
    assert (free <= covering * (1 + EXACT)).all()
    assert (free > 0.3 * covering).any()  # and it is not idle


# --- Closed forms
def link2_setting() -> Setting:
    """link2 with a face straight on its flange, as published in ORIGIN.md: x along the link, z up."""
    return Setting.of(strikable(robot_cell("link2", paddle=STRAIGHT_MOUNT.replace("0.06", "0.0"))))


L1, L2 = 0.5, 0.4  # robots/link2/ORIGIN.md
V1, V2 = 4.0 * 0.98, 5.0 * 0.98  # its limits file, 2 % kept back


def test_two_links_free() -> None:
    assert (ROBOTS / "link2" / "ORIGIN.md").exists()
    setting = link2_setting()
    lo, hi = np.array([-V1, -V2]), np.array([V1, V2])
    q = np.random.default_rng(81).uniform([-1.5, 0.3], [1.5, 1.5], (40, 2))
    angle = np.random.default_rng(82).uniform(-np.pi, np.pi, 40)
    direction = np.stack([np.cos(angle), np.zeros(40), np.sin(angle)], axis=1)
    # x = l1 c1 + l2 c12, z = l1 s1 + l2 s12: two equations, two joints, one joint at its limit.
    one, two = q[:, 0], q.sum(axis=1)
    far = np.stack([-L2 * np.sin(two), L2 * np.cos(two)], axis=1)
    whole = far + np.stack([-L1 * np.sin(one), L1 * np.cos(one)], axis=1)
    matrix = np.stack([whole, far], axis=2)
    velocity = np.linalg.solve(matrix, direction[:, [0, 2], None])[:, :, 0]
    expected = 1 / np.max(np.abs(velocity) / [V1, V2], axis=1)
    rows = rows_of(setting, q, "free")
    bounds = upper_bounds(rows, direction, lo, hi)
    assert bounds.speed == pytest.approx(expected, rel=EXACT)
    assert maximisers(rows, direction, lo, hi, bounds) == pytest.approx(
        velocity * expected[:, None], abs=EXACT
    )


@pytest.mark.parametrize("kind", ["disc", "plate"])
def test_two_links_still(kind: str) -> None:
    # The face does not turn: v2 = -v1, and the tip moves as the elbow does, across the first link. No other
    # direction can be struck at all.
    setting = link2_setting()
    lo, hi = np.array([-V1, -V2]), np.array([V1, V2])
    q = np.random.default_rng(83).uniform([-1.5, -1.5], [1.5, 1.5], (40, 2))
    across = np.stack([-np.sin(q[:, 0]), np.zeros(40), np.cos(q[:, 0])], axis=1)
    rows = rows_of(setting, q, kind)
    bounds = upper_bounds(rows, across, lo, hi)
    assert bounds.speed == pytest.approx(np.full(40, L1 * V1), rel=EXACT)
    assert certified(rows, across, lo, hi, bounds.dual) == pytest.approx(bounds.speed, rel=EXACT)
    velocity = maximisers(rows, across, lo, hi, bounds)
    assert velocity == pytest.approx(np.tile([V1, -V1], (40, 1)), abs=EXACT)
    aside = across + 0.01 * np.stack([np.cos(q[:, 0]), np.zeros(40), np.sin(q[:, 0])], axis=1)
    aside /= np.linalg.norm(aside, axis=1)[:, None]
    for direction in (aside, np.tile([0.0, 1.0, 0.0], (40, 1)), unit_vectors(40, seed=84)):
        none = upper_bounds(rows, direction, lo, hi)
        assert (none.speed == 0).all()
        assert np.abs(certified(rows, direction, lo, hi, none.dual)).max() < EXACT
        assert np.isnan(maximisers(rows, direction, lo, hi, none)).all()


def test_two_links_as_they_stretch() -> None:
    # q1 = 0, elbow at ε: along the arm the tip moves by l2 v ε at most; a bound may be loose by rounding, never low.
    setting = link2_setting()
    lo, hi = np.array([-V1, -V2]), np.array([V1, V2])
    for bend in 10.0 ** -np.arange(1, 16):
        rows = rows_of(setting, np.array([[0.0, bend]]), "free")
        # ẋ = -l2 sin ε (v1 + v2) = s, ż = l1 v1 + l2 cos ε (v1 + v2) = 0
        v1_per_sum = -L2 * np.cos(bend) / L1
        most_sum = min(V1 / abs(v1_per_sum), V2 / abs(1 - v1_per_sum))
        expected = L2 * np.sin(bend) * most_sum
        bound = upper_bounds(rows, np.array([[-1.0, 0.0, 0.0]]), lo, hi)
        assert bound.speed[0] == pytest.approx(expected, rel=1e-6, abs=1e-6)
        across = upper_bounds(rows, np.array([[0.0, 0.0, 1.0]]), lo, hi)
        # ẋ = 0 asks v2 = -v1, however little the elbow is bent; straight, both joints help.
        straight = (L1 + L2) * V1 + L2 * V2
        assert across.speed[0] == pytest.approx(L1 * V1, rel=1e-6) or across.speed[0] == pytest.approx(
            straight, rel=1e-6
        )
    rows = rows_of(setting, np.zeros((1, 2)), "free")
    assert upper_bounds(rows, np.array([[-1.0, 0.0, 0.0]]), lo, hi).speed[0] == 0
    assert upper_bounds(rows, np.array([[0.0, 0.0, 1.0]]), lo, hi).speed[0] == pytest.approx(straight)


@pytest.mark.parametrize("kind", KINDS)
def test_stretched_seven_axes(kind: str) -> None:
    setting = Setting.of(strikable(robot_cell("bench7")))
    q, direction = postures(setting, EACH, seed=91), unit_vectors(EACH, seed=92)
    q[:, 3] = 0.0
    q[::2, 5] = 0.0
    q[::3, 1] = 0.0
    rows = rows_of(setting, q, kind)
    lo, hi = random_box(EACH, 7, seed=93)
    expected, _ = by_program(rows, target_of(direction, rows), lo, hi)
    bounds = upper_bounds(rows, direction, lo, hi)
    assert bounds.speed == pytest.approx(expected, rel=EXACT, abs=EXACT)
    assert (certified(rows, direction, lo, hi, bounds.dual) >= expected * (1 - EXACT) - EXACT).all()


# Scale factors of the task-scaling example of three unit links at (0, 90°, -90°), |v| <= 1: J = [[-1 -1 0], [2 1 1]].
# The statement is that of Flacco, De Luca & Khatib, ICRA 2012; the numbers are the linear program's, worked by hand:
# they scale the task down to s of it, so that s·|task| is the bound along it.
@pytest.mark.parametrize(
    ("task", "scale", "velocity"),
    [
        pytest.param((0.0, 4.0), 0.5, (1.0, -1.0, 1.0), id="up"),
        pytest.param((-2.0, 0.0), 0.5, (0.0, 1.0, -1.0), id="back"),
        pytest.param((1.0, 1.0), 2 / 3, (1 / 3, -1.0, 1.0), id="aslant"),
    ],
)
def test_three_links_by_hand(task: tuple[float, float], scale: float, velocity: tuple[float, ...]) -> None:
    arm = Arm(planar_point_masses((1.0, 1.0, 1.0), (1.0, 1.0, 1.0)), WEIGHTLESS)
    rows = arm.jacobian(np.array([0.0, np.pi / 2, -np.pi / 2]))[2][None, :3]
    assert rows[0, :2] == pytest.approx(np.array([[-1.0, -1.0, 0.0], [2.0, 1.0, 1.0]]), abs=EXACT)
    size = np.hypot(*task)
    direction = np.array([[*task, 0.0]]) / size
    bounds = upper_bounds(rows, direction, -np.ones(3), np.ones(3))
    assert bounds.speed[0] == pytest.approx(scale * size, rel=EXACT)
    reached = maximisers(rows, direction, -np.ones(3), np.ones(3), bounds)
    assert reached[0] == pytest.approx(velocity, abs=EXACT)


def test_one_row_by_hand() -> None:
    # J = [2 1 1], |v| <= 1: at most 4, all joints at their limit. The bound of any single row is Σ |J_i| v_i.
    rows = np.zeros((1, 3, 3))
    rows[0, 0] = 2.0, 1.0, 1.0
    bounds = upper_bounds(rows, np.array([[1.0, 0.0, 0.0]]), -np.ones(3), np.ones(3))
    assert bounds.speed[0] == pytest.approx(4.0, rel=EXACT)
    assert maximisers(rows, np.array([[1.0, 0, 0]]), -np.ones(3), np.ones(3), bounds)[0] == pytest.approx(
        np.ones(3), abs=EXACT
    )


def test_the_world_dual_is_the_rows_dual() -> None:
    setting = setting_of("panda")
    q = postures(setting, 10, seed=95)
    rotation, jacobian = frames(setting, q)
    for spin_free in (True, False):
        rows = strike_rows(jacobian, rotation, spin_free, 0.2)
        dual = np.random.default_rng(96).normal(size=rows.shape[:2])
        y = np.einsum("mrn,mr->mn", rows, dual)
        world = np.einsum("min,mi->mn", jacobian, world_dual(dual, rotation, 0.2))
        assert world == pytest.approx(y, abs=EXACT)


# --- What joint travel leaves of a velocity
def test_travel_by_hand() -> None:
    # One joint of range [-2, 1], gaining at 3 rad/s² forward, at 5 backward, 10 rad/s at most, nothing kept back.
    lo, hi = -2.0, 1.0
    setting = one_joint(lo, hi, -5.0, 3.0)
    for q in (-2.0, -1.5, 0.0, 0.5, 1.0):
        behind, ahead = q - lo, hi - q
        forward = np.sqrt(2 * min(3 * behind, 5 * ahead))
        backward = np.sqrt(2 * min(5 * ahead, 3 * behind))
        low, high = setting.velocities(np.array([[0.0, q]]))
        assert (low[0, 1], high[0, 1]) == pytest.approx((-backward, forward), abs=EXACT)
    assert (
        setting.velocities(np.zeros((1, 2)))[1][0, 0] == 10.0
    )  # the other joint: no end, no acceleration limit


def one_joint(lo: float, hi: float, slowest: float, fastest: float) -> Setting:
    """link2 whose second joint has these ends and accelerations, no margins; its first joint only a velocity."""
    cell = robot_cell("link2")
    first, second = cell.arm.joints
    velocity = Bound(-10.0, 10.0, "made by the test")
    free = replace(first.limits, position=None, acceleration=None, velocity=velocity)
    tight = replace(
        second.limits,
        position=Bound(lo, hi, "made by the test"),
        acceleration=Bound(slowest, fastest, "made by the test"),
        velocity=velocity,
    )
    joints = (replace(first, limits=free), replace(second, limits=tight))
    arm = replace(cell.arm, joints=joints)
    return Setting.of(strikable(replace(cell, arm=arm, margins=NO_MARGINS)))


@pytest.mark.parametrize("q", [-1.9, -1.2, 0.1, 0.8])
@pytest.mark.parametrize("sign", [1, -1])
def test_no_motion_of_one_joint_passes_its_travel(q: float, sign: int) -> None:
    # Brute force: 15 accelerations before the posture and 15 after it on many horizons, rest to rest inside the travel,
    # the fastest by a linear program. It must come close to the closed form from below, and not pass it.
    lo, hi, slowest, fastest = -2.0, 1.0, -5.0, 3.0
    low, high = one_joint(lo, hi, slowest, fastest).velocities(np.array([[0.0, q]]))
    most = high[0, 1] if sign > 0 else -low[0, 1]
    found = max(
        fastest_pass(q, sign, (lo, hi), (slowest, fastest), first, last)
        for first in np.geomspace(0.1, 2.0, 8)
        for last in np.geomspace(0.1, 2.0, 8)
    )
    assert found <= most * (1 + EXACT)
    assert found >= 0.97 * most


def fastest_pass(
    q: float, sign: int, ends: tuple[float, float], box: tuple[float, float], first: float, last: float
) -> float:
    """Largest speed through q of piecewise constant accelerations, `first` s before it and `last` s after it."""
    count = 15
    h = np.repeat([first / count, last / count], count)
    times = np.append(0.0, np.cumsum(h))
    # Unknowns: start position, accelerations. Speed and position at each edge are linear in them; a piece's parabola
    # lies within its Bézier points, of which the middle one is the start moved on for half the piece.
    speed = np.zeros((2 * count + 1, 2 * count + 1))
    place = np.zeros_like(speed)
    place[:, 0] = 1.0
    for k in range(2 * count):
        after = np.arange(2 * count + 1) > k
        speed[after, k + 1] = h[k]
        place[after, k + 1] = h[k] * (times[after] - times[k] - h[k] / 2)
    inside = np.vstack([place, place[:-1] + speed[:-1] * h[:, None] / 2])
    done = linprog(
        -sign * speed[count],
        A_ub=np.vstack([inside, -inside]),
        b_ub=np.repeat([ends[1], -ends[0]], len(inside)),
        A_eq=np.vstack([place[count], speed[-1]]),
        b_eq=[q, 0.0],
        bounds=[(None, None), *[box] * (2 * count)],
        method="highs",
        options=SHARP,
    )
    return float(-done.fun) if done.status == 0 else 0.0


def test_ends_of_travel_lower_the_bound(tmp_path) -> None:
    # Near an end a joint can't be fast; the bound of a posture there must feel it.
    setting = Setting.of(strikable(fer_cell(tmp_path)))
    q = postures(setting, 60, seed=98)
    q[:, 3] = setting.ends[1][3] - 1e-3
    lo, hi = setting.velocities(q)
    assert (hi[:, 3] < 0.2).all() and (lo[:, 3] > -0.2).all()
    rows, direction = rows_of(setting, q, "disc"), unit_vectors(60, seed=99)
    wide = upper_bounds(
        rows, direction, setting.limits["velocity"].kept_lo, setting.limits["velocity"].kept_hi
    )
    tight = upper_bounds(rows, direction, lo, hi)
    assert (tight.speed <= wide.speed * (1 + EXACT)).all() and (tight.speed < 0.9 * wide.speed).sum() > 20
