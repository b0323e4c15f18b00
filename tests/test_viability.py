"""Braking bounds: worked rows, the motion they stand for, and adversarial roll-outs that try to pass them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from builders import fer_cell, following, robot_cell

from reach.arm import Arm
from reach.cell import Cell, Margins
from reach.evidence.measure import measure
from reach.follow.commands import Replay
from reach.follow.reference import build_reference
from reach.follow.roll import roll
from reach.kinematics import Chain
from reach.limits.brake import largest_velocity, stopping_distance
from reach.limits.build import build_limits

NO_DELAY = 1e13  # rad/s³: a brake that is there at once, the second-order case


# --- The second-order case
@pytest.mark.parametrize(
    ("q", "v", "expected", "digit"),
    [
        # Viability bound of Del Prete, IEEE RA-L 3(1) 2018, by the author's published code (pinocchio_inv_dyn
        # @9938a96, acc_bounds_util.py); the states are ours: q_max = 1, 20 rad/s², period 0.05 s.
        pytest.param(0.9, 1.0, 6.055513, 5e-7, id="room to gain"),
        pytest.param(0.9, 2.0, -20.0, 1e-6, id="on the boundary"),
    ],
)
def test_second_order_viability(q, v, expected, digit):
    fastest = largest_velocity(1.0 - q, v, v + 20 * 0.05, 20.0, NO_DELAY, 0.05)
    assert (fastest - v) / 0.05 == pytest.approx(expected, abs=digit)


def test_second_order_viability_then_stops_at_the_end():
    q, v = 0.9, 1.0
    fastest = largest_velocity(1.0 - q, v, v + 1.0, 20.0, NO_DELAY, 0.05)
    q, v = q + (v + fastest) * 0.025, fastest
    assert q + v * v / (2 * 20.0) == pytest.approx(1.0, abs=1e-9)


def test_free_joint_gets_its_ceiling():
    assert largest_velocity(10.0, 0.5, 0.52, 20.0, 500.0, 0.001) == 0.52


# --- The third-order stop
def stop_by_integration(v: float, a: float, deceleration: float, rate: float) -> float:
    """Travel until the joint stands, the acceleration falling at `rate` down to -`deceleration`, in 20,000 steps."""
    longest = (abs(a) + deceleration) / rate + (abs(v) + a * a / rate) / deceleration + 0.01
    dt = 1.5 * longest / 20_000
    t = dt * np.arange(20_001)
    lowest = min(a, -deceleration)
    acceleration = np.maximum(a - rate * t, lowest) if a > -deceleration else np.full_like(t, -deceleration)
    speed = v + np.r_[0.0, np.cumsum((acceleration[1:] + acceleration[:-1]) * dt / 2)]
    travel = np.r_[0.0, np.cumsum((speed[1:] + speed[:-1]) * dt / 2)]
    forward = np.flatnonzero(speed > 0)
    if len(forward) == 0:
        return 0.0
    return float(travel[min(forward[-1] + 1, len(travel) - 1)])


def test_stopping_distance_by_integration():
    rng = np.random.default_rng(21)
    kinds = set()
    for _ in range(200):
        deceleration, rate = rng.uniform(1, 20), 10 ** rng.uniform(1.5, 4)
        v, a = rng.uniform(-0.3, 3), rng.uniform(-1.5, 1.5) * deceleration
        expected = stop_by_integration(v, a, deceleration, rate)
        # steps of the integral near standstill: speed changes by about 30 rad/s² in 1e-4 s
        assert stopping_distance(v, a, deceleration, rate) == pytest.approx(expected, abs=2e-6, rel=1e-4)
        square = a * a + 2 * rate * v
        kinds.add("hard" if a <= -deceleration else "short" if square <= deceleration**2 else "long")
        kinds.add("still" if expected == 0 else "moving")
    assert kinds == {"hard", "short", "long", "still", "moving"}


def test_stopping_distance_grows_with_speed_and_weaker_brakes():
    speeds = np.linspace(0.0, 3.0, 301)
    for a in (-15.0, -6.0, 0.0, 4.0, 12.0):
        way = [stopping_distance(v, a, 8.0, 200.0) for v in speeds]
        assert np.all(np.diff(way) >= 0)
    for v, a in ((1.0, 0.0), (2.0, 5.0), (0.1, -3.0)):
        assert stopping_distance(v, a, 4.0, 200.0) >= stopping_distance(v, a, 8.0, 200.0)
        assert stopping_distance(v, a, 8.0, 100.0) >= stopping_distance(v, a, 8.0, 200.0)


def test_largest_velocity_is_the_edge():
    # Everything tried above the answer needs more than the room, everything tried below fits.
    rng = np.random.default_rng(22)
    inside = 0
    for _ in range(300):
        v, room = rng.uniform(-1.0, 2.5), 10 ** rng.uniform(-3, 0)
        deceleration, rate, dt = rng.uniform(2, 15), rng.uniform(50, 2000), 0.001
        ceiling = v + 8 * 2 * deceleration * dt
        answer = largest_velocity(room, v, ceiling, deceleration, rate, dt)

        def need(next_v, v=v, deceleration=deceleration, rate=rate, dt=dt):
            stop = stopping_distance(next_v, (next_v - v) / dt, deceleration, rate)
            return (v + next_v) * dt / 2 + stop

        assert answer <= ceiling and need(answer) <= room + 1e-12
        for share in (0.01, 0.2, 0.5, 1.0):
            if answer < ceiling:
                assert need(answer + share * (ceiling - answer)) > room
            assert need(answer - share * deceleration * dt) <= room + 1e-12
        inside += answer < ceiling
    assert 30 < inside < 300


# --- Adversarial roll-outs
# Earlier, 1,000 such roll-outs never passed a position limit by more than 3.2e-6 rad (measured, unpublished). The
# integrator is exact, so what is left is what torque's drift inside a period takes from the brake.
POSITION_RAD = 1e-5
VELOCITY_SHARE = 1e-6  # of the limit; the row is exact, the solver's check is not
TORQUE_SHARE = 0.01  # of torque and torque rate, beside the margins that a plan keeps
ROLLS = 8  # a robot in the default run; the whole campaign is 1,000
# The stated ends and speeds, ordinary margins on torque and acceleration.
HARD_ENDS = Margins(position_rad=0.0, position_m=0.0, velocity_share=0.0)


def adversary(cell: Cell, arm: Arm, rng: np.random.Generator) -> Cell:
    """The cell at a random start, often near its ends, with a command that pushes there and flips.

    0.3 s of twists held for 40 to 120 ms each, up to ten times what the arm can do: the motion of random
    joint velocities toward the nearer end, or a random twist.
    """
    lo, hi = (np.array([getattr(j.limits.position, side) for j in cell.arm.joints]) for side in ("lo", "hi"))
    lo, hi = np.maximum(lo, -3.0), np.minimum(hi, 3.0)
    share = rng.beta(0.4, 0.4, arm.n) * 0.94 + 0.03
    start = lo + share * (hi - lo)
    jacobian = arm.jacobian(start)[2]
    nearer = np.where(share > 0.5, 1.0, -1.0)
    t, twists, now = [], [], 0.0
    while now < 0.3:
        toward = nearer * rng.uniform(0.0, 8.0, arm.n)
        wild = rng.normal(size=6) * np.repeat([1.5, 6.0], 3)
        twist = (jacobian @ toward if rng.random() < 0.7 else wild) * rng.choice([1.0, -1.0], p=[0.8, 0.2])
        t.append(now)
        twists.append(twist)
        now += rng.uniform(0.04, 0.12)
    started = replace(cell, arm=replace(cell.arm, start=tuple(start)))
    return following(started, np.array([*t, 0.3]), np.array([*twists, twists[-1]]))


def worst_uses(cell: Cell, rolls: int, seed: int) -> dict[str, float]:
    """Largest use of position (rad past the end), velocity, torque and torque rate over so many roll-outs."""
    arm, limits = Arm(cell.arm, cell.paddle), build_limits(cell)
    chain, rng = Chain.of(arm), np.random.default_rng(seed)
    worst = {"position": -np.inf, "velocity": 0.0, "torque": 0.0, "torque rate": 0.0, "near": 0.0}
    done = 0
    while done < rolls:
        tried = adversary(cell, arm, rng)
        start = np.array(tried.arm.start)
        held = np.abs(arm.static_torque(start)) / limits["torque"].tighter
        if held.max() > 0.9:
            continue  # no start: holding it alone takes the torque
        done += 1
        reference = build_reference(tried, tried.follow, *arm.pose(start))
        rolled = roll(tried, arm, limits, Replay(reference, arm, tried.period_s, 0.0), start)
        assert rolled.failed_steps == 0 and rolled.stopped
        fine = measure(arm, chain, limits, rolled.sent).fine
        position = limits["position"]
        past = np.maximum(fine.q - position.hi, position.lo - fine.q).max()
        worst["position"] = max(worst["position"], float(past))
        worst["near"] += past > -0.02
        for name in ("velocity", "torque", "torque rate"):
            limit = limits[name]
            worst[name] = max(worst[name], float(limit.utilisation(limit.measure(fine)).max()))
    return worst


def check(worst: dict[str, float], rolls: int) -> None:
    assert worst["position"] <= POSITION_RAD
    assert worst["velocity"] <= 1 + VELOCITY_SHARE
    assert worst["torque"] <= 1 + TORQUE_SHARE
    assert worst["torque rate"] <= 1 + TORQUE_SHARE
    # and they were adversarial: limits were met
    assert worst["near"] >= rolls / 4
    assert worst["velocity"] > 0.99 and worst["torque rate"] > 0.94


def test_roll_outs_stay_inside_bench7():
    check(worst_uses(replace(robot_cell("bench7"), margins=HARD_ENDS), ROLLS, 1), ROLLS)


def test_roll_outs_stay_inside_published_limits(tmp_path):
    check(worst_uses(replace(fer_cell(tmp_path), margins=HARD_ENDS), ROLLS, 2), ROLLS)


@pytest.mark.campaign
@pytest.mark.parametrize("seed", range(10))
def test_campaign_bench7(seed):
    check(worst_uses(replace(robot_cell("bench7"), margins=HARD_ENDS), 50, 100 + seed), 50)


@pytest.mark.campaign
@pytest.mark.parametrize("seed", range(10))
def test_campaign_published(seed, tmp_path):
    check(worst_uses(replace(fer_cell(tmp_path), margins=HARD_ENDS), 50, 200 + seed), 50)
