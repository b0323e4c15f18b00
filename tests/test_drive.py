"""The drive: delay and lag against closed forms, and what a drive alone does to a strike."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from follow_case import LENGTH_M, WIDE, bump, hinge, hinge_log, limits
from scipy.integrate import quad_vec

from reach.advice.answer import answer
from reach.arm import Arm
from reach.cell import Array, Cell, CommandLog, Drive, Follow
from reach.evidence.motion import Motion
from reach.evidence.record import Strike
from reach.evidence.strikes import judge_strike
from reach.follow.drive import DriveState, behind
from reach.kinematics import Chain
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE

DT = 0.001
LAG = 0.010


def response(drive: Drive, sent: Array) -> tuple[Array, Array]:
    """Velocities and positions (k,) behind a drive of velocities sent for the ends of periods 1, 2, …, from rest."""
    state = DriveState(drive, np.zeros(1), np.zeros(1), DT)
    changes, v, q = [], [0.0], [0.0]
    for value in sent[1:]:
        changes.append(float(state.advance(np.array([value]))[0]))
        v.append(float(state.v[0]))
        q.append(float(state.q[0]))
    np.testing.assert_allclose(np.diff(v), changes, atol=1e-15)
    return np.array(v), np.array(q)


def ramp_behind_lag(t: Array, lag_s: float) -> Array:
    """First-order response to the ramp max(t, 0): t - T + T exp(-t/T)."""
    t = np.maximum(t, 0.0)
    return np.asarray(t - lag_s + lag_s * np.exp(-t / lag_s))


TIMES = DT * np.arange(200)


@pytest.mark.parametrize("delay_s", [0.0, 0.004, 0.001, 0.0035, 0.0002, 0.0109])
def test_a_delay_shifts_what_was_sent(delay_s: float) -> None:
    sent = np.sin(40 * TIMES)
    v, q = response(Drive(delay_s, 0.0), sent)
    np.testing.assert_allclose(v, np.interp(TIMES - delay_s, TIMES, sent), atol=1e-9)
    np.testing.assert_allclose(q, np.r_[0.0, np.cumsum((v[1:] + v[:-1]) / 2 * DT)], atol=1e-12)


def test_a_lag_answers_a_ramp_with_the_first_order_response() -> None:
    v, _ = response(Drive(0.0, LAG), 3.0 * TIMES)
    np.testing.assert_allclose(v, 3.0 * ramp_behind_lag(TIMES, LAG), rtol=0, atol=1e-12)


def test_a_lag_answers_a_step_with_the_first_order_response() -> None:
    # A step of what is sent takes one period: it is the difference of two ramps.
    v, _ = response(Drive(0.0, LAG), np.where(TIMES > 0, 2.0, 0.0))
    wanted = 2.0 * (ramp_behind_lag(TIMES, LAG) - ramp_behind_lag(TIMES - DT, LAG)) / DT
    np.testing.assert_allclose(v, wanted, rtol=0, atol=1e-12)
    late = TIMES > 0.002  # nearly the ideal step's, half a period later
    np.testing.assert_allclose(
        v[late], 2.0 * (1 - np.exp(-(TIMES[late] - DT / 2) / LAG)), atol=2.0 * (DT / LAG) ** 2 / 24 * 1.01
    )


@pytest.mark.parametrize("delay_s", [0.004, 0.0035, 0.0104])
def test_delay_and_lag_together(delay_s: float) -> None:
    drive = Drive(delay_s, LAG)
    v, _ = response(drive, 3.0 * TIMES)
    # Where a ramp begins inside a period its corner is cut: at most slope·dt/8 over one period of a lag of ten.
    np.testing.assert_allclose(
        v, 3.0 * ramp_behind_lag(TIMES - delay_s, LAG), rtol=0, atol=3.0 * DT / 8 * DT / LAG
    )
    sent = np.sin(30 * TIMES) * np.minimum(1.0, 20 * TIMES)
    v, _ = response(drive, sent)
    for k in (5, 23, 60, 150):
        delayed = np.interp(TIMES - delay_s, TIMES, sent)  # linear between the period's ends
        answer_, _ = quad_vec(
            lambda s, k=k, delayed=delayed: (
                np.exp(-(TIMES[k] - s) / LAG) / LAG * np.interp(s, TIMES, delayed)
            ),
            0.0,
            TIMES[k],
            points=TIMES[:k],
            epsabs=1e-11,
        )
        assert v[k] == pytest.approx(answer_, abs=1e-8)


def test_the_joints_arrive_where_they_were_sent() -> None:
    _, speed, _ = bump(2.0, 0.15)
    sent = np.r_[speed, np.zeros(400)]
    v, q = response(Drive(0.0047, 0.02), sent)
    assert q[-1] == pytest.approx(2.0 * 0.15 / 2, rel=1e-6)  # the mean of sin² is a half
    assert abs(v[-1]) < 1e-6


def test_what_held_before_the_start_goes_on() -> None:
    state = DriveState(Drive(0.0035, LAG), np.zeros(2), np.array([0.7, -0.2]), DT)
    for _ in range(50):
        np.testing.assert_allclose(state.advance(np.array([0.7, -0.2])), 0.0, atol=1e-15)
    np.testing.assert_allclose(state.q, 0.05 * np.array([0.7, -0.2]), rtol=1e-12)


def test_settles_once_all_that_was_sent_has_come_out() -> None:
    state = DriveState(Drive(0.0205, 0.0), np.zeros(1), np.zeros(1), DT)
    assert state.settled(1e-9)
    state.advance(np.array([0.5]))
    rest = 0
    while not state.settled(1e-9):
        state.advance(np.zeros(1))
        rest += 1
    assert rest in (21, 22)  # 20.5 periods until the whole of it is through
    lagging = DriveState(Drive(0.0, LAG), np.zeros(1), np.array([1.0]), DT)
    steps = 0
    while not lagging.settled(1e-3):
        lagging.advance(np.zeros(1))
        steps += 1
    # exp(-t/T) = 1e-3 at 6.9 T
    assert steps == pytest.approx(np.log(1e3) * LAG / DT, abs=2)


def test_behind_nothing_is_as_sent() -> None:
    rng = np.random.default_rng(2)
    v = np.vstack([np.zeros(2), np.cumsum(rng.normal(size=(30, 2)), axis=0)])
    a = np.vstack([np.diff(v, axis=0) / DT, np.zeros((1, 2))])
    q = np.vstack([np.zeros(2), np.cumsum((v[1:] + v[:-1]) / 2 * DT, axis=0)])
    seen = behind(Drive(), Motion(1.5, DT, q, v, a))
    np.testing.assert_allclose(seen.q, q, atol=1e-14)
    np.testing.assert_allclose(seen.v, v, atol=1e-14)
    np.testing.assert_allclose(seen.a, a, atol=1e-9)
    assert seen.start_s == 1.5


# Strikes behind a drive -------------------------------------------------------------------------------------------

SPEED = 1.6  # rad/s
CONTACT_S = 0.2


def steady(drive: Drive | None, accept_window_s: float = 0.010) -> Cell:
    """The hinge at a steady speed, contact long after the start."""
    t = DT * np.arange(300)
    cell = hinge(drive=drive, accept=replace(WIDE, strike_window_s=accept_window_s))
    return hinge_log(cell, t, np.full(300, SPEED), np.arange(300) == round(CONTACT_S / DT))


def test_without_a_drive_the_steady_strike_is_delivered() -> None:
    result = answer(steady(None), advice=False)
    (hit,) = result.evidence.strikes
    assert hit.delivered and result.verdict.grounds[0] != "1 of 1 strikes delivered"  # its limits are unknown
    assert "drive tracking" in result.evidence.not_checked


def test_a_drive_that_is_late_decides_by_its_own_name() -> None:
    drive = Drive(0.006, 0.010)
    result = answer(steady(drive), advice=False)
    (hit,) = result.evidence.strikes
    assert result.verdict.verdict == NOT_DELIVERABLE and not hit.delivered
    first = result.reasons[0]
    assert (first.limit, first.joint, first.decides) == ("drive tracking", None, True)
    assert "delay 6 ms" in first.text and "lag 10 ms" in first.text
    assert hit.limit == "drive tracking"
    assert "drive tracking" not in result.evidence.not_checked
    # Steady behind it by delay and lag, and by half a period: the arm starts with the first sample, not before.
    chord = 2 * LENGTH_M * np.sin(SPEED * (0.016 + DT / 2) / 2)
    assert hit.position_error_m == pytest.approx(chord, rel=0.01)
    assert hit.delivered_m_s == pytest.approx(LENGTH_M * SPEED * np.cos(SPEED * 0.0165), rel=1e-3)


def test_the_delivered_motion_is_the_one_behind_the_drive() -> None:
    result = answer(steady(Drive(0.006, 0.010)), advice=False)
    motion = result.evidence.motion
    assert motion is not None and result.evidence.stopped
    row = round(CONTACT_S / DT)
    sent = SPEED * (CONTACT_S - DT / 2)
    assert motion.q[row, 0] == pytest.approx(sent - SPEED * 0.016, rel=1e-3)
    assert motion.q[-1, 0] == pytest.approx(SPEED * 0.3, rel=1e-3)


def test_a_drive_in_time_is_no_reason() -> None:
    result = answer(steady(Drive(0.001, 0.001)), advice=False)
    assert result.evidence.strikes[0].delivered
    assert all(reason.limit != "drive tracking" for reason in result.reasons)


def judged(cell: Cell, jitter_s: float) -> Strike:
    """A motion at the log's speed until 1.5 ms after the window's end, then standing, judged by hand."""
    arm = Arm(cell.arm, cell.paddle)
    stop = round((CONTACT_S + 0.0065) / DT * 2)
    v = np.where(np.arange(600)[:, None] < stop, SPEED, 0.0) * np.array([1.0, 0.0])
    q = np.vstack([np.zeros(2), np.cumsum(v[:-1] * DT / 2, axis=0)])
    motion = Motion(0.0, DT / 2, q, v, np.zeros_like(v))
    assert cell.follow is not None

    def wanted(t: Array) -> tuple[Array, Array, Array]:
        states = [arm.jacobian(np.array([SPEED * x, 0.0])) for x in t]
        twist = [jacobian @ [SPEED, 0.0] for _, _, jacobian in states]
        return np.array(twist), np.array([p for p, _, _ in states]), np.array([r for _, r, _ in states])

    return judge_strike(CONTACT_S, True, Chain.of(arm), motion, wanted, cell.accept, jitter_s)


def test_jitter_widens_the_window() -> None:
    cell = steady(None)
    assert judged(cell, 0.0).delivered and judged(cell, 0.001).delivered
    late = judged(cell, 0.002)
    assert late.faults == ("too slow by 100.0 %",)
    assert late.delivered_m_s == pytest.approx(LENGTH_M * SPEED)  # at the contact itself nothing is wrong


def test_jitter_of_a_cells_drive_reaches_the_strike() -> None:
    # The command drops by half 7 ms after the contact, and the arm a period later: outside ± 5 ms, inside ± 9 ms.
    t, speed, marks = bump(1.0, 0.12)
    after = t > 0.0665
    jump = np.where(after, 0.5 * speed, speed)
    log = hinge_log(hinge(accept=WIDE), t, jump, marks, interpolation="hold")
    plain = answer(log, advice=False)
    jittered = answer(replace(log, drive=Drive(0.0, 0.0, 0.004)), advice=False)
    assert plain.evidence.strikes[0].delivered
    assert not jittered.evidence.strikes[0].delivered
    assert jittered.reasons[0].limit == "drive tracking" and "jitter ±4 ms" in jittered.reasons[0].text


def test_a_verdict_of_its_own() -> None:
    # All limits known and far away: the drive alone is between deliverable and not.
    wide = limits(position=3.0, velocity=50.0, torque=500.0, torque_rate=1e6)
    t, speed, marks = bump(0.8, 0.3)

    def verdict(drive: Drive | None) -> str:
        cell = hinge(wide, drive=drive, accept=WIDE)
        log = CommandLog(t, hinge_log(cell, t, speed).follow.commands.twist, marks)
        return answer(replace(cell, follow=Follow("paddle", "strike", log)), advice=False).verdict.verdict

    assert verdict(None) == DELIVERABLE == verdict(Drive(0.002, 0.003))
    assert verdict(Drive(0.02, 0.03)) == NOT_DELIVERABLE
