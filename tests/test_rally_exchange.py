"""Strikes from ballistics, flown again by small integrators of the test's own, and the steady bounce's figures."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from rally_case import bench, court_of, on_bench, on_gantry, turned_z, with_contact
from scipy.integrate import solve_ivp

from reach.ball import Air
from reach.cell import Array, Cell, Contact
from reach.evidence.rallies import Bounce, OffsetEdge
from reach.rally.court import Court, Point
from reach.rally.exchange import Ballistics, Disturbance, Exchange, Strike, with_restitution
from reach.rally.steady import bounces, fastest_band_m_s2, impulse, window_m_s2

G = 9.81  # m/s², as the published tables have it
E = 0.7


def ballistics(bounces_: int = 1, mass_ratio: float = 0.0, drag: float = 0.0, **contact: Any) -> Ballistics:
    """Ballistics of a face with restitution E under G."""
    return Ballistics(cell_of(drag, **contact), bounces_, mass_ratio)


def cell_of(drag: float = 0.0, **contact: Any) -> Cell:
    cell = with_contact(bench("bench7"), **({"restitution": E} | contact))
    assert cell.ball is not None
    return replace(
        cell,
        arm=replace(cell.arm, gravity_m_s2=(0.0, 0.0, -G)),
        ball=replace(cell.ball, drag_coefficient=drag),
    )


def bounced(coming: Array, normal: Array, speed: float, e: float = E, ratio: float = 0.0) -> Array:
    """Ball out (3,) of a frictionless face that moves along its normal: the two-body law of restitution."""
    return coming + (1 + e) * (speed - coming @ normal) / (1 + ratio) * normal


def flown(place: Array, velocity: Array, drag_per_m: float = 0.0) -> tuple[Array, Array, float, float]:
    """Place, velocity and time when a ball is down at height 0 again, and its apex; by another integrator."""

    def rate(_: float, state: Array) -> Array:
        v = state[3:]
        return np.concatenate([v, np.array([0, 0, -G]) - drag_per_m * np.linalg.norm(v) * v])

    def down(_: float, state: Array) -> float:
        return float(state[2])

    def top(_: float, state: Array) -> float:
        return float(state[5])

    for name, value in (("terminal", True), ("direction", -1.0)):
        setattr(down, name, value)
    begin = np.concatenate([place, velocity]) + 1e-12 * np.array([0, 0, 1, 0, 0, 0])
    done = solve_ivp(rate, (0.0, 5.0), begin, events=[down, top], rtol=1e-11, atol=1e-12, method="DOP853")
    end = done.y_events[0][0]
    return end[:3], end[3:], float(done.t_events[0][0]), float(done.y_events[1][0][2])


def follow(exchange: Exchange, ratio: float = 0.0, drag_per_m: float = 0.0, e: float = E) -> list[float]:
    """Fly the ball through every strike; the next one must be where it comes down. The apexes on the way."""
    apexes = []
    for k, strike in enumerate(exchange.strikes):
        out = bounced(strike.ball_in, strike.normal, strike.speed_m_s, e, ratio)
        np.testing.assert_allclose(out, strike.ball_out, atol=1e-8)  # m/s
        assert np.linalg.norm(strike.normal) == pytest.approx(1.0, abs=1e-12)
        if k < len(exchange.flights_s):
            place, velocity, time, apex = flown(strike.ball, out, drag_per_m)
            after = exchange.strikes[k + 1]
            apexes.append(apex)
            assert time == pytest.approx(exchange.flights_s[k], abs=1e-7)  # s
            if k > 0 or np.allclose(after.ball, 0.0):  # the first ball is taken to come down off the centre
                np.testing.assert_allclose(place[:2], after.ball[:2], atol=1e-7)  # m
                np.testing.assert_allclose(velocity, after.ball_in, atol=1e-6)  # m/s
    return apexes


# Steady


# Apex h, then v = √(2gh), T = 2v/g and the paddle's speed v (1 − e)/(1 + e) at e = 0.7, 0.8 and 0.8756.
TABLE = [
    (0.1, 1.4007, 0.2856, (0.2472, 0.1556, 0.0929)),
    (0.2, 1.9809, 0.4039, (0.3496, 0.2201, 0.1314)),
    (0.3, 2.4261, 0.4946, (0.4281, 0.2696, 0.1609)),
    (0.5, 3.1321, 0.6386, (None, 0.3480, None)),
    (1.0, 4.4294, 0.9030, (0.7817, 0.4922, 0.2938)),
]


@pytest.mark.parametrize(("apex", "v", "period", "speeds"), TABLE)
def test_the_steady_bounce_of_the_table(
    apex: float, v: float, period: float, speeds: tuple[float | None, ...]
) -> None:
    for e, speed in zip((0.7, 0.8, 0.8756), speeds, strict=True):
        exchange = ballistics(restitution=e).exchange(apex, 0.0, 0.0)
        strike = exchange.strikes[exchange.main]
        assert -strike.ball_in[2] == pytest.approx(v, abs=1e-4)  # m/s, the table's last digit
        assert exchange.flights_s == pytest.approx((period,), abs=1e-4)  # s
        np.testing.assert_allclose(strike.normal, [0, 0, 1], atol=1e-12)
        if speed is not None:
            assert strike.speed_m_s == pytest.approx(speed, abs=1e-4)  # m/s


# Lower end of the stable window and upper end of the fastest band, m/s², by e.
WINDOWS = {
    0.5: (-10.900, -1.090),
    0.52: (-10.788, -0.978),
    0.6: (-10.423, -0.613),
    0.7: (-10.116, -0.306),
    0.8: (-9.931, -0.121),
    0.8756: (-9.853, -0.043),
    0.9: (-9.837, -0.027),
}


@pytest.mark.parametrize("e", WINDOWS)
def test_the_passive_window_of_the_table_and_of_the_maps_eigenvalues(e: float) -> None:
    least, fastest = WINDOWS[e]
    window, band = window_m_s2(e, G), fastest_band_m_s2(e, G)
    assert window == (pytest.approx(least, abs=1e-3), 0.0)
    assert band == (pytest.approx(-G), pytest.approx(fastest, abs=1e-3))

    def size(a: float) -> float:
        """Largest eigenvalue of the bounce's map of (time, speed); the Jacobian is the table's."""
        jacobian = [[1, (1 + e) / G], [(1 + e) * a, e**2 + (1 + e) ** 2 * a / G]]
        return float(np.abs(np.linalg.eigvals(jacobian)).max())

    for a in (window[0] * 0.999, -1e-3):
        assert size(a) < 1
    for a in (window[0] * 1.001, 1e-3):
        assert size(a) > 1
    for a in (band[0] * 0.999, (band[0] + band[1]) / 2, band[1] * 1.001):
        assert size(a) == pytest.approx(e, abs=1e-6)


# Returns


@pytest.mark.parametrize("count", [1, 2, 3])
def test_the_ball_is_back_at_the_centre_in_the_bounces_allowed(count: int) -> None:
    """Every strike sends the ball where the next one is; after `count` it is at the centre, and then it stays there."""
    apex, offset = 0.3, 0.09
    exchange = ballistics(count).exchange(apex, offset, 0.0)
    assert len(exchange.strikes) == count + 3
    for reached in follow(exchange):
        assert reached == pytest.approx(apex, abs=1e-9)  # m
    away = [float(strike.ball[0]) for strike in exchange.strikes]
    expected = [0.0, *(offset * (count - k) / count for k in range(count)), 0.0, 0.0]
    assert away == pytest.approx(expected, abs=1e-12)
    last, steady = exchange.strikes[-2:]
    np.testing.assert_allclose(last.ball_out[:2], 0.0, atol=1e-12)
    np.testing.assert_allclose(steady.normal, [0, 0, 1], atol=1e-12)


@pytest.mark.parametrize("offset", [0.0, 0.05])
def test_a_ball_that_drifts_outward_is_stopped_and_returned(offset: float) -> None:
    """With a lateral speed s at the main strike; the face leans by what takes s away and sends the ball back."""
    apex, s = 0.2, 0.3
    made = Ballistics(cell_of(), 1, lateral_m_s=s)
    exchange = made.exchange(apex, offset, np.pi / 2)
    main = exchange.strikes[exchange.main]
    np.testing.assert_allclose(main.ball_in, [0.0, s, -np.sqrt(2 * G * apex)], atol=1e-12)  # m/s
    flight_s = 2 * np.sqrt(2 * apex / G)
    np.testing.assert_allclose(main.ball_out[:2], [0.0, -offset / flight_s], atol=1e-9)
    # On a face without friction the normal is along the change of velocity.
    change = main.ball_out - main.ball_in
    np.testing.assert_allclose(main.normal, change / np.linalg.norm(change), atol=1e-9)
    follow(replace(exchange, strikes=exchange.strikes[1:], flights_s=exchange.flights_s[1:]))


@pytest.mark.parametrize("bearing", [0.5, np.pi / 2, 4.0])
def test_a_bearing_turns_everything(bearing: float) -> None:
    made = ballistics(2)
    for a, b in zip(
        made.exchange(0.2, 0.1, 0.0).strikes, made.exchange(0.2, 0.1, bearing).strikes, strict=True
    ):
        assert a.speed_m_s == b.speed_m_s
        for name in ("ball", "normal", "ball_in", "ball_out"):
            np.testing.assert_allclose(turned_z(bearing, getattr(a, name)), getattr(b, name), atol=1e-12)


def test_with_drag_another_integrator_says_the_same() -> None:
    e = 0.85
    made = ballistics(2, drag=0.45, restitution=e)
    cell = cell_of(0.45)
    assert cell.ball is not None
    exchange = made.exchange(0.3, 0.1, 0.0)
    drag = Air.of(cell.ball, cell.arm.gravity_m_s2).drag_per_m
    for apex in follow(exchange, drag_per_m=drag, e=e):
        assert apex == pytest.approx(0.3, abs=1e-7)  # m
    plain = ballistics(restitution=e).exchange(0.3, 0.0, 0.0).strikes[0].speed_m_s
    more = exchange.strikes[-1].speed_m_s / plain
    assert 1.19 < more < 1.26  # a fifth to a quarter more for a 2.7 g ball from 0.3 m


def test_a_paddle_that_gives_is_struck_harder() -> None:
    ratio = 0.05
    follow(ballistics(mass_ratio=ratio).exchange(0.3, 0.1, 0.0), ratio)
    v = np.sqrt(2 * G * 0.3)
    strike = ballistics(mass_ratio=ratio).exchange(0.3, 0.0, 0.0).strikes[0]
    # v = −v + (1 + e)(u + v)/(1 + m)
    assert strike.speed_m_s == pytest.approx(2 * v * (1 + ratio) / (1 + E) - v, rel=1e-9)


def test_a_face_that_grips_by_the_shells_formula() -> None:
    """A hollow ball without spin keeps 0.6 of its slip where the face grips (Cross 2002)."""
    made = ballistics(friction=5.0)
    exchange = made.exchange(0.2, 0.05, 0.0)
    for strike in exchange.strikes:
        n, before = strike.normal, strike.ball_in
        across = before - (before @ n) * n
        along = before @ n + (1 + E) * (strike.speed_m_s - before @ n)
        np.testing.assert_allclose(0.6 * across + along * n, strike.ball_out, atol=1e-8)  # m/s


def test_the_same_height_by_a_paddle_at_rest_if_nothing_is_lost() -> None:
    exchange = ballistics(restitution=1.0).exchange(0.2, 0.05, 0.0)
    follow(exchange, e=1.0)
    assert exchange.strikes[0].speed_m_s == pytest.approx(0.0, abs=1e-12)
    assert (
        exchange.strikes[1].speed_m_s > 0 > exchange.strikes[2].speed_m_s
    )  # gives way where it stops the ball


# Disturbances


def landing(made: Ballistics, wrong: Disturbance, offset: float = 0.0) -> tuple[Strike, float]:
    """The strike after the disturbed one, and the flight to it."""
    exchange = made.disturbed(0.3, offset, 0.0, wrong)
    assert exchange is not None
    return exchange.strikes[exchange.main], exchange.flights_s[exchange.main - 1]


@pytest.mark.parametrize("offset", [0.0, 0.08])
def test_no_disturbance_is_the_undisturbed_landing(offset: float) -> None:
    made = ballistics(2)
    plain = made.exchange(0.3, offset, 0.0)
    strike, flight = landing(made, Disturbance(), offset)
    after = plain.strikes[plain.main + 1] if offset else plain.strikes[plain.main]
    np.testing.assert_allclose(strike.ball, after.ball, atol=1e-9)
    np.testing.assert_allclose(strike.ball_in, after.ball_in, atol=1e-9)
    assert flight == pytest.approx(plain.flights_s[-1], abs=1e-9)


@pytest.mark.parametrize("way", [(1.0, 0.0), (0.0, -1.0)])
def test_a_tilt_moves_the_next_contact_by_eight_apexes_times_the_angle(way: tuple[float, float]) -> None:
    tilt = 1e-3
    strike, _ = landing(ballistics(), Disturbance(tilt_rad=(tilt * way[0], tilt * way[1])))
    np.testing.assert_allclose(strike.ball[:2], 8 * 0.3 * tilt * np.array(way), rtol=1e-4, atol=1e-12)


def test_an_error_of_restitution_changes_the_apex_as_it_says() -> None:
    v = np.sqrt(2 * G * 0.3)
    u = v * (1 - E) / (1 + E)
    for error in (-0.05, 0.02):
        e = E + error
        _, flight = landing(ballistics(), Disturbance(restitution=error))
        assert flight == pytest.approx(2 * (e * v + (1 + e) * u) / G, rel=1e-9)
    # To first order the paddle's speed would have to change by du/u = −2 de/(1 − e²).
    de = 1e-5
    speeds = [
        ballistics(restitution=E + side * de).exchange(0.3, 0.0, 0.0).strikes[0].speed_m_s for side in (-1, 1)
    ]
    assert (speeds[1] - speeds[0]) / (2 * de) / u == pytest.approx(-2 / (1 - E**2), rel=1e-6)


def test_errors_of_place_and_velocity_go_on_to_the_next_contact() -> None:
    strike, flight = landing(ballistics(), Disturbance(place_m=(0.01, -0.02), velocity_m_s=(0.1, 0.05)))
    np.testing.assert_allclose(strike.ball, [0.01 + 0.1 * flight, -0.02 + 0.05 * flight, 0.0], atol=1e-9)
    np.testing.assert_allclose(strike.ball_in[:2], [0.1, 0.05], atol=1e-9)


def test_after_a_disturbance_every_strike_still_sends_the_ball_to_the_next() -> None:
    made = ballistics(2)
    wrong = Disturbance(0.03, (0.02, -0.01), (0.004, 0.003), (0.05, -0.02))
    exchange = made.disturbed(0.3, 0.06, 0.0, wrong)
    assert exchange is not None
    for k in range(exchange.main, len(exchange.strikes) - 1):
        strike, after = exchange.strikes[k], exchange.strikes[k + 1]
        out = bounced(strike.ball_in, strike.normal, strike.speed_m_s)
        place, velocity, _, apex = flown(strike.ball, out)
        np.testing.assert_allclose(place[:2], after.ball[:2], atol=1e-7)
        np.testing.assert_allclose(velocity, after.ball_in, atol=1e-6)
        assert apex == pytest.approx(0.3, abs=1e-7)
    np.testing.assert_allclose(exchange.strikes[-1].ball, 0.0, atol=1e-12)


def test_a_tilt_that_throws_the_ball_downward_is_no_exchange() -> None:
    assert ballistics().disturbed(0.3, 0.0, 0.0, Disturbance(tilt_rad=(3.0, 0.0))) is None


def test_restitution_stays_between_nothing_and_all() -> None:
    table = Contact(E, restitution_at=((1.0, 0.9), (3.0, 0.1)))
    assert with_restitution(table, 0.3).restitution_at == ((1.0, 1.0), (3.0, pytest.approx(0.4)))
    assert with_restitution(table, -0.3).restitution_at == ((1.0, pytest.approx(0.6)), (3.0, 0.0))


# The steady bounce of an arm


@pytest.fixture(scope="module")
def seven() -> Court:
    return court_of(on_bench("bench7", (0.2,)))


@pytest.fixture(scope="module")
def bounce(seven: Court) -> Bounce:
    edges = [OffsetEdge(0.2, bearing, 0.1 + bearing, "", "", False) for bearing in (0.0, 0.02)]
    (found,) = bounces(seven, 0, (0.2,), edges)
    return found


def test_the_acceleration_at_impact_is_what_the_motion_has(seven: Court, bounce: Bounce) -> None:
    """Joints at constant velocity over the window: the paddle's normal speed by finite differences of its place."""
    player = seven.players[0]
    (exchange,) = seven.exchanges([Point(0.2, 0.0, 0.0)], 0)
    assert exchange is not None
    played = player.play([exchange], 0.0)
    arm, step = seven.kit.setting.arm, 1e-4
    z = [arm.jacobian(played.q[0] + k * step * played.v[0])[0][2] for k in (-1, 0, 1)]
    assert (z[2] - z[0]) / (2 * step) == pytest.approx(bounce.speed_m_s, rel=1e-5)
    assert (z[2] - 2 * z[1] + z[0]) / step**2 == pytest.approx(bounce.impact_m_s2, abs=1e-3)  # m/s²


def test_the_tolerances_of_a_bounce_by_their_formulas(seven: Court, bounce: Bounce) -> None:
    accept, g = seven.kit.setting.accept, 9.80665
    assert bounce.held and bounce.window_m_s2 == window_m_s2(E, g)
    assert bounce.window_m_s2[0] <= bounce.least_m_s2 <= bounce.impact_m_s2
    assert bounce.speed_per_restitution == pytest.approx(-2 / (1 - E**2))
    assert bounce.tilt_drift_m == pytest.approx(8 * 0.2 * accept.strike_tilt_error_rad, rel=1e-9)
    assert bounce.tilt_drift_m_per_deg == pytest.approx(8 * 0.2 * np.pi / 180, rel=1e-9)
    # A contact d above meets a ball slower by g d / v: the apex above the centre moves by (1 − e) d.
    d, v = accept.strike_position_m, np.sqrt(2 * g * 0.2)
    u = v * (1 - E) / (1 + E)
    out = E * np.sqrt(v**2 - 2 * g * d) + (1 + E) * u
    assert d + out**2 / (2 * g) - 0.2 == pytest.approx(bounce.place_apex_error_m, rel=0.02)
    assert bounce.offset_left_m == pytest.approx(0.1 - bounce.tilt_drift_m - d)
    assert bounce.face_left_m == pytest.approx(0.085 - bounce.tilt_drift_m - d)


def test_a_hit_changes_momentum_by_what_the_ball_takes(seven: Court, bounce: Bounce) -> None:
    mass, jump, held = impulse(seven, 0, (bounce,))
    _, _, jacobian = (np.asarray(x) for x in seven.kit.setting.arm.jacobian(seven.stances[0]))
    inverse = np.linalg.inv(seven.kit.setting.arm.inertia(seven.stances[0]))
    along = jacobian[2]
    assert mass == pytest.approx(1 / (along @ inverse @ along), rel=1e-9)
    ball = seven.kit.cell.ball
    assert ball is not None
    push = (1 + E) * bounce.approach_m_s / (1 / ball.mass_kg + 1 / mass)  # N s, two bodies
    np.testing.assert_allclose(jump, -inverse @ along * push, rtol=0.02, atol=1e-9)
    np.testing.assert_allclose(held, -along * push, rtol=0.02, atol=1e-9)


def test_the_gantrys_slides_have_no_acceleration_of_their_own_at_impact() -> None:
    court = court_of(on_gantry((0.2,)))
    (found,) = bounces(court, 0, (0.2,), ())
    assert found.impact_m_s2 == pytest.approx(0.0, abs=1e-9)
    assert found.least_m_s2 == found.window_m_s2[0]  # 40 m/s² are plenty
    assert np.isnan(found.offset_left_m)
