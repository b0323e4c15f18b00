"""The closed loop: every contact of a trial found again by hand; edges, spin, air, sensor, the way back."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise
from typing import Any

import numpy as np
import pytest
from rally_case import bench
from trial_case import (
    RADIUS,
    G,
    Hand,
    Still,
    ball_flights,
    bout,
    gantry,
    gaps,
    paddle_at,
    slow_gantry,
    struck_by_hand,
    tried,
    watched,
    wild,
)

from reach.cell import Array, Cell, Drive, Sensor
from reach.evidence.trials import Run
from reach.qp.problem import QpBlock
from reach.trial.laws import Seen, Setup
from reach.trial.laws.mirror import Mirror
from reach.trial.laws.planning import Planning
from reach.trial.ready import centre_of

FINE = 8  # samples a period between contacts


class Leaning(Hand):
    """Brings the ball back to the axis."""

    def lean(self, place: Array, velocity: Array) -> Array:
        return np.asarray(-0.5 * place / (8 * self.setup.apex_m) - 0.8 * velocity / (2 * self.speed))


class Tilted(Hand):
    """Leans by a fixed angle toward +x."""

    def lean(self, place: Array, velocity: Array) -> Array:
        return np.array([math.sin(self.own["tilt"]), 0.0])


def bench7(**given: Any) -> Cell:
    """The seven-axis bench arm with a trial above its strike point."""
    cell = replace(bench("bench7"), period_s=0.002)
    return tried(cell, centre_m=centre_of(tried(cell, centre_m=None)), apex_m=0.2, **given)


# Contacts


CASES: dict[str, tuple[Cell, type, tuple[float, float], dict[str, float]]] = {
    "gantry": (tried(gantry(), bounces=6), Leaning, (0.04, -0.02), {}),
    "heavy air": (
        tried(gantry(), ball={"drag_coefficient": 0.45}, bounces=8),
        Mirror,
        (0.03, 0.0),
        dict(Mirror.gains),
    ),
    "slow gantry": (tried(slow_gantry(x={"acceleration": 5.0}), bounces=8), Leaning, (0.04, 0.0), {}),
    "drive": (
        tried(replace(gantry(), drive=Drive(delay_s=0.003, lag_s=0.004)), bounces=8),
        Leaning,
        (0.01, 0.0),
        {},
    ),
    "bench7": (bench7(bounces=5), Planning, (0.03, 0.0), dict(Planning.gains)),
}


@pytest.fixture(scope="module", params=CASES)
def case(request: pytest.FixtureRequest) -> tuple[Cell, Run]:
    """A cell and a trial on it."""
    cell, law, offset, gains = CASES[request.param]
    run = bout(cell, law, offset, (0.02, 0.01), **gains)
    assert run.bounces >= 4
    return cell, run


def test_at_every_contact_ball_and_face_touch(case: tuple[Cell, Run]) -> None:
    """By the chain's kinematics, the delivered motion, and the ball's flight integrated anew."""
    cell, run = case
    flights = ball_flights(cell, run)
    for k, t in enumerate(run.contacts.t_s):
        assert abs(gaps(cell, run, flights[k], np.array([t]))[0]) < 1e-6
        np.testing.assert_allclose(flights[k](np.array([t]))[0], run.contacts.ball[k], atol=1e-8)


def test_between_contacts_the_ball_is_above_the_face(case: tuple[Cell, Run]) -> None:
    cell, run = case
    flights = ball_flights(cell, run)
    for k, (begin, end) in enumerate(pairwise([0.0, *run.contacts.t_s])):
        t = np.arange(begin, end, cell.period_s / FINE)[1:]
        assert gaps(cell, run, flights[k], t).min() > -1e-9


def test_the_balls_speed_after_contact_is_newtons(case: tuple[Cell, Run]) -> None:
    cell, run = case
    np.testing.assert_allclose(run.contacts.ball_out, struck_by_hand(cell, run), atol=1e-7)
    assert not run.contacts.spin_out.any()  # a face without friction


def test_what_is_told_of_paddle_and_flight_is_so(case: tuple[Cell, Run]) -> None:
    cell, run = case
    c, flights = run.contacts, ball_flights(cell, run)
    assert cell.trial is not None and cell.trial.centre_m is not None
    point, normal, twist = paddle_at(cell, run, c.t_s)
    arm = c.ball - RADIUS * normal - point
    along = np.einsum("ki,ki->k", twist[:, :3] + np.cross(twist[:, 3:], arm), normal)
    np.testing.assert_allclose(c.paddle_m_s, along, atol=1e-7)
    np.testing.assert_allclose(np.linalg.norm(arm, axis=1), np.linalg.norm(c.face, axis=1), atol=1e-6)
    np.testing.assert_allclose(c.tilt_rad, np.arccos(np.clip(normal[:, 2], -1, 1)), atol=1e-6)
    np.testing.assert_allclose(c.offset_m, np.hypot(*(c.ball - cell.trial.centre_m)[:, :2].T), atol=1e-12)
    for k, begin in enumerate(c.t_s[:-1]):
        heights = flights[k + 1](np.linspace(begin, c.t_s[k + 1], 2001))[:, 2]
        assert c.apex_m[k] == pytest.approx(heights.max() - cell.trial.centre_m[2], abs=1e-6)


def test_the_trace_is_of_the_same_ball_and_paddle(case: tuple[Cell, Run]) -> None:
    cell, run = case
    point, _, _ = paddle_at(cell, run, run.trace.t_s)
    np.testing.assert_allclose(run.trace.paddle, point, atol=1e-9)
    flights = ball_flights(cell, run)
    row = np.searchsorted(run.contacts.t_s, run.trace.t_s, side="right")
    for k in range(len(flights)):
        mine = row == k
        np.testing.assert_allclose(run.trace.ball[mine], flights[k](run.trace.t_s[mine]), atol=1e-7)


def test_the_result_hardly_depends_on_where_in_a_period_the_ball_comes_down() -> None:
    """Apexes a little apart shift the contact through a whole period of 2 ms; less than 0.3 mm of it is seen."""
    apexes = 0.2 + np.arange(5) * 0.0004  # flights 0.4 ms apart
    runs = [bout(tried(gantry(), apex_m=float(h), bounces=4), Leaning, (0.03, 0.0)) for h in apexes]
    phases = np.array([run.contacts.t_s[0] for run in runs]) % 0.002 / 0.002
    assert np.ptp(phases) > 0.5
    off = np.array([run.contacts.apex_m - h for run, h in zip(runs, apexes, strict=True)])
    aside = np.array([run.contacts.offset_m for run in runs])
    assert np.ptp(off, axis=0).max() < 3e-4
    assert np.ptp(aside, axis=0).max() < 3e-4


@pytest.mark.campaign
def test_a_finer_control_period_makes_the_same_trial() -> None:
    coarse, fine = (bout(tried(gantry(p), bounces=4), Leaning, (0.03, 0.0)) for p in (0.002, 0.0005))
    np.testing.assert_allclose(coarse.contacts.offset_m, fine.contacts.offset_m, atol=5e-4)
    np.testing.assert_allclose(coarse.contacts.apex_m, fine.contacts.apex_m, atol=5e-4)


@pytest.mark.parametrize(
    "seed", [3, *(pytest.param(seed, marks=pytest.mark.campaign) for seed in range(100, 200))]
)
def test_a_law_gone_wild_makes_no_contact_that_is_none_and_misses_none(seed: int) -> None:
    """Sums of sinusoids on top of a sound law: up to the loss no ball is below the face within its edge."""
    cell, run = wild(seed)
    flights, c = ball_flights(cell, run), run.contacts
    for k, (begin, end) in enumerate(pairwise([0.0, *c.t_s, run.ended_s - 2 * cell.period_s])):
        t = np.arange(begin, end, cell.period_s / FINE)[1:]
        gap, (point, _, _) = gaps(cell, run, flights[k], t), paddle_at(cell, run, t)
        beside = np.linalg.norm(flights[k](t) - point, axis=1) > 0.085 + RADIUS
        assert ((gap > -1e-8) | beside).all()
    assert all(abs(gaps(cell, run, flights[k], c.t_s[k : k + 1])[0]) < 1e-6 for k in range(run.bounces))
    np.testing.assert_allclose(c.ball_out, struck_by_hand(cell, run), atol=1e-6)
    assert (np.linalg.norm(c.face, axis=1) <= 0.085 + 1e-9).all()


# Edges


def test_a_ball_outside_the_edge_is_missed() -> None:
    run = bout(tried(gantry()), Still, (0.2, 0.0))
    assert (run.outcome, run.bounces, run.recovered) == ("missed past the edge", 0, False)
    assert "115 mm past it" in run.text  # 0.2 m less the disc's 0.085 m
    flight_s = 2 * math.sqrt(2 * 0.2 / G)
    below_s = RADIUS / math.sqrt(2 * 0.2 * G)  # until the ball's middle is below the face
    assert run.ended_s == pytest.approx(flight_s + below_s, abs=0.005)


@pytest.mark.parametrize(("at", "disc", "plate"), [(0.084, 1, 1), (0.086, 0, 0), (0.06 * math.sqrt(2), 1, 1)])
def test_along_an_axis_disc_and_plate_end_alike(at: float, disc: int, plate: int) -> None:
    found = []
    for shape in ({"shape": "disc"}, {"shape": "plate", "size_m": (0.17, 0.17)}):
        cell = tried(gantry(), bounces=1)
        found.append(bout(replace(cell, paddle=replace(cell.paddle, **shape)), Still, (at, 0.0)).bounces)
    assert found == [disc, plate]


def test_a_plate_has_corners_that_a_disc_has_not() -> None:
    cell = tried(gantry(), bounces=1)
    plate = replace(cell, paddle=replace(cell.paddle, shape="plate", size_m=(0.17, 0.17)))
    corner = (0.08, -0.08)
    assert bout(cell, Still, corner).outcome == "missed past the edge"
    assert bout(plate, Still, corner).bounces == 1
    past = replace(plate, paddle=replace(plate.paddle, size_m=(0.17, 0.15)))
    assert "5 mm past it" in bout(past, Still, corner).text


# Spin and air


def test_a_face_with_friction_that_is_tilted_spins_the_ball_and_the_spin_is_kept() -> None:
    """A hollow ball that grips without tangential restitution leaves with a slip of zero."""
    cell = tried(gantry(), {"friction": 5.0}, bounces=3)
    c = bout(cell, Tilted, tilt=0.1).contacts
    normal = np.array([math.sin(0.1), 0.0, math.cos(0.1)])
    run = bout(cell, Tilted, tilt=0.1)
    _, normals, twist = paddle_at(cell, run, c.t_s)
    np.testing.assert_allclose(normals[0], normal, atol=1e-6)
    slip = c.ball_out - twist[:, :3] + np.cross(c.spin_out, -normals)
    slip -= np.einsum("ki,ki->k", slip, normals)[:, None] * normals
    np.testing.assert_allclose(slip, 0.0, atol=1e-7)
    assert abs(c.spin_out[0, 1]) > 0.05 and np.abs(c.spin_out[:, [0, 2]]).max() < 1e-6
    # The second contact begins with the spin of the first: impulse and spin change by Cross 2002, alpha = 2/3.
    across = c.ball_out[1] - c.ball_in[1]
    across -= (across @ normals[1]) * normals[1]
    np.testing.assert_allclose(c.spin_out[1] - c.spin_out[0], -1.5 * np.cross(normals[1], across), atol=1e-7)


@pytest.mark.parametrize("lift", [0.0, 0.3])
def test_spin_bends_the_next_flight_only_where_there_is_lift(lift: float) -> None:
    cell = tried(gantry(), {"friction": 5.0}, {"lift_coefficient": lift}, bounces=2)
    run = bout(cell, Tilted, tilt=0.1)
    c = run.contacts
    flight_s = c.t_s[1] - c.t_s[0]
    parabola = c.ball[0] + c.ball_out[0] * flight_s - np.array([0.0, 0.0, G]) * flight_s**2 / 2
    off = np.linalg.norm(c.ball[1] - parabola)
    np.testing.assert_allclose(ball_flights(cell, run)[1](c.t_s[1:2])[0], c.ball[1], atol=1e-8)
    assert off > 0.005 if lift else off < 1e-9


# The arm gives


def test_an_arm_that_gives_lowers_the_apex_by_the_two_bodies_formula() -> None:
    """Behind the face moves what the z slide carries: its own 1 kg, two wrist links and the paddle of 0.1 kg each."""
    ball_kg, carried_kg = 0.13, 1.3
    cell = tried(gantry(), {"arm_gives": True}, {"mass_kg": ball_kg}, bounces=1)
    run = bout(cell, Hand)
    c = run.contacts
    approach = c.paddle_m_s[0] - c.ball_in[0, 2]
    out = c.ball_in[0, 2] + 1.7 * approach / (1 + ball_kg / carried_kg)
    assert c.ball_out[0, 2] == pytest.approx(out, abs=1e-9)
    assert c.apex_m[0] == pytest.approx(out**2 / (2 * G), abs=1e-4)
    stiff = bout(tried(gantry(), {}, {"mass_kg": ball_kg}, bounces=1), Hand)
    assert stiff.contacts.apex_m[0] - c.apex_m[0] > 0.04


# Sensor


def sights(sensor: Sensor, number: int = 0, seed: int = 0, bounces: int = 3) -> tuple[Cell, Run, list[Seen]]:
    """A trial seen through a sensor, and all that its law saw; the law itself hits by the clock."""
    cell = tried(gantry(), sensor=sensor, bounces=bounces)
    seen: list[Seen] = []
    return cell, bout(cell, watched(Leaning, seen), (0.02, 0.0), number=number, seed=seed), seen


def true_ball(cell: Cell, run: Run, t_s: Array) -> Array:
    """The ball's centre (k, 3)."""
    flights, row = ball_flights(cell, run), np.searchsorted(run.contacts.t_s, t_s, side="right")
    return np.array([flights[k](np.array([t]))[0] for k, t in zip(row, t_s, strict=True)])


@pytest.mark.parametrize(
    "sensor", [Sensor(), Sensor(0.0, 0.006), Sensor(120.0), Sensor(120.0, 0.011), Sensor(77.0, 0.02)]
)
def test_a_sight_is_the_ball_as_it_was_its_age_ago(sensor: Sensor) -> None:
    cell, run, seen = sights(sensor)
    t = np.array([s.t_s for s in seen])
    age = np.array([s.ball_age_s for s in seen])
    ball = np.array([s.ball_m for s in seen])
    np.testing.assert_allclose(t, 0.002 * np.arange(len(t)), atol=1e-12)
    np.testing.assert_allclose(ball, true_ball(cell, run, t - age), atol=1e-9)
    settled = t > sensor.latency_s + 0.02
    every = 1 / sensor.rate_hz if sensor.rate_hz else 0.0
    late = math.ceil(sensor.latency_s / 0.002 - 1e-6) * 0.002
    assert age[settled].min() == pytest.approx(late, abs=1e-9)  # told at the first period after the latency
    assert age[settled].max() <= late + every + 0.002
    assert (age[~settled] <= t[~settled] + 1e-12).all()
    if sensor.rate_hz:
        taken = np.unique(np.round(t - age, 9))
        assert len(taken) == pytest.approx((t[-1] - late) * sensor.rate_hz, abs=2)
        assert np.abs(taken - np.arange(len(taken)) * every).max() <= 0.002


def test_noise_is_as_large_as_told_and_new_with_every_sample() -> None:
    cell, run, seen = sights(Sensor(0.0, 0.0, 0.003, 0.02), bounces=6)
    t = np.array([s.t_s for s in seen])
    off = np.array([s.ball_m for s in seen]) - true_ball(cell, run, t)
    np.testing.assert_allclose(off.std(axis=0), 0.003, rtol=0.12)  # four sigma of some 1000 samples
    assert np.abs(off.mean(axis=0)).max() < 4e-4
    assert np.abs(np.mean(off[1:] * off[:-1], axis=0)).max() < 0.15 * 0.003**2
    slow = (
        np.array([s.ball_m_s for s in seen])[:50] - np.array(seen[0].ball_m_s) + np.outer(t[:50], [0, 0, G])
    )
    assert 0.01 < slow.std() < 0.03


def test_the_same_seed_and_number_make_the_same_trial_and_others_another() -> None:
    noisy = Sensor(0.0, 0.0, 0.001, 0.01)
    first, again, number, seed = (
        sights(noisy, n, s, 2)[1].contacts for n, s in ((0, 0), (0, 0), (1, 0), (0, 1))
    )
    np.testing.assert_array_equal(first.ball, again.ball)
    np.testing.assert_array_equal(first.ball_out, again.ball_out)
    assert np.abs(first.ball_out - number.ball_out).max() > 1e-4
    assert np.abs(first.ball_out - seed.ball_out).max() > 1e-4


# A step found bad afterwards


def test_a_step_found_bad_makes_the_trial_again_with_care(monkeypatch: pytest.MonkeyPatch) -> None:
    cell = tried(slow_gantry(x={"acceleration": 5.0}), bounces=4)
    real, calls = QpBlock.first_bad, []

    def bad_once(self: QpBlock, slots: list[int]) -> int | None:
        calls.append(len(slots))
        return slots[0] if len(calls) == 1 else real(self, slots)

    plain = bout(cell, Leaning, (0.04, 0.0))
    monkeypatch.setattr(QpBlock, "first_bad", bad_once)
    made: list[Setup] = []

    class Counted(Leaning):
        def __init__(self, setup: Setup):
            made.append(setup)
            super().__init__(setup)

    again = bout(cell, Counted, (0.04, 0.0))
    assert calls and len(made) == 2  # the law is made anew: nothing of the first try is left in it
    assert again.outcome == plain.outcome and again.failed_steps == 0
    np.testing.assert_allclose(again.contacts.t_s, plain.contacts.t_s, atol=1e-6)
    np.testing.assert_allclose(again.contacts.ball, plain.contacts.ball, atol=1e-5)
