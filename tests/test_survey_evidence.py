"""What a survey stores, decided anew from its files: every stroke, bound and proof; and that a changed number shows."""

from __future__ import annotations

import io
import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from builders import load_text

from reach import load_cell, survey_strikes
from reach.cell import Cell
from reach.errors import InputError
from reach.evidence.items import AGREE, DIFFER, Item
from reach.recheck.arm.bounds import covering_m_s, reach_item, velocity_box
from reach.recheck.arm.ground import Ground, ground
from reach.recheck.stored import Stored
from reach.recheck.survey import whole as survey
from reach.report.json import write
from reach.report.survey.evidence import evidence_files

EXAMPLE = Path(__file__).parents[1] / "examples" / "wear_bench" / "cell.toml"
Change = Callable[[dict[str, np.ndarray], dict[str, Any]], None]
PIECES = ("profile_duration_s", "profile_jerk_m_s3", "profile_before")


def stored_of(cell: Cell) -> Stored:
    """Survey a cell, and what is stored of that, without the report."""
    result = survey_strikes(cell, advice=False)
    files = {name: content for name, content in evidence_files(result).items() if content is not None}
    arrays = {}
    for name in ("points.npz", "motions.npz"):
        if name in files:
            with np.load(io.BytesIO(files[name]), allow_pickle=False) as archive:
                arrays[name] = dict(archive)
    return Stored("out", "survey", json.loads(files["cell.json"]), json.loads(write(result)), arrays, ())


def surveyed(window_s: float | None = None, tool: bool = True, **asked: Any) -> Stored:
    """A survey of the example's cell with some things asked otherwise."""
    cell = load_cell(EXAMPLE)
    assert cell.survey is not None
    accept = replace(cell.accept, strike_window_s=window_s or cell.accept.strike_window_s)
    cell = replace(cell, accept=accept, survey=replace(cell.survey, **asked))
    return stored_of(cell if tool else replace(cell, tool=None))


def looked_at(stored: Stored, on: Ground | None = None) -> list[Item]:
    """The second opinion."""
    return survey.items(stored, on or ground(stored), lambda text: None)


def differing(items: list[Item]) -> set[tuple[str, str, str]]:
    """Kind, place and name of every comparison that does not agree."""
    return {
        (item.kind, item.where, check.name) for item in items for check in item.checks if not check.agrees
    }


def alone(stored: Stored, row: int, change: Change | None = None) -> Stored:
    """One strike of a survey as a survey of its own, something changed in a copy of it."""
    points = dict(stored.arrays["points.npz"])
    strikes = len(points["verdict"])
    part = slice(*points["profile_first"][row : row + 2])
    own = {name: array[part] for name, array in points.items() if name in PIECES}
    own |= {name: array[row : row + 1] for name, array in points.items() if len(array) == strikes}
    own["profile_first"] = np.array([0, part.stop - part.start])
    own = {name: array.copy() for name, array in own.items()}
    cell = json.loads(json.dumps(stored.cell))
    cell["verdict"] = str(own["verdict"][0])
    cell["survey"] |= {"listed": own["position"].tolist(), "box_m": None}
    cell["survey"] |= {key: own[key[:-1]].tolist() for key in ("normals", "directions")}
    cell["survey"]["speeds_m_s"] = own["required_m_s"].tolist()
    word = str(own["verdict"][0])
    figures = {"strikes": 1, "deliverable": int(word == "deliverable")}
    figures |= {
        "not_deliverable": int(word == "not deliverable"),
        "unreachable": int(own["limit"][0] == "reach"),
    }
    if change is not None:
        change(own, cell)
    return replace(
        stored, cell=cell, verdict={"verdict": word, "figures": figures}, arrays={"points.npz": own}
    )


@pytest.fixture(scope="module")
def coarse() -> Stored:
    return surveyed(spacing_m=0.4)


@pytest.fixture(scope="module")
def row(coarse) -> int:
    """A strike with a swing that is delivered."""
    return int(np.flatnonzero(coarse.arrays["points.npz"]["stroke"] == "swing")[1])


@pytest.fixture(scope="module")
def plain(coarse) -> Ground:
    return ground(coarse)


def test_the_example_is_right_by_its_files_alone(coarse, plain):
    items = looked_at(coarse, plain)
    assert {item.status for item in items} == {AGREE}
    kinds = [item.kind for item in items]
    strokes = coarse.arrays["points.npz"]["stroke"]
    swings, away = int((strokes == "swing").sum()), int((strokes == "").sum())
    assert swings >= 6 and away >= 1 and swings + away == len(strokes) == 12
    assert kinds.count("motion") == kinds.count("limits") == kinds.count("torque") == swings
    assert kinds.count("verdict") == 13 and items[-1].kind == "verdict" and items[-1].where == ""


def test_a_search_is_named_where_refusals_rest_on_one(coarse):
    points = coarse.arrays["points.npz"]
    refused = int((points["verdict"] == "not deliverable").sum())
    (note,) = survey.notes(coarse)
    assert note.startswith(f"{refused} of {refused} refusals rest on a search")


def nudged(name: str, place: int | tuple[int, ...], by: float) -> Change:
    """Add to one number of points.npz."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        points[name][place] += by

    return change


def scaled(name: str, piece: int, factor: float) -> Change:
    """Scale one piece of the swing."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        points[name][piece] *= factor

    return change


def stated(kind: str, joint: int, hi: float) -> Change:
    """Put another limit of a joint into cell.json."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        cell["arm"]["joints"][joint]["limits"][kind] |= {"lo": -hi, "hi": hi}

    return change


def said(name: str, *keys: Any) -> Change:
    """Put another text or number into points.npz, or at a place of cell.json."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        *path, value = keys
        if not path:
            points[name] = np.array(
                [value], dtype=points[name].dtype if points[name].dtype.kind != "U" else None
            )
            return
        inside = cell[name]
        for key in path[:-1]:
            inside = inside[key]
        inside[path[-1]] = value

    return change


@pytest.mark.parametrize(
    ("kind", "check", "change"),
    [
        pytest.param("motion", "strike point", nudged("q", (0, 2), 1e-5), id="posture"),
        pytest.param("motion", "strike point", nudged("position", (0, 0), 1e-5), id="place of the strike"),
        pytest.param("motion", "face normal", nudged("q", (0, 4), 1e-5), id="posture of the wrist"),
        pytest.param("motion", "strike speed", nudged("tangent", (0, 1), 1e-4), id="tangent"),
        pytest.param("motion", "turning", nudged("tangent", (0, 5), 1e-3), id="tangent of the wrist"),
        pytest.param("motion", "strike speed", nudged("demonstrated_m_s", 0, 1e-4), id="demonstrated speed"),
        pytest.param("motion", "joint speeds", nudged("demonstrated_m_s", 0, 1e-5), id="speed of the joints"),
        pytest.param("verdict", "verdict", nudged("demonstrated_m_s", 0, -1.0), id="demonstrated too slow"),
        pytest.param("verdict", "verdict", nudged("required_m_s", 0, 1.0), id="required speed"),
        pytest.param("verdict", "verdict", said("stroke", ""), id="stroke left out"),
        pytest.param("verdict", "verdict", said("verdict", "undecided"), id="verdict"),
        pytest.param("verdict", "basis", said("basis", "proved"), id="basis"),
        pytest.param("speed proof", "levers and cap", said("basis", "proved"), id="proof that is none"),
        pytest.param("bound", "bound still", nudged("bound_still_m_s", 0, 1e-5), id="bound, still"),
        pytest.param("bound", "bound free", nudged("bound_free_m_s", 0, 1e-5), id="bound, turning"),
        pytest.param("bound", "bound still", said("bound_still_m_s", np.inf), id="bound that is none"),
        pytest.param("bound", "bound still", said("bound_still_m_s", np.nan), id="bound left out"),
        pytest.param(
            "motion", "above the bound", nudged("bound_still_m_s", 0, -0.5), id="bound below the motion"
        ),
        pytest.param("bound", "dual still", nudged("dual_still", (0, 2), 1e-5), id="dual vector"),
        pytest.param(
            "bound", "dual free on open rates", nudged("dual_free", (0, 3), 1e-5), id="dual on a free rate"
        ),
        pytest.param(
            "bound",
            "dual still on open rates",
            nudged("dual_still", (0, 5), 1e-5),
            id="dual on a disc's spin",
        ),
        pytest.param("bound", "posture still, place", nudged("q_still", (0, 3), 1e-5), id="bound's posture"),
        pytest.param("bound", "posture free, normal", nudged("q_free", (0, 4), 1e-4), id="bound's face"),
        pytest.param("bound", "posture still, travel", nudged("q_still", (0, 6), 10.0), id="bound's travel"),
        pytest.param("motion", "rest", scaled("profile_jerk_m_s3", 0, 1.001), id="jerk of a piece"),
        pytest.param("motion", "rest", scaled("profile_duration_s", 1, 1.001), id="length of a piece"),
        pytest.param(
            "motion", "pieces before the strike first", scaled("profile_before", 1, 0), id="side of a piece"
        ),
        pytest.param("limits", "velocity", stated("velocity", 3, 0.5), id="stated velocity"),
        pytest.param("limits", "acceleration", stated("acceleration", 3, 2.0), id="stated acceleration"),
        pytest.param("limits", "jerk", stated("jerk", 3, 50.0), id="stated jerk"),
        pytest.param("torque", "torque", stated("torque", 1, 5.0), id="stated torque"),
        pytest.param("torque", "torque rate", stated("torque_rate", 1, 50.0), id="stated torque rate"),
        pytest.param("limits", "position", stated("position", 3, 1.0), id="stated travel"),
        pytest.param("limits", "tool speed", said("tool", "speed_m_s", 1.0), id="cap of the tool"),
        pytest.param("motion", "run-up", said("survey", "run_up_m", 0.05), id="run-up"),
        pytest.param(
            "motion",
            "strike window, speed",
            said("accept", "strike_speed_error_share", 1e-4),
            id="speed over the window",
        ),
        pytest.param(
            "motion", "strike window, aside", said("accept", "strike_lateral_m_s", 1e-5), id="way aside"
        ),
        pytest.param(
            "motion", "strike window, tilt", said("accept", "strike_tilt_error_rad", 1e-6), id="tilt"
        ),
        pytest.param("torque", "torque", said("paddle", "mass_kg", 40.0), id="mass of the paddle"),
        pytest.param("torque", "torque", said("arm", "gravity_m_s2", [0.0, 0.0, -60.0]), id="gravity"),
        pytest.param(
            "torque", "torque", said("arm", "joints", 1, "limits", "friction", 300.0), id="friction"
        ),
        pytest.param(
            "motion", "strike point", said("paddle", "mount", "xyz_m", [0.0, 0.0, 0.1201]), id="mount"
        ),
        pytest.param("strikes", "required speeds", said("survey", "speeds_m_s", [1.0]), id="speed asked for"),
        pytest.param("strikes", "places", nudged("position", (0, 1), 1e-5), id="place asked for"),
        pytest.param("strikes", "directions", nudged("direction", (0, 0), 1e-5), id="direction asked for"),
        pytest.param(
            "strikes", "number of strikes", said("survey", "listed", [[0.0] * 3] * 2), id="one left out"
        ),
        pytest.param("verdict", "verdict", said("accept", "require", ["duty"]), id="what must be known"),
        pytest.param(
            "verdict", "unknown limits", said("unknown", slice(None), [{"limit": "jerk"}]), id="unknown"
        ),
    ],
)
def test_a_changed_number_shows(coarse, plain, row, kind, check, change):
    stored = alone(coarse, row, change)
    on = (
        plain
        if stored.cell["arm"] == coarse.cell["arm"] and stored.cell["paddle"] == coarse.cell["paddle"]
        else None
    )
    if on is not None:  # what does not come from the arm
        accept, tool = stored.cell["accept"], stored.cell["tool"]["speed_m_s"]
        on = replace(on, accept=accept, tool_m_s=tool)
    found = looked_at(stored, on)
    assert (kind, check) in {(k, name) for k, _, name in differing(found)}


def test_a_strike_alone_is_as_right_as_among_the_others(coarse, plain, row):
    assert {item.status for item in looked_at(alone(coarse, row), plain)} == {AGREE}


def test_one_wrong_strike_is_named_and_no_other(coarse, plain, row):
    points = {name: array.copy() for name, array in coarse.arrays["points.npz"].items()}
    points["bound_free_m_s"][row] -= 1e-6
    changed = replace(coarse, arrays={"points.npz": points})
    assert differing(looked_at(changed, plain)) == {("bound", f"strike {row + 1}", "bound free")}


def test_the_whole_is_counted_anew(coarse, plain):
    verdict = {**coarse.verdict, "figures": {**coarse.verdict["figures"], "deliverable": 12}}
    assert differing(looked_at(replace(coarse, verdict=verdict), plain)) == {("verdict", "", "deliverable")}
    cell = {**coarse.cell, "survey": {**coarse.cell["survey"], "required_share": 0.3}}
    assert differing(looked_at(replace(coarse, cell=cell), plain)) == {("verdict", "", "verdict")}


def test_strikes_that_were_not_looked_at_are_undecided(coarse, plain, row):
    def emptied(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        for name, array in points.items():
            if name not in ("position", "normal", "direction", "required_m_s", "profile_first", *PIECES):
                points[name] = np.full_like(array, {"f": np.nan, "U": ""}.get(array.dtype.kind, 0))
        points["verdict"] = np.array(["undecided"])
        points["profile_first"] = np.zeros(2, dtype=np.int64)
        points.update({name: points[name][:0] for name in PIECES})

    stored = alone(coarse, row, emptied)
    stored.verdict["verdict"] = stored.cell["verdict"] = "undecided"
    stored.verdict["figures"] |= {"deliverable": 0}
    items = looked_at(stored, plain)
    assert {item.status for item in items} == {AGREE} and [item.kind for item in items] == [
        "strikes",
        *["verdict"] * 2,
    ]


@pytest.mark.parametrize(
    "change",
    [
        pytest.param(said("stroke", "dance"), id="stroke of no kind"),
        pytest.param(nudged("q", (0, 0), np.nan), id="posture without a number"),
        pytest.param(nudged("q", (0, 0), 1e300), id="posture out of this world"),
        pytest.param(scaled("profile_duration_s", 0, 1e12), id="stroke without an end"),
        pytest.param(scaled("profile_duration_s", 0, -1.0), id="time that runs back"),
        pytest.param(nudged("profile_first", 1, 5), id="more pieces than there are"),
        pytest.param(lambda points, cell: points.pop("dual_free"), id="array left out"),
        pytest.param(lambda points, cell: points.update(q=np.zeros((1, 3))), id="too few joints"),
        pytest.param(lambda points, cell: points.update(verdict=np.zeros(1)), id="numbers for words"),
        pytest.param(said("survey", "rotation", "wild"), id="way of striking"),
        pytest.param(said("survey", "speeds_m_s", None), id="no speeds"),
        pytest.param(said("survey", "normals", [["x"]]), id="normals of words"),
        pytest.param(said("accept", "require", 5), id="nothing to be known"),
        pytest.param(said("margins", "velocity_share", "none"), id="margin of words"),
        pytest.param(lambda points, cell: cell["margins"].pop("position_m"), id="margin left out"),
        pytest.param(lambda points, cell: cell.update(unknown=None), id="nothing unknown"),
    ],
)
def test_what_makes_no_survey_is_refused_by_name(coarse, plain, row, change):
    with pytest.raises(InputError) as caught:
        looked_at(alone(coarse, row, change), plain)
    assert caught.value.exit_code == 2 and "evidence/" in str(caught.value)


def test_refusals_are_proved_by_links_and_levers_alone():
    # One strike that no length of link gets to, one faster than all joints together, one that is neither.
    places = np.array([[2.0, 0.0, 0.3], [0.6, 0.0, 0.5], [0.6, 0.0, 0.5]])
    up = np.tile([0.0, 0.0, 1.0], (3, 1))
    asked = {"box_m": None, "listed": places, "normals": up, "directions": up}
    stored = surveyed(tool=False, speeds_m_s=np.array([1.0, 30.0, 1.0]), **asked)
    points = dict(stored.arrays["points.npz"])
    assert (
        points["basis"].tolist()[:2] == ["proved"] * 2 and points["limit"][0] == "reach" != points["limit"][1]
    )
    on = ground(stored)
    items = looked_at(stored, on)
    assert {item.status for item in items} == {AGREE}
    assert [item.kind for item in items if "proof" in item.kind] == ["reach proof", "speed proof"]
    near = alone(stored, 0, nudged("position", (0, 0), -1.4))
    assert differing(looked_at(near, on)) >= {("reach proof", "strike 1", "beyond the links")}
    slow = alone(stored, 1, nudged("required_m_s", 0, -25.0))
    assert differing(looked_at(slow, on)) >= {("speed proof", "strike 1", "levers and cap")}


RAIL = """<robot name="rail"><link name="base"/>
<link name="cart"><inertial><mass value="2"/><inertia ixx="0.1" iyy="0.1" izz="0.1" ixy="0" ixz="0" iyz="0"/></inertial>
</link>
<link name="bar"><inertial><mass value="1"/><inertia ixx="0.1" iyy="0.1" izz="0.1" ixy="0" ixz="0" iyz="0"/></inertial>
</link>
<joint name="slide" type="prismatic"><parent link="base"/><child link="cart"/><axis xyz="1 0 0"/>
<limit lower="-0.5" upper="0.3" velocity="2" effort="100"/></joint>
<joint name="turn" type="revolute"><parent link="cart"/><child link="bar"/><origin xyz="0 0 0.4"/><axis xyz="0 1 0"/>
<limit lower="-1" upper="1" velocity="3" effort="50" acceleration="5"/></joint></robot>"""


def test_a_slide_counts_with_its_own_speed_and_travel(tmp_path):
    # By hand: a slide of -0.5 to 0.3 m with a bar of 0.6 m turning on it, 0.4 m up; margins of the cell taken off.
    Path(tmp_path, "rail.urdf").write_text(RAIL, encoding="utf-8")
    cell = f"""
[arm]
urdf = '{tmp_path.as_posix()}/rail.urdf'
tip = "bar"
[paddle]
mount = {{ xyz_m = [0.0, 0.0, 0.6] }}
shape = "plate"
size_m = [0.1, 0.2]
mass_kg = 0.3
[margins]
position_m = 0.1
position_rad = 0.25
velocity_share = 0.5
acceleration_share = 0.2
[survey]
box_m = [[0.2, 0, 1.0], [0.2, 0, 1.0]]
normals = [[0, 0, 1]]
direction = [1, 0, 1]
paddle_speed_m_s = 0.5
"""
    stored = stored_of(load_text(cell))
    on = ground(stored)
    assert {item.status for item in looked_at(stored, on)} == {AGREE}
    # Turn by turn: the slide has no acceleration stated; the bar may brake with 4 rad/s² on 0.5 rad of 0.75.
    lo, hi = velocity_box(on, np.array([0.0, 0.25]))
    np.testing.assert_allclose(hi, [1.0, 1.5], atol=1e-12)
    np.testing.assert_allclose(lo, [-1.0, -1.5], atol=1e-12)
    lo, hi = velocity_box(on, np.array([0.0, 0.71]))
    np.testing.assert_allclose(hi, [1.0, np.sqrt(2 * 4 * 0.04)], atol=1e-12)  # 0.04 rad are left to stop in
    np.testing.assert_allclose(-lo, hi, atol=1e-12)
    # Along x: the slide's 1 m/s and the bar's 1.5 rad/s by 0.6 m.
    x = np.array([1.0, 0.0, 0.0])
    assert covering_m_s(on, np.array([0.2, 0.0, 1.0]), x) == pytest.approx(1.0 + 1.5 * 0.6, abs=1e-12)
    # From the slide's zero: 0.5 m of travel and 0.4 m up, then the bar.
    longest = np.hypot(0.5, 0.4) + 0.6
    for length, agrees in ((longest + 1e-3, True), (longest - 1e-3, False)):
        item = reach_item(on, "", np.array([-length, 0.0, 0.0]))
        assert (item.status == AGREE) == agrees and item.status in (AGREE, DIFFER)


@pytest.mark.campaign
def test_straight_strokes_are_right_by_their_files_alone():
    # A long strike window asks for strokes that hold speed and attitude: some go straight.
    stored = surveyed(spacing_m=0.4, window_s=0.08, speeds_m_s=np.array([1.0]))
    straight = np.flatnonzero(stored.arrays["points.npz"]["stroke"] == "straight")
    assert len(straight) and set(stored.arrays["motions.npz"]["rows"]) == set(straight)
    on = ground(stored)
    assert {item.status for item in looked_at(stored, on)} == {AGREE}
    for name, check in (("q", "rows of position"), ("a", "rows of velocity"), ("v", "rest")):
        motions = {key: array.copy() for key, array in stored.arrays["motions.npz"].items()}
        motions[f"{name}_{straight[0]}"][-1 if name == "v" else 3, 1] += 1e-5
        changed = replace(stored, arrays={**stored.arrays, "motions.npz": motions})
        assert ("motion", f"strike {straight[0] + 1}", check) in differing(looked_at(changed, on))


@pytest.mark.campaign
def test_slanting_strikes_of_a_turning_paddle_are_right_by_their_files_alone():
    normal, direction = (np.array([v]) / np.linalg.norm(v) for v in ([0.2, 0.1, 1.0], [0.0, -0.3, 1.0]))
    stored = surveyed(spacing_m=0.4, normals=normal, directions=direction, rotation="free")
    assert (stored.arrays["points.npz"]["stroke"] == "swing").sum() >= 8
    assert {item.status for item in looked_at(stored)} == {AGREE}


@pytest.mark.campaign
def test_every_strike_of_the_example_is_right_by_its_files_alone():
    stored = surveyed(spacing_m=0.1)
    points = stored.arrays["points.npz"]
    assert len(points["verdict"]) == 270 and (points["stroke"] != "").sum() >= 220
    assert {item.status for item in looked_at(stored)} == {AGREE}
