"""Edges are true edges, centres count what they hold, shares and largest errors are what they say."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from rally_case import (
    LIMIT_NAMES,
    G,
    again,
    court_of,
    on_bench,
    on_gantry,
    points_at,
    with_contact,
)
from scipy.stats import binomtest

import reach.rally.envelope as envelope_module
from reach.evidence.rallies import ApexEdge, OffsetEdge
from reach.rally.answer import answer
from reach.rally.centres import grid, weighed
from reach.rally.court import Court, Point, points_of
from reach.rally.edges import APEXES_M, OFFSETS_M, apex_edges, offset_edges
from reach.rally.envelope import best_stance, envelope
from reach.rally.spread import KINDS, Errors, Kind, feasible, interval, largest_errors, passes
from reach.verdict import DELIVERABLE, UNDECIDED

BESIDE = 0.004  # of an edge: outside of it, further than the bisection leaves
LINES = [(0.0, 0.0), (0.04, 0.0), (0.04, np.pi / 2)]
ROUNDS = [(0.1, 0.0), (0.1, np.pi / 2), (0.3, 0.0)]


@pytest.fixture(scope="module")
def seven() -> Court:
    return court_of(on_bench("bench7", (0.1, 0.3), offsets_m=(0.0, 0.04), bearings_rad=(0.0, np.pi / 2)))


@pytest.fixture(scope="module")
def slow() -> Court:
    """A gantry whose vertical slide is slow: the upper edge is its speed's."""
    return court_of(on_gantry((0.2,), own={"z": {"velocity": 0.5}}))


@pytest.fixture(scope="module")
def apexes(seven: Court) -> tuple[ApexEdge, ...]:
    return apex_edges(seven, 0, LINES)


@pytest.fixture(scope="module")
def offsets(seven: Court) -> tuple[OffsetEdge, ...]:
    return offset_edges(seven, 0, ROUNDS)


def holds(court: Court, *point: float) -> bool:
    """From any stance, one after the other."""
    for stance in range(len(court.stances)):
        made = court.exchanges([Point(*point)], stance)
        if court.delivered(made, stance, court.kit.rally.latency_s)[0][0]:
            return True
    return False


# Edges


def test_the_apex_edges_are_true_edges(seven: Court, apexes: tuple[ApexEdge, ...]) -> None:
    closed = 0
    for (offset, bearing), edge in zip(LINES, apexes, strict=True):
        assert (edge.offset_m, edge.bearing_rad) == (offset, bearing)
        assert edge.low_m is not None and edge.high_m is not None and edge.low_m < edge.high_m
        assert holds(seven, edge.low_m, offset, bearing) and holds(seven, edge.high_m, offset, bearing)
        for value, side, is_open, limit in (
            (edge.low_m, -1, edge.low_open, edge.low_limit),
            (edge.high_m, 1, edge.high_open, edge.high_limit),
        ):
            if is_open:
                assert value == APEXES_M[0 if side < 0 else -1] and limit == ""
            else:
                closed += 1
                assert not holds(seven, value * (1 + side * BESIDE), offset, bearing)
                assert limit in LIMIT_NAMES
    assert closed >= 3


def test_offsets_of_nothing_reach_lower(apexes: tuple[ApexEdge, ...]) -> None:
    lows = [edge.low_m for edge in apexes]
    assert lows[0] is not None and all(low is not None and low > lows[0] for low in lows[1:])


def test_the_largest_offset_is_a_true_edge(seven: Court, offsets: tuple[OffsetEdge, ...]) -> None:
    closed = 0
    for (apex, bearing), edge in zip(ROUNDS, offsets, strict=True):
        assert (edge.apex_m, edge.bearing_rad) == (apex, bearing) and edge.largest_m is not None
        assert holds(seven, apex, edge.largest_m, bearing)
        if edge.open:
            assert edge.largest_m == OFFSETS_M[-1] and edge.limit == ""
        else:
            closed += 1
            assert not holds(seven, apex, edge.largest_m * 1.02, bearing)
            assert edge.limit in LIMIT_NAMES
    assert closed >= 2
    assert offsets[2].largest_m is not None and offsets[0].largest_m is not None
    assert offsets[2].largest_m > offsets[0].largest_m  # a higher ball leaves more time


def test_the_upper_edge_is_where_the_slide_is_as_fast_as_the_strike(slow: Court) -> None:
    """u = √(2gh)(1 − e)/(1 + e) by hand; the lower edge is open: 40 m/s² hold an apex of a centimetre."""
    (edge,) = apex_edges(slow, 0, [(0.0, 0.0)])
    highest = (0.998 * 0.5 * 1.7 / 0.3) ** 2 / (2 * G)  # 0.2 % of a limit is kept for what nodes may miss
    assert edge.high_m == pytest.approx(highest, rel=3e-3)
    assert (edge.high_limit, edge.high_joint, edge.high_open) == ("velocity", "z", False)
    assert (edge.low_m, edge.low_limit, edge.low_open) == (APEXES_M[0], "", True)


def test_no_edge_where_nothing_holds() -> None:
    court = court_of(on_gantry((0.2,), own={"z": {"acceleration": 0.5}}))
    (edge,) = apex_edges(court, 0, [(0.0, 0.0)])
    assert (edge.low_m, edge.high_m, edge.low_open, edge.high_open) == (None, None, False, False)
    assert (edge.low_limit, edge.low_joint) == ("acceleration", "z")
    (out,) = offset_edges(court, 0, [(0.2, 0.0)])
    assert (out.largest_m, out.open) == (None, False)


# Centres


def test_the_grid_of_centres_goes_x_slowest_to_the_far_corner() -> None:
    cell = on_gantry((0.2,), centres_box_m=((0.0, -0.1, 0.4), (0.3, 0.1, 0.4)), centres_spacing_m=0.1)
    assert cell.rally is not None
    places = grid(cell.rally)
    assert len(places) == 4 * 3 * 1
    np.testing.assert_allclose(
        places[:4], [(0, -0.1, 0.4), (0, 0, 0.4), (0, 0.1, 0.4), (0.1, -0.1, 0.4)], atol=1e-12
    )
    np.testing.assert_allclose(places[-1], (0.3, 0.1, 0.4), atol=1e-12)


def test_a_centre_counts_the_points_it_holds(seven: Court) -> None:
    kit, own = seven.kit, seven.kit.rally.centre_m
    found = weighed(kit, own)
    assert (found.position, found.points) == (own, len(points_of(kit.rally)))
    counts = [
        int(seven.delivered(seven.exchanges(points_of(kit.rally), k), k, 0.0)[0].sum())
        for k in range(len(seven.stances))
    ]
    assert found.deliverable in counts and found.deliverable + found.undecided == found.points
    far = weighed(kit, (5.0, 0.0, 0.5))
    assert (far.deliverable, far.undecided, far.limit, far.apexes_m) == (0, 0, "reach", ())


# Shares and errors


@pytest.mark.parametrize(("done", "count"), [(0, 40), (1, 40), (23, 40), (40, 40), (7, 9)])
def test_the_interval_is_wilsons(done: int, count: int) -> None:
    expected = binomtest(done, count).proportion_ci(confidence_level=0.95, method="wilson")
    np.testing.assert_allclose(interval(done, count), (expected.low, expected.high), atol=1e-6)


def test_of_no_cases_nothing_is_known() -> None:
    assert interval(0, 0) == (0.0, 1.0)


def test_the_same_seed_the_same_share(seven: Court) -> None:
    court = again(seven, velocity_spread_m_s=0.3, contact_offset_spread_m=0.01, cases=12)
    point = Point(0.1, 0.0, 0.0)
    first, second = (feasible(court, point, 0, np.random.default_rng([5, 1])) for _ in range(2))
    assert first == second and 0 < first[0] < 1
    others = {feasible(court, point, 0, np.random.default_rng([seed, 1]))[0] for seed in range(3)}
    assert len(others) > 1
    low, high = interval(round(12 * first[0]), 12)
    assert first[1:] == (low, high)


def test_with_no_spread_stated_only_the_nominal_is_judged(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(envelope_module, "TURNS", 1)
    done = envelope(on_gantry((0.2,)))
    assert done.nominal_only and np.isnan(done.points.feasible_share).all()
    assert np.isfinite(done.points.largest_delay_s).all()
    spread = with_contact(on_gantry((0.2,), cases=4), restitution_spread=0.01)
    done = envelope(spread)
    assert not done.nominal_only and (done.points.feasible_share == 1.0).all()


@pytest.fixture(scope="module")
def errors(seven: Court) -> Errors:
    return largest_errors(seven, [Point(0.3, 0.04, 0.0)], np.array([0]))


@pytest.mark.parametrize(("name", "kind"), list(zip(Errors._fields[1:], KINDS, strict=True)))
def test_up_to_the_largest_error_a_point_passes_and_just_above_it_does_not(
    name: str, kind: Kind, seven: Court, errors: Errors
) -> None:
    size = float(getattr(errors, name)[0])
    assert 0 < size < kind.most
    point = Point(0.3, 0.04, 0.0)
    ways = [(1, 0), (-1, 0)] if name == "restitution" else [(1, 0), (0, 1), (-1, 0), (0, -1)]

    def all_pass(by: float) -> bool:
        return bool(passes(seven, [(point, kind.make(by, *way)) for way in ways], 0).all())

    assert all_pass(size) and all_pass(size / 2)
    assert not all_pass(size + kind.most / 2**7)


def test_the_largest_contact_offset_stays_on_the_face(errors: Errors, seven: Court) -> None:
    room = 0.085 - seven.kit.cell.accept.strike_position_m
    assert errors.contact_offset_m[0] <= room


def test_the_largest_delay_is_an_edge_and_no_less_than_the_margin(seven: Court, errors: Errors) -> None:
    delay = float(errors.delay_s[0])
    point = Point(0.3, 0.04, 0.0)
    made = seven.exchanges([point], 0)
    flight = 2 * np.sqrt(2 * 0.3 / G)
    assert seven.delivered(made, 0, delay)[0].all()
    assert not seven.delivered(made, 0, delay + flight / 2**7)[0].any()
    points = points_at(seven, [point])
    assert points.verdict[0] == DELIVERABLE
    # Stopped first, the arm may turn later than a direct way would leave it; never sooner by more than that stop.
    assert 0 < delay < flight and 0 < points.margin_s[0] < flight


def test_an_error_is_the_same_for_every_bearing_on_a_gantry_alike_all_around() -> None:
    court = court_of(on_gantry((0.2,)))
    found = largest_errors(court, [Point(0.2, 0.0, 0.0), Point(0.2, 0.0, np.pi / 2)], np.array([0, 0]))
    for column in found:
        assert column[0] == pytest.approx(column[1], rel=1e-6)


# The whole


def test_the_answer_names_known_limits_and_stays_below_its_edges(monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(envelope_module, "TURNS", 2)
    cell = on_gantry((0.1,), offsets_m=(0.0, 0.05), bearings_rad=(0.0,), latency_s=0.01)
    result = answer(cell, with_advice=False)
    evidence = result.evidence
    points = evidence.points
    names = {
        *points.limit,
        *(edge.low_limit for edge in evidence.edges),
        *(e.limit for e in evidence.offsets),
    }
    assert names - {""} <= LIMIT_NAMES
    for edge in evidence.edges:
        assert edge.low_m is not None and edge.high_m is not None
        mine = (points.offset_m == edge.offset_m) & (points.verdict == DELIVERABLE)
        assert (points.apex_m[mine] >= edge.low_m * (1 - BESIDE)).all()
    assert [edge.bearing_rad for edge in evidence.offsets] == [0.0, np.pi]
    assert [bounce.apex_m for bounce in evidence.bounces] == [0.1]
    assert evidence.shown is not None and evidence.shown.offset_m == 0.05


# What is not right yet


def test_a_stopped_run_blames_no_limit(monkeypatch: pytest.MonkeyPatch) -> None:
    real = envelope_module._judge
    calls: list[int] = []

    def work(*given: Any) -> Any:
        if calls:
            raise KeyboardInterrupt
        calls.append(1)
        return real(*given)

    monkeypatch.setattr(envelope_module, "_judge", work)
    monkeypatch.setattr(envelope_module, "CHUNK", 1)
    result = answer(on_gantry((0.1, 0.2)), with_advice=False)
    assert result.evidence.stopped
    assert "cycle time" not in {reason.limit for reason in result.reasons}


def test_an_interrupt_between_two_rounds_keeps_what_is_done(monkeypatch: pytest.MonkeyPatch) -> None:
    def interrupted(*_: object) -> None:
        raise KeyboardInterrupt

    monkeypatch.setattr(envelope_module, "TURNS", 1)
    monkeypatch.setattr(envelope_module, "bounces", interrupted)
    try:
        done = envelope(on_gantry((0.2,)))
    except KeyboardInterrupt:
        pytest.fail("the points are lost")
    assert done.stopped and (done.points.verdict == DELIVERABLE).all()


def test_an_unknown_limit_is_what_decides() -> None:
    result = answer(on_gantry((0.2,), own={"z": {"torque_rate": None}}), with_advice=False)
    assert {reason.limit for reason in result.reasons if reason.decides} == {"torque rate"}


def test_no_deliverable_point_lies_below_the_lowest_apex() -> None:
    apexes, bearings = tuple(np.geomspace(0.02, 0.3, 6).tolist()), (0.0, np.pi / 2, np.pi)
    court = court_of(on_bench("bench7", apexes, offsets_m=(0.0, 0.06), bearings_rad=bearings))
    (edge,) = apex_edges(court, best_stance(court, points_of(court.kit.rally)), [(0.06, np.pi / 2)])
    points = points_at(court)
    mine = (points.offset_m == 0.06) & (points.bearing_rad == np.pi / 2) & (points.verdict == DELIVERABLE)
    assert edge.low_m is not None and mine.any()
    assert points.apex_m[mine].min() >= edge.low_m * (1 - BESIDE)


def test_a_duty_that_must_be_known_and_is_not_leaves_it_open() -> None:
    cell = on_gantry((0.2,))
    cell = replace(cell, accept=replace(cell.accept, require=(*cell.accept.require, "duty")))
    assert answer(cell, with_advice=False).verdict.verdict == UNDECIDED
