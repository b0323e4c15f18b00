"""The roll: integration, start and stop, readings of a log, pose feedback, and that its short cuts change nothing."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from functools import cache
from itertools import product
from typing import Any

import numpy as np
import pytest
from builders import NO_MARGINS, WEIGHTLESS, WORKING, Body, chain_arm, following, robot_cell
from follow_case import (
    INERTIA_KG_M2,
    LENGTH_M,
    LEVEL,
    MASS_KG,
    UPRIGHT,
    bump,
    hinge,
    hinge_log,
    limits,
    one_joint,
    unlimited,
)
from scipy.integrate import solve_ivp
from scipy.spatial.transform import Rotation

from reach.arm import Arm
from reach.cell import Array, Cell, CommandLog, Follow, Pose
from reach.evidence.motion import FINE, Motion
from reach.follow import roll as roll_module
from reach.follow.bench import run
from reach.follow.commands import Replay
from reach.follow.reference import Reference, build_reference
from reach.follow.roll import roll
from reach.follow.rolled import Roll
from reach.follow.rows import Rows
from reach.follow.step import BLOCK, Stepper
from reach.kinematics import Chain
from reach.limits.build import build_limits
from reach.qp.backends import Solver
from reach.verdict import NOT_DELIVERABLE, UNDECIDED

G = 9.80665
SAME = 1e-6
SHORT = 2e-4  # the null-space return may take this share of what a free step asks


def rolled(cell: Cell, give_up: Callable[[int, Array, Array], bool] | None = None) -> Roll:
    """Roll a cell from its start posture, pose gain as in its [follow]."""
    assert cell.follow is not None
    arm, start = Arm(cell.arm, cell.paddle), np.array(cell.arm.start)
    commands = Replay(reference_of(cell), arm, cell.period_s, cell.follow.pose_gain_per_s, give_up)
    return roll(cell, arm, build_limits(cell), commands, start)


def reference_of(cell: Cell) -> Reference:
    """The reference of a cell, begun at its start posture."""
    assert cell.follow is not None
    return build_reference(cell, cell.follow, *Arm(cell.arm, cell.paddle).pose(np.array(cell.arm.start)))


@cache
def violent() -> Cell:
    """A six-axis arm driven into its velocity, acceleration and torque-rate limits and back."""
    cell = robot_cell("bench6")
    start = np.array(list(WORKING["bench6"].values()))
    jacobian = Arm(cell.arm, cell.paddle).jacobian(start)[2]
    fast = jacobian @ np.array([2.0, -1.5, 2.5, 3.0, -2.0, 4.0])
    t = 0.001 * np.arange(250)
    twist = np.where(t[:, None] < 0.12, fast, -0.6 * fast)
    return following(replace(cell, arm=replace(cell.arm, start=tuple(start))), t, twist)


@cache
def clean() -> Roll:
    """The violent roll as it comes."""
    return rolled(violent())


def same_motion(one: Roll, other: Roll, tolerance: float = SAME) -> None:
    """Two rolls of the same joint motion; a over a period of 1 ms amplifies by 1,000."""
    assert len(one.sent.q) == len(other.sent.q)
    np.testing.assert_allclose(one.sent.q, other.sent.q, rtol=0, atol=tolerance)
    np.testing.assert_allclose(one.sent.v, other.sent.v, rtol=0, atol=tolerance)


# Integration ------------------------------------------------------------------------------------------------------


def test_the_violent_log_meets_limits() -> None:
    steps = np.flatnonzero(clean().z_box.any(1) | clean().z.any(1))
    assert 50 < len(steps) < len(clean().shortfall)
    assert clean().z_box.any() and clean().z.any()
    assert (clean().failed_steps, clean().fallback_steps) == (0, 0)


def test_integration_is_exact_for_constant_acceleration() -> None:
    sent, dt = clean().sent, 0.001
    q, v, a = sent.q, sent.v, sent.a
    np.testing.assert_allclose(v[1:-1], v[:-2] + a[:-2] * dt, rtol=0, atol=1e-13)
    np.testing.assert_allclose(q[1:], q[:-1] + v[:-1] * dt + a[:-1] * dt**2 / 2, rtol=0, atol=1e-13)
    assert np.all(a[-1] == 0)


@pytest.mark.parametrize("known", [{}, {"velocity": 5.0}, {"torque": 50.0}, {"torque_rate": 1e4}], ids=str)
def test_torque_at_each_step_whatever_is_limited(known: dict[str, float]) -> None:
    t = 0.001 * np.arange(60)
    found = rolled(hinge_log(hinge(limits(**known)), t, 4.0 * t, interpolation="linear"))
    np.testing.assert_allclose(found.torque, INERTIA_KG_M2 * found.sent.a[:-1], rtol=0, atol=1e-9)
    np.testing.assert_allclose(found.torque[:58, 0], INERTIA_KG_M2 * 4.0, rtol=SHORT)


def test_motion_between_rows() -> None:
    sent, dt = clean().sent, 0.001
    rng = np.random.default_rng(3)
    t = np.sort(rng.uniform(0, dt * (len(sent.q) - 1), 60))
    q, v, a = sent.at(t)
    speed = np.array([np.interp(t, sent.t_s, column) for column in sent.v.T]).T  # linear inside a period
    np.testing.assert_allclose(v, speed, rtol=0, atol=1e-9)
    for at, position, acceleration in zip(t, q, a, strict=True):
        knots = np.append(
            sent.t_s[sent.t_s < at], at
        )  # trapezia are exact for a speed that is linear between
        speeds = np.array([np.interp(knots, sent.t_s, column) for column in sent.v.T])
        np.testing.assert_allclose(
            position, sent.q[0] + np.trapezoid(speeds, knots, axis=1), rtol=0, atol=1e-11
        )
        np.testing.assert_array_equal(acceleration, sent.a[len(knots) - 2])


def test_motion_outside_its_rows_and_on_the_fine_grid() -> None:
    motion = Motion(
        2.0,
        0.1,
        np.array([[0.0], [0.05], [0.15]]),
        np.array([[0.0], [1.0], [1.0]]),
        np.array([[10.0], [0], [0]]),
    )
    q, v, _ = motion.at(np.array([1.0, 2.05, 2.1, 2.15]))
    np.testing.assert_allclose(q[:, 0], [0.0, 0.0125, 0.05, 0.1], atol=1e-12)
    np.testing.assert_allclose(v[:, 0], [0.0, 0.5, 1.0, 1.0], atol=1e-12)
    t, fine, _, _ = motion.fine()
    assert len(t) == 2 * FINE + 1
    np.testing.assert_allclose(fine[:5, 0], [0.0, 0.003125, 0.0125, 0.028125, 0.05], atol=1e-12)


# Start and stop ---------------------------------------------------------------------------------------------------


def test_starts_at_rest() -> None:
    assert np.all(clean().sent.v[0] == 0)
    np.testing.assert_array_equal(clean().sent.q[0], list(WORKING["bench6"].values()))


def test_starts_with_a_given_velocity() -> None:
    cell = hinge(start_velocity=0.8)
    found = rolled(hinge_log(cell, 0.001 * np.arange(100), np.full(100, 0.8))).sent
    assert found.v[0, 0] == 0.8
    np.testing.assert_allclose(found.v[1:100, 0], 0.8, rtol=SHORT)  # nothing to do but keep going
    np.testing.assert_allclose(found.q[99, 0], 0.8 * 0.099, rtol=2e-4)


def link2_torque(q: Array, v: Array, a: Array) -> Array:
    """Torques (m, 2) of the bare link2 arm in closed form (its ORIGIN.md), losses and rotor inertia included."""
    c1, c2, s2, c12 = np.cos(q[:, 0]), np.cos(q[:, 1]), np.sin(q[:, 1]), np.cos(q.sum(1))
    v1, v2 = v.T
    m12 = 0.06416 + 0.12 * c2
    one = (0.56448 + 0.05 + 0.24 * c2) * a[:, 0] + m12 * a[:, 1] - 0.12 * s2 * (2 * v1 * v2 + v2**2)
    two = m12 * a[:, 0] + (0.06416 + 0.02) * a[:, 1] + 0.12 * s2 * v1**2
    one += G * (1.2 * c1 + 0.24 * c12) + 0.2 * v1 + 0.4 * np.tanh(v1 / 0.1)
    two += G * 0.24 * c12 + 0.1 * v2 + 0.2 * np.tanh(v2 / 0.1)
    return np.column_stack([one, two])


@cache
def jerked() -> Cell:
    """Link2 without a paddle, from its working posture with a step of command: torque rate binds at once."""
    cell = replace(robot_cell("link2"), paddle=WEIGHTLESS)
    t = 0.001 * np.arange(150)
    twist = np.tile([-0.5, 0.0, 0.8, 0.0, 0.0, 0.0], (150, 1))
    return following(cell, t, twist)


def test_torque_rate_of_the_first_period_counts_from_gravity_torque() -> None:
    _, q, v, a = rolled(jerked()).sent.fine()
    torque = link2_torque(q, v, a)
    standing = link2_torque(q[:1], 0 * q[:1], 0 * q[:1])[0]
    assert np.abs(standing).min() > 1.0  # so that counting from zero would be something else
    rate = np.abs(torque[:FINE] - standing).max(0) / 0.001
    stated, kept = np.array([1200.0, 800.0]), 0.95
    assert np.all(rate <= stated)
    assert np.any(rate >= 0.99 * kept * stated)


def test_the_stop_is_part_of_the_motion() -> None:
    found = rolled(jerked())
    sent, end = found.sent, found.end_row
    assert found.stopped and end == 150 < len(sent.q) - 1
    assert np.abs(sent.v[end]).max() > 0.1  # it still moves when the command ends
    assert np.all(sent.v[-1] == 0) and np.all(sent.a[-1] == 0)
    _, q, v, a = sent.fine()
    torque = link2_torque(q, v, a)
    np.testing.assert_allclose(torque[-1], link2_torque(q[-1:], 0 * q[-1:], 0 * q[-1:])[0], atol=1e-9)
    rate = np.abs(torque[FINE:] - torque[:-FINE]).max(0) / 0.001
    assert np.all(rate <= np.array([1200.0, 800.0]))
    measured = run(jerked()).evidence
    assert measured.stopped and measured.torque is not None
    np.testing.assert_allclose(measured.torque[-1], torque[-1], atol=1e-6)


def test_an_arm_too_weak_to_stop() -> None:
    # Torque 0.5 N·m less the margin of 10 % slows 0.25 kg·m² by 1.8 rad/s²: 12 rad/s take 6.7 s.
    cell = hinge(limits(torque=0.5), start_velocity=12.0, period_s=0.005)
    found = rolled(hinge_log(cell, 0.005 * np.arange(10), np.full(10, 12.0)))
    assert not found.stopped
    v, end = found.sent.v[:, 0], found.end_row
    assert v[end] == pytest.approx(12.0, rel=5e-3) and len(v) - 1 - end == 400
    np.testing.assert_allclose(v[end:], v[end] - 1.8 * 0.005 * np.arange(401), rtol=1e-6)
    done = run(hinge_log(cell, 0.005 * np.arange(10), np.full(10, 12.0)))
    assert done.verdict.verdict == NOT_DELIVERABLE
    assert any("stand" in ground for ground in done.verdict.grounds)


# Stamps and control periods ---------------------------------------------------------------------------------------

STAMPS = np.array([0.0, 0.0031, 0.007, 0.0102, 0.0139])
SPEEDS = np.array([0.1, 0.5, -0.2, 0.3, 0.4])


def off_grid(interpolation: str, period_s: float = 0.002) -> Cell:
    """The hinge with few stamps off the control's grid."""
    return hinge_log(hinge(period_s=period_s), STAMPS, SPEEDS, interpolation=interpolation)


def along_hinge(twists: Array, cell: Cell) -> Array:
    """Signed speed in rad/s that twists (k, 6) of the hinge mean, by their turning about the upright axis."""
    return np.asarray(twists[:, 5])


@pytest.mark.parametrize("period_s", [0.0005, 0.001, 0.002])
def test_hold_goes_for_the_last_sample_before_a_period(period_s: float) -> None:
    cell = off_grid("hold", period_s)
    reference = reference_of(cell)
    steps = int(np.ceil((reference.end_s - STAMPS[0]) / period_s - 1e-6))
    wanted = [SPEEDS[np.flatnonzero(STAMPS <= period_s * k + 1e-9)[-1]] for k in range(steps)]
    np.testing.assert_allclose(along_hinge(reference.targets(period_s, steps), cell), wanted, atol=1e-12)


@pytest.mark.parametrize("period_s", [0.0005, 0.001, 0.002, 0.005])
def test_linear_goes_for_the_command_at_the_periods_end(period_s: float) -> None:
    cell = off_grid("linear", period_s)
    reference = reference_of(cell)
    steps = int(np.floor((STAMPS[-1] - STAMPS[0]) / period_s))
    wanted = np.interp(period_s * np.arange(1, steps + 1), STAMPS, SPEEDS)
    np.testing.assert_allclose(along_hinge(reference.targets(period_s, steps), cell), wanted, atol=1e-12)


@pytest.mark.parametrize("interpolation", ["hold", "linear"])
def test_reference_between_stamps(interpolation: str) -> None:
    reference = reference_of(off_grid(interpolation))
    t = np.linspace(0.0, STAMPS[-1] - 1e-6, 57)
    twist, position, axes = reference.at(t)
    if interpolation == "linear":
        speed = np.interp(t, STAMPS, SPEEDS)
    else:
        speed = np.array([SPEEDS[np.flatnonzero(x >= STAMPS)[-1]] for x in t])
    np.testing.assert_allclose(twist[:, 5], speed, atol=1e-9)
    knots = [np.union1d(STAMPS[STAMPS < x], [0.0, x]) for x in t]
    angle = np.array(
        [
            np.trapezoid(np.interp(k, STAMPS, SPEEDS), k)
            if interpolation == "linear"
            else np.sum(SPEEDS[: len(k) - 1] * np.diff(k))
            for k in knots
        ]
    )
    # The strike point is on a circle; the reference moves it in straight steps of at most a control period.
    circle = LENGTH_M * np.column_stack([np.cos(angle), np.sin(angle), 0 * angle])
    np.testing.assert_allclose(position, circle, atol=LENGTH_M * (0.5 * 0.002) ** 2)
    turned = Rotation.from_matrix(axes @ axes[0].T).as_rotvec()
    np.testing.assert_allclose(turned, np.outer(angle, [0, 0, 1]), atol=1e-9)


@pytest.mark.parametrize("at_s", [0.050, 0.0505], ids=["on the grid", "off the grid"])
def test_hold_is_causal(at_s: float) -> None:
    t = np.sort(np.r_[0.001 * np.arange(50), at_s, at_s + 0.001 * np.arange(1, 30)])
    found = rolled(hinge_log(hinge(), t, np.where(t >= at_s - 1e-9, 0.3, 0.0))).sent
    seen = int(np.ceil(round(at_s / 0.001, 6)))  # first control instant at which the sample is there
    assert np.all(found.v[: seen + 1] == 0)
    np.testing.assert_allclose(found.v[seen + 1, 0], 0.3, rtol=SHORT)


def test_linear_reaches_a_ramp_in_step() -> None:
    t = 0.004 * np.arange(26)
    found = rolled(hinge_log(hinge(), t, 5.0 * t, interpolation="linear")).sent
    np.testing.assert_allclose(found.v[:100, 0], 5.0 * 0.001 * np.arange(100), rtol=SHORT)
    np.testing.assert_allclose(found.a[1:98, 0], 5.0, rtol=2 * SHORT)


def test_the_last_sample_holds_for_one_median_period() -> None:
    found = rolled(off_grid("hold", 0.0005))
    end = STAMPS[-1] + np.median(np.diff(STAMPS))
    assert found.end_row == int(np.ceil(end / 0.0005 - 1e-6))
    np.testing.assert_allclose(found.sent.v[found.end_row, 0], SPEEDS[-1], rtol=SHORT)
    assert abs(found.sent.v[found.end_row + 1, 0]) < 1e-12


# Readings ---------------------------------------------------------------------------------------------------------

BASE = Pose((0.1, -0.2, 0.3), (0.3, -0.4, 0.9))
FRAMES = ("world", "base", "paddle")
POINTS = ("strike", "tip", (0.03, -0.05, 0.04))
START = np.array(list(WORKING["bench6"].values()))


@cache
def tilted() -> Cell:
    """The six-axis arm with a turned base, nothing limiting it, face and tip apart and turned."""
    cell = unlimited(robot_cell("bench6"))
    arm = replace(cell.arm, base=BASE, start=tuple(START))
    return replace(cell, arm=arm)


def physical(t: Array) -> tuple[Array, Array, Array, Array]:
    """Strike point, axes, its velocity and angular velocity (world axes) of a smooth motion with a turning paddle."""
    p0, R0 = Arm(tilted().arm, tilted().paddle).pose(START)
    s, ds = 1 - np.cos(8 * t), 8 * np.sin(8 * t)
    alpha, beta = 0.15 * s, 0.25 * np.sin(6 * t) ** 2
    d_alpha, d_beta = 0.15 * ds, 1.5 * np.sin(12 * t)
    about_z = Rotation.from_rotvec(np.outer(alpha, [0, 0, 1]))
    axes = (about_z * Rotation.from_rotvec(np.outer(beta, [1, 0, 0]))).as_matrix() @ R0
    turning = np.outer(d_alpha, [0, 0, 1]) + d_beta[:, None] * about_z.apply([1.0, 0, 0])
    way = np.array([0.02, -0.03, 0.025])
    return p0 + np.outer(s, way), axes, np.outer(ds, way), turning


def offset(point: object) -> Array:
    """From the strike point to a reading's point, paddle axes, by the mount of the test's paddle."""
    if point == "strike":
        return np.zeros(3)
    if point == "tip":
        mount = Rotation.from_euler("xyz", [10.0, -5.0, 20.0], degrees=True)
        return -mount.inv().apply([0.01, -0.02, 0.06])
    return np.array(point)


def read_as(frame: Any, point: Any) -> Cell:
    """The physical motion as a log in one reading, a sample a control period."""
    t = 0.001 * np.arange(201)
    _, axes, velocity, turning = physical(t)
    at_point = velocity + np.cross(turning, axes @ offset(point))
    twist = np.hstack([at_point, turning])
    if frame == "base":
        turn = Rotation.from_euler("xyz", BASE.rpy_rad).as_matrix()
        twist = np.hstack([at_point @ turn, turning @ turn])
    elif frame == "paddle":
        twist = np.hstack([np.einsum("kji,kj->ki", axes, x) for x in (at_point, turning)])
    log = CommandLog(t, twist, source="made by the test")
    return replace(tilted(), follow=Follow(frame, point, log, interpolation="linear"))


@cache
def plain_reading() -> tuple[Reference, Roll]:
    """Reference and roll of the reading in world axes about the strike point."""
    cell = read_as("world", "strike")
    return reference_of(cell), rolled(cell)


@pytest.mark.parametrize("frame, point", list(product(FRAMES, POINTS)), ids=str)
def test_nine_readings_of_one_motion(frame: str, point: object) -> None:
    cell = read_as(frame, point)
    reference, found = reference_of(cell), rolled(cell)
    t = 0.001 * np.arange(201)
    position, axes, velocity, turning = physical(t)
    got_twist, got_position, got_axes = reference.at(t)
    # Of second order in the control period: 1e-6 s² times rates of some m/s² and rad/s², and their products.
    np.testing.assert_allclose(got_position, position, rtol=0, atol=3e-6)
    np.testing.assert_allclose(got_axes, axes, rtol=0, atol=3e-6)
    np.testing.assert_allclose(got_twist, np.hstack([velocity, turning]), rtol=0, atol=3e-6)
    sent, plain = found.sent, plain_reading()[1].sent
    np.testing.assert_allclose(sent.q[:201], plain.q[:201], rtol=0, atol=3e-6)
    np.testing.assert_allclose(sent.v[:201], plain.v[:201], rtol=0, atol=2e-5)


def test_the_joints_take_the_paddle_along_the_motion() -> None:
    sent = plain_reading()[1].sent
    position, axes, _ = Chain.of(Arm(tilted().arm, tilted().paddle)).twists(sent.q[:201], sent.v[:201])
    wanted, wanted_axes, _, _ = physical(0.001 * np.arange(201))
    travel = np.abs(wanted - wanted[0]).max()
    assert travel > 0.03
    # What the weight of the null-space return costs in the weakest direction.
    np.testing.assert_allclose(position, wanted, rtol=0, atol=0.01 * travel)
    np.testing.assert_allclose(axes, wanted_axes, rtol=0, atol=0.01)


@pytest.mark.parametrize("frame, point", list(product(FRAMES, POINTS)), ids=str)
def test_held_twists_integrate_on_se3(frame: Any, point: Any) -> None:
    rng = np.random.default_rng(5)
    stamps = np.cumsum(np.r_[0.0, rng.uniform(0.004, 0.03, 7)])
    twist = rng.normal(size=(8, 6)) * np.repeat([0.3, 3.0], 3)
    log = CommandLog(stamps, twist, source="made by the test")
    cell = replace(tilted(), follow=Follow(frame, point, log))
    reference = reference_of(cell)
    p, R = Arm(cell.arm, cell.paddle).pose(START)
    base = Rotation.from_euler("xyz", BASE.rpy_rad).as_matrix()
    arm = offset(point)
    at_point = p + R @ arm

    def moving(_: float, state: Array, sent: Array) -> Array:
        axes = state[3:].reshape(3, 3)
        frame_axes = {"world": np.eye(3), "base": base, "paddle": axes}[frame]
        turning = frame_axes @ sent[3:]
        return np.r_[frame_axes @ sent[:3], np.cross(turning, axes.T).T.ravel()]

    state = np.r_[at_point, R.ravel()]
    for k in range(7):
        answer = solve_ivp(
            moving, (stamps[k], stamps[k + 1]), state, "DOP853", rtol=1e-11, atol=1e-12, args=(twist[k],)
        )
        state = answer.y[:, -1]
        axes = state[3:].reshape(3, 3)
        _, position, got = reference.at(stamps[k + 1 : k + 2])
        np.testing.assert_allclose(got[0], axes, rtol=0, atol=1e-8)
        np.testing.assert_allclose(position[0], state[:3] - axes @ arm, rtol=0, atol=1e-8)


# Pose feedback ----------------------------------------------------------------------------------------------------


def drifting(gain: float) -> tuple[Array, Array]:
    """Times and distance from the commanded pose, of a start posture that is off it; nothing is commanded."""
    cell = tilted()
    solver = replace(cell.solver, posture_gain_per_s=0.0)
    cell = replace(cell, solver=solver)
    off = START + 0.004 * np.array([1.0, -1.0, 0.5, 1.0, -0.5, 1.0])
    t = 0.001 * np.arange(200)
    held = following(replace(cell, arm=replace(cell.arm, start=tuple(off))), t, np.zeros((200, 6)))
    arm = Arm(cell.arm, cell.paddle)
    follow = replace(held.follow, pose_gain_per_s=gain)
    wanted = arm.pose(START)
    reference = build_reference(held, follow, *wanted)
    sent = roll(held, arm, build_limits(held), Replay(reference, arm, held.period_s, gain), off).sent
    return sent.t_s, np.array([np.linalg.norm(arm.pose(q)[0] - wanted[0]) for q in sent.q])


@pytest.mark.parametrize("gain", [10.0, 25.0])
def test_pose_gain_pulls_drift_back_with_its_time_constant(gain: float) -> None:
    t, off = drifting(gain)
    assert off[0] > 1e-3
    # The speed at a period's end is the gain times the error at its begin, and position the trapezium of speeds.
    wanted, speed = [off[0]], 0.0
    for _ in range(195):
        after = gain * wanted[-1]
        wanted.append(wanted[-1] - 0.001 * (speed + after) / 2)
        speed = after
    np.testing.assert_allclose(off[:196], wanted, rtol=0.01)
    np.testing.assert_allclose(off[:196], off[0] * np.exp(-gain * t[:196]), rtol=0.001 * gain**2 * 0.195)


def test_without_gain_drift_stays() -> None:
    _, off = drifting(0.0)
    np.testing.assert_allclose(off, off[0], rtol=1e-9)


# Giving up --------------------------------------------------------------------------------------------------------


def test_give_up_ends_the_roll() -> None:
    seen: list[tuple[int, Array, Array]] = []

    def watch(row: int, q: Array, v: Array) -> bool:
        seen.append((row, q.copy(), v.copy()))
        return row == 90

    found = rolled(violent(), watch)
    assert len(found.shortfall) == 90 and len(found.sent.q) == 91 and not found.stopped
    assert [row for row, _, _ in seen] == list(range(91))
    for row, q, v in seen:
        np.testing.assert_array_equal(q, clean().sent.q[row])
        np.testing.assert_array_equal(v, clean().sent.v[row])


# Short cuts -------------------------------------------------------------------------------------------------------


def test_every_step_solved_with_care_gives_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    plain = clean()
    careful = Stepper.careful
    calls = []
    monkeypatch.setattr(Stepper, "free", lambda *_: None)
    monkeypatch.setattr(Stepper, "quick", lambda *_: None)
    monkeypatch.setattr(Stepper, "careful", lambda self, p: calls.append(1) or careful(self, p))
    other = rolled(violent())
    assert len(calls) >= len(other.shortfall)
    same_motion(plain, other)
    np.testing.assert_allclose(other.shortfall, plain.shortfall, rtol=0, atol=SAME)
    assert (other.elastic_steps, other.gave_way) == (plain.elastic_steps, plain.gave_way)


def test_rows_always_in_give_the_same(monkeypatch: pytest.MonkeyPatch) -> None:
    plain = clean()
    monkeypatch.setattr(Rows, "clear", lambda *_: False)
    same_motion(plain, rolled(violent()))


def test_rows_are_left_out_somewhere(monkeypatch: pytest.MonkeyPatch) -> None:
    told, clear = [], Rows.clear
    monkeypatch.setattr(Rows, "clear", lambda *given: told.append(clear(*given)) or told[-1])
    rolled(violent())
    assert True in told and False in told


def busy_step() -> int:
    """A step in the middle of a block that the solver answered, limits active."""
    active = clean().z_box.any(1) & clean().z.any(1)
    steps = [k for k in np.flatnonzero(active).tolist() if 10 < k % BLOCK < BLOCK - 10]
    return int(steps[len(steps) // 2])


def spoil(
    monkeypatch: pytest.MonkeyPatch, step: int, bad: Callable[[Any], Any], who: set[str], tries: int
) -> list[str]:
    """Let solvers `who` give bad answers in one step, for the first so many asks; returns who was asked there."""
    now, asked = [-1], []
    one_step, attempt = roll_module._Roller._step, Solver.attempt

    def stepping(self: Any, k: int) -> None:
        now[0] = k
        one_step(self, k)

    def answering(self: Solver, problem: Any, name: str) -> Any:
        answer = attempt(self, problem, name)
        if now[0] != step:
            return answer
        asked.append(name)
        return bad(answer) if name in who and sum(x in who for x in asked) <= tries else answer

    monkeypatch.setattr(roll_module._Roller, "_step", stepping)
    monkeypatch.setattr(Solver, "attempt", answering)
    return asked


def nothing(answer: Any) -> Any:
    raise RuntimeError("the solver broke")


BAD: dict[str, Callable[[Any], Any]] = {
    "not finite": lambda a: (a[0] * np.nan, a[1], a[2]),
    "infeasible point": lambda a: (a[0] + 0.05, a[1], a[2]),
    "not optimal": lambda a: (a[0] * 0.5, a[1], a[2]),
    "wrong sign": lambda a: (a[0], -a[1], -a[2]),
    "no answer": lambda a: None,
    "raises": nothing,
}


@pytest.mark.parametrize("kind", BAD)
def test_one_bad_answer_is_solved_again(kind: str, monkeypatch: pytest.MonkeyPatch) -> None:
    plain, step = clean(), busy_step()
    asked = spoil(monkeypatch, step, BAD[kind], {"daqp"}, tries=1)
    found = rolled(violent())
    assert asked == ["daqp", "daqp"]
    same_motion(plain, found)
    np.testing.assert_allclose(found.shortfall, plain.shortfall, rtol=0, atol=SAME)
    assert (found.failed_steps, found.fallback_steps, found.stopped) == (0, 0, True)


@pytest.mark.parametrize("kind", BAD)
def test_the_second_solver_steps_in_and_is_counted(kind: str, monkeypatch: pytest.MonkeyPatch) -> None:
    plain, step = clean(), busy_step()
    asked = spoil(monkeypatch, step, BAD[kind], {"daqp"}, tries=99)
    found = rolled(violent())
    assert asked[0] == "daqp" and asked[-1] == "piqp"
    # Either solver's answer passes the check at 1e-6, but redundant directions weigh 1e-4: there they may part more.
    same_motion(plain, found, 10 * SAME)
    assert (found.failed_steps, found.fallback_steps, found.elastic_steps) == (0, 1, plain.elastic_steps)


def test_roll_back_behind_a_drive(monkeypatch: pytest.MonkeyPatch) -> None:
    from reach.cell import Drive

    cell = replace(violent(), drive=Drive(0.0034, 0.01, 0.0))
    plain = rolled(cell)
    spoil(monkeypatch, busy_step(), BAD["infeasible point"], {"daqp"}, tries=1)
    found = rolled(cell)
    same_motion(plain, found)
    np.testing.assert_allclose(found.delivered.q, plain.delivered.q, rtol=0, atol=SAME)
    np.testing.assert_allclose(found.delivered.v, plain.delivered.v, rtol=0, atol=SAME)


@pytest.mark.parametrize("kind", ["not finite", "wrong sign", "raises"])
def test_both_solvers_failing_is_named_and_leaves_it_undecided(
    kind: str, monkeypatch: pytest.MonkeyPatch
) -> None:
    spoil(monkeypatch, busy_step(), BAD[kind], {"daqp", "piqp"}, tries=99)
    done = run(violent())
    assert done.roll is not None and done.roll.failed_steps == 1 == done.evidence.failed_steps
    assert done.verdict.verdict == UNDECIDED
    assert any("no solver answered" in ground for ground in done.verdict.grounds)


# Limits that can't be kept ----------------------------------------------------------------------------------------


def test_a_start_above_the_velocity_limit_gives_way_and_is_recorded() -> None:
    # From 2 rad/s down to the 1 rad/s allowed, as fast as 4 N·m on 0.25 kg·m² slow it: 0.016 rad/s a period.
    cell = replace(hinge(limits(velocity=1.0, torque=4.0), start_velocity=2.0), margins=NO_MARGINS)
    found = rolled(hinge_log(cell, 0.001 * np.arange(150), np.full(150, 0.5)))
    kept = 4.0 * 0.99  # what every plan keeps for the drift of torque inside a period
    speed = 2.0 - kept / INERTIA_KG_M2 * 0.001 * np.arange(151)
    too_fast = speed[1:] > 1.0 + 1e-6
    assert found.elastic_steps == too_fast.sum() == len(found.gave_way)
    assert {(item.limit, item.joint) for item in found.gave_way} == {("velocity", 0)}
    for item in found.gave_way:
        assert item.amount == pytest.approx(speed[item.step + 1] - 1.0, rel=1e-4)
    assert np.abs(found.sent.a).max() * INERTIA_KG_M2 <= 4.0 + 1e-6  # torque stays hard
    assert found.sent.v[149, 0] == pytest.approx(0.5, rel=0.01)  # the arm is by then turned ahead of the log


def test_every_limit_that_gives_way_is_recorded() -> None:
    # Braking harder than 5 rad/s² breaks the acceleration limit, braking softer the velocity limit for longer.
    known = limits(velocity=1.0, acceleration=5.0, torque=40.0)
    cell = replace(hinge(known, start_velocity=2.0), margins=NO_MARGINS)
    found = rolled(hinge_log(cell, 0.001 * np.arange(150), np.full(150, 0.5)))
    gave_way = {(item.step, item.limit) for item in found.gave_way}
    too_fast = np.flatnonzero(found.sent.v[1:, 0] > 1.0 + 1e-5)
    too_hard = np.flatnonzero(np.abs(found.sent.a[:, 0]) > 5.0 + 1e-2)
    assert len(too_fast) or len(too_hard)
    assert gave_way >= {(int(k), "velocity") for k in too_fast}
    assert gave_way >= {(int(k), "acceleration") for k in too_hard}


def test_holding_the_start_takes_more_torque_than_there_is() -> None:
    load = MASS_KG * G * LENGTH_M
    cell = hinge_log(hinge(limits(torque=0.8 * load), LEVEL), 0.001 * np.arange(60), np.zeros(60))
    done = run(cell)
    (reason,) = done.evidence.blocked
    assert (reason.limit, reason.decides, reason.basis) == ("torque", True, "proved")
    assert "j1" in reason.text and f"{load:.1f}" in reason.text
    assert done.verdict.verdict == NOT_DELIVERABLE


def test_an_arm_of_one_joint() -> None:
    body = Body(np.zeros(3), UPRIGHT, MASS_KG, np.array([LENGTH_M, 0.0, 0.0]))
    spec = replace(chain_arm([body], np.array([LENGTH_M, 0.0, 0.0])), start=(0.0,))
    twist = np.tile([0.0, 0.5 * LENGTH_M, 0.0, 0.0, 0.0, 0.5], (20, 1))
    found = rolled(following(Cell("built", spec, WEIGHTLESS), 0.001 * np.arange(20), twist))
    np.testing.assert_allclose(found.sent.v[1:21, 0], 0.5, rtol=SHORT)


def test_one_joints_bump_is_that_joints_motion() -> None:
    cell = one_joint(unlimited(robot_cell("bench6")), 2, 1.2, 0.2, START)
    sent = rolled(cell).sent
    t, speed, _ = bump(1.2, 0.2)
    np.testing.assert_allclose(sent.v[: len(t), 2], speed, atol=0.02)
    others = np.delete(np.arange(6), 2)
    assert np.abs(sent.v[: len(t), others]).max() < 0.02
