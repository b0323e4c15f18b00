"""First contact against dense sampling, the outline of the face, and the ball struck by a face that turns."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np
import pytest
from scipy.optimize import brentq

from reach.ball import Air, Face, Flight, NoContact, first_contact, impact, struck
from reach.cell import Ball, Contact, Paddle, Pose

DOWN = (0.0, 0.0, -9.81)
R = 0.02
DENSE_S = 5e-5
Gap = Callable[[float], float]


def dense_contact(gap: Gap, begin: float, end: float) -> float | None:
    """The end of the first span of DENSE_S in which the gap, once above zero, falls to zero or below."""
    above = gap(begin) > 0
    for t in np.arange(begin, end, DENSE_S)[1:].tolist():
        now = gap(t) > 0
        if above and not now:
            return float(t)
        above = now
    return None


def tilting_paddle(random: np.random.Generator, air: Air) -> Gap:
    """Gap of a flying ball over a face that goes up and down, to and fro, and tilts, each as a sinusoid."""
    ball = Flight(
        0.0,
        random.uniform((-0.05, -0.05, 0.02), (0.05, 0.05, 0.3)),
        random.uniform((-0.3, -0.3, -1.0), (0.3, 0.3, 2.5)),
        random.normal(size=3),
        air,
    )
    up, tilt, turn = random.uniform(0, 0.05), random.uniform(0, 0.3), random.uniform(0, 2 * np.pi)
    rates, phases = random.uniform(5, 40, size=2), random.uniform(0, 2 * np.pi, size=2)

    def gap(t: float) -> float:
        x, y, z, *_ = ball.one(t)
        lean = tilt * math.sin(rates[1] * t + phases[1])
        n = (math.sin(lean) * math.cos(turn), math.sin(lean) * math.sin(turn), math.cos(lean))
        return x * n[0] + y * n[1] + (z - up * math.sin(rates[0] * t + phases[0])) * n[2] - R

    return gap


@pytest.mark.parametrize("step", [0.001, 0.005, 0.02])
def test_first_contact_agrees_with_dense_sampling(step: float) -> None:
    """Random tilting paddles; the step that samples the gap leaves no trace in the instant."""
    random = np.random.default_rng(17)
    air = Air(0.0, 0.0, DOWN)
    found = 0
    for _ in range(30):
        gap = tilting_paddle(random, air)
        wanted = dense_contact(gap, 0.0, 0.6)
        got = first_contact(gap, 0.0, 0.6, step)
        if gap(0.0) <= 0 and gap(1e-7) < gap(0.0):
            assert got == 0.0
            continue
        if wanted is None:
            assert got is None
            continue
        assert got is not None and wanted - DENSE_S - 1e-9 <= got <= wanted + 1e-9
        assert gap(got) == pytest.approx(0, abs=1e-10)
        found += 1
    assert found > 15


def test_the_instant_does_not_depend_on_the_step() -> None:
    random = np.random.default_rng(31)
    for _ in range(10):
        gap = tilting_paddle(random, Air(0.0, 0.0, DOWN))
        fine, *others = [first_contact(gap, 0.0, 0.6, step) for step in (0.0005, 0.003, 0.0077, 0.02)]
        assert others == [None] * 3 if fine is None else others == pytest.approx([fine] * 3, abs=3e-12)


def test_with_drag_too() -> None:
    random = np.random.default_rng(23)
    air = Air.of(Ball(0.0027, R, drag_coefficient=0.45), DOWN)
    for _ in range(3):
        gap = tilting_paddle(random, air)
        wanted = dense_contact(gap, 0.05, 0.4)
        got = first_contact(gap, 0.05, 0.4, 0.01)
        assert (got is None) == (wanted is None)
        if got is not None and wanted is not None:
            assert wanted - DENSE_S - 1e-9 <= got <= wanted + 1e-9


@pytest.mark.parametrize("depth", [1e-3, 1e-6, 1e-9, -1e-9, -1e-6, -1e-3])
def test_a_graze_between_samples(depth: float) -> None:
    """The gap 5 (t - c)² - depth (m) falls through zero sqrt(depth/5) before c, wherever the samples lie."""
    random = np.random.default_rng(2)
    for lowest in (*random.uniform(0.001, 0.499, size=200), 0.25, 0.253):
        got = first_contact(lambda t, c=lowest: 5 * (t - c) ** 2 - depth, 0.0, 0.5, 0.01)
        if depth < 0:
            assert got is None
        elif lowest > np.sqrt(depth / 5):
            assert got is not None
            assert got == pytest.approx(lowest - np.sqrt(depth / 5), abs=1e-12 / np.sqrt(20 * depth) + 1e-11)


def swing_up(lift: float) -> Gap:
    """Gap over a crest at 0 s of a sinusoid of 5 cm and 60 rad/s to a ball that falls by it; its least is -lift."""

    def over(t: float) -> float:
        return -0.5 * t - 9.81 / 2 * t**2 + 0.05 * (1 - math.cos(60 * t))

    least = brentq(lambda t: -0.5 - 9.81 * t + 3 * math.sin(60 * t), 0, 0.01, xtol=1e-15)
    return lambda t: over(t) - over(least) - lift


@pytest.mark.parametrize(("lift", "met"), [(1e-6, True), (1e-9, True), (-1e-9, False), (-1e-6, False)])
def test_a_paddle_that_swings_up_and_just_meets_the_ball(lift: float, met: bool) -> None:
    """Samples lie 1.2 rad of the swing apart; the two meet for 0.2 ms where it is 1 um."""
    gap = swing_up(lift)
    for begin in np.linspace(-0.05, -0.03, 41).tolist():
        got = first_contact(gap, begin, 0.03, 0.02)
        assert (got is not None) == met
        if got is not None:
            assert gap(got) == pytest.approx(0, abs=1e-13)
            assert gap(got - 1e-7) > 0 > gap(got + 1e-7)


STARTS = [
    (lambda t: -1e-3 - t, 0.0),  # falls from below: at once
    (lambda t: -t, 0.0),  # falls from zero: at once
    (lambda t: 1e-13 - t, 0.0),  # the same within rounding
    (lambda t: t, None),  # leaves the face
    (lambda t: -1e-3 + t, None),  # comes out from below
    (lambda t: -1e-3 + t - t**2, (1 + math.sqrt(0.996)) / 2),  # and falls back
    (lambda t: t - 100 * t**2, 0.01),  # hops within the first step
    (lambda t: 1e-15 + t - 100 * t**2, 0.01),
    (lambda t: -1e-15 + t - 100 * t**2, 0.01),
    (lambda t: -1e-3 + t - 100 * t**2, (1 + math.sqrt(0.6)) / 200),
    (lambda t: -3e-3 + t - 100 * t**2, None),  # never out: least -0.5 mm
    (lambda t: 1e-3 - t + 100 * t**2, (1 - math.sqrt(0.6)) / 200),  # dips within the first step
    (lambda t: 3e-3 - t + 100 * t**2, None),
    (lambda t: 1e-3 + (t - 1.0) + 100 * (t - 1.0) ** 2, 1 - (1 + math.sqrt(0.6)) / 200),  # within the last
    (lambda t: -1e-3 - (t - 1.0) - 100 * (t - 1.0) ** 2, 1 - (1 - math.sqrt(0.6)) / 200),
    (
        lambda t: (t - 0.915) * (t - 0.97) * (t - 0.99),
        0.97,
    ),  # out within the last span but one, a dip in the last
    (lambda t: 1 - t, 1.0),  # at the very end
    (lambda t: 1.0, None),
]


@pytest.mark.parametrize(("gap", "wanted"), STARTS)
def test_how_a_gap_may_begin_and_end(gap: Gap, wanted: float | None) -> None:
    got = first_contact(gap, 0.0, 1.0, 0.05)
    if wanted is None:
        assert got is None
    else:
        assert got == pytest.approx(wanted, abs=1e-11)


def test_no_time_is_no_contact() -> None:
    assert first_contact(lambda t: -t, 1.0, 1.0, 0.01) is None
    assert first_contact(lambda t: 0.005 - t, 0.0, 0.01, 5.0) == pytest.approx(0.005, abs=1e-12)


def test_a_contact_is_not_found_again_by_the_ball_that_leaves() -> None:
    """Dropped 0.3 m onto a still face and thrown back, the ball comes again after 2 v/g and not at once."""
    ball = Flight(0.0, np.array((0, 0, 0.3)), np.zeros(3), np.zeros(3), Air(0.0, 0.0, DOWN))
    when = first_contact(lambda t: ball.one(t)[2], 0.0, 1.0, 0.01)
    assert when == pytest.approx(np.sqrt(0.6 / 9.81), abs=1e-12)
    state = ball.one(when)
    for nudge in (-1e-11, 0.0, 1e-11):
        up = Flight(when, np.array((0, 0, state[2] + nudge)), np.array((0, 0, 2.0)), np.zeros(3), ball.air)
        again = first_contact(lambda t, up=up: up.one(t)[2], when, 2.0, 0.01)
        assert again == pytest.approx(when + 4 / 9.81, abs=1e-10)


def test_faces() -> None:
    disc = Face.of(Paddle(Pose(), 0.2, "disc", radius_m=0.08))
    plate = Face.of(Paddle(Pose(), 0.2, "plate", size_m=(0.3, 0.1)))
    assert disc is not None and plate is not None
    assert Face.of(Paddle(Pose(), 0.2, "given", com_m=(0, 0, 0), inertia_kg_m2=(1,) * 6)) is None
    assert (disc.half_width_m, plate.half_width_m) == (0.08, 0.05)
    assert disc.past(0.06, 0.08) == pytest.approx(0.02)
    assert plate.past(0.18, -0.09) == pytest.approx(0.05)
    assert plate.past(0.0, 0.07) == pytest.approx(0.02)
    assert plate.past(-0.16, 0.02) == pytest.approx(0.01)
    for face, inside, outside in ((disc, (0.05, 0.06), (0.06, 0.06)), (plate, (0.15, -0.05), (0.15, 0.051))):
        assert face.holds(*inside) and face.past(*inside) == 0
        assert not face.holds(*outside) and face.past(*outside) > 0


def test_past_is_the_distance_to_the_nearest_point_within() -> None:
    """Against the points within on a grid of 5 mm, of which one lies within 5 mm · sqrt(2) of any point within."""
    random = np.random.default_rng(4)
    grid = np.stack(np.meshgrid(*[np.linspace(-1, 1, 401)] * 2), axis=-1).reshape(-1, 2)
    for face in (Face("disc", (0.7, 0.7)), Face("plate", (0.9, 0.3))):
        within = grid[[face.holds(x, y) for x, y in grid]]
        for point in random.uniform(-1, 1, size=(50, 2)):
            nearest = np.linalg.norm(within - point, axis=1).min()
            assert face.past(*point) == pytest.approx(nearest, abs=0.005 * np.sqrt(2))


PAIR = Contact(0.8, friction=0.25, tangential_restitution=0.1)


def test_a_ball_off_the_middle_meets_the_speed_of_the_face_there() -> None:
    """A face that turns at 5 rad/s about its y throws a ball 0.1 m out along x by 0.5 m/s more along -z."""
    out = struck(
        (0.1, 0.03, 0.02), (0, 0, -2), (0, 0, 0), (0, 0, 0), np.eye(3), (0, 0, 0.3, 0, 5, 0), PAIR, 0.02
    )
    np.testing.assert_allclose(out.contact_point_face, (0.1, 0.03), atol=1e-15)
    plain, _ = impact((0, 0, -2), (0, 0, 1), (0, 0, 0.3 - 0.5), PAIR)
    np.testing.assert_allclose(out.ball_out, plain, atol=1e-15)


def test_a_struck_ball_is_the_same_seen_from_any_axes() -> None:
    """Ball, face and twist turned and moved together give the ball out turned, at the same point of the face."""
    random = np.random.default_rng(8)
    for _ in range(50):
        turn = Pose(rpy_rad=tuple(random.uniform(-3, 3, size=3))).rotation
        shift = random.normal(size=3)
        where = np.array((*random.uniform(-0.1, 0.1, size=2), 0.02))
        v, w = random.normal(size=3) - (0, 0, 5), random.normal(size=3)
        twist = random.normal(size=6)
        ratio = random.uniform(0, 0.1)
        here = struck(where, v, w, (0, 0, 0), np.eye(3), twist, PAIR, 0.02, ratio)
        turned_twist = (*turn @ twist[:3], *turn @ twist[3:])
        there = struck(turn @ where + shift, turn @ v, turn @ w, shift, turn, turned_twist, PAIR, 0.02, ratio)
        np.testing.assert_allclose(there.ball_out, turn @ here.ball_out, atol=1e-13)
        np.testing.assert_allclose(there.spin_out, turn @ here.spin_out, atol=1e-13)
        np.testing.assert_allclose(there.contact_point_face, where[:2], atol=1e-14)
        point_velocity = twist[:3] + np.cross(twist[3:], (where[0], where[1], 0))
        out, spin = impact(v, (0, 0, 1), point_velocity, PAIR, w, ratio)
        np.testing.assert_allclose(here.ball_out, out, atol=1e-14)
        np.testing.assert_allclose(here.spin_out, spin, atol=1e-14)


def test_a_face_that_runs_away_strikes_nothing() -> None:
    with pytest.raises(NoContact, match="does not approach"):
        struck((0, 0, 0.02), (0, 0, -1), (0, 0, 0), (0, 0, 0), np.eye(3), (0, 0, -2, 0, 0, 0), PAIR, 0.02)
