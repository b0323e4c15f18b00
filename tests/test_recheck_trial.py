"""The second opinion on trials: it agrees with what was made, and differs where one number of it is another."""

from __future__ import annotations

import io
import json
import math
from collections.abc import Callable
from copy import deepcopy
from dataclasses import fields, replace
from functools import cache
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from scipy.integrate import simpson, solve_ivp
from trial_case import CENTRE, RADIUS, G, Still, bout, gantry, ground_of, tried, wild

from reach.arm import Arm
from reach.cell import Array, Bound, Cell, Recovered, Starts
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Item
from reach.evidence.trials import Contacts, Run
from reach.recheck.arm.engine import available
from reach.recheck.arm.ground import Ground, ground
from reach.recheck.ball import Air, Bounce, Flights, Outline, launch, tops
from reach.recheck.stored import BadFolder, Stored
from reach.recheck.trial import whole as trial
from reach.recheck.trial.bounces import given
from reach.report.document import strict
from reach.report.json import json_text
from reach.report.trial.document import document
from reach.report.trial.evidence import evidence_files
from reach.result import TrialResult
from reach.strike.impact import effective_mass
from reach.trial.answer import NO_POSTURE, Tried, gathered, verdicts
from reach.trial.starts import starts_of
from reach.verdict import judge_trials

needs_engine = pytest.mark.skipif(not available(), reason="without the second engine")

SPINNING = {"friction": 0.3, "tangential_restitution": 0.2}
AIRY = {"drag_coefficient": 0.4, "lift_coefficient": 0.1}
RUNS = "runs.npz"


# What is looked at: two starts of the planning law, one recovered, one not


def asked(**more: Any) -> dict[str, Any]:
    """A trial of two starts."""
    starts = Starts(offsets_m=(0.03, 0.5), bearings_rad=(0.0,), lateral_m_s=(0.1,))
    counted = Recovered(within_m=0.02, apex_error_m=0.03, by_bounce=3, then_for=3)
    given = {"law": "planning", "bounces": 6, "required_share": 0.5, "starts": starts, "recovered": counted}
    return given | more


def made(
    cell: Cell, runs: tuple[Run, ...], total: int = 2, ready: bool = True, stopped: bool = False
) -> Stored:
    """A run of trials as it is stored."""
    start = np.array(cell.arm.start)
    own = Tried(runs, ground_of(cell).flight_s if ready else math.nan, stopped)
    evidence = gathered(cell, CENTRE, start if ready else None, total, {}, own)
    assert cell.trial is not None
    verdict = judge_trials(verdicts(cell, evidence), cell.trial.required_share, cell.accept, evidence)
    result = TrialResult(
        cell=cell,
        verdict=verdict,
        without_margins=verdict.verdict,
        reasons=(),
        needs=(),
        remedies=(),
        headroom_share=None,
        headroom_text="",
        notes=(),
        evidence=evidence,
    )
    files, told = evidence_files(result), json.loads(json_text(strict(document(result), digits=9)))
    content, archive = files["cell.json"], files[RUNS]
    assert content is not None
    arrays = {} if archive is None else {RUNS: dict(np.load(io.BytesIO(archive)))}
    return Stored("out", "trial", json.loads(content), told, arrays, ())


def both(cell: Cell) -> tuple[Cell, tuple[Run, ...]]:
    """The trials of a cell's two starts."""
    return cell, tuple(bout(cell, None, (off, 0.0), (0.1, 0.0), k) for k, off in enumerate((0.03, 0.5)))


@cache
def airy() -> tuple[Cell, tuple[Run, ...]]:
    """Two starts with drag, lift and friction."""
    return both(tried(gantry(), SPINNING, AIRY, **asked()))


@cache
def spinning() -> tuple[Cell, tuple[Run, ...]]:
    """Two starts with friction."""
    return both(tried(gantry(), SPINNING, **asked()))


@cache
def plain() -> tuple[Cell, tuple[Run, ...]]:
    """Two starts without air and friction."""
    return both(tried(gantry(), **asked()))


@cache
def whole() -> Stored:
    """The spinning ones as they were stored."""
    return made(*spinning())


@cache
def stand() -> Ground:
    """The arm of all of them."""
    return ground(whole())


def nudged(change: Callable[[Any], Any], of: Stored | None = None) -> Stored:
    """A run with one thing changed: `change` gets its arrays, cell and verdict."""
    one = deepcopy(of or whole())
    arrays = dict(one.arrays.get(RUNS, {}))
    change(SimpleNamespace(arrays=arrays, cell=one.cell, verdict=one.verdict))
    return replace(one, arrays={RUNS: arrays} if arrays else {})


def looked_at(stored: Stored, at: Ground | None = None) -> list[Item]:
    """Every item; the ground is that of cell.json where it was changed."""
    return trial.items(stored, at or ground(stored), lambda text: None)


def states(found: list[Item], status: str) -> set[tuple[str, str]]:
    """Kind and place of the items of a status."""
    return {(item.kind, item.where) for item in found if item.status == status}


# What was made agrees


@needs_engine
def test_everything_agrees_with_air_spin_and_friction() -> None:
    cell, runs = airy()
    assert [run.recovered for run in runs] == [True, False], "one start is to be recovered, the other not"
    assert np.abs(runs[0].contacts.spin_out).max() > 0.01, "the ball is to spin, m/s"
    found = looked_at(made(cell, runs), stand())
    assert {item.status for item in found} == {AGREE}
    kinds = {item.kind for item in found}
    assert kinds == {
        "starts",
        "flight",
        "motion",
        "impact",
        "contact",
        "limits",
        "torque",
        "outcome",
        "verdict",
    }


@needs_engine
@pytest.mark.parametrize("seed", [1, 2, 3, 6])
def test_shaken_paddles_lost_balls_and_runaways_agree(seed: int) -> None:
    cell, run = wild(seed)
    found = looked_at(made(cell, (run,), 1))
    assert states(found, DIFFER) == {("starts", "")}, "only its random start is none of the grid"


@needs_engine
def test_an_arm_that_gives_and_a_table_of_restitution_agree() -> None:
    table = {"arm_gives": True, "restitution_at": ((0.5, 0.8), (1.0, 0.75), (3.0, 0.6))}
    cell = tried(gantry(), SPINNING | table, **asked(bounces=4, starts=Starts((0.02,), (0.0,), (0.0,))))
    found = looked_at(made(cell, (bout(cell, offset=(0.02, 0.0)),), 1))
    assert states(found, DIFFER) == set()


@needs_engine
def test_a_ball_that_dies_on_a_still_paddle_agrees() -> None:
    cell = tried(gantry(), {"restitution": 0.3}, **asked(starts=Starts((0.0,), (0.0,), (0.0,))))
    run = bout(cell, Still)
    assert run.outcome == "died on the paddle"
    assert states(looked_at(made(cell, (run,), 1)), DIFFER) == set()


@needs_engine
def test_a_motion_that_was_said_to_pass_a_limit_agrees_and_one_that_was_not_differs() -> None:
    cell, _ = plain()
    z = cell.arm.joints[2]
    less = replace(z, limits=replace(z.limits, torque_continuous=Bound(-1.0, 1.0, "invented")))
    joints = (*cell.arm.joints[:2], less, *cell.arm.joints[3:])
    cell = replace(cell, arm=replace(cell.arm, joints=joints))
    run = bout(cell, offset=(0.03, 0.0), lateral=(0.1, 0.0))
    assert (run.outcome, run.broken) == ("limit", ("duty of z",))
    stored = made(cell, (run,), 2, stopped=True)
    assert states(looked_at(stored), DIFFER) == set()

    def silent(at: Any) -> None:
        at.cell["broken"] = [[]]

    assert ("torque", "start 1") in states(looked_at(nudged(silent, stored)), DIFFER)


@needs_engine
def test_starts_left_out_when_stopped_are_undecided() -> None:
    cell, runs = spinning()
    cell = replace(cell, trial=replace(cell.trial, required_share=1.0))
    stored = made(cell, runs[:1], stopped=True)
    assert stored.verdict["verdict"] == "undecided"
    assert states(looked_at(stored), DIFFER) == set()

    def hidden(at: Any) -> None:
        at.cell["stopped"] = False

    assert states(looked_at(nudged(hidden, stored)), DIFFER) == {("starts", "")}


@needs_engine
def test_a_recovered_start_with_a_required_limit_unknown_is_undecided() -> None:
    cell, runs = spinning()
    y = cell.arm.joints[1]
    joints = (
        cell.arm.joints[0],
        replace(y, limits=replace(y.limits, torque_rate=None)),
        *cell.arm.joints[2:],
    )
    stored = made(replace(cell, arm=replace(cell.arm, joints=joints)), runs)
    assert stored.verdict["verdict"] == "undecided"
    assert states(looked_at(stored), DIFFER) == set()


@needs_engine
def test_a_random_start_agrees_and_one_past_its_disc_differs() -> None:
    starts = Starts((0.03,), (0.0,), (0.1,), random=1)
    cell = tried(gantry(), **asked(bounces=3, starts=starts))
    each = [(start.offset.tolist(), start.lateral.tolist()) for start in starts_of(starts, 0)]
    stored = made(cell, tuple(bout(cell, None, offset, lateral) for offset, lateral in each))
    assert states(looked_at(stored), DIFFER) == set()
    far = nudged(bump("offset", (1, 1), 0.06), stored)
    assert {("starts", ""), ("flight", "start 2")} <= states(looked_at(far), DIFFER)


# What can't be checked


def test_without_engine_torque_and_what_hangs_on_it_are_not_checkable() -> None:
    found = looked_at(whole(), replace(stand(), engine=None, why_no_engine="none is there"))
    assert states(found, DIFFER) == set()
    torque = {("torque", "start 1"), ("torque", "start 2")}
    assert states(found, NOT_CHECKABLE) == torque | {("outcome", "start 1"), ("verdict", "")}


@needs_engine
def test_trials_without_their_motion_are_checked_by_flights_and_impacts() -> None:
    cell, runs = plain()
    stored = made(cell, tuple(replace(run, motion=None) for run in runs))
    found = looked_at(stored)
    assert states(found, DIFFER) == set()
    assert {("flight", "start 1"), ("impact", "start 2")} <= states(found, AGREE)
    left = {(kind, f"start {k}") for kind in ("contact", "limits", "torque", "outcome") for k in (1, 2)}
    assert states(found, NOT_CHECKABLE) == left | {("verdict", "")}

    def harder(at: Any) -> None:
        at.arrays["ball_out_0"][3, 2] += 1e-6

    assert {("impact", "start 1"), ("flight", "start 1")} <= states(looked_at(nudged(harder, stored)), DIFFER)


def test_a_refusal_for_want_of_a_posture_is_not_checkable_but_its_verdict_is() -> None:
    cell, _ = spinning()
    stored = made(cell, (), ready=False)
    assert (stored.verdict["blocked"], stored.arrays) == (NO_POSTURE, {})
    found = looked_at(stored)
    assert states(found, NOT_CHECKABLE) == {("verdict", "")} and not states(found, DIFFER)
    assert any("posture" in note for note in trial.notes(stored))

    def easier(at: Any) -> None:
        at.cell["verdict"] = at.verdict["verdict"] = "deliverable"

    assert states(looked_at(nudged(easier, stored)), DIFFER) == {("verdict", "")}


@pytest.mark.parametrize("word", ["solver failed", "law failed"])
def test_a_failure_after_the_last_bounce_leaves_no_trace(word: str) -> None:
    cell, runs = spinning()
    failed = replace(runs[0], outcome=word, recovered=False, failed_steps=1)
    found = looked_at(made(cell, (failed, runs[1])), stand())
    assert ("outcome", "start 1") in states(found, NOT_CHECKABLE)
    assert states(found, DIFFER) == set()


# What was changed differs


def bump(name: str, place: Any, size: float) -> Callable[[Any], None]:
    """A change of one number of an array."""

    def change(at: Any) -> None:
        at.arrays[name][place] += size

    return change


def put(value: Any, *keys: Any) -> Callable[[Any], None]:
    """A change of one value of cell.json."""

    def change(at: Any) -> None:
        table = at.cell
        for key in keys[:-1]:
            table = table[key]
        assert table[keys[-1]] != value
        table[keys[-1]] = value

    return change


def says(value: Any, *keys: Any) -> Callable[[Any], None]:
    """A change of one value of verdict.json."""
    return lambda at: put(value, *keys)(SimpleNamespace(cell=at.verdict))


def outcome(word: str) -> Callable[[Any], None]:
    """Another outcome of the first start, in every file."""

    def change(at: Any) -> None:
        at.arrays["outcome"] = np.array([word, str(at.arrays["outcome"][1])])
        at.verdict["outcome"][0]["outcome"] = word

    return change


def recovered(at: Any) -> None:
    """The second start called recovered, in every file."""
    at.arrays["recovered"][1] = True
    at.verdict["outcome"][1]["recovered"] = True


def without_bounce(row: int) -> Callable[[Any], None]:
    """A change that leaves a bounce out."""

    def change(at: Any) -> None:
        for field in fields(Contacts):
            at.arrays[f"{field.name}_0"] = np.delete(at.arrays[f"{field.name}_0"], row, axis=0)

    return change


NUDGES: dict[str, tuple[Callable[[Any], None], set[str]]] = {
    "instant": (bump("t_s_0", 3, 1e-6), {"flight", "contact"}),
    "ball": (bump("ball_0", (2, 0), 1e-6), {"flight", "contact"}),
    "ball in": (bump("ball_in_0", (2, 1), 1e-6), {"flight", "impact"}),
    "ball out": (bump("ball_out_0", (2, 1), 1e-6), {"flight", "impact"}),
    "last ball out": (bump("ball_out_0", (5, 2), 1e-6), {"flight", "impact"}),
    "spin out": (bump("spin_out_0", (1, 2), 1e-6), {"impact"}),
    "contact point": (bump("face_0", (4, 1), 1e-6), {"contact"}),
    "paddle": (bump("paddle_m_s_0", 0, 1e-6), {"contact"}),
    "tilt": (bump("tilt_rad_0", 1, 1e-6), {"contact"}),
    "bearing": (bump("tilt_bearing_rad_0", 0, 1e-3), {"contact"}),
    "apex": (bump("apex_m_0", 2, 1e-6), {"flight"}),
    "offset": (bump("offset_m_0", 2, 1e-6), {"flight"}),
    "posture": (bump("q_0", (500, 1), 1e-6), {"motion"}),
    "joint velocity": (bump("v_0", (500, 1), 1e-6), {"motion"}),
    "joint acceleration": (bump("a_0", (500, 1), 1e-4), {"motion"}),
    "whole motion": (bump("q_0", ..., 1e-4), {"motion", "contact"}),
    "time of motion": (bump("start_s_0", (), 1e-6), {"motion", "contact"}),
    "period of motion": (bump("period_s_0", (), 1e-6), {"motion"}),
    "start": (bump("offset", (0, 1), 1e-6), {"starts", "flight"}),
    "lateral": (bump("lateral", (0, 0), 1e-6), {"starts", "flight"}),
    "bounce in the middle": (without_bounce(2), {"flight", "contact", "outcome"}),
    "last bounce": (without_bounce(5), {"outcome"}),
    "outcome": (outcome("missed past the edge"), {"outcome"}),
    "recovered": (recovered, {"outcome"}),
    "restitution": (put(0.71, "contact", "restitution"), {"impact"}),
    "friction": (put(0.001, "contact", "friction"), {"impact"}),
    "tangential restitution": (put(0.201, "contact", "tangential_restitution"), {"impact"}),
    "drag": (put(0.01, "ball", "drag_coefficient"), {"starts", "flight"}),
    "lift": (put(0.01, "ball", "lift_coefficient"), {"flight"}),
    "ball's radius": (put(0.021, "ball", "radius_m"), {"contact", "impact"}),
    "face": (put(1e-6, "paddle", "radius_m"), {"contact"}),
    "centre": (put(0.51, "centre_m", 2), {"starts", "flight"}),
    "apex wanted": (put(0.21, "trial", "apex_m"), {"starts", "flight"}),
    "bounces wanted": (put(7, "trial", "bounces"), {"outcome"}),
    "bounces recovered in": (put(0.001, "trial", "recovered", "within_m"), {"outcome"}),
    "share": (put(0.9, "trial", "required_share"), {"verdict"}),
    "ready posture": (put(0.1, "ready", 0), {"motion"}),
    "start asked for": (put(0.04, "trial", "starts", "offsets_m", 0), {"starts"}),
    "velocity limit": (
        put({"lo": -0.1, "hi": 0.1}, "arm", "joints", 2, "limits", "velocity"),
        {"limits", "outcome"},
    ),
    "tool's cap": (put({"speed_m_s": 0.1}, "tool"), {"limits", "outcome"}),
    "passed limit": (put(["jerk of z"], "broken", 0), {"limits"}),
    "verdict": (put("not deliverable", "verdict"), {"verdict"}),
    "verdict told": (says("not deliverable", "verdict"), {"verdict"}),
    "share told": (says(0.75, "recovered_share"), {"verdict"}),
    "interval told": (says(0.2, "recovered_low_share"), {"verdict"}),
    "bounces told": (says(5, "outcome", 0, "bounces"), {"outcome"}),
}


@pytest.mark.parametrize("name", NUDGES)
def test_one_number_changed_is_seen_where_it_counts(name: str) -> None:
    change, kinds = NUDGES[name]
    stored = nudged(change)
    at = replace(ground(stored), engine=None, why_no_engine="left out here")
    seen = {
        kind for kind, where in states(looked_at(stored, at), DIFFER) if where in ("", "start 1", "start 2")
    }
    assert kinds <= seen, f"{name}: differs in {seen or 'nothing'}"


@needs_engine
def test_a_stated_torque_changed_is_seen() -> None:
    stored = nudged(put({"lo": -3.0, "hi": 3.0}, "arm", "joints", 2, "limits", "torque"))
    assert ("torque", "start 1") in states(looked_at(stored), DIFFER)


# Hostile folders

ARRAYS = (
    "offset",
    "lateral",
    "outcome",
    "recovered",
    "moved",
    "t_s_0",
    "ball_0",
    "face_1",
    "spin_out_1",
    "q_0",
    "a_1",
)


@pytest.mark.parametrize("name", ARRAYS)
@pytest.mark.parametrize("how", ["missing", "shape", "kind", "nan"])
def test_an_array_that_is_not_as_written_is_refused(name: str, how: str) -> None:
    def change(at: Any) -> None:
        old = at.arrays.pop(name)
        if how == "shape":
            at.arrays[name] = np.concatenate([old, old[:1]])
        elif how == "kind":
            at.arrays[name] = np.full(old.shape, b"x")
        elif how == "nan":
            at.arrays[name] = np.full(old.shape, np.nan)

    with pytest.raises(BadFolder):
        looked_at(nudged(change), stand())


@pytest.mark.parametrize(
    ("value", "keys"),
    [
        (None, ("ball",)),
        (0, ("ball", "mass_kg")),
        ("0.7", ("contact", "restitution")),
        ([[1.0, 0.5], [1.0, 0.4]], ("contact", "restitution_at")),
        ("table", ("contact", "restitution_at")),
        (-1, ("trial", "apex_m")),
        (math.inf, ("trial", "bounces")),
        (3, ("trial", "bounces")),
        (2, ("trial", "required_share")),
        ([], ("trial", "starts", "offsets_m")),
        ([0.0] * 2000, ("trial", "starts", "offsets_m")),
        ("all", ("trial", "starts")),
        ([0.0], ("centre_m",)),
        ([0.0], ("ready",)),
        ([[1], []], ("broken",)),
        ([], ("broken",)),
        ("given", ("paddle", "shape")),
    ],
)
def test_a_cell_that_is_not_as_written_is_refused(value: Any, keys: tuple[Any, ...]) -> None:
    def many(at: Any) -> None:
        at.cell["trial"]["starts"]["bearings_rad"] = [0.0] * 2000
        put(value, *keys)(at)

    with pytest.raises(BadFolder):
        looked_at(nudged(many if value == [0.0] * 2000 else put(value, *keys)), stand())


@pytest.mark.parametrize("name", ["t_s_0", "ball_out_0", "spin_out_0", "q_0", "v_0", "a_0", "tilt_rad_0"])
def test_numbers_beyond_measure_differ_without_a_fault(name: str) -> None:
    def change(at: Any) -> None:
        at.arrays[name][1] = 1e300

    at = replace(stand(), engine=None, why_no_engine="left out here")
    assert states(looked_at(nudged(change), at), DIFFER)


# The ball alone

DOWN = np.array([0.0, 0.0, -G])
K, LIFT = 0.14, 0.05  # 1/m, of a 40 mm, 2.7 g ball with coefficients of 0.5 and 0.18


def thrown(count: int = 6) -> tuple[Array, Array, Array, Array]:
    """Places, velocities, spins (b, 3) and times (b,) of balls; the first rises straight up without spin."""
    rng = np.random.default_rng(5)
    velocity = rng.normal(size=(count, 3)) * [1, 1, 0] + [0, 0, 1] * rng.uniform(1, 4, (count, 1))
    spin = rng.normal(size=(count, 3))
    velocity[0, :2], spin[0] = 0.0, 0.0
    return rng.normal(size=(count, 3)), velocity, spin, 2 * velocity[:, 2] / G


def by_scipy(
    k: float, lift: float, place: Array, velocity: Array, spin: Array, seconds: float
) -> tuple[Any, float]:
    """The path over time and the height of its top, by another integrator that stops at the top."""
    size = float(np.linalg.norm(spin))
    axis = spin / size if size else spin

    def rate(_: float, state: Array) -> Array:
        v = state[3:]
        speed = float(np.linalg.norm(v))
        return np.concatenate([v, DOWN - k * speed * v + lift * speed * np.cross(axis, v)])

    class Level:
        terminal = True

        def __call__(self, _: float, state: Array) -> float:
            return float(state[5])

    options: dict[str, Any] = {
        "method": "DOP853",
        "rtol": 1e-12,
        "atol": 1e-13,
        "max_step": 0.01,
        "dense_output": True,
    }
    up = solve_ivp(rate, (0.0, 5.0), [*place, *velocity], events=Level(), **options)
    top = float(up.t[-1])
    down = solve_ivp(rate, (top, seconds), up.y[:, -1], **options)
    return lambda t: np.where(t <= top, up.sol(np.minimum(t, top)), down.sol(np.maximum(t, top))), float(
        up.y[2, -1]
    )


def test_flight_without_air_is_a_parabola() -> None:
    place, velocity, spin, seconds = thrown()
    flights = Flights.of(Air(0.0, 0.0, DOWN), place, velocity, spin, seconds)
    ends, speeds = flights.ends()
    np.testing.assert_allclose(ends[:, 2], place[:, 2], atol=1e-12)  # m: the time up and down again
    np.testing.assert_allclose(speeds, velocity * [1, 1, -1], atol=1e-12)  # m/s
    np.testing.assert_allclose(
        tops(flights.air, place, velocity, spin), place[:, 2] + velocity[:, 2] ** 2 / (2 * G)
    )


def test_flight_in_air_agrees_with_another_integrator() -> None:
    place, velocity, spin, seconds = thrown()
    air = Air(K, LIFT, DOWN)
    flights = Flights.of(air, place, velocity, spin, seconds)
    (ends, speeds), heights = flights.ends(), tops(air, place, velocity, spin)
    for i in range(len(place)):
        path, top = by_scipy(K, LIFT, place[i], velocity[i], spin[i], float(seconds[i]))
        np.testing.assert_allclose(np.hstack([ends[i], speeds[i]]), path(seconds[i]), atol=5e-10)  # m, m/s
        assert heights[i] == pytest.approx(top, abs=1e-10)  # m
        when = np.linspace(0.0, float(seconds[i]), 41)
        np.testing.assert_allclose(flights.places(np.full(41, i), when), path(when)[:3].T, atol=5e-10)  # m


def test_a_ball_that_falls_against_drag_has_the_closed_form_speed() -> None:
    """v² = g/k (1 - exp(-2 k h)), by integration of v dv/dh = g - k v²."""
    air, zero = Air(K, 0.0, DOWN), np.zeros((1, 3))
    ends, speeds = (part[0] for part in Flights.of(air, zero, zero, zero, np.array([1.0])).ends())
    assert speeds[2] == pytest.approx(-math.sqrt(-G / K * math.expm1(2 * K * ends[2])), abs=1e-10)  # m/s


@pytest.mark.parametrize("k", [0.0, K, 1.0])
def test_the_launch_reaches_its_apex_and_comes_back_in_its_time(k: float) -> None:
    air, zero = Air(k, 0.0, DOWN), np.zeros((1, 3))
    found = launch(air, 0.3)
    assert found is not None
    velocity, seconds = found
    assert tops(air, zero, velocity[None], zero)[0] == pytest.approx(0.3, abs=1e-10)  # m
    ends, _ = Flights.of(air, zero, velocity[None], zero, np.array([seconds])).ends()
    np.testing.assert_allclose(ends, 0.0, atol=1e-9)  # m


def test_a_launch_under_a_sideways_pull_comes_back_and_with_drag_has_no_closed_form() -> None:
    air, zero = Air(0.0, 0.0, np.array([1.0, -2.0, -G])), np.zeros((1, 3))
    found = launch(air, 0.3)
    assert found is not None
    ends, _ = Flights.of(air, zero, found[0][None], zero, np.array([found[1]])).ends()
    np.testing.assert_allclose(ends, 0.0, atol=1e-12)  # m
    assert launch(replace(air, drag_per_m=K), 0.3) is None


def test_lift_alone_does_no_work_and_drag_takes_k_v_cubed() -> None:
    place, velocity, spin, seconds = thrown()
    for k in (0.0, K):
        flights = Flights.of(Air(k, LIFT, DOWN), place, velocity, spin, seconds)
        assert flights.knots is not None
        speed = np.linalg.norm(flights.knots[1], axis=2)
        energy = speed**2 / 2 + G * flights.knots[0, :, :, 2]  # J/kg
        lost = k * simpson(speed**3, axis=0) * seconds / (len(speed) - 1)
        np.testing.assert_allclose(energy[0] - energy[-1], lost, atol=1e-8)  # J/kg; |v|³ has a kink at a top


def test_a_flight_backwards_or_without_end_is_none() -> None:
    place, velocity, spin, _ = thrown(2)
    for air in (Air(0.0, 0.0, DOWN), Air(K, LIFT, DOWN)):
        ends, _ = Flights.of(air, place, velocity, spin, np.array([-1e-3, 1e9])).ends()
        assert np.isnan(ends).all()


def bounce(friction: float = 0.0, tangential: float = 0.0, *table: tuple[float, float]) -> Bounce:
    """A contact with a table of restitution, by default 0.7 throughout."""
    at, values = np.array(table or ((0.0, 0.7),)).T
    return Bounce(at, values, friction, tangential, False)


def struck(contact: Bounce, velocity: Any, spin: Any, face: Any, ratio: float = 0.0) -> tuple[Array, Array]:
    """One ball on a level face."""
    rows = (np.array([row], dtype=float) for row in (velocity, spin, (0, 0, 1), face))
    out, after = contact.after(*rows, np.array([ratio]))
    return out[0], after[0]


def test_a_ball_on_a_moving_face_leaves_by_newton() -> None:
    """v' = -e v + (1 + e) u along the normal; nothing happens across a face without friction."""
    out, spin = struck(bounce(), (0.3, 0.0, -2.0), (0.1, 0.2, 0.3), (5.0, 0.0, 0.5))
    np.testing.assert_allclose(out, (0.3, 0.0, 0.7 * 2.0 + 1.7 * 0.5), atol=1e-14)  # m/s
    np.testing.assert_allclose(spin, (0.1, 0.2, 0.3), atol=1e-14)  # m/s


def test_a_face_that_gives_keeps_momentum() -> None:
    ratio, m = 0.25, 1.0
    out, _ = struck(bounce(), (0.0, 0.0, -2.0), (0, 0, 0), (0.0, 0.0, 1.0), ratio)
    face = 1.0 - ratio * m * (out[2] + 2.0)  # m/s, of a paddle of m / ratio that took the impulse
    assert out[2] - face == pytest.approx(0.7 * 3.0, abs=1e-14)  # m/s: they part by e times how they came


def test_a_gripping_face_stops_the_slip_and_a_slipping_one_gives_all_its_friction() -> None:
    grip, spin = struck(bounce(10.0), (1.0, 0.0, -2.0), (0.0, 0.5, 0.1), (0.2, 0.0, 0.0))
    lowest = grip - np.cross(spin, (0, 0, 1))
    np.testing.assert_allclose(lowest[:2], (0.2, 0.0), atol=1e-14)  # m/s: the face's
    slip, _ = struck(bounce(0.1), (1.0, 0.0, -2.0), (0.0, 0.0, 0.0), (0.0, 0.0, 0.0))
    np.testing.assert_allclose(slip[:2], (1.0 - 0.1 * 1.7 * 2.0, 0.0), atol=1e-14)  # m/s


def test_a_perfectly_rough_and_elastic_ball_keeps_its_energy_and_turns_its_slip_round() -> None:
    """Garwin 1969: e = e_t = 1."""
    before, spin = np.array([1.0, -0.4, -2.0]), np.array([0.3, 0.5, 0.1])
    out, after = struck(bounce(100.0, 1.0, (0.0, 1.0)), before, spin, (0, 0, 0))
    energies = [v @ v + 2 / 3 * s @ s for v, s in ((before, spin), (out, after))]
    assert energies[1] == pytest.approx(energies[0], abs=1e-13)  # m²/s²
    slips = [(v - np.cross(s, (0, 0, 1)))[:2] for v, s in ((before, spin), (out, after))]
    np.testing.assert_allclose(slips[1], -slips[0], atol=1e-14)  # m/s


def test_restitution_is_straight_between_the_rows_of_its_table_and_held_beyond() -> None:
    table = ((1.0, 0.8), (2.0, 0.6), (4.0, 0.5))
    found = bounce(0.0, 0.0, *table).newton(np.array([0.5, 1.0, 1.5, 3.0, 9.0]))
    np.testing.assert_allclose(found, (0.8, 0.8, 0.7, 0.55, 0.5), atol=1e-15)


def test_a_ball_that_goes_away_from_the_face_makes_no_bounce() -> None:
    assert np.isnan(struck(bounce(), (0, 0, 1.0), (0, 0, 0), (0, 0, 0))[0]).all()


def test_the_outline_is_a_circle_or_a_rectangle() -> None:
    points = np.array([[0.03, 0.04], [0.06, 0.0], [0.0, 0.02]])
    np.testing.assert_allclose(Outline(True, (0.05, 0.05)).past(points), (0.0, 0.01, -0.03), atol=1e-15)  # m
    np.testing.assert_allclose(
        Outline(False, (0.05, 0.03)).past(points), (0.01, 0.01, -0.01), atol=1e-15
    )  # m


@needs_engine
def test_what_the_arm_gives_is_one_over_its_effective_mass() -> None:
    cell, _ = spinning()
    arm, q = Arm(cell.arm, cell.paddle), np.array([0.1, -0.2, 0.4, 0.3, -0.5])
    _, rotation, jacobian = arm.jacobian(q)
    mass = effective_mass(arm.inertia(q), rotation[:, 2] @ jacobian[:3])
    assert 1 / given(stand(), q) == pytest.approx(mass, rel=1e-8)  # kg


def test_the_radius_of_the_ball_is_that_of_the_cell() -> None:
    assert whole().number("ball", "radius_m") == RADIUS
