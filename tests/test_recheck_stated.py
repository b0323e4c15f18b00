"""Inputs read again by code of the second opinion alone: what cell.json says of them, and what changed since."""

from __future__ import annotations

import json
import math
from collections.abc import Iterator
from dataclasses import asdict
from pathlib import Path
from types import SimpleNamespace
from typing import Any

import pytest

from reach.errors import InputError
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Item
from reach.formats import load_cell
from reach.recheck.stated import whole as stated
from reach.recheck.stored import Stored
from reach.report.rally.document import settings as rally_settings
from reach.report.stored import cell_file
from reach.report.survey.document import settings as survey_settings
from reach.report.trial.document import settings as trial_settings

LINK = """<inertial><mass value="1.5"/><origin xyz="0 0 0.1"/>
<inertia ixx="0.02" iyy="0.02" izz="0.01" ixy="0" ixz="0" iyz="0"/></inertial>"""

# Every way in which a URDF and a limits file can meet: the joints' names say which.
URDF = f"""<robot name="odd">
<link name="base"/><link name="a">{LINK}</link><link name="b">{LINK}</link><link name="c">{LINK}</link>
<link name="d">{LINK}</link><link name="e">{LINK}</link><link name="f">{LINK}</link><link name="hand">{LINK}</link>
<link name="thumb">{LINK}</link><link name="camera"/>
<joint name="both" type="revolute"><parent link="base"/><child link="a"/><axis xyz="0 0 2"/>
  <limit lower="-2.5" upper="2" velocity="3" effort="80" acceleration="9" jerk="900"/>
  <dynamics damping="0.5" friction="0"/></joint>
<joint name="rail" type="prismatic"><parent link="a"/><child link="b"/><axis xyz="1 0 0"/>
  <limit upper="0.4" velocity="0" effort="0"/></joint>
<joint name="unbounded" type="continuous"><parent link="b"/><child link="c"/><axis xyz="0 1 0"/>
  <limit lower="-1" upper="1" velocity="4" effort="40"/></joint>
<joint name="soft" type="revolute"><parent link="c"/><child link="d"/><axis xyz="0 1 0"/>
  <limit lower="-2" upper="2" velocity="4" effort="40"/>
  <safety_controller soft_lower_limit="-1.5" soft_upper_limit="2.5" k_velocity="1"/></joint>
<joint name="replaced" type="revolute"><parent link="d"/><child link="e"/><axis xyz="0 0 1"/>
  <limit lower="-1" upper="1" velocity="2" effort="20"/><dynamics damping="0.2" friction="0.3"/></joint>
<joint name="stiff" type="fixed"><parent link="e"/><child link="f"/><origin xyz="0 0 0.2" rpy="0 0.3 0"/></joint>
<joint name="silent" type="revolute"><parent link="f"/><child link="hand"/><axis xyz="0 1 0"/>
  <limit lower="-1e-13" upper="1" velocity="5" effort="10"/></joint>
<joint name="grip" type="revolute"><parent link="hand"/><child link="thumb"/><axis xyz="0 1 0"/>
  <limit lower="0.1" upper="0.5" velocity="1" effort="1"/></joint>
<joint name="pan" type="revolute"><parent link="a"/><child link="camera"/><axis xyz="0 0 1"/>
  <limit lower="-1" upper="1" velocity="1" effort="1"/></joint>
</robot>"""

LIMITS = """
[joints.both]
position_rad = [-2.0, 2.2]
velocity_rad_s = 3.5
acceleration_rad_s2 = [-7.0, 8.0]
torque_rate_nm_s = 700
torque_continuous_nm = 30.0
armature_kg_m2 = 0.0
friction_nm = 1.25
source = "maker"
[joints.rail]
velocity_m_s = 1.2
torque_n = 300
armature_kg = 2.0
[joints.unbounded]
position_rad = [-6.0, 6.5]
[joints.soft]
damping_nm_s_rad = 0.1
[joints.replaced]
override = true
position_rad = [-1.4, 1.4]
velocity_rad_s = 2.5
damping_nm_s_rad = 0.0
"""

CELL = """
[arm]
urdf = "../robot/odd.urdf"
limits = "odd.limits.toml"
tip = "hand"
locked_rad = { pan = -0.25 }
base = { xyz_m = [0.1, -0.2, 0.3], rpy_deg = [10.0, 20.0, 30.0] }
start_deg = { both = 12.0, unbounded = 5.0, soft = 7.0, replaced = -3.0, silent = 20.0 }
start_m = { rail = 0.1 }
[paddle]
mount = { xyz_m = [0.0, 0.01, 0.08], rpy_deg = [0.0, 90.0, 45.0] }
shape = "plate"
size_m = [0.15, 0.16]
thickness_m = 0.01
mass_kg = 0.2
[[paddle.part]]
mass_kg = 0.05
com_m = [0.0, 0.0, -0.05]
[tool]
speed_m_s = 2.0
[ball]
mass_kg = 0.003
radius_m = 0.02
drag_coefficient = 0.4
[contact]
restitution = 0.8
restitution_at = [[1.0, 0.85], [5.0, 0.8]]
friction = 0.1
[control]
period_s = 0.002
[margins]
velocity_share = 0.03
[accept]
strike_tilt_error_deg = 2.0
require = ["position"]
[survey]
box_m = [[0.2, 0.0, 0.5], [0.4, 0.0, 0.5]]
normals = [[0, 0, 2], [0, 0.5, 1], [0, 0, 1]]
direction = [0, 0, 3]
paddle_speed_m_s = 0.4
run_up_m = 0.2
[rally]
centre_m = [0.3, 0.0, 0.8]
apexes_m = [0.2, 0.3, 0.2]
offsets_m = [0.0, 0.02]
bearings_deg = [0, 90, 360]
[trial]
apex_m = 0.25
gains = { restitution = 0.7 }
sensor = { rate_hz = 100, latency_s = 0.01 }
starts = { offsets_m = [0.01], bearings_deg = [45] }
"""

SETTINGS = {"survey": survey_settings, "rally": rally_settings, "trial": trial_settings}


@pytest.fixture
def folder(tmp_path, monkeypatch) -> Path:
    """A folder with the inputs, in which the command was run."""
    for name, text in (
        ("robot/odd.urdf", URDF),
        ("cells/odd.limits.toml", LIMITS),
        ("cells/cell.toml", CELL),
    ):
        path = tmp_path / name
        path.parent.mkdir(exist_ok=True)
        path.write_text(text, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def stored(command: str = "survey") -> Stored:
    """What a run of the inputs would store of them."""
    cell = load_cell("cells/cell.toml")
    result: Any = SimpleNamespace(cell=cell, command=command, verdict=SimpleNamespace(verdict="undecided"))
    own = {command: SETTINGS[command](getattr(cell, command))}
    own |= {"ball": asdict(cell.ball), "contact": asdict(cell.contact)}
    return Stored("out", command, json.loads(cell_file(result, own)), {}, {}, ())


def of(items: list[Item], where: str) -> Item:
    """The item of a place."""
    return next(item for item in items if item.where == where)


@pytest.mark.parametrize("command", SETTINGS)
def test_what_the_readers_made_of_the_files_is_found_again(folder, command):
    items = stated.items(stored(command))
    assert {item.status for item in items} == {AGREE}
    joints = ["both", "rail", "unbounded", "soft", "replaced", "silent"]
    assert [item.where for item in items] == [*joints, "cell", command]


def test_limits_of_both_files_meet_as_the_interface_says(folder):
    # By hand, from the two files above.
    joints = {joint["name"]: joint["limits"] for joint in stored().cell["arm"]["joints"]}
    sides = {name: {kind: bound and (bound["lo"], bound["hi"]) for kind, bound in limits.items() if kind[0] != "d"
             and kind not in ("armature", "friction")} for name, limits in joints.items()}  # fmt: skip
    assert sides["both"]["position"] == (-2.0, 2.0) and sides["both"]["velocity"] == (-3.0, 3.0)
    assert sides["both"]["acceleration"] == (-7.0, 8.0) and sides["both"]["jerk"] == (-900.0, 900.0)
    assert sides["rail"]["position"] == (0.0, 0.4) and sides["rail"]["torque"] == (-300.0, 300.0)
    assert sides["unbounded"]["position"] == (-6.0, 6.5) and sides["soft"]["position"] == (-1.5, 2.0)
    assert sides["replaced"]["position"] == (-1.4, 1.4) and sides["replaced"]["torque"] == (-20.0, 20.0)
    assert joints["replaced"]["damping"] == 0.0 and joints["replaced"]["friction"] == 0.3
    assert joints["both"]["armature"] == 0.0 and sides["silent"]["torque_rate"] is None


def leaves(value: Any, path: tuple[str | int, ...] = ()) -> Iterator[tuple[str | int, ...]]:
    """Places of every number, truth value and null in plain data."""
    if isinstance(value, dict):
        for key, part in value.items():
            yield from leaves(part, (*path, key))
    elif isinstance(value, list):
        for number, part in enumerate(value):
            yield from leaves(part, (*path, number))
    elif not isinstance(value, str):
        yield path


def put(cell: dict[str, Any], path: tuple[str | int, ...]) -> None:
    """Change what stands at a place by a hair, a truth value to its contrary, null to a number."""
    inside: Any = cell
    for key in path[:-1]:
        inside = inside[key]
    old = inside[path[-1]]
    if isinstance(old, bool):
        inside[path[-1]] = not old
    elif old is None:
        inside[path[-1]] = {"lo": -1.0, "hi": 1.0} if path[-2] == "limits" else 1.0
    else:
        inside[path[-1]] = old + 1e-9 * max(1.0, abs(old))


@pytest.mark.parametrize("command", SETTINGS)
def test_every_number_stored_of_the_files_is_compared(folder, command):
    run = stored(command)
    text = json.dumps(run.cell)
    tables = ["period_s", "arm", "paddle", "tool", "margins", "accept", "ball", "contact"]
    tables = [*tables, command] if command == "survey" else [command]  # the others once are enough
    places = [path for table in tables for path in leaves(run.cell[table], (table,))]
    assert len(places) > (150 if command == "survey" else 15)
    silent = []
    for path in places:
        cell = json.loads(text)
        put(cell, path)
        items = stated.items(Stored("out", command, cell, {}, {}, ()))
        if DIFFER not in {item.status for item in items}:
            silent.append(path)
    assert not silent


def asking(survey: str) -> Stored:
    """What a run would store of the same cell with another table [survey]."""
    path = Path("cells/cell.toml")
    head, _, rest = CELL.partition("[survey]")
    path.write_text(f"{head}[survey]\n{survey}\n[rally]{rest.partition('[rally]')[2]}", encoding="utf-8")
    return stored()


def test_a_file_of_strikes_is_read_again(folder):
    rows = "x_m, y_m,z_m,nx,ny,nz,paddle_speed_m_s,dx,dy,dz\n0.2,0,0.5,0,0,2,0.4,0,1,1\n0.3,0,0.5,0,1,1,0.5,0,0,3\n"
    Path("cells/strikes.csv").write_text(rows, encoding="utf-8")
    run = asking('strikes = "strikes.csv"')
    assert of(stated.items(run), "survey").status == AGREE
    for key in ("listed", "normals", "directions", "speeds_m_s"):
        kept = json.dumps(run.cell["survey"])
        put(run.cell["survey"], (key, 1) if key == "speeds_m_s" else (key, 1, 2))
        worst = of(stated.items(run), "survey").worst
        assert worst is not None and worst.name == f"survey {key}" and not worst.agrees
        run.cell["survey"] = json.loads(kept)
    Path("cells/strikes.csv").unlink()
    assert of(stated.items(run), "survey").status == NOT_CHECKABLE


def test_faces_by_tilt_and_bearing_are_found_again(folder):
    run = asking(
        "box_m = [[0.2, 0.0, 0.5], [0.4, 0.0, 0.5]]\npaddle_speed_m_s = 0.4\n"
        "face_tilts_deg = [0, 20]\nbearings_deg = [0, 120, 240]"
    )
    assert len(run.cell["survey"]["normals"]) == 4  # the upright one counts once
    assert of(stated.items(run), "survey").status == AGREE
    put(run.cell["survey"], ("normals", 3, 1))
    assert {check.name for check in of(stated.items(run), "survey").checks if not check.agrees} == {
        "survey face_tilts_deg",
        "survey direction",
    }


def test_a_difference_names_joint_and_limit(folder):
    run = stored()
    run.cell["arm"]["joints"][1]["limits"]["torque"]["hi"] = 301.0
    items = stated.items(run)
    assert [item.where for item in items if item.status == DIFFER] == ["rail"]
    worst = of(items, "rail").worst
    assert worst is not None and (worst.name, worst.unit) == ("torque", "N") and worst.difference == 1.0


def test_a_limit_that_only_one_side_knows_differs(folder):
    run = stored()
    run.cell["arm"]["joints"][5]["limits"]["jerk"] = {"lo": None, "hi": None}
    worst = of(stated.items(run), "silent").worst
    assert worst is not None and worst.difference == math.inf and worst.text.startswith("unknown here")


def test_an_input_that_changed_is_named(folder):
    run = stored()
    Path("robot/odd.urdf").write_text(URDF + "\n", encoding="utf-8")
    for look in (stated.items, stated.urdf_again):
        with pytest.raises(InputError, match=r"robot/odd.urdf: file: changed since the run") as caught:
            look(run)
        assert caught.value.exit_code == 2


def test_an_input_that_is_not_there_is_left_out_and_named(folder):
    run = stored()
    Path("cells/odd.limits.toml").unlink()
    items = stated.items(run)
    assert all("cells/odd.limits.toml" in of(items, joint).left_out for joint in ("both", "silent"))
    assert of(items, "cell").status == AGREE and of(items, "cells/odd.limits.toml").status == NOT_CHECKABLE
    assert stated.urdf_again(run) == URDF.encode()
    Path("robot/odd.urdf").unlink()
    items = stated.items(run)
    assert of(items, "cell").status == NOT_CHECKABLE and stated.urdf_again(run) is None
    Path("cells/cell.toml").unlink()
    items = stated.items(run)
    assert {item.status for item in items} == {NOT_CHECKABLE} and len(items) == 3


def test_a_cell_made_in_python_has_no_files_to_look_at(folder):
    run = stored()
    run.cell["inputs"] = []
    (item,) = stated.items(run)
    assert item.status == NOT_CHECKABLE and "Python" in item.left_out


def test_a_file_that_the_cell_names_must_be_one_of_the_inputs(folder):
    run = stored()
    run.cell["inputs"] = [entry for entry in run.cell["inputs"] if not entry["path"].endswith("urdf")]
    worst = of(stated.items(run), "cell").worst
    assert worst is not None and worst.name == "named file" and "robot/odd.urdf" in worst.text


@pytest.mark.parametrize(
    ("path", "value"),
    [
        (("inputs",), 5),
        (("inputs",), [{"path": "cells/cell.toml"}]),
        (("inputs",), [{"path": 3, "sha256": "x"}]),
        (("inputs",), [{"path": f"{i}", "sha256": ""} for i in range(1000)]),
        (("arm", "joints"), [1, 2]),
        (("arm", "joints", 0, "limits"), {}),
        (("arm", "joints", 0, "limits", "position"), "wide"),
        (("arm", "held"), [{"name": []}]),
        (("tool",), {"cap": 1.0}),
        (("paddle",), [1]),
        (("margins",), 7),
        (("survey",), {"normals": 3}),
    ],
)
def test_what_no_run_stores_is_refused_or_differs(folder, path, value):
    run = stored()
    inside: Any = run.cell
    for key in path[:-1]:
        inside = inside[key]
    inside[path[-1]] = value
    try:
        items = stated.items(run)
    except InputError as error:
        assert error.exit_code == 2
    else:
        assert DIFFER in {item.status for item in items}


@pytest.mark.parametrize("path", ["/dev/zero", "cells", "no\0name", "x" * 5000])
def test_no_odd_file_is_read(folder, path):
    run = stored()
    run.cell["inputs"].append({"path": path, "sha256": "0"})
    assert of(stated.items(run), path).status == NOT_CHECKABLE
