"""The second opinion on envelopes: it agrees with what was made, and differs where one number of it is another."""

from __future__ import annotations

import io
import json
from collections.abc import Callable
from copy import deepcopy
from dataclasses import replace
from functools import cache
from types import SimpleNamespace
from typing import Any

import numpy as np
import pytest
from rally_case import CENTRE, E, G, bench, court_of, gantry_cell, on_gantry, path_of, points_at, rallied

from reach.cell import Array, Cell, Contact
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Item
from reach.evidence.rallies import RallyPoints, SpeedProof, TimeProof
from reach.rally.answer import gathered
from reach.rally.envelope import Envelope
from reach.recheck.arm.engine import available
from reach.recheck.arm.ground import Ground, ground
from reach.recheck.ball import Air, Flights, tops
from reach.recheck.rally import whole as rally
from reach.recheck.rally.exchange import Exchanges, Knots, launches
from reach.recheck.rally.refusals import PROOFS, _tangent, claims
from reach.recheck.stored import BadFolder, Stored
from reach.report.document import strict
from reach.report.json import json_text
from reach.report.rally.document import document
from reach.report.rally.evidence import evidence_files
from reach.result import RallyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED, judge_rally

needs_engine = pytest.mark.skipif(not available(), reason="without the second engine")
ARCHIVES = ("points.npz", "motions.npz", PROOFS)
POINTS, MOTIONS = ARCHIVES[:2]
TIME, SPEED = 2, 3  # rows of the slow gantry that are refused by time and by speed


# What is looked at: a gantry whose slides are slow across and up, with points of every verdict


def stored_of(cell: Cell, points: RallyPoints) -> Stored:
    """An envelope's points as they are stored."""
    n = len(cell.arm.joints)
    nothing = (np.nan, np.full(n, np.nan), np.full(n, np.nan))
    evidence = gathered(cell, Envelope(points, (), (), (), (), None, nothing, True, False))
    assert cell.rally is not None
    verdict = judge_rally(evidence, cell.rally.required_share, cell.accept)
    result = RallyResult(
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
    content = files["cell.json"]
    assert content is not None
    arrays = {name: dict(np.load(io.BytesIO(files[name] or b""))) for name in ARCHIVES if files[name]}
    return Stored("out", "rally", json.loads(content), told, arrays, ())


@cache
def slow() -> tuple[Cell, RallyPoints]:
    """0.2 m: delivered at the centre and at 30 mm, 300 mm too far for 0.5 m/s; 0.4 m asks 0.49 m/s of 0.4 m/s."""
    own = {"z": {"velocity": 0.4}, "x": {"velocity": 0.5}}
    cell = on_gantry((0.2, 0.4), own=own, offsets_m=(0.0, 0.03, 0.3), bearings_rad=(0.4,))
    return cell, points_at(court_of(cell))


@cache
def whole() -> Stored:
    """The slow gantry as it was stored."""
    return stored_of(*slow())


@cache
def stand() -> Ground:
    """Its arm."""
    return ground(whole())


@cache
def giving() -> Stored:
    """Seven joints that give at a hit, drag, and a face that loses more when it is hit harder."""
    cell = bench("bench7")
    table = ((0.5, 0.8), (2.0, 0.7), (5.0, 0.6))
    contact = Contact(0.7, restitution_at=table, arm_gives=True, friction=0.1)
    assert cell.ball is not None
    ball = replace(cell.ball, drag_coefficient=0.4)
    made = rallied(replace(cell, ball=ball, contact=contact), CENTRE["bench7"], (0.2,), offsets_m=(0.04,))
    made = replace(made, rally=replace(made.rally, bearings_rad=(1.0,), recover_within_bounces=2))
    return stored_of(made, points_at(court_of(made)))


def nudged(change: Callable[[Any], Any], of: Stored | None = None) -> Stored:
    """An envelope with one thing changed: `change` gets points, motions, proofs, cell and verdict."""
    one = deepcopy(of or whole())
    arrays = {name: dict(one.arrays.get(name, {})) for name in ARCHIVES}
    points, motions, proofs = arrays.values()
    change(SimpleNamespace(points=points, motions=motions, proofs=proofs, cell=one.cell, verdict=one.verdict))
    return replace(one, arrays={name: content for name, content in arrays.items() if content})


def looked_at(stored: Stored, at: Ground | None = None) -> list[Item]:
    """Every item; the ground is that of cell.json where it was changed."""
    return rally.items(stored, at or ground(stored), lambda text: None)


def differences(stored: Stored, at: Ground | None = None) -> set[tuple[str, str, str]]:
    """Kind, place and name of every comparison that differs."""
    items = looked_at(stored, at)
    return {
        (item.kind, item.where, check.name) for item in items for check in item.checks if not check.agrees
    }


def of_point(row: int) -> str:
    return f"point {row + 1}"


# What was made is agreed to


def test_every_kind_of_point_is_there() -> None:
    _, points = slow()
    assert points.verdict.tolist() == [DELIVERABLE] * 2 + [NOT_DELIVERABLE] * 4
    assert isinstance(points.proofs[TIME], TimeProof)
    assert all(isinstance(points.proofs[row], SpeedProof) for row in range(SPEED, 6))
    assert sorted(points.proofs) == [2, 3, 4, 5]


@needs_engine
def test_all_that_was_made_is_agreed_to() -> None:
    items = looked_at(whole(), stand())
    assert {item.status for item in items} == {AGREE}, [item for item in items if item.status != AGREE]
    kinds = [item.kind for item in items]
    assert {kind: kinds.count(kind) for kind in ("limits", "torque", "strikes")} == {
        "limits": 2,
        "torque": 2,
        "strikes": 2,
    }
    assert (kinds.count("time bound"), kinds.count("speed bound"), kinds.count("verdict")) == (1, 3, 7)


def test_a_refusal_by_time_with_joints_to_spare_is_agreed_to() -> None:
    """Seven joints, margins kept back, from several stances, each with cuts of its own."""
    cell = rallied(bench("bench7"), CENTRE["bench7"], (0.03,), offsets_m=(0.06,), bearings_rad=(0.0,))
    stored = stored_of(cell, points_at(court_of(cell)))
    assert stored.arrays[POINTS]["limit"].tolist() == ["cycle time"]
    assert len(stored.arrays[PROOFS]["leg_0"]) == stored.arrays[POINTS]["postures"][0] > 2
    assert len(stored.arrays[PROOFS]["cut_leg_0"]) > len(stored.arrays[PROOFS]["leg_0"])
    items = looked_at(stored)
    assert {item.status for item in items} == {AGREE}
    assert [item.kind for item in items].count("time bound") == 1


@needs_engine
def test_an_arm_that_gives_in_air_is_agreed_to() -> None:
    stored = giving()
    assert stored.arrays[POINTS]["verdict"].tolist() == [DELIVERABLE]
    items = looked_at(stored)
    assert {item.status for item in items} == {AGREE}, [item for item in items if item.status != AGREE]
    asked = nudged(lambda one: one.cell["contact"].update(arm_gives=False), stored)
    assert ("strikes", of_point(0), "ball, apex") in differences(asked)


def test_without_an_engine_torque_and_a_paddle_that_gives_are_left_open() -> None:
    blind = replace(stand(), engine=None, why_no_engine="no engine")
    items = looked_at(whole(), blind)
    assert {(item.kind, item.status) for item in items if item.status != AGREE} == {("torque", NOT_CHECKABLE)}
    bench_blind = replace(ground(giving()), engine=None, why_no_engine="no engine")
    open_ = {item.kind for item in looked_at(giving(), bench_blind) if item.status == NOT_CHECKABLE}
    assert open_ == {"torque", "strikes"}


def test_a_centre_out_of_reach_is_proved_again() -> None:
    cell = rallied(gantry_cell(), (4.0, 4.0, 4.0))
    stored = stored_of(cell, points_at(court_of(cell)))
    assert stored.arrays[POINTS]["basis"].tolist() == ["proved"]
    (item,) = [item for item in looked_at(stored) if item.kind == "reach proof"]
    assert item.status == AGREE

    def nearer(one: Any) -> None:
        one.points["centre"] = one.points["centre"] * 0.5
        one.cell["rally"]["centre_m"] = [2.0, 2.0, 2.0]

    assert differences(nudged(nearer, stored)) == {("reach proof", of_point(0), "beyond the links")}


def test_an_unknown_limit_leaves_a_demonstrated_point_undecided() -> None:
    cell = on_gantry((0.2,), own={"z": {"torque_rate": None}})
    stored = stored_of(cell, points_at(court_of(cell)))
    assert stored.arrays[POINTS]["verdict"].tolist() == [UNDECIDED]
    assert not differences(stored)


def test_notes_say_what_rests_on_a_search() -> None:
    told = rally.notes(whole())
    assert told[0].startswith("4 refused by speed or by time")
    away = nudged(lambda one: one.points["limit"].__setitem__(TIME, "reach"))
    assert [note.split(" ")[0] for note in rally.notes(away)[:2]] == ["1", "3"]


# One number that is another shows


def _add(name: str, by: float, at: Any = ..., of: str = "motions") -> Callable[[Any], None]:
    def change(one: Any) -> None:
        arrays = getattr(one, of)
        arrays[name] = arrays[name].copy()
        arrays[name][at] += by

    return change


def _set(table: str, key: str, value: Any) -> Callable[[Any], None]:
    return lambda one: one.cell[table].__setitem__(key, value)


def _limit(joint: int, kind: str, side: float) -> Callable[[Any], None]:
    def change(one: Any) -> None:
        one.cell["arm"]["joints"][joint]["limits"][kind] = {"lo": -side, "hi": side, "source": ""}

    return change


def _shared(one: Any) -> None:
    """The point at the centre told as not deliverable."""
    one.points["verdict"] = one.points["verdict"].astype("U20")
    one.points["verdict"][0] = NOT_DELIVERABLE


def _turned(one: Any) -> None:
    """A multiplier of a cut with the other sign."""
    one.proofs[f"cut_weight_{TIME}"] = -one.proofs[f"cut_weight_{TIME}"]


def _twice(one: Any) -> None:
    """The one leg told twice, for two stances."""
    for name in [key for key in one.proofs if key.endswith(f"_{TIME}") and not key.startswith("cut_")]:
        one.proofs[name] = np.concatenate([one.proofs[name]] * 2)
    one.points["postures"] = one.points["postures"] + 1


def _unproved(one: Any) -> None:
    """A refusal without its proof."""
    one.proofs["rows"], one.proofs["kind"] = one.proofs["rows"][1:], one.proofs["kind"][1:]


FIRST, SECOND = of_point(0), of_point(1)
LATE, FAST = of_point(TIME), of_point(SPEED)
NUDGES: dict[str, tuple[Callable[[Any], Any], tuple[str, str, str]]] = {
    "knot position": (_add("q_1", 1e-6, (3, 0)), ("strikes", SECOND, "strike point")),
    "knot velocity": (_add("v_1", 1e-3, (3, 2)), ("strikes", SECOND, "speed")),
    "wrist that turns": (_add("v_1", 1e-2, (slice(3, 5), 3)), ("strikes", SECOND, "turning")),
    "strike instant": (_add("strike_s_0", 1e-4, 1), ("strikes", FIRST, "flight")),
    "no rest": (_add("a_0", 1e-3, (-1, 2)), ("strikes", FIRST, "rest at both ends")),
    "elsewhere at rest": (_add("q", 1e-6, (0, 1), "points"), ("strikes", FIRST, "ready posture")),
    "stated velocity": (_limit(2, "velocity", 0.3), ("limits", FIRST, "velocity")),
    "stated acceleration": (_limit(2, "acceleration", 1.0), ("limits", FIRST, "acceleration")),
    "accepted speed": (
        _set("accept", "strike_lateral_m_s", 0.0),
        ("strikes", SECOND, "strike window, aside"),
    ),
    "restitution": (_set("contact", "restitution", 0.71), ("strikes", FIRST, "speed")),
    "ball after it": (_set("contact", "restitution", 0.71), ("point", FIRST, "paddle_speed_m_s")),
    "ball radius": (_set("ball", "radius_m", 0.021), ("strikes", FIRST, "strike point")),
    "gravity": (_set("arm", "gravity_m_s2", [0, 0, -9.8]), ("strikes", FIRST, "flight")),
    "apex": (_add("apex_m", 1e-3, 0, "points"), ("as asked", "points", "apex, offset, bearing")),
    "bearing": (_add("bearing_rad", 1e-3, 1, "points"), ("strikes", SECOND, "offset and bearing")),
    "paddle speed": (_add("paddle_speed_m_s", 1e-6, 1, "points"), ("point", SECOND, "paddle_speed_m_s")),
    "face tilt": (_add("face_tilt_rad", 1e-6, 1, "points"), ("point", SECOND, "face_tilt_rad")),
    "dual": (_add(f"dual_{SPEED}", -0.01, 2, "proofs"), ("speed bound", FAST, "dual")),
    "dual aside": (_add(f"dual_{SPEED}", 1e-3, 0, "proofs"), ("speed bound", FAST, "bound")),
    "dual on the spin": (_add(f"dual_{SPEED}", 1e-3, 5, "proofs"), ("speed bound", FAST, "dual on the spin")),
    "needed": (_add(f"needed_m_s_{SPEED}", 1e-6, (), "proofs"), ("speed bound", FAST, "needed")),
    "other posture": (_add(f"q_{SPEED}", 1e-3, 0, "proofs"), ("speed bound", FAST, "posture, place")),
    "slide that is fast enough": (
        _limit(2, "velocity", 0.5),
        ("speed bound", FAST, "bound above what is needed"),
    ),
    "multiplier's sign": (_turned, ("time bound", LATE, "multipliers below 0")),
    "multiplier": (_add(f"cut_weight_{TIME}", 0.1, 0, "proofs"), ("time bound", LATE, "short")),
    "place multiplier": (_add(f"place_dual_{TIME}", 0.1, (0, 0, 0), "proofs"), ("time bound", LATE, "short")),
    "tangent": (_add(f"cut_speeds_{TIME}", 0.1, (0, 0), "proofs"), ("time bound", LATE, "short")),
    "short": (_add(f"short_{TIME}", 1e-6, 0, "proofs"), ("time bound", LATE, "short")),
    "flight of a leg": (_add(f"flight_s_{TIME}", 1e-6, 0, "proofs"), ("time bound", LATE, "flight")),
    "stance": (_add(f"stance_{TIME}", 1e-3, (0, 2), "proofs"), ("time bound", LATE, "stance, place")),
    "one stance for two": (_twice, ("time bound", LATE, "stances")),
    "slide that is in time": (
        _limit(0, "velocity", 4.0),
        ("time bound", LATE, "conditions that can be kept"),
    ),
    "verdict of a point": (_shared, ("verdict", FIRST, "verdict")),
    "refusal without a proof": (_unproved, ("verdict", LATE, "verdict")),
    "verdict": (lambda one: one.verdict.update(verdict=DELIVERABLE), ("verdict", "", "verdict")),
    "count": (lambda one: one.verdict["figures"].update(deliverable=3), ("verdict", "", "deliverable")),
}


@pytest.mark.parametrize("name", NUDGES)
def test_a_nudge_shows(name: str) -> None:
    change, found = NUDGES[name]
    stored = nudged(change)
    same_arm = stored.cell["arm"] == whole().cell["arm"] and stored.cell["accept"] == whole().cell["accept"]
    assert found in differences(stored, stand() if same_arm else None)


def test_slower_joints_never_undo_a_refusal() -> None:
    """What is refused at 0.5 m/s is refused at 0.45; the stored sums are others then, the conclusion is the same."""
    found = differences(nudged(_limit(0, "velocity", 0.45)))
    assert ("time bound", LATE, "short") in found
    assert ("time bound", LATE, "conditions that can be kept") not in found
    assert ("verdict", LATE, "verdict") not in found


# What the proofs stand on


def test_no_motion_goes_farther_than_a_tangent_says() -> None:
    """Random accelerations within the limits, speeds kept within theirs, against cuts taken anywhere."""
    rng = np.random.default_rng(5)
    gain, brake, top, time_s, steps = 12.0, 9.0, 1.5, 0.4, 400
    nearest = np.inf
    for _ in range(60):
        rate = rng.uniform(-1, 1, 4).repeat(steps // 4) + rng.uniform(-0.2, 1.2)
        rate = np.clip(rate * gain, -brake, gain)
        speed = np.empty(steps + 1)
        speed[0] = rng.uniform(-top, top)
        for k in range(steps):
            speed[k + 1] = min(speed[k] + rate[k] * time_s / steps, top)
        way = float((speed[1:] + speed[:-1]).sum() * time_s / steps / 2)
        ends = speed[[0, -1]]
        for at in (ends, rng.uniform(-top, top, 2)):
            begin_s, end_s, most = _tangent(at, time_s, gain, brake, top)
            room = begin_s * ends[0] + end_s * ends[1] + most - way
            assert room >= -1e-9  # m or rad
            nearest = min(nearest, room)
    assert nearest < 0.02


def test_a_launch_in_air_comes_down_where_it_is_to() -> None:
    """The flights found, followed from their start: distance and apex."""
    air = Air(0.1, 0.0, np.array([0.0, 0.0, -G]))
    ways = [(0.1, 0.0), (0.3, 0.2), (0.8, 0.5)]
    found = launches(air, ways)
    assert list(found) == ways
    velocity = np.array([one.velocity for one in found.values()])
    zero = np.zeros_like(velocity)
    seconds = np.array([one.seconds for one in found.values()])
    places, _ = Flights.of(air, zero, velocity, zero, seconds).ends()
    np.testing.assert_allclose(places, [[way, 0.0, 0.0] for _, way in ways], atol=1e-9)  # m
    np.testing.assert_allclose(tops(air, zero, velocity, zero), [apex for apex, _ in ways], atol=1e-9)  # m


def test_strikes_by_hand() -> None:
    """A ball straight up over an apex h: paddle at (1 − e)/(1 + e) √(2 g h), flights of 2 √(2 h/g)."""
    made = Exchanges(whole(), [(0.2, 0.0), (0.2, 0.03)])
    steady, aside = made.at(0.2, 0.0, 0.0), made.at(0.2, 0.03, 0.4)
    assert steady is not None and aside is not None
    np.testing.assert_allclose(steady.speeds(0.0), (1 - E) / (1 + E) * np.sqrt(2 * G * 0.2), rtol=1e-12)
    np.testing.assert_allclose(aside.flights_s, 2 * np.sqrt(2 * 0.2 / G), rtol=1e-12)
    np.testing.assert_allclose(aside.place[1], [0.03 * np.cos(0.4), 0.03 * np.sin(0.4), 0.0], atol=1e-15)
    assert len(aside.place) == 4


def test_quintics_are_those_of_another_library() -> None:
    _, points = slow()
    own, path = points.motions[1], path_of(points.motions[1])
    knots = Knots.of(whole(), 1, 5)
    times = np.linspace(0.0, own.t_s[-1] - 1e-9, 50)
    q, v = knots.at(times)
    np.testing.assert_allclose(q, path(times), atol=1e-12)
    np.testing.assert_allclose(v, path.derivative()(times), atol=1e-10)


# Hostile folders


def _put(of: str, name: str, value: Any) -> Callable[[Any], None]:
    return lambda one: getattr(one, of).__setitem__(name, value)


def _broken(of: str, name: str, with_: float) -> Callable[[Any], None]:
    def change(one: Any) -> None:
        array: Array = getattr(one, of)[name] * 1.0
        array.reshape(-1)[0] = with_
        getattr(one, of)[name] = array

    return change


HOSTILE: dict[str, Callable[[Any], Any]] = {
    "centre of two": _put("points", "centre", np.zeros((6, 2))),
    "fewer apexes": _put("points", "apex_m", np.zeros(5)),
    "apex below ground": _put("points", "apex_m", np.full(6, -1.0)),
    "apex beyond all": _put("points", "apex_m", np.full(6, 1e300)),
    "verdicts as numbers": _put("points", "verdict", np.zeros(6)),
    "no verdicts": lambda one: one.points.pop("verdict"),
    "rows beyond": _put("motions", "rows", np.array([0, 9])),
    "row twice": _put("motions", "rows", np.array([0, 0])),
    "knots that do not rise": _put("motions", "t_s_0", np.zeros(6)),
    "a year of motion": _broken("motions", "t_s_0", -3e7),
    "knot that is none": _broken("motions", "q_0", np.nan),
    "strike after the end": _put("motions", "strike_s_0", np.array([0.1, 1e6])),
    "no strikes": _put("motions", "strike_s_0", np.zeros(0)),
    "unknown kind of proof": _put("proofs", "kind", np.array(["time", "faith", "speed", "speed"])),
    "proofs of no point": _put("proofs", "rows", np.array([2, 3, 4, 77])),
    "dual of seven": _put("proofs", f"dual_{SPEED}", np.zeros(7)),
    "dual that is none": _broken("proofs", f"dual_{SPEED}", np.inf),
    "strike of none": _put("proofs", f"strike_{SPEED}", np.array(12)),
    "cut of no joint": _put("proofs", f"cut_joint_{TIME}", np.array([99])),
    "cut without a sign": _put("proofs", f"cut_sign_{TIME}", np.array([0.5])),
    "leg of none": _put("proofs", f"leg_{TIME}", np.array([5])),
    "posture of two": _put("proofs", f"q_{TIME}", np.zeros((1, 2, 2))),
    "accepted nothing": _put("cell", "accept", {}),
    "requires numbers": lambda one: one.cell["accept"].update(require=[1]),
    "bounces without end": lambda one: one.cell["rally"].update(recover_within_bounces=1e12),
    "ball of words": lambda one: one.cell["ball"].update(radius_m="wide"),
    "apexes that are no list": lambda one: one.cell["rally"].update(apexes_m=0.2),
}


@pytest.mark.parametrize("name", HOSTILE)
def test_a_hostile_folder_is_refused(name: str) -> None:
    with pytest.raises(BadFolder):
        looked_at(nudged(HOSTILE[name]), stand())


@pytest.mark.parametrize("size", [1e9, 1e200])
def test_numbers_beyond_measure_differ_and_nothing_breaks(size: float) -> None:
    names = [(MOTIONS, "v_0"), (MOTIONS, "q_1"), (PROOFS, f"dual_{SPEED}"), (PROOFS, f"cut_weight_{TIME}")]
    for file, name in names:
        of = {MOTIONS: "motions", PROOFS: "proofs"}[file]
        assert differences(nudged(_broken(of, name, size)), stand())


def test_proofs_are_the_same_bytes_again_and_none_without_a_refusal() -> None:
    cell, points = slow()
    one, other = stored_of(cell, points), stored_of(cell, points)
    assert claims(one, 6, 5).keys() == claims(other, 6, 5).keys() == {2, 3, 4, 5}
    cell = on_gantry((0.2,))
    assert PROOFS not in stored_of(cell, points_at(court_of(cell))).arrays


def test_a_scaled_proof_proves_no_more() -> None:
    """Multipliers times a million make the sum a million times as large; a share of all sizes stays the same."""

    def scaled(one: Any) -> None:
        names = ("velocity_dual", "place_dual", "change_dual", "cut_weight", "short")
        for name in names:
            one.proofs[f"{name}_{TIME}"] = 1e6 * one.proofs[f"{name}_{TIME}"]
        one.cell["arm"]["joints"][0]["limits"]["velocity"] = {"lo": -4.0, "hi": 4.0, "source": ""}

    found = differences(nudged(scaled))
    assert ("time bound", LATE, "conditions that can be kept") in found
    assert ("verdict", LATE, "verdict") in found
    assert DIFFER in {item.status for item in looked_at(nudged(scaled)) if item.kind == "time bound"}
