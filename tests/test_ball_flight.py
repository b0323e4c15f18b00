"""Flight of the ball: closed forms, an integrator of another kind, tops and landings, launches there and back."""

from __future__ import annotations

import pickle

import numpy as np
import pytest
from scipy.integrate import solve_ivp

from reach.ball import LONGEST_S, Air, Flight, NoFlight, fall, launch
from reach.cell import Ball, Vec3

G = 9.81
DOWN: Vec3 = (0.0, 0.0, -G)
NONE = (0.0, 0.0, 0.0)
BALL = Ball(0.0027, 0.02, drag_coefficient=0.45, lift_coefficient=0.2)
VACUUM = Air(0.0, 0.0, DOWN)
AIR = Air.of(BALL, DOWN)


def flight(
    air: Air, velocity: tuple[float, ...], spin: tuple[float, ...] = NONE, start_s: float = 0.0
) -> Flight:
    return Flight(start_s, np.array((0.1, -0.2, 0.3)), np.array(velocity), np.array(spin), air)


def test_the_air_of_a_ball() -> None:
    """k = rho A Cd/(2 m): 0.5 · 1.2 · pi 0.02² · 0.45/0.0027 = 0.1257 per m for a table tennis ball."""
    assert AIR.drag_per_m == pytest.approx(0.5 * 1.2 * np.pi * 4e-4 * 0.45 / 0.0027, rel=1e-15)
    assert AIR.lift_per_m / AIR.drag_per_m == pytest.approx(0.2 / 0.45)
    assert not AIR.still and VACUUM.still
    assert Air.of(Ball(0.0027, 0.02), DOWN).still


@pytest.mark.parametrize("gravity", [DOWN, (0.4, -1.0, -9.0)])
def test_without_air_the_flight_is_a_parabola(gravity: Vec3) -> None:
    ball = flight(Air(0.0, 0.3, gravity), (1.0, 0.5, 2.0), start_s=7.0)
    t = np.linspace(7.0, 9.0, 41)
    position, velocity = ball.at(t)
    after = (t - 7.0)[:, None]
    np.testing.assert_allclose(
        position,
        (0.1, -0.2, 0.3) + after * np.array((1, 0.5, 2)) + after**2 * np.array(gravity) / 2,
        atol=1e-14,
    )
    np.testing.assert_allclose(velocity, (1, 0.5, 2) + after * np.array(gravity), atol=1e-14)
    for k in (0, 17, 40):
        np.testing.assert_allclose(ball.one(float(t[k])), [*position[k], *velocity[k]], rtol=0, atol=1e-14)


CASES = {
    "drag": (AIR, (1.0, -0.4, 4.0), NONE),
    "lift": (Air(0.0, 0.06, DOWN), (3.0, 0.2, 2.0), (0.0, -6.0, 1.0)),
    "both": (AIR, (4.0, 1.0, 3.0), (2.0, 5.0, -3.0)),
    "sideways gravity": (Air(0.13, 0.05, (1.0, -2.0, -9.0)), (0.5, 0.3, 3.0), (0.0, 9.0, 0.0)),
    "straight up": (AIR, (0.0, 0.0, 6.0), NONE),
    "straight down, backspin": (AIR, (0.0, 0.0, -2.0), (3.0, 0.0, 0.0)),
}


def stiff_answer(ball: Flight, t: np.ndarray) -> np.ndarray:
    """The same states (k, 6) by an implicit Runge-Kutta method of order 5, Radau IIA, acceleration in vectors."""

    def rate(_: float, state: np.ndarray) -> np.ndarray:
        v, w = state[3:], ball.spin_m_s
        size, turning = np.linalg.norm(v), np.linalg.norm(w)
        a = np.array(ball.air.gravity_m_s2) - ball.air.drag_per_m * size * v
        if turning > 0 and size > 0:
            a = a + ball.air.lift_per_m * size**2 * np.cross(w / turning, v / size)
        return np.concatenate((v, a))

    start = np.concatenate((ball.position, ball.velocity))
    done = solve_ivp(rate, (t[0], t[-1]), start, method="Radau", t_eval=t, rtol=1e-9, atol=1e-10)
    return np.asarray(done.y.T)


@pytest.mark.parametrize("case", CASES)
def test_with_air_it_agrees_with_an_integrator_of_another_kind(case: str) -> None:
    air, velocity, spin = CASES[case]
    ball = flight(air, velocity, spin, start_s=2.0)
    t = np.linspace(2.0, 3.0, 21)
    position, speed = ball.at(t)
    np.testing.assert_allclose(np.hstack((position, speed)), stiff_answer(ball, t), rtol=0, atol=2e-8)
    later = ball.one(3.5)
    again = ball.one(2.05)
    np.testing.assert_allclose(again, [*position[1], *speed[1]], rtol=0, atol=1e-14)
    assert later != again


def test_lift_does_no_work_and_turns_the_ball_towards_spin_cross_velocity() -> None:
    """Without drag 1/2 v² + g z stays; topspin about +y of a ball along +x pushes it down, backspin up."""
    for turned, sign in ((3.0, -1), (-3.0, 1)):
        ball = flight(Air(0.0, 0.1, DOWN), (5.0, 0.0, 1.0), (0.0, turned, 0.0))
        position, velocity = ball.at(np.linspace(0, 1, 11))
        energy = (velocity**2).sum(axis=1) / 2 + G * position[:, 2]
        np.testing.assert_allclose(energy, energy[0], rtol=1e-9)
        parabola = 0.3 + 1.0 - G / 2
        assert sign * (position[-1, 2] - parabola) > 0.3


def test_the_rate_of_spin_does_not_count_and_its_axis_does() -> None:
    slow = flight(AIR, (2.0, 0.0, 1.0), (0.0, 0.1, 0.0)).one(0.4)
    fast = flight(AIR, (2.0, 0.0, 1.0), (0.0, 10.0, 0.0)).one(0.4)
    np.testing.assert_allclose(slow, fast, rtol=0, atol=1e-12)
    assert abs(slow[2] - flight(AIR, (2.0, 0.0, 1.0), (0.0, 0.0, 10.0)).one(0.4)[2]) > 0.01


@pytest.mark.parametrize("case", CASES)
def test_the_apex_is_where_the_ball_stops_rising(case: str) -> None:
    air, velocity, spin = CASES[case]
    ball = flight(air, velocity, spin, start_s=2.0)
    when, height = ball.apex()
    if velocity[2] < 0:
        assert (when, height) == (2.0, pytest.approx(0.3, abs=1e-15))
        return
    assert ball.one(when)[5] == pytest.approx(0, abs=1e-9)
    assert ball.at(np.linspace(2, 3, 301))[0][:, 2].max() <= height + 1e-12
    assert ball.one(when)[2] == height


def test_closed_apex_and_landing() -> None:
    """Top v²/(2 g) above the start after v/g; down again after 2 v/g, and from h after sqrt(2 h/g)."""
    ball = flight(VACUUM, (1.0, 0.0, 3.0), start_s=5.0)
    assert ball.apex() == (pytest.approx(5 + 3 / G), pytest.approx(0.3 + 9 / (2 * G)))
    assert ball.down_to(0.3) == pytest.approx(5 + 6 / G, abs=1e-12)
    dropped = flight(VACUUM, (0.0, 0.0, 0.0))
    assert dropped.down_to(0.1) == pytest.approx(np.sqrt(0.4 / G), abs=1e-12)


@pytest.mark.parametrize("air", [VACUUM, AIR], ids=["vacuum", "air"])
def test_down_to_is_the_way_down(air: Air) -> None:
    ball = flight(air, (1.0, 0.2, 3.0), (0.0, 1.0, 0.0), start_s=1.0)
    when, height = ball.apex()
    for z in (-2.0, 0.0, 0.3, 0.5, height - 1e-6, height):
        landing = ball.down_to(z)
        assert landing is not None and landing >= when
        state = ball.one(landing)
        assert state[2] == pytest.approx(z, abs=1e-10)
        assert state[5] <= 1e-9
    assert ball.down_to(height + 1e-6) is None


@pytest.mark.parametrize(("air", "count"), [(VACUUM, 500), (AIR, 30)], ids=["vacuum", "air"])
def test_down_to_the_apex_is_at_the_apex_in_spite_of_rounding(air: Air, count: int) -> None:
    """The top is flat: 1e-12 m of rounding in the height are 0.5 us in the instant, sqrt(2e-12/g)."""
    for velocity in np.random.default_rng(3).uniform((-1, -1, 0.1), (1, 1, 5), size=(count, 3)):
        ball = flight(air, tuple(velocity))
        when, height = ball.apex()
        assert ball.down_to(height) == pytest.approx(when, abs=5e-7)
        assert ball.down_to(height + 1e-13) == pytest.approx(when, abs=5e-7)
        assert ball.down_to(height + 1e-11) is None


@pytest.mark.parametrize("air", [VACUUM, AIR], ids=["vacuum", "air"])
def test_down_to_from_a_ball_that_falls(air: Air) -> None:
    ball = flight(air, (1.0, 0.0, -1.0), start_s=1.0)
    assert ball.down_to(0.3) == 1.0
    assert ball.down_to(0.3 + 1e-6) is None
    landing = ball.down_to(0.0)
    assert landing is not None and ball.one(landing)[2] == pytest.approx(0, abs=1e-10)


def test_down_to_gives_up_on_a_ball_that_does_not_come() -> None:
    """At its end speed of 8.8 m/s it falls some 530 m in 60 s; in vacuum 17.6 km."""
    assert flight(AIR, (0.0, 0.0, 0.0)).down_to(-0.9 * 8.8 * LONGEST_S) is not None
    assert flight(AIR, (0.0, 0.0, 0.0)).down_to(-1.1 * 8.9 * LONGEST_S) is None
    assert flight(VACUUM, (0.0, 0.0, 0.0)).down_to(-17_000.0) is not None
    assert flight(VACUUM, (0.0, 0.0, 0.0)).down_to(-18_000.0) is None


PLACES = [
    ((0, 0, 0), (0, 0, 0)),
    ((0.3, 0.1, 0.4), (0.55, -0.1, 0.4)),
    ((0, 0, 0.1), (1.5, 0, 0.0)),
    ((0, 0, 0), (-0.2, 0.4, 0.05)),
]


@pytest.mark.parametrize("apex", [0.05, 0.1, 0.3, 1.0, 2.0])
@pytest.mark.parametrize(("start", "land"), PLACES)
@pytest.mark.parametrize(
    ("air", "spin"),
    [
        (VACUUM, NONE),
        (AIR, NONE),
        (AIR, (1.0, 4.0, -2.0)),
        (Air(0.0, 0.03, DOWN), (0.0, 0.0, 2.0)),
        (Air(0.13, 0.0, (0.3, -0.5, -9.7)), NONE),
    ],
    ids=["vacuum", "drag", "drag and lift", "lift", "sideways gravity"],
)
def test_a_launch_flies_back(
    air: Air, spin: tuple[float, ...], start: tuple[float, ...], land: tuple[float, ...], apex: float
) -> None:
    """Flown from its start it tops at the wanted height and is at the landing place when it should, within 1 nm."""
    top = max(start[2], land[2]) + apex
    made = launch(air, start, land, top, spin)
    ball = Flight(0.0, np.array(start, dtype=float), made.velocity, np.array(spin), air)
    assert ball.apex()[1] == pytest.approx(top, abs=1e-9)
    assert ball.down_to(land[2]) == pytest.approx(made.flight_s, abs=1e-9)
    state = ball.one(made.flight_s)
    np.testing.assert_allclose(state[:3], land, rtol=0, atol=1e-9)
    np.testing.assert_allclose(state[3:], made.landing_velocity, rtol=0, atol=1e-8)


@pytest.mark.parametrize("air", [VACUUM, AIR], ids=["vacuum", "air"])
def test_launch_from_and_to_the_apex(air: Air) -> None:
    down = launch(air, (0, 0, 0.3), (0.2, 0, 0), 0.3)
    assert down.velocity[2] == 0
    up = launch(air, (0, 0, 0), (0.2, 0, 0.3), 0.3)
    assert up.landing_velocity[2] == pytest.approx(0, abs=1e-12)
    assert up.velocity[2] > np.sqrt(2 * G * 0.3) - 1e-12
    ball = Flight(0.0, np.zeros(3), up.velocity, np.zeros(3), air)
    np.testing.assert_allclose(ball.one(up.flight_s)[:3], (0.2, 0, 0.3), rtol=0, atol=1e-9)


def test_drag_asks_for_more_at_the_start_and_leaves_less_at_the_end() -> None:
    light, heavy = (launch(air, (0, 0, 0), (0.3, 0, 0), 0.4) for air in (VACUUM, AIR))
    assert np.all(heavy.velocity[[0, 2]] > light.velocity[[0, 2]] * 1.01)
    assert np.all(np.abs(heavy.landing_velocity[[0, 2]]) < np.abs(light.landing_velocity[[0, 2]]) * 0.99)


@pytest.mark.parametrize("air", [VACUUM, AIR], ids=["vacuum", "air"])
@pytest.mark.parametrize("height", [0.05, 0.3, 2.0, 40.0])
def test_a_fall_is_the_flight_of_a_ball_let_go(air: Air, height: float) -> None:
    ball = Flight(0.0, np.array((0.5, 0.1, height)), np.zeros(3), np.zeros(3), air)
    landing = ball.down_to(0.0)
    assert landing is not None
    np.testing.assert_allclose(fall(air, height, (0.5, 0.1, 0.0)), ball.one(landing)[3:], rtol=0, atol=1e-9)


def test_what_no_flight_does() -> None:
    with pytest.raises(NoFlight, match="below an end"):
        launch(VACUUM, (0, 0, 0.5), (0, 0, 0), 0.4)
    with pytest.raises(NoFlight, match="no time to fly"):
        launch(AIR, (0, 0, 0.4), (1, 0, 0.4), 0.4)
    with pytest.raises(NoFlight, match=r"no launch was found|can't be followed|does not come down"):
        launch(AIR, (0, 0, 0), (300.0, 0, 0), 0.3)
    with pytest.raises(NoFlight, match="below the landing place"):
        fall(AIR, 0.3, (0, 0, 0.4))
    with pytest.raises(NoFlight, match="sideways"):
        fall(Air(0.0, 0.0, (0.1, 0.0, -9.0)), 0.3, (0, 0, 0))
    for air in (Air(0.0, 0.0, (0.0, 9.0, 0.0)), Air(0.1, 0.0, (0.0, 0.0, 9.0))):
        for ask in (
            lambda a: flight(a, NONE).apex(),
            lambda a: flight(a, NONE).down_to(0.0),
            lambda a: launch(a, NONE, NONE, 0.3),
            lambda a: fall(a, 0.3, NONE),
        ):
            with pytest.raises(NoFlight, match="does not pull down"):
                ask(air)


@pytest.mark.parametrize("air", [VACUUM, AIR], ids=["vacuum", "air"])
def test_there_is_no_ball_before_its_start(air: Air) -> None:
    ball = flight(air, (0.0, 0.0, 1.0), start_s=4.0)
    with pytest.raises(NoFlight, match=r"no ball at 3\.9 s"):
        ball.one(3.9)
    with pytest.raises(NoFlight, match=r"no ball at 3\.9 s"):
        ball.at(np.array((5.0, 3.9)))


def test_a_flight_with_air_ends_some_time() -> None:
    with pytest.raises(NoFlight, match="no longer"):
        flight(AIR, (0.0, 0.0, 1.0)).one(1e6)


@pytest.mark.parametrize("air", [VACUUM, AIR], ids=["vacuum", "air"])
def test_a_flight_can_be_sent_to_another_process(air: Air) -> None:
    ball = flight(air, (1.0, 0.0, 2.0), (0.0, 3.0, 0.0))
    here = ball.one(0.7)
    assert pickle.loads(pickle.dumps(ball)).one(0.7) == here


def test_lift_stronger_than_gravity_has_no_top_there() -> None:
    """Backspin at 20 m/s with l = 0.2 per m lifts at 80 m/s²: what is horizontal there is no apex."""
    strong = Air(0.0, 0.2, DOWN)
    with pytest.raises(NoFlight):
        launch(strong, (0, 0, 0), (6.0, 0, 0), 0.1, (0.0, -1.0, 0.0))
