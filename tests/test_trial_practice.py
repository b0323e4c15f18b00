"""What anybody who has kept a ball up knows of laws, found again in trials on a gantry that hardly has limits.

Where no source is named it is common practice, no source.
"""

from __future__ import annotations

import math
from dataclasses import replace
from itertools import pairwise

import numpy as np
import pytest
from trial_case import CENTRE, G, Hand, Still, bout, gantry, slow_gantry, tried

from reach.cell import Array, Recovered, Sensor
from reach.evidence.trials import Run
from reach.trial.laws import Seen, Setup, Twist
from reach.trial.laws.mirror import Mirror
from reach.trial.laws.planning import Planning

E_OF_GANTRY = 0.7


class Copy(Hand):
    """The paddle goes at a share of the ball's vertical speed, against it."""

    def height(self, b: float, vz: float) -> tuple[float, float]:
        share = self.own["share"]
        return -share * b, -share * vz


class Leaning(Hand):
    """Leans against offset and lateral speed, by shares of what takes each away; less where the ball comes back."""

    def lean(self, place: Array, velocity: Array) -> Array:
        back = self.own.get("back", 1.0) if place @ velocity < 0 else 1.0
        position = back * self.own["position"] * place / (8 * self.setup.apex_m)
        return np.asarray(-position - self.own["speed"] * velocity / (2 * self.speed))


class DeadBand(Leaning):
    """Does not lean where the ball is nearer to the axis than a band."""

    def lean(self, place: Array, velocity: Array) -> Array:
        return super().lean(place, velocity) if np.hypot(*place) > self.own["band"] else np.zeros(2)


class Strong(Copy):
    """Leans by 20 degrees toward +x, whatever the ball does."""

    def lean(self, place: Array, velocity: Array) -> Array:
        return np.array([math.sin(math.radians(20)), 0.0])


class StrongAtCentre(Strong):
    """The same, and the paddle stays on the axis."""

    def twist(self, seen: Seen) -> Twist:
        _, _, vz, wx, wy, wz = super().twist(seen)
        x, y, _ = seen.paddle_m
        return 30 * (CENTRE[0] - x), 30 * (CENTRE[1] - y), vz, wx, wy, wz


class Sine(Hand):
    """A sinusoid, blind to the ball's height, that meets it at acceleration `a`, `late` seconds after the right time.

    Amplitude and phase by CHECKS 2.2: A w cos(phase) = v (1 - e)/(1 + e), a = -A w² sin(phase), w = 2 pi/T.
    """

    def __init__(self, setup: Setup):
        super().__init__(setup)
        self.w = math.pi * G / self.speed
        rise, bend = self.share * self.speed / self.w, -self.own["a"] / self.w**2
        self.amplitude, self.phase, self.t_s = math.hypot(rise, bend), math.atan2(bend, rise), 0.0

    def twist(self, seen: Seen) -> Twist:
        self.t_s = seen.t_s + self.setup.period_s - self.own["late"]
        return super().twist(seen)

    def height(self, b: float, vz: float) -> tuple[float, float]:
        angle = self.w * self.t_s + self.phase
        size = self.amplitude
        return size * (math.sin(angle) - math.sin(self.phase)), size * self.w * math.cos(angle)


# Along the vertical


@pytest.mark.parametrize("e", [0.5, 0.7, 0.8756])
def test_copying_the_balls_speed_one_to_one_runs_away(e: float) -> None:
    """u = |v|, so the ball leaves at (1 + 2e) v."""
    run = bout(tried(gantry(0.004), {"restitution": e}), Copy, share=1.0)
    c = run.contacts
    np.testing.assert_allclose(c.paddle_m_s, -c.ball_in[:, 2], rtol=1e-4)
    np.testing.assert_allclose(c.ball_out[:, 2], -(1 + 2 * e) * c.ball_in[:, 2], rtol=1e-4)
    assert run.outcome == "ran away" and not run.recovered
    assert c.apex_m[-1] > 3 * 0.2 and run.bounces == 1  # (1 + 2e)² is 4 or more


def test_too_small_a_gain_lets_the_ball_die() -> None:
    """A share k gives a speed of e + (1 + e) k times the last, below 1 for k below (1 - e)/(1 + e)."""
    run = bout(tried(gantry(0.004)), Copy, share=0.1)
    kept = E_OF_GANTRY + (1 + E_OF_GANTRY) * 0.1
    rises = [0.2 * kept ** (2 * k) for k in range(1, run.bounces + 1)]
    np.testing.assert_allclose(run.contacts.apex_m, rises, atol=5e-4)
    assert run.outcome == "died on the paddle" and not run.recovered
    assert run.bounces == math.ceil(math.log(0.03) / (2 * math.log(kept)))  # below 3 % of the wanted apex


def test_the_share_between_holds_the_ball_without_any_feedback_of_energy() -> None:
    run = bout(tried(gantry(0.004), bounces=10), Copy, share=(1 - E_OF_GANTRY) / (1 + E_OF_GANTRY))
    assert run.outcome == "held"
    np.testing.assert_allclose(run.contacts.apex_m, 0.2, atol=1e-3)


# Aside


def across(run: Run) -> Array:
    """Offsets (k,) along x, with their sign."""
    return np.asarray(run.contacts.ball[:, 0] - CENTRE[0])


def test_a_tilt_that_ignores_the_lateral_speed_overshoots_as_far_as_the_ball_was_off() -> None:
    """Offsets go as x'' = (2 - p) x' - x, which has no damping: the ball swings with the amplitude it began with."""
    run = bout(tried(gantry(0.004), bounces=16), Leaning, (0.03, 0.0), position=0.5, speed=0.0)
    x = across(run)
    peaks = [abs(b) for a, b, c in zip(x, x[1:], x[2:], strict=False) if abs(b) > max(abs(a), abs(c))]
    assert len(peaks) >= 3 and min(peaks) > 0.03
    signs = [a * b < 0 for a, b in pairwise(x)]
    assert sum(signs) >= 3
    by_hand = [0.03, 0.03 * (1 - 0.5)]
    for _ in range(5):
        by_hand.append(1.5 * by_hand[-1] - by_hand[-2])
    np.testing.assert_allclose(x[:7], by_hand, atol=0.002)  # the normal lags by some 1/60 s
    assert not run.recovered


def test_less_tilt_while_the_ball_comes_back_mends_it() -> None:
    start = (0.03, 0.0)
    same, less = (
        across(bout(tried(gantry(0.004), bounces=16), Leaning, start, position=0.5, speed=0.0, back=back))
        for back in (1.0, 0.1)
    )
    assert np.abs(same[-8:]).max() > 0.03
    assert np.abs(less[-8:]).max() < 0.5 * 0.03


def test_leaning_against_the_lateral_speed_stops_the_ball_at_the_axis() -> None:
    run = bout(tried(gantry(0.004), bounces=16), Leaning, (0.03, 0.0), position=0.5, speed=0.8)
    x = across(run)
    assert x.min() > -0.1 * 0.03 and np.abs(x[-6:]).max() < 2e-4


def test_no_tilt_near_the_axis_leaves_a_small_lasting_oscillation() -> None:
    cell = tried(gantry(0.004), bounces=32)
    given = {"position": 0.5, "speed": 0.4}
    free, banded = (bout(cell, DeadBand, (0.05, 0.0), band=band, **given) for band in (0.0, 0.01))
    assert free.outcome == banded.outcome == "held"
    assert 0.4 * 0.01 < banded.oscillation_m < 1.5 * 0.01
    assert free.oscillation_m < 0.1 * banded.oscillation_m
    later = np.abs(across(banded))
    assert later[-10:].max() > 0.5 * later[12:22].max()  # it does not go away
    size = np.sqrt(np.mean(banded.contacts.offset_m[-20:] ** 2))  # then_for = 20
    assert math.isclose(banded.oscillation_m, size, rel_tol=1e-12)


# Sights and air


class Settling(Leaning):
    """Takes half of the offset and most of the lateral speed away."""

    def lean(self, place: Array, velocity: Array) -> Array:
        return np.asarray(-0.5 * place / (8 * self.setup.apex_m) - 0.8 * velocity / (2 * self.speed))


class Trusting(Settling):
    """Takes every sight for new."""

    def twist(self, seen: Seen) -> Twist:
        return super().twist(seen._replace(ball_age_s=0.0))


def late(law: type, latency_s: float) -> Run:
    """A trial with that latency."""
    cell = tried(
        gantry(), sensor=Sensor(0.0, latency_s), bounces=8, recovered=Recovered(then_for=5, by_bounce=3)
    )
    return bout(cell, law, (0.03, 0.0))


def test_latency_makes_it_worse_for_a_law_that_takes_sights_for_new() -> None:
    """An old sight of a falling ball is too high, so the paddle is low, meets it late, and it rises less."""
    runs = [late(Trusting, s) for s in (0.0, 0.02, 0.04)]
    low = [float((0.2 - run.contacts.apex_m[-5:]).mean()) for run in runs]
    assert abs(low[0]) < 1e-4 and low[1] > 0.01 and low[2] > 2 * low[1]
    assert [run.recovered for run in runs] == [True, True, False]
    assert runs[0].oscillation_m < runs[1].oscillation_m < runs[2].oscillation_m


def test_latency_hardly_matters_to_a_law_that_works_out_where_the_ball_is() -> None:
    """All but the first moments of a flight, when the last sight is from before the contact."""
    now, later = (late(Settling, s).contacts for s in (0.0, 0.04))
    np.testing.assert_allclose(later.ball, now.ball, atol=2e-4)
    np.testing.assert_allclose(later.apex_m, now.apex_m, atol=2e-4)


def blind(law: type) -> type:
    """A law that is not told of the air."""

    class Blind(law):
        def __init__(self, setup: Setup):
            super().__init__(replace(setup, ball=replace(setup.ball, drag_coefficient=0.0)))

    return Blind


@pytest.mark.parametrize("law", [Mirror, Planning])
def test_drag_takes_height_unless_the_law_makes_up_for_it(law: type) -> None:
    cell = tried(gantry(), ball={"drag_coefficient": 0.45}, bounces=8)
    gains = dict(vars(law)["gains"])
    knows, not_knows = (bout(cell, one, **gains).contacts.apex_m[-3:] - 0.2 for one in (law, blind(law)))
    assert np.abs(knows).max() < 2e-3
    assert not_knows.max() < -5e-3


@pytest.mark.parametrize("apex_m", [0.264, 0.472])
def test_a_ball_with_drag_begins_at_any_apex(apex_m: float) -> None:
    assert (
        bout(tried(gantry(), ball={"drag_coefficient": 0.45}, apex_m=apex_m, bounces=1), Still).bounces == 1
    )


# Too far


def test_a_strong_tilt_with_a_fast_hit_sends_the_ball_aside_faster_than_up_to_be_caught() -> None:
    """20 degrees at 0.6 of the ball's speed: the push of (1 + e) 1.6 v cos stands 20 degrees off the vertical."""
    cell = tried(slow_gantry(x={"velocity": 1.0}, y={"velocity": 1.0}))
    run = bout(cell, Strong, share=0.6)
    (out,) = run.contacts.ball_out
    speed, angle = math.sqrt(2 * G * 0.2), math.radians(20)
    along = speed * math.cos(angle)
    paddle = run.contacts.paddle_m_s[0]
    assert math.isclose(out[0], (1 + E_OF_GANTRY) * (along + paddle) * math.sin(angle), rel_tol=1e-4)
    flight_s = 2 * out[2] / G
    assert out[0] * flight_s > 1.0 * flight_s + 0.085
    assert run.outcome in ("too fast to catch", "limit")  # the law went after it, at all the speed it had
    assert "the paddle had to cross at" in run.text
    needed = float(run.text.split("cross at ")[1].split(" m/s")[0])
    assert needed > math.sqrt(2.0)  # 1 m/s along x and along y: what the arm can do along the diagonal
    assert needed < out[0]


def test_the_same_ball_is_caught_by_an_arm_without_that_limit() -> None:
    run = bout(tried(gantry(0.004)), Strong, share=0.6)
    assert run.bounces >= 2 and run.limit == ""


def test_a_paddle_that_stays_on_the_axis_misses_the_ball_that_it_sent_aside() -> None:
    run = bout(tried(gantry(0.004)), StrongAtCentre, share=0.6)
    assert run.bounces == 1 and not run.recovered
    assert "goes down outside the paddle's edge" in run.text


def test_an_arm_that_could_have_caught_it_is_not_blamed_for_a_law_that_stays_on_the_axis() -> None:
    assert bout(tried(gantry()), StrongAtCentre, share=0.6).outcome == "missed past the edge"


# The passive window: −2g(1+e²)/(1+e)² < a < 0. S. Schaal, C. G. Atkeson, D. Sternad, "One-handed juggling: a dynamical
# approach to a rhythmic movement task", J. Motor Behavior 28(2) (1996) 165-183; the formula from memory (CHECKS 2.2).


def factors(e: float, a: float) -> np.ndarray:
    """Eigenvalues of the map from bounce to bounce, of time and speed (CHECKS 2.2)."""
    return np.linalg.eigvals([[1.0, (1 + e) / G], [(1 + e) * a, e * e + (1 + e) ** 2 * a / G]])


def fixed_apexes(e: float, a: float) -> tuple[float, float]:
    """The apex 0.2 m of the fixed point, and that of its twin, which is struck where the paddle slows down or gains.

    The same speed is met at minus the phase: higher by 2 A sin(phase) = 2 a/w² for a > 0.
    """
    w = math.pi * G / math.sqrt(2 * G * 0.2)
    return 0.2, 0.2 + 2 * a / w**2


def paddled(e: float, a: float, bounces: int, late_s: float, period_s: float = 0.002) -> Run:
    """A trial of the sinusoid."""
    return bout(tried(gantry(period_s), {"restitution": e}, bounces=bounces), Sine, a=a, late=late_s)


@pytest.mark.parametrize(("e", "a"), [(0.5, -3.0), pytest.param(0.8, -3.0, marks=pytest.mark.campaign)])
def test_a_blind_sinusoid_inside_the_window_keeps_the_ball_for_30_bounces(e: float, a: float) -> None:
    """An error of 5 ms in time goes away as |lambda| = e to the power of the bounces."""
    assert np.abs(factors(e, a)).max() == pytest.approx(e)
    run = paddled(e, a, 30, 0.005, 0.004)
    assert run.outcome == "held" and run.bounces == 30
    off = np.abs(run.contacts.apex_m - 0.2)
    assert off[:3].max() > 5e-4  # it was off
    assert off[-10:].max() < 5e-4
    spacing = np.diff(run.contacts.t_s[-10:])
    np.testing.assert_allclose(spacing, 2 * math.sqrt(2 * 0.2 / G), atol=1e-4)


def test_a_gaining_sinusoid_loses_the_rhythm_to_the_twin_that_slows_down() -> None:
    """a > 0: the error grows by lambda a bounce, until the ball meets the same sinusoid where it slows down."""
    e, a = 0.5, 2.0
    growth = float(np.abs(factors(e, a)).max())
    assert growth > 1.5
    run = paddled(e, a, 20, -0.001)
    _, twin = fixed_apexes(e, a)
    off = run.contacts.apex_m - 0.2
    assert (off[4] / off[1]) ** (1 / 3) == pytest.approx(growth, rel=0.08)
    assert off[-1] == pytest.approx(twin - 0.2, abs=5e-4) and twin - 0.2 > 0.016


@pytest.mark.campaign
def test_a_gaining_sinusoid_met_too_early_lets_the_ball_fall() -> None:
    """The other way from the same fixed point there is no twin: the ball loses height at every bounce."""
    run = paddled(0.5, 2.0, 9, 0.001)
    off = run.contacts.apex_m - 0.2
    growth = float(np.abs(factors(0.5, 2.0)).max())
    assert (off[4] / off[1]) ** (1 / 3) == pytest.approx(growth, rel=0.08)
    assert (np.diff(off) < 0).all() and off[-1] < -0.08


def test_a_sinusoid_that_slows_down_too_hard_loses_the_rhythm_to_every_other_bounce() -> None:
    e, a = 0.5, -13.0
    assert a < -2 * G * (1 + e * e) / (1 + e) ** 2
    both = factors(e, a)
    worst = float(both[np.argmax(np.abs(both))].real)
    assert worst < -1.5
    run = paddled(e, a, 12, 0.0005)
    off = run.contacts.apex_m - 0.2
    assert (off[5] / off[1]) ** (1 / 4) == pytest.approx(-worst, rel=0.05)
    assert (off[:-1] * off[1:] < 0).all() and abs(off[-1]) > 0.05
