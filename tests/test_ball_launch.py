"""Launches over many apexes: there is one wherever there is a flight, and it is that of the closed form."""

from __future__ import annotations

import math

import numpy as np
import pytest

from reach.ball import Air, Flight, NoFlight, launch
from reach.ball.hodograph import arc
from reach.cell import Ball, Vec3

G = 9.80665  # m/s², 3rd CGPM, 1901
DOWN: Vec3 = (0.0, 0.0, -G)
NONE = (0.0, 0.0, 0.0)
# Masses and sizes: ITTF Technical Leaflet T3; ITF Rules of Tennis, Appendix I. Coefficients invented.
BALLS = {"table tennis": Ball(0.0027, 0.02, 0.45, 0.2), "tennis": Ball(0.0577, 0.0335, 0.55, 0.2)}


def flown(air: Air, start: Vec3, land: Vec3, apex: float, spin: Vec3 = NONE) -> float:
    """How far the flight of a launch, followed from its start, is off: apex, landing in m, speed there in m/s."""
    made = launch(air, start, land, apex, spin)
    ball = Flight(0.0, np.array(start), made.velocity, np.array(spin), air)
    end = np.abs(np.array(ball.one(made.flight_s)) - [*land, *made.landing_velocity])
    return max(abs(ball.apex()[1] - apex), float(end.max()))


@pytest.mark.parametrize(
    ("z", "apex"),
    [(0.0, 0.264), (0.0, 0.472), (0.0, 0.715), (0.0, 0.902), (0.52, 0.49 + 0.52), (0.52, 0.676)],
)
def test_apexes_at_which_a_step_across_the_top_once_erred(z: float, apex: float) -> None:
    assert flown(Air.of(BALLS["table tennis"], DOWN), (0.0, 0.0, z), (0.0, 0.0, z), apex) < 1e-9


@pytest.mark.parametrize("ball", BALLS)
@pytest.mark.parametrize("land", [NONE, (1e-4, 0.0, 0.005), (0.02, 0.0, 0.009), (0.3, -0.1, 0.0)])
def test_every_apex_has_its_launch(ball: str, land: Vec3) -> None:
    """Within 1 nm and 1 nm/s of what the flight, integrated from its start, then does."""
    air = Air.of(BALLS[ball], DOWN)
    for apex in np.linspace(0.01, 4.0, 80).tolist():
        assert flown(air, NONE, land, apex) < 1e-9


@pytest.mark.parametrize("land", [NONE, (0.3, -0.1, 0.0)])
def test_every_apex_has_its_launch_with_lift_too(land: Vec3) -> None:
    """Landing speeds within 10 nm/s: of a ball that comes to rest nearly, they are worth ten times the places."""
    air = Air.of(BALLS["table tennis"], DOWN)
    for apex in np.linspace(0.013, 4.0, 12).tolist():
        assert flown(air, NONE, land, apex, (1.0, 4.0, -2.0)) < 1e-8


@pytest.mark.parametrize("sideways", [0.0, 1e-4, 1e-3, 1e-2, 0.1])
def test_a_flight_over_a_top_is_exact_whatever_its_step_there(sideways: float) -> None:
    """A fall with drag, v² = (g/k)(1 - exp(-2kh)): the horizontal velocity changes it by its square at most."""
    air = Air.of(BALLS["table tennis"], DOWN)
    k = air.drag_per_m
    for rise in np.linspace(1.2, 6.0, 30).tolist():
        ball = Flight(0.0, np.zeros(3), np.array((sideways, 0.0, rise)), np.zeros(3), air)
        if sideways == 0:
            height = math.log1p(k * rise * rise / G) / (2 * k)
            seconds = math.atan(rise * math.sqrt(k / G)) / math.sqrt(G * k)
            assert ball.apex() == pytest.approx((seconds, height), abs=1e-10)
            seconds += math.acosh(math.exp(k * height)) / math.sqrt(G * k)
            assert ball.down_to(0.0) == pytest.approx(seconds, abs=1e-10)
            continue
        when, top = ball.apex()
        landing = ball.down_to(0.0)
        x = ball.one(landing or math.nan)[0]
        found = arc(k, G, top, top, x)
        assert found is not None
        assert found.start_m_s == pytest.approx((sideways, rise), abs=1e-9)
        assert found.flight_s == pytest.approx(landing, abs=1e-9)
        assert 0 < when < found.flight_s / 2


@pytest.mark.parametrize("way", [1e-12, 1e-3, 0.1, 1.0, 2.0])
@pytest.mark.parametrize(("rise", "drop"), [(0.3, 0.3), (0.0, 0.3), (0.3, 0.0), (2.0, 0.5), (1e-6, 1.0)])
def test_an_arc_is_a_flight(rise: float, drop: float, way: float) -> None:
    air = Air.of(BALLS["table tennis"], DOWN)
    found = arc(air.drag_per_m, G, rise, drop, way)
    assert found is not None
    (vx, vz), (wx, wz) = found.start_m_s, found.landing_m_s
    ball = Flight(0.0, np.zeros(3), np.array((vx, 0.0, vz)), np.zeros(3), air)
    np.testing.assert_allclose(ball.one(found.flight_s), (way, 0, rise - drop, wx, 0, wz), rtol=0, atol=1e-9)
    assert ball.apex()[1] == pytest.approx(rise, abs=1e-10)


@pytest.mark.parametrize("apex", [15.0, 30.0])
def test_where_drag_is_too_strong_for_the_arc_the_flight_is_followed(apex: float) -> None:
    """k h = 1.9 and 3.8: the ball starts at 2.5 and 6.6 times, exp(k h), the speed of its landing."""
    air = Air.of(BALLS["table tennis"], DOWN)
    assert arc(air.drag_per_m, G, apex, apex, 0.2) is None
    assert flown(air, NONE, (0.2, 0.0, 0.0), apex) < 1e-7
    made = launch(air, NONE, NONE, apex)
    ratio = -made.velocity[2] / made.landing_velocity[2]
    assert ratio == pytest.approx(math.exp(air.drag_per_m * apex), rel=1e-9)


@pytest.mark.parametrize("way", [300.0, 1e20, 1e200])
def test_a_way_that_no_ball_makes(way: float) -> None:
    air = Air.of(BALLS["table tennis"], DOWN)
    assert arc(air.drag_per_m, G, 0.3, 0.3, way) is None
    with pytest.raises(NoFlight):
        launch(air, NONE, (way, 0.0, 0.0), 0.3)
