"""What becomes of a trial: laws that fail, limits that lose the ball, what counts as recovered, the verdict."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from trial_case import CENTRE, G, Hand, Still, bout, contacts_of, gantry, ground_of, slow_gantry, tried

from reach.cell import Array, Cell, Drive, Recovered, Sensor, Starts
from reach.qp.problem import QpBlock
from reach.trial.answer import answer
from reach.trial.bout import play, recovered_at
from reach.trial.laws import Seen, Setup, Twist
from reach.trial.starts import Start
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED


class Leaning(Hand):
    """Brings the ball back to the axis."""

    def lean(self, place: Array, velocity: Array) -> Array:
        return np.asarray(-0.5 * place / (8 * self.setup.apex_m) - 0.8 * velocity / (2 * self.speed))


# Laws that fail


def failing(how: Callable[[], Any]) -> type:
    """A law that is good for one bounce."""

    class Failing(Hand):
        def twist(self, seen: Seen) -> Any:
            return how() if seen.contacts else super().twist(seen)

    return Failing


def no_idea() -> None:
    raise ValueError("no idea")


@pytest.mark.parametrize(
    ("how", "words"),
    [
        (no_idea, "ValueError: no idea"),
        (
            lambda: (0.0, 0.0, math.nan, 0.0, 0.0, 0.0),
            "six finite numbers, got (0.0, 0.0, nan, 0.0, 0.0, 0.0)",
        ),
        (lambda: np.full(6, np.inf), "six finite numbers, got array([inf"),
        (lambda: (0.0,) * 5, "of shape (5,)"),
        (lambda: np.zeros((1, 6)), "of shape (1, 6)"),
        (lambda: None, "got None"),
        (lambda: "uphill", "got of type str"),
        (lambda: 1 / 0, "ZeroDivisionError"),
    ],
    ids=["raises", "nan", "inf", "five", "matrix", "None", "text", "by zero"],
)
def test_a_law_that_fails_ends_its_trial_with_the_reason_and_the_line(
    how: Callable[[], Any], words: str
) -> None:
    run = bout(tried(gantry(), bounces=3), failing(how))
    assert (run.outcome, run.recovered, run.bounces) == ("law failed", False, 1)
    assert words in run.text and f"({Path(__file__).name} line " in run.text
    assert run.text.startswith("the law failed at 0.40")  # seconds: the first bounce
    assert run.failed_steps == 0 and run.limit == run.joint == ""


def test_a_law_that_cant_be_made_fails_every_trial() -> None:
    class Unmade(Still):
        def __init__(self, setup: Setup):
            raise KeyError("gone")

        def twist(self, seen: Seen) -> Twist:
            return super().twist(seen)

    run = bout(tried(gantry()), Unmade)
    assert (run.outcome, run.bounces, run.ended_s, run.recovered) == ("law failed", 0, 0.0, False)
    assert "can't be made" in run.text and "'gone'" in run.text and Path(__file__).name in run.text
    assert len(run.contacts.t_s) == 0 and run.contacts.ball.shape == (0, 3) and run.motion is None


def test_the_line_is_told_too_where_the_law_has_its_twist_from_another_file() -> None:
    class Unmade(Hand):
        def __init__(self, setup: Setup):
            raise KeyError("gone")

    assert Path(__file__).name in bout(tried(gantry()), Unmade).text


def test_a_law_that_cant_be_made_a_second_time_fails_its_trial(monkeypatch: pytest.MonkeyPatch) -> None:
    """The second time comes where a step was found bad afterwards."""
    made: list[int] = []

    class Once(Leaning):
        def __init__(self, setup: Setup):
            made.append(1)
            if len(made) > 1:
                raise ValueError("only once")
            super().__init__(setup)

    monkeypatch.setattr(QpBlock, "first_bad", lambda self, slots: slots[0])
    assert bout(tried(slow_gantry(x={"acceleration": 5.0})), Once, (0.04, 0.0)).outcome == "law failed"


@pytest.mark.parametrize("speed", [1e4, 1e100, 1e200])
def test_an_answer_beyond_all_measure_is_the_laws_failure(speed: float) -> None:
    run = bout(tried(gantry(), bounces=3), failing(lambda: (0.0, 0.0, speed, 0.0, 0.0, 0.0)))
    assert run.outcome == "law failed" and "within ±1000 m/s and rad/s" in run.text


def test_the_greatest_twist_that_may_be_asked_is_no_trouble_to_the_solver() -> None:
    for twist in ((1000.0,) * 6, (-1000.0, 1000.0, -1000.0, -1000.0, 1000.0, 1000.0)):
        run = bout(tried(slow_gantry(), bounces=3), failing(lambda twist=twist: twist))
        assert run.outcome not in ("law failed", "solver failed") and run.failed_steps == 0


# Limits and drives that lose the ball


@pytest.mark.parametrize(
    ("own", "limit", "outcome"),
    [
        ({"velocity": 0.2}, "velocity", "too fast to catch"),
        ({"acceleration": 1.0}, "acceleration", "limit"),
    ],
)
def test_a_ball_lost_to_a_slow_joint_names_limit_and_joint(
    own: dict[str, float | None], limit: str, outcome: str
) -> None:
    run = bout(tried(slow_gantry(x=own)), Leaning, lateral=(0.8, 0.0))
    assert (run.outcome, run.limit, run.joint, run.recovered) == (outcome, limit, "x", False)
    assert outcome != "limit" or f"the {limit} of x held the paddle back" in run.text
    assert bout(tried(gantry(), bounces=6), Leaning, lateral=(0.8, 0.0)).outcome == "held"


@pytest.mark.parametrize("joint", ["x", "y"])
def test_the_joint_named_is_the_one_along_which_the_ball_flies(joint: str) -> None:
    cell = tried(slow_gantry(x={"velocity": 0.2}, y={"velocity": 0.2}))
    run = bout(cell, Leaning, lateral=(0.8, 0.0) if joint == "x" else (0.0, 0.8))
    assert (run.limit, run.joint) == ("velocity", joint)


def test_a_ball_that_dies_for_want_of_acceleration_names_it() -> None:
    """3 m/s² can't reverse the paddle's 0.35 m/s within a flight that gets shorter and shorter."""
    run = bout(tried(slow_gantry(z={"acceleration": 3.0})), Hand)
    assert run.outcome == "died on the paddle"
    assert (run.limit, run.joint) == ("acceleration", "z")


def lagging(drive: Drive | None) -> Cell:
    """The gantry behind a drive."""
    return tried(replace(gantry(), drive=drive), bounces=6)


def test_a_drive_that_lags_a_little_meets_the_ball_a_little_lower() -> None:
    """The reference gains speed at k g, k = (1 - e)/(1 + e), so joints some s behind run k g s slower; the law's
    feedback makes up for that with an error of k g s/60 in height, at b below the centre with b + k b of it."""
    lag_s, k = 0.004, (1 - 0.7) / (1 + 0.7)
    low = k * G * lag_s / Hand.follow / (1 + k)
    plain, behind = (bout(lagging(drive), Hand) for drive in (None, Drive(delay_s=0.002, lag_s=0.002)))
    assert plain.outcome == behind.outcome == "held"
    assert np.mean(plain.contacts.ball[:, 2] - behind.contacts.ball[:, 2]) == pytest.approx(low, rel=0.05)


def test_a_drive_that_lags_more_than_the_law_bears_loses_the_ball() -> None:
    assert bout(lagging(Drive(0.03, 0.03)), Hand).outcome in ("ran away", "died on the paddle")


def test_a_ball_that_flies_off_is_too_fast_to_catch_where_no_arm_of_that_speed_could_be_there() -> None:
    """At 3 m/s aside it is 1.21 m off at the end of its flight of 0.404 s; less the edge, 2.79 m/s."""
    slow = tried(slow_gantry(x={"velocity": 1.0}, y={"velocity": 1.0}))
    run = bout(slow, Still, lateral=(3.0, 0.0))
    flight_s = 2 * math.sqrt(2 * 0.2 / G)
    assert run.outcome == "too fast to catch"
    assert f"had to cross at {3.0 - 0.085 / flight_s:.2f} m/s, it can do 0.98" in run.text  # 1 m/s less 2 %
    assert bout(tried(gantry()), Still, lateral=(3.0, 0.0)).outcome == "missed past the edge"


def test_a_ball_too_fast_to_catch_is_so_too_where_the_law_goes_after_it() -> None:
    slow = tried(slow_gantry(x={"velocity": 1.0}, y={"velocity": 1.0}))
    run = bout(slow, Hand, lateral=(3.0, 0.0))
    assert (run.outcome, run.limit, run.joint) == ("too fast to catch", "velocity", "x")


class Sweeps:
    """A face, leaning toward -x by the gain, that goes under a ball at x = 0.25 m once that is down to 7 cm."""

    def __init__(self, setup: Setup):
        self.lean, self.centre = setup.gains["lean"], setup.centre_m

    def twist(self, seen: Seen) -> Twist:
        ball, paddle = np.array(seen.ball_m), np.array(seen.paddle_m)
        normal = np.array([-math.sin(self.lean), 0.0, math.cos(self.lean)])
        wx, wy, wz = (40 * np.cross(seen.paddle_normal, normal)).tolist()
        late = seen.ball_m_s[2] < 0 and ball[2] - self.centre[2] < 0.07
        return 100 * float(ball[0] - paddle[0]) * late, 0.0, 20 * float(0.48 - paddle[2]), wx, wy, wz


def swept(lean: float) -> Any:
    """A trial of it, with an x slide that makes the way in 20 ms."""
    quick = slow_gantry(
        x={"velocity": 50.0, "acceleration": 5000.0, "jerk": 1e7, "torque": 1e6, "torque_rate": 1e9}
    )
    return bout(tried(quick, bounces=1), Sweeps, (0.25, 0.0), lean=lean)


def test_a_level_face_that_comes_late_still_meets_the_ball() -> None:
    assert swept(0.0).bounces == 1


def test_a_leaning_face_that_comes_as_late_meets_it_too() -> None:
    assert swept(0.35).bounces == 1


def test_a_paddle_that_rises_past_a_rising_ball_beside_it_has_not_met_it() -> None:
    """The ball starts 0.3 m aside at 2 m/s upward; the paddle rises faster for a moment, then waits below."""

    class Jump:
        def __init__(self, setup: Setup):
            self.low = setup.centre_m[2] - setup.ball.radius_m

        def twist(self, seen: Seen) -> Twist:
            up = 3.0 if seen.t_s < 0.03 else 20.0 * (self.low - 0.05 - seen.paddle_m[2])
            return 0.0, 0.0, up, 0.0, 0.0, 0.0

    run = bout(tried(gantry()), Jump, (0.3, 0.0))
    assert run.outcome == "missed past the edge"


# Recovered


GOOD = Recovered(within_m=0.02, apex_error_m=0.03, by_bounce=3, then_for=4)


@pytest.mark.parametrize(
    ("offsets", "apexes", "at"),
    [
        ([0.0] * 4, [0.3] * 4, 1),
        ([0.0] * 3, [0.3] * 3, None),  # too few
        ([0.05, 0.0, 0.0, 0.0, 0.0], [0.3] * 5, 2),
        ([0.05, 0.05, 0.0, 0.0, 0.0, 0.0], [0.3] * 6, 3),
        ([0.05, 0.05, 0.05, 0.0, 0.0, 0.0, 0.0], [0.3] * 7, None),  # the fourth is too late
        (
            [0.0, 0.0, 0.0, 0.05, 0.0, 0.0, 0.0, 0.0],
            [0.3] * 8,
            None,
        ),  # three good ones and a bad one, then too late
        ([0.02] * 4, [0.33, 0.27, 0.33, 0.27], 1),  # the bounds belong to it
        ([0.02, 0.0200001, 0.02, 0.02, 0.02, 0.02], [0.3] * 6, 3),
        ([0.0] * 5, [0.3, 0.3301, 0.3, 0.3, 0.3], None),
        ([0.0] * 4 + [0.2], [0.3] * 4 + [0.9], 1),  # what comes after is not asked for
        ([], [], None),
    ],
)
def test_recovered_from_the_first_bounce_that_begins_a_good_row(
    offsets: list[float], apexes: list[float], at: int | None
) -> None:
    apexes = [0.3 + round(apex - 0.3, 9) for apex in apexes]
    found = recovered_at(contacts_of(offsets, apexes), replace(GOOD, apex_error_m=0.03 + 1e-12), 0.3)
    assert found == at


def test_a_trial_counts_by_its_own_contacts() -> None:
    asked = Recovered(within_m=0.01, apex_error_m=0.01, by_bounce=5, then_for=5)
    run = bout(tried(gantry(), recovered=asked, bounces=10), Leaning, (0.03, 0.0))
    good = (run.contacts.offset_m <= 0.01) & (np.abs(run.contacts.apex_m - 0.2) <= 0.01)
    assert not good[0] and run.recovered
    assert run.recovered_at == int(np.argmax(good)) + 1 > 1
    strict = replace(asked, by_bounce=1)
    assert not bout(tried(gantry(), recovered=strict, bounces=10), Leaning, (0.03, 0.0)).recovered


def test_trials_on_one_ground_share_nothing() -> None:
    ground = ground_of(tried(gantry(), sensor=Sensor(0.0, 0.0, 0.001, 0.0), bounces=3), Leaning)
    start = Start(np.array([0.02, 0.0]), np.zeros(2))
    first = play(ground, start, 3, False)
    play(ground, Start(np.array([0.0, 0.05]), np.zeros(2)), 4, False)
    again = play(ground, start, 3, True)
    np.testing.assert_array_equal(first.contacts.ball_out, again.contacts.ball_out)
    assert first.motion is None and again.motion is not None


# The verdict on all starts


TWO = Starts(offsets_m=(0.02, 0.3), bearings_rad=(0.0,))  # the second one is far outside
ASKED = Recovered(by_bounce=4, then_for=3)


def on_two(cell: Cell, **trial: Any) -> Cell:
    """A start that the mirror recovers, and one whose x slide is too slow for it."""
    return tried(cell, **{"bounces": 7, "apex_m": 0.1, "starts": TWO, "recovered": ASKED} | trial)


SLOW = slow_gantry(x={"velocity": 0.4})


@pytest.mark.parametrize(("share", "verdict"), [(0.5, DELIVERABLE), (0.51, NOT_DELIVERABLE)])
def test_the_share_asked_for_decides(share: float, verdict: str) -> None:
    result = answer(on_two(SLOW, required_share=share), with_advice=False)
    evidence = result.evidence
    assert result.verdict.verdict == verdict
    assert evidence.recovered.tolist() == [True, False] and evidence.recovered_share == 0.5
    assert f"required {100 * share:g} %" in result.verdict.sentence
    (reason,) = result.reasons
    assert (reason.limit, reason.joint, reason.value, reason.bound) == ("velocity", "x", 1.0, 2.0)
    assert reason.decides == (verdict == NOT_DELIVERABLE)


def test_the_interval_of_the_share_is_wilsons() -> None:
    """E. B. Wilson, J. American Statistical Association 22 (1927) 209: roots of (p - s)² = z² p (1 - p)/n."""
    evidence = answer(on_two(SLOW, bounces=6, apex_m=0.05), with_advice=False).evidence
    z, n, s = 1.959963984540054, 2, 0.5
    roots = np.sort(np.roots([1 + z * z / n, -(2 * s + z * z / n), s * s]))
    assert (evidence.low, evidence.high) == pytest.approx(tuple(roots), abs=1e-7)


def test_a_required_limit_that_nobody_stated_leaves_recovered_starts_undecided() -> None:
    unknown = slow_gantry(x={"velocity": 0.4, "torque_rate": None})
    both = answer(on_two(unknown, required_share=0.5), with_advice=False)
    assert both.verdict.verdict == UNDECIDED and "torque rate unknown for x" in both.verdict.sentence
    assert both.evidence.recovered_share == 0.5


def test_the_trials_begin_at_the_centre_whatever_the_start_posture_is() -> None:
    elsewhere = replace(gantry(), arm=replace(gantry().arm, start=(0.3, -0.2, 0.1, 0.2, 0.1)))
    result = answer(on_two(elsewhere, starts=Starts(), bounces=7))
    (run,) = result.evidence.runs
    assert run.motion is not None
    np.testing.assert_allclose(run.trace.paddle[0], np.array(CENTRE) - [0.0, 0.0, 0.02], atol=1e-5)
    assert run.recovered and np.abs(run.motion.v[0]).max() == 0.0
