"""The laws of control on a paddle that does what it is told, against published maps."""

from __future__ import annotations

import math
from collections.abc import Callable
from itertools import pairwise

import numpy as np
import pytest
from ideal_paddle import (
    BEARINGS,
    CENTRE,
    GRAVITY,
    NO_AIR,
    PERIOD_S,
    STILL,
    TABLE_TENNIS,
    Bounce,
    leaving,
    rally,
    setup_for,
)

from reach.ball import Air, Flight
from reach.cell import Ball, Contact, Trial
from reach.trial.laws import LAWS, Seen, asked, law_class, made
from reach.trial.laws.mirror import DEEPEST_M, FARTHEST_M, STEEPEST
from reach.trial.laws.planning import AGAIN_S, FROZEN_S, HOLD_S, MOVED_M, Planning, path


def trial_of(law: str, apex_m: float, **gains: float) -> Trial:
    """A trial on a paddle that does what it is told, which may be told to follow twice as fast as an arm."""
    return Trial(law=law, apex_m=apex_m, gains=tuple({"follow_per_s": 20.0, **gains}.items()))


def mirror(apex_m: float, **gains: float) -> Trial:
    return trial_of("mirror", apex_m, **gains)


def speed(apex_m: float) -> float:
    return math.sqrt(2 * GRAVITY * apex_m)


# Apex h, speed at contact v, period T, paddle speed for e = 0.7, 0.8, 0.8756 (textbook, from memory; recomputed with
# numpy).
APEXES = [
    (0.1, 1.4007, 0.2856, (0.2472, 0.1556, 0.0929)),
    (0.2, 1.9809, 0.4039, (0.3496, 0.2201, 0.1314)),
    (0.3, 2.4261, 0.4946, (0.4281, 0.2696, 0.1609)),
    (1.0, 4.4294, 0.9030, (0.7817, 0.4922, 0.2938)),
]


@pytest.mark.parametrize("law", LAWS)
@pytest.mark.parametrize(("apex", "v", "period", "strikes"), APEXES)
def test_every_law_strikes_as_the_apex_asks(
    law: str, apex: float, v: float, period: float, strikes: tuple[float, ...]
) -> None:
    for e, strike in zip((0.7, 0.8, 0.8756), strikes, strict=True):
        *_, before, last = rally(trial_of(law, apex), Contact(e), *leaving(apex), 6)
        assert -last.ball_in[2] == pytest.approx(v, abs=3e-4)
        assert last.paddle_m_s[2] == pytest.approx(strike, abs=3e-4)
        assert last.t_s - before.t_s == pytest.approx(period, abs=1e-4)
        assert last.off_m < 1e-6


def published(e: float, energy: float, apex: float, start: float, bounces: int) -> list[float]:
    """Speeds by v' = v [1 + (1 + e) k11 (eta* - v²/2)] (Bühler, Koditschek & Kindlmann 1994, from memory)."""
    eta = GRAVITY * apex
    k11 = energy / (2 * (1 + e) * eta)
    speeds = [start]
    for _ in range(bounces):
        speeds.append(speeds[-1] * (1 + (1 + e) * k11 * (eta - speeds[-1] ** 2 / 2)))
    return speeds[1:]


def mirrored(e: float, energy: float, apex: float, start: float, bounces: int) -> list[float]:
    """The same speeds from the law on the paddle."""
    place = leaving(apex)[0]
    found = rally(mirror(apex, energy=energy), Contact(e), place, (0.0, 0.0, start), bounces)
    return [bounce.ball_out[2] for bounce in found]


@pytest.mark.parametrize("e", [0.5, 0.8])
@pytest.mark.parametrize("energy", [0.5, 0.7, 1.0])
def test_the_mirror_law_makes_the_published_map(e: float, energy: float) -> None:
    start = 1.02 * speed(0.5)
    by_map, by_law = (f(e, energy, 0.5, start, 8) for f in (published, mirrored))
    np.testing.assert_allclose(by_law, by_map, atol=2e-4)
    assert by_law[-1] == pytest.approx(speed(0.5), abs=1e-3)


@pytest.mark.parametrize("e", [0.5, 0.8])
def test_a_dead_beat_gain_mends_the_energy_in_one_bounce(e: float) -> None:
    v = speed(0.5)
    for speeds in (published(e, 1.0, 0.5, 1.02 * v, 2), mirrored(e, 1.0, 0.5, 1.02 * v, 2)):
        # What is left is of second order: v' = v (1 + d)(1 - d - d²/2), so -1.5 d² v.
        assert speeds[0] - v == pytest.approx(-1.5 * 0.02**2 * v, abs=1e-4)
        assert speeds[1] == pytest.approx(v, abs=1e-4)


@pytest.mark.parametrize("energy", [0.5, 1.0, 1.5])
def test_the_slope_at_the_fixed_point_is_that_of_the_map(energy: float) -> None:
    v, step, e = speed(0.5), 0.02, 0.8
    for f in (published, mirrored):
        above, below = (f(e, energy, 0.5, v + side, 1)[0] for side in (step, -step))
        # 1 - 2 (1 + e) k11 eta*, with k11 = energy/(2 (1 + e) eta*)
        assert (above - below) / (2 * step) == pytest.approx(1 - energy, abs=0.01)


@pytest.mark.parametrize("e", [0.5, 0.8])
def test_the_energy_gain_has_its_published_limit(e: float) -> None:
    """A share 0.99 of the limit converges; 1.01 ends in an orbit of two bounces, 0.144 m/s off (check values' row)."""
    v = speed(0.5)
    assert published(e, 2 * 0.99, 0.5, 1.02 * v, 3000)[-1] == pytest.approx(v, abs=1e-9)
    down, up = sorted(s - v for s in published(e, 2 * 1.01, 0.5, 1.02 * v, 3000)[-2:])
    assert up == pytest.approx(0.144, abs=5e-4)

    by_map, by_law = (np.array(f(e, 2 * 0.99, 0.5, 1.02 * v, 40)) - v for f in (published, mirrored))
    np.testing.assert_allclose(by_law, by_map, atol=3e-3)
    # Near the limit errors alternate and shrink by some 0.98 a bounce.
    assert np.all(np.abs(by_law[2:]) < np.abs(by_law[:-2]))
    assert abs(by_law[39]) < 0.5 * abs(by_law[1])
    orbit = sorted(s - v for s in mirrored(e, 2 * 1.01, 0.5, v + 0.14, 60)[-2:])
    # The orbit's size goes as the root of what the gain is above 2, so 3 mm/s are a thousandth of the gain.
    assert orbit == pytest.approx([down, up], abs=3e-3)


def apexes(found: list[Bounce]) -> list[float]:
    return [bounce.apex_m for bounce in found]


def test_copying_the_ball_one_to_one_runs_away() -> None:
    e = 0.8
    found = rally(mirror(0.05, mirror=(1 + e) / (1 - e), energy=0.0), Contact(e), *leaving(0.05), 3)
    # u = |v|, so the ball leaves at (1 + 2 e) v and rises by the square of it.
    for low, high in pairwise(apexes(found)):
        assert high / low == pytest.approx((1 + 2 * e) ** 2, rel=0.02)


def test_striking_too_softly_lets_the_ball_die() -> None:
    found = rally(mirror(0.3, mirror=0.3, energy=0.0), Contact(0.8), *leaving(0.3), 15)
    ratio = 1.0 - (1 + 0.8) * (1 - 0.3) * 0.2 / 1.8  # e + (1 + e) 0.3 k10
    for high, low in pairwise(apexes(found)[:8]):
        assert low / high == pytest.approx(ratio**2, rel=0.01)


def test_a_tilt_blind_to_lateral_speed_never_settles() -> None:
    found = rally(mirror(0.3, tilt_velocity=0.0), Contact(0.8), *leaving(0.3, 0.03), 30)
    assert max(bounce.off_m for bounce in found[-8:]) > 0.03  # as far as at the start


def test_a_strong_tilt_sends_the_ball_too_far() -> None:
    found = rally(mirror(0.3, tilt_position=4.0), Contact(0.8), *leaving(0.3, 0.03), 12)
    assert max(bounce.off_m for bounce in found) > 5 * 0.03


def test_no_tilt_leaves_the_ball_where_it_is() -> None:
    found = rally(mirror(0.3, tilt_position=0.0, tilt_velocity=0.0), Contact(0.8), *leaving(0.3, 0.01), 12)
    assert [bounce.off_m for bounce in found] == pytest.approx([0.01] * 12, abs=1e-6)


def test_dead_beat_tilts_return_the_ball_and_then_stop_it() -> None:
    gains = {"tilt_position": 1.0, "tilt_velocity": 1.0}
    first, second, third, *_ = rally(mirror(0.3, **gains), Contact(0.8), *leaving(0.3, 0.03), 4)
    assert first.off_m == pytest.approx(0.03, abs=1e-6)
    assert second.off_m < 3e-4  # 2 v sin(theta) is not quite 2 v theta
    assert math.hypot(*second.ball_out[:2]) < 5e-3
    assert third.off_m < 2e-3


@pytest.mark.parametrize(("p", "d"), [(0.5, 0.8), (0.3, 0.5)])
def test_offset_and_lateral_speed_shrink_as_derived(p: float, d: float) -> None:
    found = rally(
        mirror(0.3, tilt_position=p, tilt_velocity=d), Contact(0.8), *leaving(0.3, 0.02, 0.0, 0.02), 4
    )
    states = np.array([(bounce.ball_m[0] - CENTRE[0], bounce.ball_in[0]) for bounce in found])
    step = np.linalg.solve(states[:2], states[1:3]).T
    assert np.linalg.det(step) == pytest.approx(1 - d, abs=0.01)
    assert np.trace(step) == pytest.approx(2 - p - d, abs=0.01)


@pytest.mark.parametrize("bearing", BEARINGS)
@pytest.mark.parametrize("e", [0.5, 0.8, 0.9])
def test_planning_returns_a_ball_in_one_bounce(e: float, bearing: float) -> None:
    found = rally(Trial(law="planning", apex_m=0.3), Contact(e), *leaving(0.3, 0.08, bearing), 4)
    assert found[0].off_m == pytest.approx(0.08, abs=1e-6)
    assert max(bounce.off_m for bounce in found[1:]) < 3e-5
    assert apexes(found) == pytest.approx([0.3] * 4, abs=2e-4)


def test_planning_returns_the_share_it_is_told() -> None:
    trial = Trial(law="planning", apex_m=0.3, gains=(("return_share", 0.5),))
    found = rally(trial, Contact(0.8), *leaving(0.3, 0.08), 4)
    assert [bounce.off_m for bounce in found] == pytest.approx([0.08, 0.04, 0.02, 0.01], abs=5e-4)


def test_planning_knows_drag_friction_and_a_table_of_restitution() -> None:
    contact = Contact(0.8, restitution_at=((1.0, 0.9), (5.0, 0.7)))
    found = rally(Trial(law="planning", apex_m=0.3), contact, *leaving(0.3, 0.08), 4, TABLE_TENNIS)
    assert max(bounce.off_m for bounce in found[1:]) < 1e-3
    assert apexes(found)[1:] == pytest.approx([0.3] * 3, abs=1e-3)
    # A face with friction leaves the ball a spin that nothing shows the law; the first return has none yet.
    rough = rally(
        Trial(law="planning", apex_m=0.3), Contact(0.8, friction=0.2), *leaving(0.3, 0.08), 12, TABLE_TENNIS
    )
    assert rough[1].off_m < 1e-3
    assert rough[-1].off_m < 5e-3


def test_the_mirror_law_reaches_its_apex_in_air() -> None:
    found = rally(mirror(0.3), Contact(0.8), *leaving(0.3, 0.02), 8, TABLE_TENNIS)
    assert found[0].apex_m < 0.3 - 0.01  # what drag takes from a start that does not know of it
    assert apexes(found)[-3:] == pytest.approx([0.3] * 3, abs=5e-4)


@pytest.mark.parametrize("law", LAWS)
def test_a_late_sensor_is_made_up_for(law: str) -> None:
    trial = trial_of(law, 0.3)
    prompt, late = (rally(trial, Contact(0.8), *leaving(0.3, 0.05, 1.0), 10, late=n) for n in (0, 20))
    for one, other in zip(prompt, late, strict=True):
        assert other.off_m == pytest.approx(one.off_m, abs=5e-4)
        assert other.apex_m == pytest.approx(one.apex_m, abs=5e-4)


def test_a_contact_not_yet_shown_is_planned_on_at_once() -> None:
    """Waiting for the sensor would leave less of a short flight, and need twice the acceleration."""

    def peak(late: int) -> float:
        sent: list[float] = []
        trial = Trial(law="planning", apex_m=0.05)
        rally(
            trial,
            Contact(0.8),
            *leaving(0.05, 0.03),
            5,
            late=late,
            watch=lambda _, twist: sent.append(twist[2]),
        )
        return float(np.abs(np.diff(sent)).max()) / PERIOD_S

    assert peak(60) == pytest.approx(peak(0), rel=0.2)


def swung(start: float, end: float, length_s: float) -> tuple[float, float]:
    """Peak acceleration and lowest place of a path from a speed to a speed at the same place."""
    along = path(0.0, length_s, ([0.0], [start], [0.0]), [0.0], [end])
    times = np.linspace(0.0, length_s, 20001)
    accelerations = [along.acceleration(t)[0] for t in times]
    return float(np.abs(accelerations).max()), float(min(along.at(t)[0][0] for t in times))


def test_the_direct_way_is_gentler_than_a_rest_between() -> None:
    """The figures of the docstring, for u = 1 m/s and T = 1 s."""
    peak, low = swung(1.0, 1.0, 1.0)
    assert (peak, -low) == pytest.approx((5.77, 0.147), abs=5e-3)
    peak, low = swung(0.0, 1.0, 0.5)
    assert peak == pytest.approx(7.9, abs=0.05)
    assert -low < 0.147


def test_a_strike_keeps_velocity_and_normal_around_contact() -> None:
    sent: list[tuple[float, tuple[float, ...]]] = []
    trial = Trial(law="planning", apex_m=0.3)
    first, *_ = rally(
        trial, Contact(0.8), *leaving(0.3, 0.08), 2, watch=lambda seen, twist: sent.append((seen.t_s, twist))
    )
    held = [np.array(twist) for t, twist in sent if first.t_s - HOLD_S <= t <= first.t_s]
    assert len(held) >= 4
    assert np.ptp(held, axis=0).max() < 1e-3  # m/s and rad/s
    earlier = [np.array(twist) for t, twist in sent if t < first.t_s - 0.1]
    assert np.ptp(earlier, axis=0).max() > 0.1


def plans(ball: Ball, wrong: Callable[[int], np.ndarray]) -> tuple[list[float], float, Planning]:
    """When one flight is planned for, its sights wrong by (6,) m and m/s at each period, and when contact is due."""
    setup = setup_for(Trial(law="planning"), Contact(0.8), ball)
    law = Planning(setup)
    flight = Flight(0.0, *map(np.array, leaving(0.3, 0.05)), np.zeros(3), Air.of(ball, (0.0, 0.0, -GRAVITY)))
    contact_s = flight.down_to(CENTRE[2])
    assert contact_s is not None
    times, seen_plan = [], None
    for k in range(int(contact_s / PERIOD_S)):
        x, y, z, vx, vy, vz = (np.array(flight.one(k * PERIOD_S)) + wrong(k)).tolist()
        law.twist(STILL._replace(t_s=k * PERIOD_S, ball_m=(x, y, z), ball_m_s=(vx, vy, vz)))
        if law.plan is not seen_plan:
            times.append(k * PERIOD_S)
            seen_plan = law.plan
    return times, contact_s, law


def aside(size_m: float) -> np.ndarray:
    return np.array([size_m, 0.0, 0.0, 0.0, 0.0, 0.0])


@pytest.mark.parametrize("ball", [NO_AIR, TABLE_TENNIS])
def test_a_flight_that_goes_as_predicted_is_planned_for_once(ball: Ball) -> None:
    assert plans(ball, lambda k: aside(0.0))[0] == [0.0]
    assert plans(ball, lambda k: aside((-1) ** k * MOVED_M / 3))[0] == [0.0]


def test_a_sight_that_wanders_is_planned_for_anew_but_not_always() -> None:
    times, contact_s, _ = plans(NO_AIR, lambda k: aside(0.2 * MOVED_M * k))
    assert len(times) > 10
    assert min(np.diff(times)) > AGAIN_S - PERIOD_S / 2
    assert times[-1] < contact_s - FROZEN_S


def test_noise_of_the_sights_averages_out() -> None:
    """A contact is off by what one sight is off, over the root of their number, and by what the velocity adds."""
    rng = np.random.default_rng(0)
    places = []
    for _ in range(12):
        noise = rng.normal(size=(600, 6)) * np.repeat([0.003, 0.03], 3)
        _, contact_s, law = plans(NO_AIR, lambda k, noise=noise: noise[k])
        assert law.mean is not None
        left = contact_s - int(contact_s / PERIOD_S) * PERIOD_S
        places.append(law.mean[0] + law.mean[3] * left - 0.05 - CENTRE[0])
    # 490 sights: places off by 3 mm, and velocities by 30 mm/s over the part of the flight that each is carried on.
    expected = float(np.hypot(0.003, 0.03 * 0.495 / math.sqrt(3)) / math.sqrt(490))
    assert np.std(places) == pytest.approx(expected, rel=0.5)


def test_a_long_flight_has_a_rest_before_the_stroke() -> None:
    sights: list[Seen] = []
    trial = Trial(law="planning", apex_m=2.0)
    found = rally(trial, Contact(0.8), *leaving(2.0, 0.08), 3, watch=lambda seen, _: sights.append(seen))
    assert max(bounce.off_m for bounce in found[1:]) < 5e-4
    wait = [s for s in sights if found[0].t_s + 0.52 < s.t_s < found[1].t_s - 0.52]
    assert len(wait) > 100
    for seen in wait:
        assert math.dist(seen.paddle_m, (*CENTRE[:2], CENTRE[2] - NO_AIR.radius_m)) < 1e-3
        assert max(map(abs, (*seen.paddle_m_s, *seen.paddle_rad_s))) < 5e-3


def test_planning_goes_to_rest_where_no_ball_comes() -> None:
    law = made(law_class(Trial(law="planning")), setup_for(Trial(law="planning"), Contact(0.8)))
    lost = STILL._replace(ball_m=(0.5, 0.1, 0.2), ball_m_s=(0.0, 0.0, -1.0), paddle_m=(0.5, 0.1, 0.8))
    height, rise = 0.8, 0.0
    for k in range(1500):
        seen = lost._replace(t_s=k * PERIOD_S, paddle_m=(0.5, 0.1, height), paddle_m_s=(0.0, 0.0, rise))
        twist = asked(law, seen)
        height, rise = height + (rise + twist[2]) / 2 * PERIOD_S, twist[2]
        assert twist == pytest.approx((0, 0, twist[2], 0, 0, 0), abs=1e-12)
    assert height == pytest.approx(0.88, abs=1e-6)
    assert rise == pytest.approx(0.0, abs=1e-6)


def test_the_mirror_law_keeps_its_reference_near_whatever_it_sees() -> None:
    setup = setup_for(mirror(0.3, follow_per_s=1.0, turn_per_s=1.0), Contact(0.5))
    law = made(law_class(Trial()), setup)
    far = [(50.0, -40.0, 30.0), (0.5, 0.1, -30.0), (9.0, 0.1, 0.9)]
    for place in far:
        vx, vy, vz, wx, wy, _ = asked(law, STILL._replace(ball_m=place))
        # With gains of 1/s the twist is the way to the reference: radius and tilt add their part.
        assert math.hypot(vx, vy) <= math.sqrt(2) * FARTHEST_M + NO_AIR.radius_m
        assert abs(vz) <= DEEPEST_M + NO_AIR.radius_m
        assert math.hypot(wx, wy) <= STEEPEST + 1e-12
    *_, wx, wy, _ = asked(law, STILL._replace(ball_m_s=(9.0, -9.0, 0.0)))
    assert math.hypot(wx, wy) == pytest.approx(STEEPEST, abs=1e-12)


@pytest.mark.parametrize("law", LAWS)
def test_a_law_answers_the_same_twice(law: str) -> None:
    trial, start = Trial(law=law), leaving(0.3, 0.04, 2.0, 0.05)
    assert rally(trial, Contact(0.8), *start, 5) == rally(trial, Contact(0.8), *start, 5)
