"""Whole strikes: closed forms of minimum time, convergence, the reach of joint speed limits, and what they promise."""

from __future__ import annotations

import tempfile
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from builders import FER_READY_RAD, NO_MARGINS, WEIGHTLESS, WORKING, fer_cell, load_text, robot_cell
from strike_case import (
    INVENTED,
    Stroke,
    bounded,
    demonstrated,
    near,
    postures,
    published,
    rubless,
    straights_of,
    strikable,
    swings_of,
    unit_vectors,
)

from reach.cell import Array, Bound, Cell
from reach.strike.setting import Setting
from reach.strike.stroke import Demonstration

EXACT = 1e-9  # m, m/s, rad, rad/s
HOME = {"bench7": np.array(list(WORKING["bench7"].values())), "fer": np.array(FER_READY_RAD)}
RUN_UPS = (0.3, 0.05)
NO_LOSS = 0.995  # of the quick timing's speed, that the optimisation has at least


@cache
def cell_of(name: str) -> Cell:
    if name == "bench7":
        return robot_cell("bench7")
    if name == "ur5":
        return bounded(published("ur5"), **INVENTED)
    with tempfile.TemporaryDirectory() as folder:
        return fer_cell(Path(folder))


def instant(cell: Cell) -> Cell:
    """The cell with a strike that is an instant, nothing kept back, and no gravity."""
    return replace(
        cell,
        margins=NO_MARGINS,
        accept=replace(cell.accept, strike_window_s=0.0),
        arm=replace(cell.arm, gravity_m_s2=(0.0, 0.0, 0.0)),
    )


# --- Closed forms: the second joint of link2 alone, without gravity, friction and paddle mass
# Its inertia is 0.06416 kg·m² everywhere (robots/link2/ORIGIN.md) and its lever 0.4 m, so that torque τ is an
# acceleration A = 0.4 τ / 0.06416 of the strike point and torque rate a jerk in the same way: the double integrator.
LEVER, INERTIA = 0.4, 0.06416


def one_link(torque: tuple[float, float], rate: float, window_s: float) -> Cell:
    """link2 with an unlimited first joint, and of its second one torque and torque rate alone."""
    cell = instant(replace(rubless(robot_cell("link2")), paddle=WEIGHTLESS))
    cell = bounded(
        cell,
        velocity=40.0,
        acceleration=np.inf,
        jerk=np.inf,
        torque=np.inf,
        torque_rate=np.inf,
        torque_continuous=np.inf,
    )
    first, second = (
        replace(j, limits=replace(j.limits, armature=0.0, position=Bound(-20.0, 20.0, "test")))
        for j in cell.arm.joints
    )
    tight = replace(second.limits, torque=Bound(*torque, "test"), torque_rate=Bound(-rate, rate, "test"))
    joints = (first, replace(second, limits=tight))
    accept = replace(
        cell.accept, strike_window_s=window_s, strike_lateral_m_s=10.0, strike_tilt_error_rad=3.0
    )
    return replace(cell, arm=replace(cell.arm, joints=joints), accept=accept)


def only_swing(cell: Cell, run_up_m: float, joint: int = 1) -> tuple[Setting, Stroke]:
    """The swing of link2's second joint alone: along what it moves, the paddle free to turn."""
    setting = Setting.of(strikable(cell, run_up_m, rotation="free"))
    q = np.array([[0.2, 0.6]])
    direction = setting.arm.jacobian(q[0])[2][:3, joint]
    (stroke,) = swings_of(setting, q, direction[None] / np.linalg.norm(direction))
    return setting, stroke


def kept(setting: Setting, name: str) -> tuple[float, float]:
    """What a plan uses of the second joint's limit, as an acceleration or jerk of the strike point."""
    limit = setting.limits[name]
    return tuple(float(side[1]) * LEVER / INERTIA for side in (limit.kept_lo, limit.kept_hi))


def speed_over(way: float, acceleration: float, jerk: float, window_s: float) -> float:
    """Speed gained from rest over a way, acceleration taken back at its end, then held for half the window: worked by
    hand from D = u/2 (u/A + A/j) + u w/2, and D = u √(u/j) + u w/2 where A is not reached; by bisection."""
    low, high = 0.0, np.sqrt(2 * acceleration * way)
    for _ in range(80):
        u = (low + high) / 2
        ramped = u / 2 * (u / acceleration + acceleration / jerk)
        need = ramped if u >= acceleration**2 / jerk else u * np.sqrt(u / jerk)
        low, high = (u, high) if need + u * window_s / 2 <= way else (low, u)
    return float(low)


@pytest.mark.parametrize("run_up_m", [0.05, 0.3])
@pytest.mark.parametrize("torque", [(-10.0, 10.0), (-4.0, 10.0), (-10.0, 4.0)])
def test_swing_by_torque_alone(run_up_m: float, torque: tuple[float, float]) -> None:
    setting, stroke = only_swing(one_link(torque, np.inf, 0.0), run_up_m)
    lo, hi = kept(setting, "torque")
    # From rest at constant acceleration, and to rest likewise: the weaker side decides.
    expected = np.sqrt(2 * min(hi, -lo) * run_up_m)
    assert stroke.bound > 2 * expected  # the joints' speed is none of it
    assert stroke.quick.speed == pytest.approx(expected, rel=1e-3)
    done = demonstrated(setting, stroke)
    assert done is not None and done.speed == stroke.quick.speed


@pytest.mark.parametrize("run_up_m", [0.02, 0.3])
@pytest.mark.parametrize("rate", [60.0, 400.0])
@pytest.mark.parametrize("window_s", [0.0, 0.02])
def test_swing_by_torque_and_its_rate(run_up_m: float, rate: float, window_s: float) -> None:
    setting, stroke = only_swing(one_link((-10.0, 10.0), rate, window_s), run_up_m)
    expected = speed_over(run_up_m, kept(setting, "torque")[1], kept(setting, "torque rate")[1], window_s)
    assert stroke.bound > 2 * expected
    # For a speed u the double-S has the largest acceleration at every speed on the way, so it needs the least way.
    assert stroke.quick.speed == pytest.approx(expected, rel=1e-3)
    done, best = demonstrated(setting, stroke), demonstrated(setting, stroke, (20, 40))
    assert done is not None and best is not None
    assert done.speed == stroke.quick.speed
    assert best.speed == pytest.approx(expected, rel=0.01)
    assert best.speed <= expected * 1.001


# --- Closed forms with gravity: one sliding joint that lifts
LIFT = """<robot name="lift">
  <link name="base"/>
  <joint name="z" type="prismatic"><parent link="base"/><child link="carriage"/><axis xyz="0 0 1"/>
    <limit lower="-5" upper="5" effort="60" velocity="100"/></joint>
  <link name="carriage"><inertial><mass value="3.0"/><inertia ixx="0.01" iyy="0.01" izz="0.01"
    ixy="0" ixz="0" iyz="0"/></inertial></link>
</robot>"""
FACE = '[paddle]\nmount = {{ rpy_deg = [{}, 0.0, 0.0] }}\nshape = "disc"\nradius_m = 0.08\nmass_kg = 0.2\n'


@pytest.mark.parametrize("up", [True, False], ids=["up", "down"])
@pytest.mark.parametrize("rate", [np.inf, 900.0])
def test_lift(up: bool, rate: float, tmp_path: Path) -> None:
    urdf = tmp_path / "lift.urdf"
    urdf.write_text(LIFT, encoding="utf-8")
    head = f"[arm]\nurdf = '{urdf.as_posix()}'\ntip = \"carriage\"\nstart_m = {{ z = 0.0 }}\n"
    cell = load_text(head + FACE.format(0.0 if up else 180.0))
    cell = replace(
        bounded(cell, torque_rate=rate, acceleration=np.inf, jerk=np.inf),
        margins=NO_MARGINS,
        accept=replace(cell.accept, strike_window_s=0.0),
    )
    setting = Setting.of(strikable(cell, 0.2))
    (stroke,) = swings_of(setting, np.zeros((1, 1)))
    assert stroke.normal == pytest.approx([0.0, 0.0, 1.0 if up else -1.0], abs=EXACT)
    # Up: force less weight on the way, weight helps to stop. Down: the other way round. Either way the weaker of the
    # two sides is F/m - g, over the run-up or over the follow-through.
    mass, gravity = 3.2, 9.80665
    force = float(setting.limits["torque"].kept_hi[0])
    jerk = float(setting.limits["torque rate"].kept_hi[0]) / mass
    expected = speed_over(0.2, force / mass - gravity, min(jerk, 1e12), 0.0)
    assert stroke.quick.speed == pytest.approx(expected, rel=1e-3)
    done = demonstrated(setting, stroke)
    assert done is not None and done.speed == stroke.quick.speed
    if np.isfinite(rate):
        best = demonstrated(setting, stroke, (20, 40))
        assert best is not None and best.speed == pytest.approx(expected, rel=0.01)
        assert best.speed <= expected * 1.001


# --- The optimisation has converged, and does not lose what the quick timing has
def slow_swings(name: str, run_up_m: float, count: int) -> tuple[Setting, list[Stroke]]:
    """Swings of random postures that joint speed does not end."""
    setting = Setting.of(strikable(cell_of(name), run_up_m))
    strokes = swings_of(setting, postures(setting, max(30, 3 * count), seed=7))
    return setting, [s for s in strokes if s.quick.speed < 0.95 * s.bound][:count]


def assert_converged(name: str, run_up_m: float, count: int, first: int = 0) -> None:
    setting, strokes = slow_swings(name, run_up_m, first + count)
    assert len(strokes) > first
    for stroke in strokes[first:]:
        quick, coarse = demonstrated(setting, stroke), demonstrated(setting, stroke, (20, 40))
        fine = demonstrated(setting, stroke, (20, 40, 80))
        assert quick is not None and coarse is not None and fine is not None
        best = [max(quick.speed, done.speed) for done in (coarse, fine)]
        assert best[1] == pytest.approx(best[0], rel=0.01)
        assert fine.speed == pytest.approx(coarse.speed, rel=0.01)
        assert coarse.speed >= NO_LOSS * quick.speed


def assert_no_loss(name: str, run_up_m: float, count: int) -> None:
    setting, strokes = slow_swings(name, run_up_m, count)
    assert strokes
    for stroke in strokes:
        quick, best = demonstrated(setting, stroke), demonstrated(setting, stroke, (20, 40))
        assert quick is not None and best is not None
        assert best.speed >= NO_LOSS * quick.speed


ARMS = ("bench7", "fer", "ur5")
ONE_BY_DEFAULT = ("bench7", *(pytest.param(name, marks=pytest.mark.campaign) for name in ARMS[1:]))


@pytest.mark.parametrize("name", ONE_BY_DEFAULT)
def test_more_pieces_change_little(name: str) -> None:
    assert_converged(name, 0.05, 1, first=2)  # one that is quickly done; the campaign looks at all


@pytest.mark.parametrize("name", ONE_BY_DEFAULT)
def test_optimising_loses_nothing(name: str) -> None:
    assert_no_loss(name, 0.3, 1)  # 0.05 m is in the test before


def test_optimising_loses_nothing_where_it_once_lost_most() -> None:
    # Dry friction turns over within the first millimetres of this run-up; linear programs got stuck at 0.597 m/s, where
    # the quick timing has 0.654.
    setting = Setting.of(strikable(cell_of("bench7"), 0.05))
    (stroke,) = swings_of(setting, postures(setting, 9, seed=7)[8:])
    quick, best = demonstrated(setting, stroke), demonstrated(setting, stroke, (20, 40))
    assert quick is not None and best is not None
    assert best.speed >= NO_LOSS * quick.speed


@pytest.mark.campaign
@pytest.mark.parametrize("name", ARMS)
@pytest.mark.parametrize("run_up_m", RUN_UPS)
def test_more_pieces_change_little_in_many_postures(name: str, run_up_m: float) -> None:
    assert_converged(name, run_up_m, 10)


@pytest.mark.campaign
@pytest.mark.parametrize("name", ARMS)
@pytest.mark.parametrize("run_up_m", RUN_UPS)
def test_optimising_loses_nothing_in_many_postures(name: str, run_up_m: float) -> None:
    assert_no_loss(name, run_up_m, 20)


# --- Where joint speed limits, the two sides meet
@pytest.mark.parametrize(("name", "least"), [("bench7", 15), ("fer", 30)])
def test_joint_speed_is_reached(name: str, least: int) -> None:
    setting = Setting.of(strikable(cell_of(name)))
    strokes = swings_of(setting, near(setting, HOME[name], 0.3, 40, seed=8))
    fast = [stroke for stroke in strokes if stroke.quick.speed >= 0.995 * stroke.bound]
    assert len(fast) >= least
    for stroke in fast:
        done = demonstrated(setting, stroke)
        assert done is not None
        twist = setting.arm.jacobian(done.motion.q[done.strike_row])[2] @ done.motion.v[done.strike_row]
        assert 0.995 * stroke.bound <= twist[:3] @ stroke.direction <= stroke.bound * (1 + EXACT)


def test_no_swing_passes_its_bound() -> None:
    for name in ("bench7", "fer"):
        setting = Setting.of(strikable(cell_of(name)))
        for stroke in swings_of(setting, postures(setting, 25, seed=9)):
            done = demonstrated(setting, stroke)
            assert done is not None
            assert done.speed <= stroke.bound * (1 + EXACT)
            assert np.isfinite(stroke.bound)


# --- What a demonstrated motion promises
def looked_at(setting: Setting, motion_s: Array, item: Demonstration) -> tuple[Array, Array, Array]:
    """Strike points (k, 3), paddle axes (k, 3, 3) and twists (k, 6) at times, by Pinocchio, state by state."""
    q, v, _ = item.motion.at(motion_s)
    states = [setting.arm.jacobian(x) for x in q]
    return (
        np.array([state[0] for state in states]),
        np.array([state[1] for state in states]),
        np.array([state[2] @ speed for state, speed in zip(states, v, strict=True)]),
    )


def assert_kept(setting: Setting, item: Demonstration, direction: Array, normal: Array, still: bool) -> None:
    """Rest at both ends, the strike in its row, its window, and the run-up, by Pinocchio."""
    motion, row = item.motion, item.strike_row
    assert not motion.v[[0, -1]].any() and not motion.a[-1].any()
    assert motion.t_s[row] == pytest.approx(0.0, abs=1e-12)
    assert np.abs(motion.q[row] - item.q).max() < EXACT
    assert np.abs(motion.v[row] - item.speed * item.tangent).max() < EXACT
    # The strike itself: a strike of this exact velocity, the face turning about its normal at most.
    _, _, (twist,) = looked_at(setting, np.zeros(1), item)
    assert np.abs(twist[:3] - item.speed * direction).max() < EXACT
    if still:
        assert np.abs(twist[3:] - twist[3:] @ normal * normal).max() < 1e-8
    accept = setting.accept
    half = accept.strike_window_s / 2
    _, rotation, twists = looked_at(setting, np.linspace(-half, half, 81), item)
    off = twists[:, :3] - item.speed * direction
    along = off @ normal
    wanted = item.speed * (direction @ normal)
    assert np.abs(along).max() <= accept.strike_speed_error_share * wanted
    assert np.linalg.norm(off - along[:, None] * normal, axis=1).max() <= accept.strike_lateral_m_s
    tilt = np.arccos(np.clip(rotation[:, :, 2] @ normal, -1.0, 1.0))
    assert tilt.max() <= accept.strike_tilt_error_rad
    if setting.run_up_m is not None:
        for end in (motion.t_s[0], motion.t_s[-1]):
            points, _, _ = looked_at(setting, np.linspace(0.0, end, 300), item)
            way = np.linalg.norm(np.diff(points, axis=0), axis=1).sum()
            assert way <= setting.run_up_m * 1.005


@pytest.mark.parametrize("name", ["bench7", "fer"])
@pytest.mark.parametrize("run_up_m", [None, *RUN_UPS])
@pytest.mark.parametrize("aslant", [False, True])
def test_swings_do_what_they_promise(name: str, run_up_m: float | None, aslant: bool) -> None:
    setting = Setting.of(strikable(cell_of(name), run_up_m))
    q = np.vstack([near(setting, HOME[name], 0.5, 3, seed=18), postures(setting, 3, seed=19)])
    direction = None
    if aslant:
        normal = np.array([setting.arm.pose(x)[1][:, 2] for x in q])
        direction = normal + 0.3 * unit_vectors(len(q), seed=20)
        direction /= np.linalg.norm(direction, axis=1)[:, None]
    strokes = swings_of(setting, q, direction)
    assert len(strokes) >= 5
    for stroke in strokes:
        item = demonstrated(setting, stroke)
        assert item is not None
        assert np.abs(item.q - stroke.q).max() < EXACT
        assert_kept(setting, item, stroke.direction, stroke.normal, still=True)


def test_optimised_swings_do_what_they_promise() -> None:
    setting = Setting.of(strikable(cell_of("bench7"), 0.05))
    for stroke in swings_of(setting, near(setting, HOME["bench7"], 0.5, 3, seed=21)):
        item = demonstrated(setting, stroke, (20,))
        assert item is not None
        assert_kept(setting, item, stroke.direction, stroke.normal, still=True)


@pytest.mark.parametrize("name", ["bench7", "fer"])
def test_swings_with_a_turning_paddle_do_what_they_promise(name: str) -> None:
    setting = Setting.of(strikable(cell_of(name), 0.3, rotation="free"))
    q = near(setting, HOME[name], 0.5, 12, seed=22)
    strokes = swings_of(setting, q)
    assert len(strokes) == len(q)
    for stroke in strokes:
        item = demonstrated(setting, stroke)
        assert item is not None
        assert_kept(setting, item, stroke.direction, stroke.normal, still=False)


@pytest.mark.parametrize("name", ["bench7", "fer"])
@pytest.mark.parametrize("run_up_m", [None, *RUN_UPS])
def test_straight_strokes_stay_straight(name: str, run_up_m: float | None) -> None:
    setting = Setting.of(strikable(cell_of(name), run_up_m))
    done = straights_of(setting, near(setting, HOME[name], 0.5, 4, seed=23))
    assert len(done) == 4
    for item in done:
        point, rotation = setting.arm.pose(item.q)
        normal = rotation[:, 2]
        assert_kept(setting, item, normal, normal, still=True)
        points, axes, _ = looked_at(setting, np.linspace(item.motion.t_s[0], item.motion.t_s[-1], 400), item)
        off = points - point
        assert np.linalg.norm(off - (off @ normal)[:, None] * normal, axis=1).max() < 1e-3
        assert np.degrees(np.arccos(np.clip(axes[:, :, 2] @ normal, -1.0, 1.0))).max() < 0.2
        assert np.ptp(off @ normal) > 0.02  # it goes somewhere
