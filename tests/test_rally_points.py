"""Points of an envelope: the demonstrated are flown and measured again, the refused are refused by another bound."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from builders import NO_MARGINS, robot_cell
from rally_case import (
    BALL_TOML,
    CENTRE,
    LEVEL_TOML,
    LIMIT_NAMES,
    E,
    G,
    again,
    ballistic,
    bench,
    court_of,
    gantry_cell,
    on_bench,
    on_gantry,
    path_of,
    points_at,
    rallied,
    row,
    too_late,
    with_contact,
)

import reach
import reach.rally.envelope as envelope_module
from reach.cell import Array, Margins, Tool
from reach.evidence.rallies import RallyPoints
from reach.rally.court import Court, Point, points_of
from reach.rally.cycle import TURNS_S
from reach.strike.sides import upper
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

BY_TIME = "cycle time"


@pytest.fixture(scope="module")
def seven() -> Court:
    """bench7: two low apexes and a comfortable one, the centre and an offset, two bearings."""
    return court_of(
        on_bench("bench7", (0.01, 0.08, 0.2), offsets_m=(0.0, 0.06), bearings_rad=(0.0, np.pi / 2))
    )


@pytest.fixture(scope="module")
def points(seven: Court) -> RallyPoints:
    return points_at(seven)


@pytest.fixture(scope="module")
def gantry() -> Court:
    return court_of(on_gantry((0.01, 0.05, 0.2), offsets_m=(0.0, 0.03), bearings_rad=(0.4,)))


@pytest.fixture(autouse=True)
def few_bearings(monkeypatch: pytest.MonkeyPatch) -> None:
    """Largest offsets at the cell's own bearings alone: not looked at here."""
    monkeypatch.setattr(envelope_module, "TURNS", 1)


# Demonstrated


def test_each_verdict_is_there(points: RallyPoints) -> None:
    assert {DELIVERABLE, NOT_DELIVERABLE} <= set(points.verdict.tolist())
    assert (points.verdict == DELIVERABLE).sum() >= 4
    assert set(points.limit.tolist()) <= LIMIT_NAMES
    assert sorted(points.motions) == np.flatnonzero(points.verdict == DELIVERABLE).tolist()


def test_the_motion_of_a_deliverable_point_keeps_every_limit(seven: Court, points: RallyPoints) -> None:
    """The quintics sampled eight times a control period; torques by the library's own inverse dynamics."""
    setting = seven.kit.setting
    for knots in points.motions.values():
        path = path_of(knots)
        step = setting.period_s / 8
        t = np.arange(0.0, knots.t_s[-1], step)
        q, v, a, jerk = (path.derivative(k)(t) if k else path(t) for k in range(4))
        torque = setting.arm.torque(q, v, a)
        values: dict[str, Array] = {"position": q, "velocity": v, "acceleration": a, "torque": torque}
        values |= {"jerk": jerk, "torque rate": np.diff(torque, axis=0) / step}
        for kind, value in values.items():
            limit = setting.limits[kind]
            known = np.isfinite(limit.hi)
            assert (value <= limit.hi)[:, known].all(), kind
            assert (value >= limit.lo)[:, known].all(), kind
        for k in (0, -1):
            assert not knots.v[k].any() and not knots.a[k].any()


def test_its_strikes_are_right_at_their_instants(seven: Court, points: RallyPoints) -> None:
    """Place, velocity along the normal, no turning but about the normal, legs as long as the ball flies."""
    arm, ball = seven.kit.setting.arm, seven.kit.cell.ball
    assert ball is not None
    for k, knots in points.motions.items():
        given = row(points, k)
        places, normals, speeds = ballistic(given["apex_m"], given["offset_m"], given["bearing_rad"])
        path, flight = path_of(knots), 2 * np.sqrt(2 * given["apex_m"] / G)
        assert len(knots.strike_s) == len(places)
        np.testing.assert_allclose(np.diff(knots.strike_s), flight, atol=1e-9)
        for at, place, normal, speed in zip(knots.strike_s, places, normals, speeds, strict=True):
            q, v = path(at), path.derivative()(at)
            position, rotation, jacobian = (np.asarray(x) for x in arm.jacobian(q))
            twist = jacobian @ v
            expected = seven.centre + place - ball.radius_m * normal
            np.testing.assert_allclose(position, expected, atol=1e-6)  # m
            np.testing.assert_allclose(rotation[:, 2], normal, atol=1e-5)
            np.testing.assert_allclose(twist[:3], speed * normal, atol=1e-5)  # m/s
            np.testing.assert_allclose(np.cross(twist[3:], normal), 0.0, atol=1e-4)  # rad/s
        main = 1 if given["offset_m"] else 0
        assert given["paddle_speed_m_s"] == pytest.approx(speeds[main], rel=1e-6)
        assert given["face_tilt_rad"] == pytest.approx(np.arccos(normals[main][2]), abs=1e-6)
        assert given["flight_s"] == pytest.approx(flight, rel=1e-9)


def test_a_deliverable_point_is_in_time_and_below_its_bound(points: RallyPoints) -> None:
    done = points.verdict == DELIVERABLE
    assert (points.cycle_s[done] <= points.flight_s[done]).all()
    np.testing.assert_allclose(points.margin_s[done], (points.flight_s - points.cycle_s)[done], atol=1e-9)
    assert (points.time_bound_s[done] <= points.cycle_s[done]).all()
    assert (points.paddle_speed_m_s[done] <= points.speed_bound_m_s[done]).all()


# Refused


def test_a_point_refused_by_time_is_refused_by_the_programme(seven: Court, points: RallyPoints) -> None:
    rows = np.flatnonzero((points.verdict == NOT_DELIVERABLE) & (points.limit == BY_TIME))
    assert len(rows) >= 2
    for k in rows[:1].tolist():
        assert too_late(seven, points_of(seven.kit.rally)[k])
        assert "alone needs" in points.reason[k] and points.joint[k] in seven.kit.setting.arm.names
    done = int(np.flatnonzero(points.verdict == DELIVERABLE)[0])
    assert not too_late(seven, points_of(seven.kit.rally)[done])


def test_a_slow_slide_refuses_by_its_speed() -> None:
    """Asked 0.3495 m/s upward of a slide that does 0.3: no more in any posture, nor by the survey's bound."""
    court = court_of(on_gantry((0.2,), own={"z": {"velocity": 0.3}}))
    given = row(points_at(court), 0)
    assert (given["verdict"], given["limit"], given["joint"]) == (NOT_DELIVERABLE, "velocity", "z")
    bound = upper(court.kit.setting, court.stances, np.array([[0.0, 0.0, 1.0]])).still.max()
    assert given["speed_bound_m_s"] == pytest.approx(bound) == pytest.approx(0.3)  # m/s
    assert given["paddle_speed_m_s"] == pytest.approx(np.sqrt(2 * G * 0.2) * (1 - E) / (1 + E))


def test_a_capped_tool_refuses_by_the_tools_speed() -> None:
    cell = on_gantry((0.4,))
    assert cell.tool is None
    given = row(points_at(court_of(replace(cell, tool=Tool(0.3, "invented")))), 0)
    assert (given["verdict"], given["limit"], given["joint"]) == (NOT_DELIVERABLE, "tool speed", "")


def test_a_centre_out_of_reach_is_proved_and_ends_in_one() -> None:
    """The links' lengths by hand: three slides of 1.5 m, nothing else."""
    court = court_of(on_gantry((0.2,)))
    assert court.kit.reach[1] == pytest.approx(4.5)  # m
    cell = rallied(gantry_cell(), (4.0, 4.0, 4.0))
    result = reach.size_rally(cell, advice=False)
    assert result.verdict.exit_code == 1
    given = row(result.evidence.points, 0)
    assert (given["verdict"], given["basis"], given["limit"]) == (NOT_DELIVERABLE, "proved", "reach")
    assert result.evidence.edges == result.evidence.offsets == () and result.evidence.shown is None


def test_an_offset_past_the_travel_is_searched_for_and_not_reached() -> None:
    points = points_at(court_of(on_gantry((0.5,), offsets_m=(0.0, 1.7), bearings_rad=(0.0,))))
    assert points.verdict.tolist() == [DELIVERABLE, NOT_DELIVERABLE]
    assert (points.basis[1], points.limit[1]) == ("searched", "reach")


# Unknown limits, margins, latency


def test_an_unknown_limit_leaves_points_open_and_says_what_would_do() -> None:
    result = reach.size_rally(on_gantry((0.2,), own={"z": {"torque_rate": None}}), advice=False)
    given = row(result.evidence.points, 0)
    assert (given["verdict"], given["basis"]) == (UNDECIDED, "demonstrated")
    assert "torque rate must be known" in given["reason"]
    assert result.verdict.exit_code == 3 and "torque rate unknown for z" in result.verdict.sentence
    (need,) = [need for need in result.needs if need.limit == "torque rate"]
    assert need.joint == "z" and need.sufficient is not None
    own = {"z": {"torque_rate": need.sufficient * 1.01}}
    assert points_at(court_of(on_gantry((0.2,), own=own))).verdict[0] == DELIVERABLE


def test_no_margins_never_make_it_worse(seven: Court, points: RallyPoints) -> None:
    rally = seven.kit.rally
    free = points_at(court_of(replace(bench("bench7"), margins=NO_MARGINS, rally=rally)))
    done = points.verdict == DELIVERABLE
    assert (free.verdict[done] == DELIVERABLE).all()
    assert points.margin_free[done].all()
    assert (free.verdict[points.margin_free] == DELIVERABLE).all()
    assert (free.margin_free == (free.verdict == DELIVERABLE)).all()


@pytest.mark.parametrize("arm", [pytest.param("seven", marks=pytest.mark.campaign), "gantry"])
def test_more_latency_delivers_no_more_and_comes_off_the_margin(
    arm: str, request: pytest.FixtureRequest
) -> None:
    court: Court = request.getfixturevalue(arm)
    before: Any = None
    lost = compared = 0
    for latency in (0.0, 0.02, 0.05, 0.1, 0.2):
        found = points_at(again(court, latency_s=latency))
        done = found.verdict == DELIVERABLE
        if before is not None:
            was, margin, at, q = before
            assert not (done & ~was).any()
            lost += int((was & ~done).sum())
            both = done & (found.margin_s > 1e-9) & (found.q == q).all(axis=1)  # played from the same stance
            compared += int(both.sum())
            np.testing.assert_allclose(margin[both] - found.margin_s[both], latency - at, atol=1e-9)
        before = (done, found.margin_s, latency, found.q)
    assert lost > 0 and compared > 0


# Other arms, faces and envelopes


def test_a_paddle_that_loses_nothing_stays_where_it_is() -> None:
    court = court_of(with_contact(on_gantry((0.01, 0.2)), restitution=1.0))
    points = points_at(court)
    assert points.verdict.tolist() == [DELIVERABLE] * 2
    np.testing.assert_allclose(points.paddle_speed_m_s, 0.0, atol=1e-12)
    for knots in points.motions.values():
        q = path_of(knots)(np.linspace(0, knots.t_s[-1], 50))
        assert np.abs(q - court.stances[0]).max() < 1e-9  # m or rad


def test_an_apex_of_a_centimetre(gantry: Court) -> None:
    points = points_at(gantry)
    assert points.flight_s[0] == pytest.approx(2 * np.sqrt(2 * 0.01 / G))
    assert points.verdict[0] == DELIVERABLE
    assert points.cycle_s[0] >= points.time_bound_s[0] == pytest.approx(4 * points.paddle_speed_m_s[0] / 40.0)


def test_one_bearing_and_the_centre_alone() -> None:
    points = points_at(court_of(on_gantry((0.2, 0.3), offsets_m=(0.0,), bearings_rad=(2.0,))))
    assert points.offset_m.tolist() == [0.0, 0.0] and points.bearing_rad.tolist() == [2.0, 2.0]


def test_two_bounces_return_with_half_the_tilt() -> None:
    one, two = (
        points_at(
            court_of(on_gantry((0.2,), offsets_m=(0.1,), bearings_rad=(0.0,), recover_within_bounces=count))
        )
        for count in (1, 2)
    )
    assert one.verdict[0] == two.verdict[0] == DELIVERABLE
    assert two.face_tilt_rad[0] == pytest.approx(one.face_tilt_rad[0] / 2, rel=1e-3)
    assert len(two.motions[0].strike_s) == len(one.motions[0].strike_s) + 1


def test_six_joints_keep_a_ball_up() -> None:
    court = court_of(on_bench("bench6", (0.2, 0.4)))
    points = points_at(court)
    assert (points.verdict == DELIVERABLE).any()
    assert points.q.shape == (2, 6)


def test_two_joints_in_a_plane_hold_no_level_face_away_from_their_one_posture() -> None:
    cell = robot_cell("link2", paddle=LEVEL_TOML, rest=BALL_TOML)
    points = points_at(court_of(rallied(cell, (0.5, 0.0, 0.3))))
    assert (points.verdict[0], points.basis[0], points.limit[0]) == (NOT_DELIVERABLE, "searched", "reach")


# What is not right yet


def test_what_a_late_eye_delivers_an_early_one_is_not_refused() -> None:
    """Who sees the ball after 66 ms can wait 2 ms more."""
    court = court_of(on_gantry((0.03,), offsets_m=(0.01,), bearings_rad=(0.0,)))
    early, late = (str(points_at(again(court, latency_s=latency)).verdict[0]) for latency in (0.066, 0.068))
    assert late == DELIVERABLE
    assert early != NOT_DELIVERABLE


def test_what_a_late_eye_delivers_an_early_one_does_too() -> None:
    """At latencies whose own turn is among those that an earlier sight may wait for."""
    court = court_of(on_gantry((0.03,)))
    made = court.exchanges([Point(0.03, 0.01, 0.0)], 0)
    half = court.kit.cell.accept.strike_window_s / 2
    good = [court.delivered(made, 0, half + turn)[0][0] for turn in TURNS_S[:18]]
    assert good[0] and not good[-1]
    assert good == sorted(good, reverse=True)


def test_without_margins_says_what_a_run_without_them_says() -> None:
    """0.343 m/s kept of 0.35, 0.3495 asked: with no margin no bound refuses it."""
    cell = on_gantry((0.2,), own={"z": {"velocity": 0.35}})
    with_share = reach.size_rally(replace(cell, margins=Margins()), advice=False)
    without = reach.size_rally(cell, advice=False)
    assert with_share.verdict.verdict != DELIVERABLE
    assert with_share.without_margins == without.verdict.verdict


def test_a_refusal_that_holds_only_with_margins_is_left_open_without() -> None:
    """0.335 m/s kept of 0.342, 0.3495 asked less the accepted 3 %, 0.339: with no margin no bound refuses it."""
    cell = on_gantry((0.2,), own={"z": {"velocity": 0.342}})
    result = reach.size_rally(replace(cell, margins=Margins()), advice=False)
    assert result.verdict.verdict == NOT_DELIVERABLE
    assert result.without_margins == UNDECIDED


def test_two_slides_that_share_a_strike_are_not_refused_for_how_it_was_shared() -> None:
    """Shared as their accelerations are, each slide is back after 4 u / (a + b), less than the flight."""
    own = {"z": {"acceleration": 3.06}, "lift": {"acceleration": 0.765}}
    cell = rallied(gantry_cell(own, lift=True, window_s=0.0), CENTRE["gantry"])
    given = row(points_at(court_of(cell)), 0)
    assert 4 * given["paddle_speed_m_s"] / (3.06 + 0.765) < 0.91 * given["flight_s"]
    assert given["verdict"] != NOT_DELIVERABLE


def test_a_slide_slower_than_asked_by_less_than_is_accepted_is_not_refused() -> None:
    """0.345 m/s of 0.3495: 1.3 % short where 3 % are accepted."""
    court = court_of(on_gantry((0.2,), own={"z": {"velocity": 0.345}}))
    given = row(points_at(court), 0)
    assert given["paddle_speed_m_s"] < 0.345 * (1 + court.kit.setting.accept.strike_speed_error_share)
    assert given["verdict"] != NOT_DELIVERABLE


def test_an_arm_that_must_turn_its_paddle_to_strike_can_not() -> None:
    """Two links with the face level in one posture alone: any way up turns it, at 0.9 rad/s for the 0.35 m/s asked."""
    cell = robot_cell(
        "link2",
        paddle="[paddle]\nmount = { xyz_m = [0.0, 0.0, 0.0] }\nradius_m = 0.05\nmass_kg = 0.1\n",
        rest=BALL_TOML,
    )
    arm = replace(cell.arm, start=(0.8, -0.8))
    place = 0.5 * np.array([np.cos(0.8), 0.0, np.sin(0.8)]) + np.array([0.4, 0.0, 0.02])
    given = row(points_at(court_of(rallied(replace(cell, arm=arm), tuple(place.tolist())))), 0)
    assert given["verdict"] == NOT_DELIVERABLE and given["basis"] == "searched"
    assert "m/s asked, at most" in given["reason"]


def test_with_latency_a_deliverable_point_is_above_its_time_bound() -> None:
    court = court_of(on_gantry((0.05,), offsets_m=(0.05,), bearings_rad=(0.0,), latency_s=0.06))
    given = row(points_at(court), 0)
    assert given["verdict"] == DELIVERABLE
    assert given["time_bound_s"] <= given["cycle_s"]
