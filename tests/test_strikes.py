"""Strikes judged on hand-made motions, contacts found in hand-made logs, and what that makes of a verdict."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from follow_case import WIDE, bump, hinge, hinge_log, limits

from reach.arm import Arm
from reach.cell import Accept, Array, Cell, CommandLog, Contact, Follow
from reach.evidence.motion import FINE, Motion
from reach.evidence.record import Track
from reach.evidence.strikes import (
    Errors,
    compare,
    flight_times,
    judge_strike,
    next_contact_shift,
    strike_faults,
    throughout_faults,
    track,
    window_times,
)
from reach.follow.bench import run
from reach.follow.contacts import Contacts, contacts
from reach.follow.reference import build_reference
from reach.kinematics import Chain
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

ACCEPT = Accept()
G = 9.80665


def errors(**changed: Any) -> Errors:
    """Errors of one instant, nothing wrong but what is given."""
    plain = {
        "wanted_normal": 1.0,
        "normal": 1.0,
        "lateral": 0.0,
        "velocity": 0.0,
        "position": 0.0,
        "tilt": 0.0,
    }
    return Errors(**{k: np.atleast_1d(np.asarray(v, float)) for k, v in {**plain, **changed}.items()})


# compare ----------------------------------------------------------------------------------------------------------


def turned(axis: int, angle: float) -> Array:
    """Rotation (3, 3) about a coordinate axis."""
    c, s = np.cos(angle), np.sin(angle)
    i, j = [(1, 2), (2, 0), (0, 1)][axis]
    matrix = np.eye(3)
    matrix[i, i], matrix[j, j], matrix[i, j], matrix[j, i] = c, c, -s, s
    return matrix


def test_compare_splits_the_error_along_and_across_the_commanded_normal() -> None:
    wanted_axes = np.array([np.eye(3), turned(1, np.pi / 2), turned(0, -np.pi / 2)])  # normals z, x, y
    wanted_twist = np.zeros((3, 6))
    wanted_twist[:, :3] = [[0.2, 0, 1.0], [0.7, 0.1, 0], [0, -0.5, 0]]
    twist = wanted_twist.copy()
    twist[:, :3] += [[0.03, -0.04, -0.12], [-0.1, 0.0, 0.2], [0.05, 0.0, 0.0]]
    twist[:, 3:] = 9.0  # turning is not part of a strike's errors
    position = np.array([[0, 0, 0.003], [0.001, 0.002, 0.002], [0, 0, 0]])
    axes = np.array([turned(0, 0.02), turned(1, np.pi / 2) @ turned(2, 1.0), turned(0, -np.pi / 2 + 0.5)])
    found = compare((wanted_twist, np.zeros((3, 3)), wanted_axes), twist, position, axes)
    np.testing.assert_allclose(found.wanted_normal, [1.0, 0.7, -0.5], atol=1e-12)
    np.testing.assert_allclose(found.normal, [0.88, 0.6, -0.5], atol=1e-12)
    np.testing.assert_allclose(found.lateral, [0.05, 0.2, 0.05], atol=1e-12)
    np.testing.assert_allclose(found.velocity, [0.13, np.sqrt(0.05), 0.05], atol=1e-12)
    np.testing.assert_allclose(found.position, [0.003, 0.003, 0.0], atol=1e-12)
    np.testing.assert_allclose(found.tilt, [0.02, 0.0, 0.5], atol=1e-12)  # spin about the normal is no tilt


@pytest.mark.parametrize("angle", [1e-9, 1e-4, np.pi / 2, np.pi - 1e-6])
def test_tilt_keeps_its_precision_at_both_ends(angle: float) -> None:
    still = (np.zeros((1, 6)), np.zeros((1, 3)), np.eye(3)[None])
    found = compare(still, np.zeros((1, 6)), np.zeros((1, 3)), turned(0, angle)[None])
    assert found.tilt[0] == pytest.approx(angle, rel=1e-6)


# strike_faults ----------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    "wanted, normal, fault",
    [
        (1.0, 1.0299, None),
        (1.0, 0.9701, None),
        (1.0, 1.031, "too fast by 3.1 %"),
        (1.0, 0.969, "too slow by 3.1 %"),
        (0.2, 0.19, "too slow by 5.0 %"),
        (-1.0, -0.9, "too slow by 10.0 %"),
        (-1.0, -1.1, "too fast by 10.0 %"),
        (-1.0, 0.5, "too slow by 150.0 %"),
        (1.0, -1.0, "too slow by 200.0 %"),
    ],
)
def test_speed_may_miss_neither_way(wanted: float, normal: float, fault: str | None) -> None:
    assert strike_faults(errors(wanted_normal=wanted, normal=normal), ACCEPT) == ((fault,) if fault else ())


@pytest.mark.parametrize(
    "item, inside, outside, words",
    [
        ("lateral", 0.0499, 0.0512, "0.051 m/s sideways"),
        ("position", 0.0049, 0.0063, "6.3 mm off"),
        ("tilt", np.radians(0.99), np.radians(1.25), "tilted by 1.25°"),
    ],
)
def test_each_item_has_its_limit(item: str, inside: float, outside: float, words: str) -> None:
    assert strike_faults(errors(**{item: inside}), ACCEPT) == ()
    assert strike_faults(errors(**{item: outside}), ACCEPT) == (words,)


@pytest.mark.parametrize("item", ["wanted_normal", "normal", "lateral", "position", "tilt"])
@pytest.mark.parametrize("where", [0, 1, 2])
def test_not_a_number_fails(item: str, where: int) -> None:
    values = np.ones(3) if "normal" in item else np.zeros(3)
    values[where] = np.nan
    plain = {"wanted_normal": np.ones(3), "normal": np.ones(3)}
    zeros = {k: np.zeros(3) for k in ("lateral", "velocity", "position", "tilt")}
    assert strike_faults(Errors(**{**plain, **zeros, item: values}), ACCEPT) != ()


def test_the_worst_of_a_window_counts_and_all_items_are_named() -> None:
    bad = Errors(
        np.ones(3),
        np.array([1.0, 1.02, 0.9]),
        np.array([0.0, 0.2, 0.1]),
        np.zeros(3),
        np.array([0.001, 0.0, 0.02]),
        np.radians([0.0, 3.0, 2.0]),
    )
    assert strike_faults(bad, ACCEPT) == (
        "too slow by 10.0 %",
        "0.200 m/s sideways",
        "20.0 mm off",
        "tilted by 3.00°",
    )


# The window -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("half_s", [0.005, 0.0013, 0.0002])
def test_the_window_reaches_from_end_to_end_at_the_fine_rate(half_s: float) -> None:
    times = window_times(3.2, half_s, 0.001)
    assert times[0] == pytest.approx(3.2 - half_s) and times[-1] == pytest.approx(3.2 + half_s)
    assert times[len(times) // 2] == pytest.approx(3.2) and len(times) % 2 == 1
    assert np.diff(times).max() <= 0.001 / FINE + 1e-12


def test_an_empty_window_is_the_contact_alone() -> None:
    np.testing.assert_array_equal(window_times(3.2, 0.0, 0.001), [3.2])


class Drop:
    """The hinge turning at 1 rad/s, 20 % slower inside (from_s, until_s), and the command that does not."""

    def __init__(self, from_s: float, until_s: float):
        cell = hinge(accept=replace(WIDE, strike_position_m=1.0))
        self.accept, arm = cell.accept, Arm(cell.arm, cell.paddle)
        t = 0.00025 * np.arange(1600)
        v = np.where((t >= from_s - 1e-9) & (t < until_s - 1e-9), 0.8, 1.0)[:, None] * np.array([1.0, 0.0])
        q = np.vstack([np.zeros(2), np.cumsum(v[:-1] * 0.00025, axis=0)])
        self.motion, self.chain = Motion(0.0, 0.00025, q, v, np.zeros_like(v)), Chain.of(arm)

    def wanted(self, t: Array) -> tuple[Array, Array, Array]:
        """The command: a circle of half a metre at 1 rad/s, the face forward."""
        p = 0.5 * np.column_stack([np.cos(t), np.sin(t), 0 * t])
        forward = np.column_stack([-np.sin(t), np.cos(t), 0 * t])
        turning = np.column_stack([0 * t, 0 * t, 1 + 0 * t])
        axes = np.stack([2 * p, -turning, forward], axis=2)
        return np.hstack([0.5 * forward, turning]), p, axes

    def judged(self, window_s: float) -> Any:
        """The strike at 0.2 s."""
        accept = replace(self.accept, strike_window_s=window_s)
        return judge_strike(0.2, True, self.chain, self.motion, self.wanted, accept, 0.0)


@pytest.mark.parametrize("window_s, kept", [(0.010, True), (0.0119, True), (0.0130, False), (0.020, False)])
@pytest.mark.parametrize("after", [True, False])
def test_a_strike_holds_over_its_window(window_s: float, kept: bool, after: bool) -> None:
    drop = Drop(0.206, 0.3) if after else Drop(0.1, 0.194)
    strike = drop.judged(window_s)
    assert strike.delivered is kept
    assert strike.commanded_m_s == pytest.approx(0.5)
    if after:
        assert strike.delivered_m_s == pytest.approx(0.5)
        assert strike.position_error_m < 0.01
        assert strike.delivered_share == pytest.approx(1.0 if kept else 0.8, abs=1e-3)
        assert strike.faults == (() if kept else ("too slow by 20.0 %",))


def test_a_strikes_numbers_in_closed_form() -> None:
    strike = Drop(0.1, 0.4).judged(0.010)
    behind = 0.2 * (0.2 - 0.1)  # rad, at the contact
    worst = 0.2 * (0.205 - 0.1)
    assert strike.delivered_m_s == pytest.approx(0.4 * np.cos(behind), rel=1e-6)
    assert strike.delivered_share == pytest.approx(0.8 * np.cos(worst), rel=1e-6)
    assert strike.tilt_error_deg == pytest.approx(np.degrees(worst), rel=1e-6)
    assert strike.position_error_m == pytest.approx(2 * 0.5 * np.sin(worst / 2), rel=1e-6)
    assert strike.lateral_m_s == pytest.approx(0.4 * np.sin(worst), rel=1e-6)


# The next contact -------------------------------------------------------------------------------------------------


@pytest.mark.parametrize("apex_m", [0.1, 0.3, 0.8])
def test_a_tilt_moves_the_next_contact_by_8_h_theta(apex_m: float) -> None:
    flight = 2 * np.sqrt(2 * apex_m / G)  # up to the apex and down
    theta = np.radians(1.0)
    assert next_contact_shift(flight, theta) == pytest.approx(8 * apex_m * theta, rel=1e-12)
    # The exact flight of a ball that leaves under 2 theta at the same speed: to first order in theta.
    v = np.sqrt(2 * G * apex_m)
    exact = v * np.sin(2 * theta) * 2 * v * np.cos(2 * theta) / G
    assert next_contact_shift(flight, theta) == pytest.approx(exact, rel=0.01)
    assert next_contact_shift(None, theta) is None


def test_flight_times() -> None:
    times, speeds = np.array([0.5, 1.0, 1.6]), np.array([0.2, 0.2, -0.25])
    found = flight_times(times, speeds, Contact(0.8))
    # u = v (1 - e)/(1 + e): the ball leaves at 0.25·1.8/0.2 = 2.25 m/s and is back after 2v/g.
    assert found == pytest.approx([0.5, 0.6, 2 * 2.25 / G])
    assert flight_times(times, speeds, None) == [pytest.approx(0.5), pytest.approx(0.6), None]
    assert flight_times(times, speeds, Contact(1.0))[-1] is None
    assert flight_times(np.empty(0), np.empty(0), Contact(0.8)) == []


def test_a_strikes_tilt_in_metres_at_the_next_contact() -> None:
    drop = Drop(0.1, 0.4)
    strike = judge_strike(0.2, True, drop.chain, drop.motion, drop.wanted, drop.accept, 0.0, 0.6)
    tilt = 0.2 * 0.105
    assert strike.next_contact_shift_m == pytest.approx(G * 0.36 * tilt, rel=1e-6)
    assert strike.shift_per_degree_m == pytest.approx(G * 0.36 * np.pi / 180, rel=1e-12)


# Contacts ---------------------------------------------------------------------------------------------------------


def found_in(speed: Array, strike: Array | None = None, period_s: float = 0.01, **follow: Any) -> Contacts:
    """Contacts of a log of normal speeds, world axes, the face held upright."""
    twist = np.zeros((len(speed), 6))
    twist[:, 2] = speed
    log = CommandLog(period_s * np.arange(len(speed)), twist, strike)
    settings = Follow("world", "strike", log, **follow)
    cell = replace(hinge(), follow=settings)
    return contacts(settings, build_reference(cell, settings, np.zeros(3), np.eye(3)))


def test_marks_in_succession_are_one_contact_at_the_first() -> None:
    marks = np.zeros(60, bool)
    marks[[0, 1, 10, 20, 21, 22, 23, 59]] = True
    found = found_in(np.zeros(60), marks)
    np.testing.assert_allclose(found.t_s, [0.0, 0.1, 0.2, 0.59])
    assert found.marked and not found.guessed


def test_marks_outrank_peaks() -> None:
    marks = np.zeros(60, bool)
    marks[40] = True
    found = found_in(hills((20, 1.0)), marks)
    np.testing.assert_allclose(found.t_s, [0.4])
    assert len(found_in(hills((20, 1.0)), np.zeros(60, bool)).t_s) == 0


def hills(*tops: tuple[int, float], floor: float = 0.0) -> Array:
    """60 samples: triangles of half width 5 with given tops (row, height) on a floor."""
    row = np.arange(60)
    shapes = [floor + (top - floor) * np.maximum(0.0, 1 - abs(row - at) / 5) for at, top in tops]
    return np.asarray(np.max([*shapes, np.full(60, floor)], axis=0))


@pytest.mark.parametrize(
    "speed, rows, why",
    [
        (hills((10, 1.0), (40, 0.5)), [10, 40], "two peaks"),
        (hills((10, 0.09), (40, 0.5)), [40], "too low"),
        (hills((10, 0.59), (40, 0.7), floor=0.5), [40], "high but not prominent: 0.09 above its floor"),
        (hills((10, 0.62), (40, 0.7), floor=0.5), [10, 40], "prominent enough"),
        (hills((10, 1.0), (22, 0.8)), [10], "0.12 s apart: the higher one"),
        (hills((10, 0.8), (22, 1.0)), [22], "0.12 s apart: the higher one, though later"),
        (hills((10, 1.0), (25, 0.8)), [10, 25], "0.15 s apart"),
        (-hills((10, 1.0)), [], "away from the ball"),
        (np.linspace(0, 1, 60), [], "still rising at the end"),
        (np.full(60, 0.5), [], "steady"),
    ],
    ids=lambda x: x if isinstance(x, str) else "",
)
def test_guessed_contacts(speed: Array, rows: list[int], why: str) -> None:
    found = found_in(speed)
    np.testing.assert_allclose(found.t_s, 0.01 * np.array(rows, float), atol=1e-9)
    assert found.guessed is bool(rows) and not found.marked


def test_height_prominence_and_gap_are_the_cells() -> None:
    speed = hills((10, 0.3), (22, 0.5), (45, 0.2))
    np.testing.assert_allclose(found_in(speed, strike_min_m_s=0.25).t_s, [0.22])
    np.testing.assert_allclose(found_in(speed, strike_min_gap_s=0.1).t_s, [0.1, 0.22, 0.45])


def test_the_normal_is_that_of_the_commanded_paddle() -> None:
    # Speed along the face while the paddle turns by a right angle: world x is its normal at the end.
    t = 0.01 * np.arange(100)
    twist = np.zeros((100, 6))
    twist[:50, 4] = np.pi / 2 / 0.5
    twist[:, 0] = np.exp(-(((t - 0.2) / 0.05) ** 2)) * 0.09 + np.exp(-(((t - 0.8) / 0.05) ** 2))
    log = CommandLog(t, twist)
    settings = Follow("world", "strike", log)
    found = contacts(
        settings, build_reference(replace(hinge(), follow=settings), settings, np.zeros(3), np.eye(3))
    )
    np.testing.assert_allclose(found.t_s, [0.8])


def test_without_a_reference_only_marks_count() -> None:
    log = CommandLog(0.01 * np.arange(60), np.zeros((60, 6)))
    assert len(contacts(Follow("world", "strike", log), None).t_s) == 0


# Verdicts ---------------------------------------------------------------------------------------------------------

FAR = limits(position=3.0, velocity=50.0, torque=500.0, torque_rate=1e6)


def bumped(strike: Array | None, known: Any = FAR, at: Any = "strikes", **follow: Any) -> Cell:
    """The hinge with one bump of speed."""
    t, speed, _ = bump(0.8, 0.3)
    return hinge_log(hinge(known, accept=replace(WIDE, at=at)), t, speed, strike, **follow)


def test_guessed_contacts_leave_it_undecided_until_accepted() -> None:
    plain, accepted = run(bumped(None)), run(bumped(None, strikes="guessed-ok"))
    for done in (plain, accepted):
        (strike,) = done.evidence.strikes
        assert not strike.marked and strike.time_s == pytest.approx(0.15)
    assert plain.verdict.verdict == UNDECIDED and plain.evidence.guessed
    assert any("guessed" in ground for ground in plain.verdict.grounds)
    assert accepted.verdict.verdict == DELIVERABLE and not accepted.evidence.guessed


def test_a_missed_guess_is_a_miss() -> None:
    assert (
        run(bumped(None, replace(FAR, velocity=limits(velocity=0.4).velocity))).verdict.verdict
        == NOT_DELIVERABLE
    )


def test_no_strike_at_all_is_judged_throughout() -> None:
    none = np.zeros(301, bool)
    slow = replace(FAR, velocity=limits(velocity=0.4).velocity)
    good, bad = run(bumped(none)), run(bumped(none, slow))
    assert good.evidence.strikes == bad.evidence.strikes == ()
    assert good.verdict.verdict == DELIVERABLE and good.verdict.grounds == ("tracked throughout",)
    assert bad.verdict.verdict == NOT_DELIVERABLE
    assert any("speed along the normal" in text for text in bad.evidence.throughout_faults)


def test_throughout_judges_beyond_the_strikes() -> None:
    # The strike comes before the speed that is not to be had.
    early = np.arange(301) == 60
    slow = replace(FAR, velocity=limits(velocity=0.4).velocity)
    assert run(bumped(early, slow, interpolation="linear")).verdict.verdict == DELIVERABLE
    assert (
        run(bumped(early, slow, at="throughout", interpolation="linear")).verdict.verdict == NOT_DELIVERABLE
    )


def flat_track(**changed: Array) -> Track:
    """A track of four rows, the last after the command's end, nothing wrong but what is given."""
    zeros = np.zeros(4)
    plain: dict[str, Any] = {
        "t_s": 0.1 * np.arange(4),
        "commanded_normal": np.array([0.0, 1.0, 0.5, 0.0]),
        "delivered_normal": np.array([0.0, 1.0, 0.5, 0.0]),
        "velocity_error": zeros,
        "position_error": zeros,
        "tilt_error": zeros,
    }
    three, pose, six = np.zeros((4, 3)), np.zeros((4, 3, 3)), np.zeros((4, 6))
    rest = {"position": three, "wanted_position": three, "rotation": pose, "twist": six, "wanted_twist": six}
    return Track(**{**plain, **changed}, **rest, during=np.array([True, True, True, False]))


@pytest.mark.parametrize(
    "changed, fault",
    [
        ({}, None),
        ({"delivered_normal": np.array([0.0, 1.0, 0.471, 0.0])}, None),  # 3 % of the largest
        (
            {
                "delivered_normal": np.array([0.0, 1.0, 0.469, 0.0]),
                "velocity_error": np.array([0, 0, 0.031, 0]),
            },
            "speed along the normal off by 0.0310 m/s at 0.200 s",
        ),
        ({"velocity_error": np.array([0, 0.06, 0, 0])}, "0.060 m/s sideways at 0.100 s"),
        ({"position_error": np.array([0, 0.004, 0.007, 0])}, "7.0 mm off the commanded path at 0.200 s"),
        ({"tilt_error": np.radians([1.5, 0, 0, 0])}, "tilted by 1.50° at 0.000 s"),
        ({"tilt_error": np.radians([0, 0, 0, 9.0]), "position_error": np.array([0, 0, 0, 1.0])}, None),
    ],
)
def test_throughout_faults(changed: dict[str, Array], fault: str | None) -> None:
    assert throughout_faults(flat_track(**changed), ACCEPT) == ((fault,) if fault else ())


@pytest.mark.parametrize("name", ["delivered_normal", "velocity_error", "position_error", "tilt_error"])
def test_not_a_number_fails_throughout(name: str) -> None:
    values = getattr(flat_track(), name).copy()
    values[1] = np.nan
    assert throughout_faults(flat_track(**{name: values}), ACCEPT) != ()


def test_track_sets_commanded_beside_delivered() -> None:
    drop = Drop(0.1, 0.4)
    position, rotation, twist = drop.chain.twists(drop.motion.q, drop.motion.v)
    beside = track(drop.motion, drop.wanted, position, rotation, twist, 1000)
    late = 0.2 * np.clip(beside.t_s - 0.1, 0.0, None)  # rad
    np.testing.assert_allclose(beside.position_error, np.sin(late / 2), atol=1e-9)
    np.testing.assert_allclose(beside.tilt_error, late, atol=1e-9)
    np.testing.assert_allclose(beside.commanded_normal, 0.5, atol=1e-12)
    slow = np.where(beside.t_s >= 0.1 - 1e-9, 0.4, 0.5)
    np.testing.assert_allclose(beside.delivered_normal, slow * np.cos(late), atol=1e-9)
    np.testing.assert_allclose(
        beside.velocity_error, np.sqrt(0.25 + slow**2 - slow * np.cos(late)), atol=1e-9
    )
    assert beside.during.sum() == 1000 and beside.during[:1000].all()
