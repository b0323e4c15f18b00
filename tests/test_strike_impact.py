"""What a hit does to the arm, against closed forms and published effective masses."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from builders import WEIGHTLESS, planar_point_masses, robot_cell
from test_arm_outside import PUMA_QN, puma

from reach.arm import Arm
from reach.cell import Ball, Contact, Survey
from reach.strike.impact import effective_mass, hit
from reach.survey.judged import approach_speed

BALL = Ball(mass_kg=0.06, radius_m=0.033)  # of a tennis ball's size, invented
AXES = np.eye(3)


def two_links() -> Arm:
    """Unit links with unit point masses at their ends, no gravity to speak of."""
    return Arm(planar_point_masses((1.0, 1.0), (1.0, 1.0)), WEIGHTLESS)


def test_two_links_feel_as_heavy_as_the_textbook_says() -> None:
    # Lynch & Park, Modern Robotics (2017) ch. 8, unit 2R arm at (0, 90°): 1 kg along x, 2 kg along y (from memory).
    arm, q = two_links(), np.array([0.0, np.pi / 2])
    for axis, expected in ((0, 1.0), (1, 2.0)):
        assert hit(arm, q, AXES[axis], BALL, 0.5, 1.0).effective_mass_kg == pytest.approx(expected, rel=1e-12)


def test_puma_feels_as_heavy_as_published() -> None:
    # Khatib's directional mass of the PUMA 560 at qn with rotor inertia (see tests/test_arm_outside.py).
    arm = puma()
    masses = [hit(arm, PUMA_QN, axis, None, np.nan, np.nan).effective_mass_kg for axis in AXES]
    assert masses == pytest.approx([8.7251, 10.1326, 6.8558], abs=5e-5)


def test_momentum_and_restitution_hold_with_joints_free() -> None:
    arm, rng = Arm(robot_cell("bench7").arm, robot_cell("bench7").paddle), np.random.default_rng(1)
    for q in rng.uniform(-1.0, 1.0, (20, 7)):
        normal = rng.normal(size=3)
        normal /= np.linalg.norm(normal)
        e, approach = float(rng.uniform(0.3, 0.95)), float(rng.uniform(0.5, 6.0))
        struck = hit(arm, q, normal, BALL, e, approach)
        jacobian = arm.jacobian(q)[2][:3]
        # Newton's restitution on the relative speed: the face gives by n·J Δq̇, the ball turns round by P / m.
        face, ball = normal @ jacobian @ struck.velocity_jump, struck.ball_impulse[0] / BALL.mass_kg
        assert ball - face == pytest.approx((1 + e) * approach, rel=1e-12)
        # The impulse that the ball takes is the one the arm takes: M Δq̇ = -Jᵀ n P.
        taken = arm.inertia(q) @ struck.velocity_jump
        assert taken == pytest.approx(-(jacobian.T @ normal) * struck.ball_impulse[0], abs=1e-12)
        assert struck.ball_impulse[0] < struck.ball_impulse[1]


def test_locked_joints_take_all_of_the_impulse() -> None:
    arm, q = two_links(), np.array([0.0, np.pi / 2])
    struck = hit(arm, q, AXES[1], BALL, 0.8, 2.0)
    impulse = 1.8 * BALL.mass_kg * 2.0
    # Along y at (1, 1): lever 1 m about the first joint, 0 about the second, straight below the strike point.
    assert struck.ball_impulse[1] == pytest.approx(impulse)
    assert struck.joint_impulse == pytest.approx([-impulse, 0.0], abs=1e-15)


def test_no_motion_along_the_normal_gives_an_arm_that_can_not_give() -> None:
    arm = two_links()
    assert effective_mass(np.eye(2), np.zeros(2)) == np.inf
    struck = hit(arm, np.array([0.3, 0.4]), AXES[2], BALL, 0.8, 2.0)
    assert struck.ball_impulse[0] == pytest.approx(struck.ball_impulse[1])
    assert struck.velocity_jump == pytest.approx([0.0, 0.0])


def survey_of(ball_in: tuple[float, float, float] | None) -> Survey:
    up = np.array([[0.0, 0.0, 1.0]])
    return Survey(((0.5, 0.0, 0.5),) * 2, 0.1, None, up, up, np.array([1.0]), ball_in_m_s=ball_in)


def test_how_fast_ball_and_face_meet() -> None:
    cell = replace(robot_cell("bench7"), ball=BALL, contact=Contact(restitution=0.7))
    given = replace(cell, survey=survey_of((0.5, 0.0, -3.0)))
    assert approach_speed(given, AXES[2], 0.4) == pytest.approx(3.4)
    # A ball that is kept up leaves as fast as it came: v = u (1 + e)/(1 - e), so they meet at u + v = 2 u/(1 - e).
    kept = replace(cell, survey=survey_of(None))
    u, e = 0.4, 0.7
    v = u * (1 + e) / (1 - e)
    assert approach_speed(kept, AXES[2], u) == pytest.approx(u + v)
    assert -e * -(u + v) + u == pytest.approx(v)  # it does come back so
    assert np.isnan(approach_speed(replace(kept, ball=None), AXES[2], u))
