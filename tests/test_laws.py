"""Laws of control on a paddle that does what it is told, against published maps; and a user's law with all its faults."""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise
from pathlib import Path
from typing import get_args

import numpy as np
import pytest
from ideal_paddle import (
    BEARINGS,
    CENTRE,
    GRAVITY,
    NO_AIR,
    PERIOD_S,
    TABLE_TENNIS,
    Bounce,
    leaving,
    rally,
    setup_for,
)
from scipy.optimize import brentq

from reach.cell import Contact, LawName, Trial
from reach.errors import InputError
from reach.trial.laws import LAWS, Law, LawFault, Seen, asked, gains_of, law_class, made
from reach.trial.laws.mirror import DEEPEST_M, FARTHEST_M, STEEPEST
from reach.trial.laws.planning import HOLD_S, path

OWN_LAW = Path(__file__).parents[1] / "examples" / "wear_bench" / "own_law.py"
STILL = Seen(
    0.0, (*CENTRE[:2], 1.2), (0.0,) * 3, 0.0, (0.5, 0.1, 0.88), (0.0, 0.0, 1.0), (0.0,) * 3, (0.0,) * 3, 0
)


def mirror(apex_m: float, **gains: float) -> Trial:
    return Trial(law="mirror", apex_m=apex_m, gains=tuple(gains.items()))


def speed(apex_m: float) -> float:
    return math.sqrt(2 * GRAVITY * apex_m)


# Vertical: published map and figures ---------------------------------------------------------------------------------

# Apex h, speed at contact v, period T, paddle speed for e = 0.7, 0.8, 0.8756 (textbook, from memory; recomputed with numpy).
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
        *_, before, last = rally(Trial(law=law, apex_m=apex), Contact(e), *leaving(apex), 6)
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
    """A share 0.99 of the limit converges; 1.01 ends in an orbit of two bounces, 0.144 m/s off (row of the check values)."""
    v = speed(0.5)
    assert published(e, 2 * 0.99, 0.5, 1.02 * v, 3000)[-1] == pytest.approx(v, abs=1e-9)
    down, up = sorted(s - v for s in published(e, 2 * 1.01, 0.5, 1.02 * v, 3000)[-2:])
    assert up == pytest.approx(0.144, abs=5e-4)

    errors = np.abs(np.array(mirrored(e, 2 * 0.99, 0.5, 1.02 * v, 100)) - v)
    # Near the limit errors alternate and shrink by 0.98 a bounce, and a little faster while they are large.
    assert errors[99] < 0.25 * errors[0]
    assert np.all(errors[2::2] < errors[:-2:2]) and np.all(errors[3::2] < errors[1:-2:2])
    orbit = sorted(s - v for s in mirrored(e, 2 * 1.01, 0.5, v + 0.13, 100)[-2:])
    # The orbit's size goes as the root of what the gain is above 2, so 3 mm/s are a thousandth of the gain.
    assert orbit == pytest.approx([down, up], abs=3e-3)


# What is commonly known to go wrong (common practice, no source) ------------------------------------------------------


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


# Sideways ------------------------------------------------------------------------------------------------------------


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
    assert max(bounce.off_m for bounce in found[1:]) < 5e-4
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
    trial = Trial(law=law, apex_m=0.3)
    prompt, late = (rally(trial, Contact(0.8), *leaving(0.3, 0.05, 1.0), 10, late=n) for n in (0, 20))
    for one, other in zip(prompt, late, strict=True):
        assert other.off_m == pytest.approx(one.off_m, abs=5e-4)
        assert other.apex_m == pytest.approx(one.apex_m, abs=5e-4)


# The planned path ----------------------------------------------------------------------------------------------------


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


# Passive bounce on a sinusoid ----------------------------------------------------------------------------------------

OMEGA = 4 * math.pi  # 2 Hz, of the check values


def passive(e: float, acceleration: float) -> np.ndarray:
    """Jacobian in (t, v) of the ball on a table A sin(w t), one bounce a cycle, by central differences of the exact flight."""
    v = GRAVITY * math.pi / OMEGA
    along, across = (
        (1 - e) / (1 + e) * v / OMEGA,
        -acceleration / OMEGA**2,
    )  # A cos, A sin of the contact's phase
    size, phase = math.hypot(along, across), math.atan2(across, along)

    def bounced(state: np.ndarray) -> np.ndarray:
        t, up = state

        def gap(s: float) -> float:
            table = size * (math.sin(OMEGA * (t + s)) - math.sin(OMEGA * t))
            return float(up * s - GRAVITY * s * s / 2 - table)

        fly = brentq(gap, 0.6 * 2 * v / GRAVITY, 1.4 * 2 * v / GRAVITY, xtol=1e-14)
        table = size * OMEGA * math.cos(OMEGA * (t + fly))
        return np.array((t + fly, -e * (up - GRAVITY * fly) + (1 + e) * table))

    at = np.array((phase / OMEGA, v))
    np.testing.assert_allclose(bounced(at), at + (2 * math.pi / OMEGA, 0.0), atol=1e-9)
    steps = 1e-5 * np.eye(2)
    return np.column_stack([(bounced(at + step) - bounced(at - step)) / 2e-5 for step in steps])


def growth(e: float, acceleration: float) -> float:
    return float(np.abs(np.linalg.eigvals(passive(e, acceleration))).max())


# e, least acceleration at impact, upper end of the band where |lambda| = e; Schaal, Atkeson & Sternad 1996, Dijkstra et al.
# 2004 (formulas from memory; recomputed by differences).
WINDOWS = [(0.5, -10.900, -1.090), (0.8, -9.931, -0.121), (0.7, -10.116, -0.306), (0.9, -9.837, -0.027)]
GROWTHS = [
    (0.5, ((-11.009, 1.033), (-10.791, 0.966), (-9.81, 0.5), (-3.0, 0.5), (0.05, 1.015))),
    (0.8, ((-10.03, 1.081), (-9.832, 0.880), (-3.0, 0.8))),
]


@pytest.mark.parametrize(("e", "least", "fastest"), WINDOWS)
def test_a_passive_bounce_is_stable_in_the_published_window(e: float, least: float, fastest: float) -> None:
    assert brentq(lambda a: growth(e, a) - 1, least - 0.2, least + 0.05) == pytest.approx(least, abs=1e-3)
    assert growth(e, -1e-3) < 1 < growth(e, 1e-3)
    assert growth(e, 1.02 * fastest) == pytest.approx(e, abs=1e-4)
    assert growth(e, 0.95 * fastest) > e + 1e-3
    assert np.linalg.det(passive(e, -3.0)) == pytest.approx(e * e, abs=1e-5)


@pytest.mark.parametrize(("e", "rows"), GROWTHS)
def test_a_passive_bounce_grows_as_tabled(e: float, rows: tuple[tuple[float, float], ...]) -> None:
    for acceleration, expected in rows:
        # Where the two eigenvalues meet they go as the root of the differences' error.
        assert growth(e, acceleration) == pytest.approx(expected, abs=2e-3)


def holmes(alpha: float, gamma: float, state: tuple[float, float]) -> tuple[float, float]:
    """P. J. Holmes, J. Sound Vib. 84 (1982) 173 (from memory): a table that moves and is not displaced."""
    phase, v = state
    return phase + v, alpha * v - gamma * math.cos(phase + v)


@pytest.mark.parametrize(("alpha", "low", "high"), [(0.5, 3.14159, 4.34392), (0.8, 1.25664, 3.81302)])
def test_the_map_of_holmes_has_a_window_of_its_own(alpha: float, low: float, high: float) -> None:
    def left(gamma: float) -> float:
        """How far from one bounce a cycle after 3000 bounces, from next to it."""
        cosine = max(-1.0, -2 * math.pi * (1 - alpha) / gamma)
        state = (-math.acos(cosine), 2 * math.pi + 1e-4)
        for _ in range(3000):
            state = holmes(alpha, gamma, state)
        return abs(state[1] - 2 * math.pi)

    assert low == pytest.approx(2 * math.pi * (1 - alpha), abs=1e-5)
    assert left(1.005 * low) < 1e-6 > left(0.995 * high)
    assert left(0.995 * low) > 1e-2 < left(1.005 * high)
    a, b = (holmes(alpha, high, (-2.0 + d, 6.0)) for d in (1e-5, -1e-5))
    c, d = (holmes(alpha, high, (-2.0, 6.0 + d)) for d in (1e-5, -1e-5))
    slopes = np.array([np.subtract(a, b), np.subtract(c, d)]) / 2e-5
    assert np.linalg.det(slopes) == pytest.approx(alpha, abs=1e-6)  # and not its square


def test_the_two_windows_are_not_the_same() -> None:
    """Holmes: stable down to -g; with the table's own motion, farther."""
    e, acceleration = 0.5, -10.4
    assert growth(e, acceleration) < 1
    turn = 2 * (1 + e) * acceleration / GRAVITY  # gamma sin(phase) of that acceleration
    in_holmes = np.linalg.eigvals(np.array([[1.0, 1.0], [turn, e + turn]]))
    assert np.abs(in_holmes).max() > 1


# Registry, gains, and the user's own law -----------------------------------------------------------------------------


def test_the_laws_are_those_a_cell_can_name() -> None:
    assert tuple(LAWS) == get_args(LawName)
    for name, law in LAWS.items():
        assert law_class(Trial(law=name)) is law and issubclass(law, Law)
        assert gains_of(law, Trial(law=name), "cell.toml") == law.gains


@pytest.mark.parametrize("law", LAWS)
def test_a_law_answers_the_same_twice(law: str) -> None:
    trial, start = Trial(law=law), leaving(0.3, 0.04, 2.0, 0.05)
    assert rally(trial, Contact(0.8), *start, 5) == rally(trial, Contact(0.8), *start, 5)


def test_a_cell_sets_gains_and_no_others() -> None:
    trial = mirror(0.3, energy=1.0)
    assert gains_of(LAWS["mirror"], trial, "cell.toml") == {**LAWS["mirror"].gains, "energy": 1.0}
    trial = replace(trial, gains=(("enrgy", 1.0), ("zzz", 2.0)))
    with pytest.raises(InputError) as caught:
        gains_of(LAWS["mirror"], trial, "cell.toml")
    first, second = map(str, caught.value.faults)
    told = 'cell.toml: trial.gains.enrgy: "enrgy" is no gain of the law "mirror"; did you mean "energy"?'
    assert first == told
    assert second.startswith('cell.toml: trial.gains.zzz: "zzz" is no gain of the law "mirror"; known here: ')
    with pytest.raises(
        InputError, match=r'cell.toml: trial.law: there is no law "miror"; did you mean "mirror"'
    ):
        law_class(Trial(law="miror"), "cell.toml")


def own(file: Path, text: str, name: str = "Mine") -> Trial:
    file.write_text(text, encoding="utf-8")
    return Trial(law=name, law_file=str(file))


@pytest.mark.parametrize("bearing", BEARINGS)
def test_the_example_of_an_own_law_keeps_a_ball_up(bearing: float) -> None:
    trial = Trial(law="OwnLaw", law_file=str(OWN_LAW), apex_m=0.3)
    found = rally(trial, Contact(0.85, friction=0.2), *leaving(0.3, 0.08, bearing), 30)
    assert len(found) == 30
    for bounce in found[10:]:
        assert (
            bounce.off_m < 0.02 and abs(bounce.apex_m - 0.3) < 0.03
        )  # as [trial.recovered] has it by default


HEAD = "import dataclasses\n\n\nclass Mine:\n    def __init__(self, setup):\n        self.setup = setup\n\n"
LOADS = [
    ("class Other:\n    pass\n", "line 1", 'there is no class "Mine"; known here: "Other"'),
    ("class Mind:\n    pass\n", "line 1", 'there is no class "Mine"; did you mean "Mind"?'),
    ("x = 1\n", "line 1", 'there is no class "Mine"; it has no class at all'),
    (
        "x = 1\n\nMine = 3\n",
        "line 3",
        '"Mine" is no class but of type int; name a class with a method "twist"',
    ),
    ("\n\nclass Mine:\n    gains = {}\n", "line 3", '"Mine" has no method "twist(self, seen)"'),
    ("x = 1\ny = 1 / 0\n", "line 2", "fails while it is loaded: ZeroDivisionError: division by zero"),
    ("x = 1\nclass Mine(:\n", "line 2", "fails while it is loaded: SyntaxError: "),
    ("import sys\nsys.exit(3)\n", "line 2", "fails while it is loaded: SystemExit: 3"),
    ("import no_such_module_at_all\n", "line 1", "fails while it is loaded: ModuleNotFoundError: "),
]


@pytest.mark.parametrize(("text", "where", "what"), LOADS)
def test_a_file_without_the_law_is_bad_input(tmp_path: Path, text: str, where: str, what: str) -> None:
    trial = own(tmp_path / "mine.py", text)
    with pytest.raises(InputError) as caught:
        law_class(trial)
    (fault,) = caught.value.faults
    assert (fault.file, fault.where) == (trial.law_file, where)
    assert fault.what.startswith(what)


def test_a_file_that_is_not_there_is_bad_input(tmp_path: Path) -> None:
    with pytest.raises(InputError, match=r"gone\.py: line 1: fails while it is loaded: FileNotFoundError"):
        law_class(Trial(law="Mine", law_file=str(tmp_path / "gone.py")))


@pytest.mark.parametrize("gains", ["[1.0]", "{1: 2.0}", "{'a': 'b'}", "{'a': float('nan')}", "{'a': True}"])
def test_gains_that_are_no_numbers_by_name_are_bad_input(tmp_path: Path, gains: str) -> None:
    text = f"x = 1\nclass Mine:\n    gains = {gains}\n    def twist(self, seen):\n        return (0.0,) * 6\n"
    trial = own(tmp_path / "mine.py", text)
    with pytest.raises(InputError, match=r"mine\.py: line 2: .*\"gains\""):
        gains_of(law_class(trial), trial, "cell.toml")


def test_a_law_is_loaded_as_it_stands_and_leaves_nothing_behind(tmp_path: Path) -> None:
    text = HEAD + "    def twist(self, seen):\n        return [0, 0, {0}, 0, 0, 0]\n"
    # Postponed annotations make dataclasses look their module up, which must be there.
    text = (
        "from __future__ import annotations\n"
        + text
        + "\n\n@dataclasses.dataclass\nclass Kept:\n    x: int = 0\n"
    )
    for value in (1, 2):
        trial = own(tmp_path / "mine.py", text.replace("{0}", str(value)))
        law = made(law_class(trial), setup_for(trial, Contact(0.8)))
        assert asked(law, STILL) == (0.0, 0.0, value, 0.0, 0.0, 0.0)
    assert [entry.name for entry in tmp_path.iterdir()] == ["mine.py"]
    with pytest.raises(InputError, match='"speed" is no gain of the law "Mine"; it has none'):
        gains_of(law_class(trial), replace(trial, gains=(("speed", 1.0),)), "cell.toml")


@pytest.mark.parametrize(
    "answer",
    ["(1, 2.0, 3, 4, 5, 6)", "[1, 2, 3, 4, 5, 6]", "np.arange(1.0, 7.0)", "np.arange(1, 7, dtype='f4')"],
)
def test_six_finite_numbers_are_an_answer(tmp_path: Path, answer: str) -> None:
    trial = own(
        tmp_path / "mine.py",
        f"import numpy as np\n{HEAD}    def twist(self, seen):\n        return {answer}\n",
    )
    twist = asked(made(law_class(trial), setup_for(trial, Contact(0.8))), STILL)
    assert twist == (1, 2, 3, 4, 5, 6)
    assert {type(part) for part in twist} == {float}


BAD = [
    "None",
    "1.0",
    "(0.0,) * 5",
    "[0.0] * 7",
    "['0.0'] * 6",
    "'000000'",
    "np.zeros((6, 1))",
    "np.zeros((1, 6))",
]
BAD += [
    "np.full(6, np.nan)",
    "(0, 0, 0, 0, 0, float('inf'))",
    "np.zeros(6, complex)",
    "np.array(['0'] * 6)",
    "object()",
]


@pytest.mark.parametrize("answer", BAD)
def test_anything_else_is_a_fault_with_its_line(tmp_path: Path, answer: str) -> None:
    trial = own(
        tmp_path / "mine.py",
        f"import numpy as np\n{HEAD}    def twist(self, seen):\n        return {answer}\n",
    )
    law = made(law_class(trial), setup_for(trial, Contact(0.8)))
    with pytest.raises(LawFault) as caught:
        asked(law, STILL)
    assert caught.value.text.startswith("twist must be six finite numbers, got ")
    assert caught.value.text.endswith(" (mine.py line 9)")
    assert caught.value.line == 9


def test_what_a_law_raises_is_told_with_its_line(tmp_path: Path) -> None:
    body = "    def twist(self, seen):\n        return self.inner()\n\n    def inner(self):\n"
    for statement, told in (
        ("raise ValueError('bad gain')", "ValueError: bad gain (mine.py line 12)"),
        ("return [].pop()", "IndexError: pop from empty list (mine.py line 12)"),
        ("raise SystemExit", "SystemExit (mine.py line 12)"),
        (
            "return dataclasses.replace(1)",
            "TypeError: replace() should be called on dataclass instances (mine.py line 12)",
        ),
    ):
        trial = own(tmp_path / "mine.py", f"\n{HEAD}{body}        {statement}\n")
        with pytest.raises(LawFault) as caught:
            asked(made(law_class(trial), setup_for(trial, Contact(0.8))), STILL)
        assert str(caught.value) == caught.value.text == told
        assert caught.value.line == 12
    trial = own(
        tmp_path / "mine.py",
        HEAD.replace("self.setup = setup", "self.x = setup.nothing") + body + "        pass\n",
    )
    with pytest.raises(LawFault, match=r"AttributeError: .*nothing.* \(mine\.py line 6\)"):
        made(law_class(trial), setup_for(trial, Contact(0.8)))
