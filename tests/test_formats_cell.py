"""The cell file: every key's type and range, what keys mean for each other, and what a sound cell becomes."""

from __future__ import annotations

import hashlib
import math
import subprocess
import sys
from pathlib import Path

import numpy as np
import pytest
from formats_case import (
    CELL,
    LIMITS,
    LOG,
    URDF,
    expect_fault,
    faults_of,
    load,
    only_fault,
    replaced,
    write_cell,
)

from reach.cell import Accept, Bound, Drive, Follow, Margins, SolverSpec
from reach.errors import InputError
from reach.formats import files, load_cell
from reach.formats.kinds import Table
from reach.formats.presets import BALLS
from reach.formats.schema import CELL as CELL_KEYS
from reach.formats.schema import SOLVERS


def test_sound_cell(tmp_path: Path) -> None:
    path = write_cell(tmp_path)
    cell = load_cell(path)
    assert cell.path == str(path)
    assert [joint.name for joint in cell.arm.joints] == ["j1", "j2"]
    assert cell.arm.start == pytest.approx((math.radians(30), 0.1))
    assert cell.arm.start_velocity == (0.0, 0.0)
    assert cell.arm.gravity_m_s2 == (0.0, 0.0, -9.80665)
    assert cell.paddle.mount.rpy_rad == pytest.approx((0, math.pi / 2, 0))
    assert cell.paddle.parts[0].com_m == (0, 0, -0.03)
    assert isinstance(cell.follow, Follow)
    assert cell.follow.commands.twist.shape == (3, 6)
    assert cell.period_s == 0.001
    assert (cell.ball, cell.contact, cell.tool, cell.drive) == (None, None, None, None)
    names = ["cell.toml", "arm.urdf", "limits.toml", "log.csv"]
    expected = [hashlib.sha256((tmp_path / name).read_bytes()).hexdigest() for name in names]
    assert [Path(item.path).name for item in cell.inputs] == names
    assert [item.sha256 for item in cell.inputs] == expected


def test_paths_stay_as_typed(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "here").mkdir()
    write_cell(tmp_path / "here")
    monkeypatch.chdir(tmp_path)
    cell = load_cell("here/cell.toml")
    assert [item.path for item in cell.inputs][:2] == ["here/cell.toml", str(Path("here", "arm.urdf"))]
    assert cell.arm.urdf_path == str(Path("here", "arm.urdf"))


FULL = """
[tool]
speed_m_s = 1.7
source = "invented manual"
[ball]
preset = "table tennis"
drag_coefficient = 0.45
[contact]
restitution = 0.85
restitution_at = [[1.0, 0.9], [3.0, 0.8]]
[control]
period_s = 0.002
[drive]
delay_s = 0.004
[solver]
name = "clarabel"
rotation_length_m = 0.1
[margins]
torque_share = 0.0
[accept]
at = "throughout"
strike_tilt_error_deg = 2.0
require = ["position"]
[survey]
box_m = [[0.2, 0, 0.2], [0.2, 0, 0.2]]
normals = [[0, 0, 1]]
paddle_speed_m_s = 1.0
exact = true
max_points = 10
[rally]
centre_m = [0.5, 0, 0.4]
apexes_m = [0.1]
[trial]
gains = { energy = 0.05 }
starts = { offsets_m = [0.08], random = 3 }
sensor = { rate_hz = 0 }
recovered = { within_m = 0.02 }
"""


def test_every_section(tmp_path: Path) -> None:
    cell = load(tmp_path, cell=CELL + FULL)
    assert cell.tool is not None and cell.tool.speed_m_s == 1.7
    assert cell.ball is not None and (cell.ball.mass_kg, cell.ball.drag_coefficient) == (0.0027, 0.45)
    assert "ITTF" in cell.ball.source
    assert cell.contact is not None and cell.contact.restitution_at == ((1.0, 0.9), (3.0, 0.8))
    assert cell.period_s == 0.002
    assert cell.drive is not None and (cell.drive.delay_s, cell.drive.lag_s) == (0.004, 0.0)
    assert (cell.solver.name, cell.solver.fallback) == ("clarabel", "piqp")
    assert cell.margins.torque_share == 0.0
    assert cell.accept.strike_tilt_error_rad == pytest.approx(math.radians(2))
    assert cell.accept.require == ("position",)
    assert cell.survey is not None and cell.survey.exact and cell.survey.max_points == 10
    assert cell.rally is not None and cell.rally.apexes_m == (0.1,)
    assert cell.trial is not None and (cell.trial.gains, cell.trial.starts.random) == ((("energy", 0.05),), 3)


def test_defaults_are_those_of_the_contract(tmp_path: Path) -> None:
    """A section left out and a section left empty mean the same, and what reach.cell says."""
    bare = load(tmp_path)
    empty = load(tmp_path, cell=CELL + "[solver]\n[margins]\n[accept]\n[control]\n[drive]\n")
    for cell in (bare, empty):
        assert cell.solver == SolverSpec()
        assert cell.margins == Margins()
        assert cell.accept == Accept()
        assert cell.period_s == 0.001
    assert (bare.drive, empty.drive) == (None, Drive())
    follow = bare.follow
    assert follow == Follow("world", "strike", follow.commands) if follow else False


BAD_VALUES = [
    ("radius_m = 0.08", "radius_m = -0.08", "paddle.radius_m", ("above 0",)),
    ("radius_m = 0.08", "radius_m = 80", "paddle.radius_m", ("at most 2", "mm")),
    ("radius_m = 0.08", 'radius_m = "0.08"', "paddle.radius_m", ("give a number",)),
    ("radius_m = 0.08", "radius_m = true", "paddle.radius_m", ("true", "give a number")),
    ("radius_m = 0.08", "radius_m = nan", "paddle.radius_m", ("finite",)),
    ("radius_m = 0.08", "radius_m = inf", "paddle.radius_m", ("finite",)),
    ("radius_m = 0.08", "radius_m = 1" + "0" * 400, "paddle.radius_m", ("finite",)),
    ("radius_m = 0.08", "radius_m = 2026-01-01", "paddle.radius_m", ("give a number",)),
    ("radius_m = 0.08", "radius_m = 0.08\nradios_m = 1", "paddle.radios_m", ("unknown key", "radius_m")),
    ("radius_m = 0.08\n", "", "paddle.radius_m", ("missing", "disc")),
    ("radius_m = 0.08", "radius_m = 0.08\nsize_m = [1, 1]", "paddle.size_m", ("does not belong", "disc")),
    ('shape = "disc"', 'shape = "disk"', "paddle.shape", ("one of", 'did you mean "disc"')),
    ('shape = "disc"', "shape = 3", "paddle.shape", ("one of",)),
    ("mass_kg = 0.2\n", "", "paddle.mass_kg", ("missing",)),
    ("mass_kg = 0.2", "mass_kg = 0", "paddle.mass_kg", ("above 0",)),
    ("xyz_m = [0, 0, 0.05]", "xyz_m = [0, 0]", "paddle.mount.xyz_m", ("2 numbers", "must have 3")),
    ("xyz_m = [0, 0, 0.05]", "xyz_m = [0, 0, 50]", "paddle.mount.xyz_m[2]", ("mm",)),
    ("xyz_m = [0, 0, 0.05]", "xyz_m = 0.05", "paddle.mount.xyz_m", ("list of 3",)),
    ("mass_kg = 0.05", 'mass_kg = "x"', "paddle.part[0].mass_kg", ("number",)),
    ("com_m = [0, 0, -0.03]", "", "paddle.part[0].com_m", ("missing",)),
    ("[[paddle.part]]", "[paddle.part]", "paddle.part", ("list",)),
    ('urdf = "arm.urdf"\n', "", "arm.urdf", ("missing",)),
    ('urdf = "arm.urdf"', 'urdf = ""', "arm.urdf", ("text in quotes",)),
    ('tip = "flange"\n', "", "arm.tip", ("missing",)),
    ('tip = "flange"', 'tip = "flanje"', "arm.tip", ("does not exist", 'did you mean "flange"')),
    ('tip = "flange"', 'tip = "foot"', "arm.tip", ("root link",)),
    ('frame = "world"\n', "", "follow.frame", ("missing", "world", "base", "paddle", "no default")),
    ('frame = "world"', 'frame = "tool"', "follow.frame", ("one of",)),
    ('point = "strike"\n', "", "follow.point", ("missing", "strike", "tip", "[x, y, z]", "no default")),
    ('point = "strike"', 'point = "flange"', "follow.point", ("one of", "[x, y, z]")),
    ('point = "strike"', "point = [0, 1]", "follow.point", ("must have 3",)),
    ('commands = "log.csv"\n', "", "follow.commands", ("missing",)),
    ('commands = "log.csv"', 'commands = "log.bag"', "follow.commands", ("no reader", ".csv")),
    ("j1 = 30.0", "j1 = 300.0", "arm.start_deg.j1", ("5.2359", "[-1.5, 2]", "URDF")),
    ("j1 = 30.0", "j1 = 30.0, k1 = 1", "arm.start_deg.k1", ("no joint", '"j1"')),
    ("j1 = 30.0", "j1 = 30.0, grip = 1", "arm.start_deg.grip", ("not on the chain", "locked_rad")),
    ("j1 = 30.0", "j1 = 30.0, j2 = 1", "arm.start_deg.j2", ("slides", "start_m")),
    ("start_deg = { j1 = 30.0 }", "start_deg = {}", "arm.start_rad.j1", ("missing",)),
    ("start_m = { j2 = 0.1 }", "", "arm.start_m.j2", ("missing",)),
    ("start_m = { j2 = 0.1 }", "start_m = { j2 = 0.1, j1 = 0 }", "arm.start_m.j1", ("turns", "start_rad")),
    ("[paddle]", "start_rad = { j1 = 0.1 }\n[paddle]", "arm.start_deg.j1", ("twice",)),
    ("[paddle]", 'start = "auto"\n[paddle]', "arm.start", ("stands beside",)),
    ("[paddle]", "locked_rad = { grip = 2.0 }\n[paddle]", "arm.locked_rad.grip", ("outside",)),
    ("[paddle]", "locked_rad = { j1 = 0.0 }\n[paddle]", "arm.locked_rad.j1", ("on the chain",)),
    ("[paddle]", "locked_rad = { grop = 0.2 }\n[paddle]", "arm.locked_rad.grop", ('did you mean "grip"',)),
    ("[paddle]", "locked_rad = { face = 0.2 }\n[paddle]", "arm.locked_rad.face", ("fixed",)),
    ("[paddle]", "locked_m = { grip = 0.2 }\n[paddle]", "arm.locked_m.grip", ("turns", "locked_rad")),
    (
        "[paddle]",
        "start_velocity_rad_s = { j1 = 9 }\n[paddle]",
        "arm.start_velocity_rad_s.j1",
        ("outside the velocity",),
    ),
    (
        "[paddle]",
        "start_velocity_m_s = { j1 = 0 }\n[paddle]",
        "arm.start_velocity_m_s.j1",
        ("start_velocity_rad_s",),
    ),
]


@pytest.mark.parametrize(("old", "new", "where", "words"), BAD_VALUES)
def test_bad_value(tmp_path: Path, old: str, new: str, where: str, words: tuple[str, ...]) -> None:
    faults = faults_of(tmp_path, cell=replaced(CELL, old, new))
    expect_fault(faults, "cell.toml", where, *words)


BAD_SECTIONS = [
    ("[robot]\n", "robot", ("unknown key",)),
    ("[marginz]\n", "marginz", ('did you mean "margins"',)),
    ("[tool]\n", "tool.speed_m_s", ("missing",)),
    ("[margins]\ntorque_share = 1.0\n", "margins.torque_share", ("below 1",)),
    ("[margins]\ntorque_share = -0.1\n", "margins.torque_share", ("at least 0",)),
    ("[margins]\nposition_rad = 2.0\n", "margins.position_rad", ("j1", "no room")),
    ("[solver]\nname = 'highs'\n", "solver.name", SOLVERS),
    ("[solver]\nfallback = 'osqp'\n", "solver.fallback", SOLVERS),
    ("[accept]\nrequire = ['torque', 'power']\n", "accept.require[1]", ("one of", "torque rate")),
    ("[accept]\nrequire = ['torque', 'torque']\n", "accept.require", ("twice",)),
    ("[accept]\nat = 'always'\n", "accept.at", ("throughout",)),
    ("[control]\nperiod_s = 1\n", "control.period_s", ("at most 0.1", "ms")),
    ("[control]\nperiod_s = 0\n", "control.period_s", ("at least 1e-05", "at most 0.1")),
    ("[drive]\ndelay_s = -1\n", "drive.delay_s", ("at least 0",)),
    ("[ball]\npreset = 'table tenis'\n", "ball.preset", ('did you mean "table tennis"',)),
    ("[ball]\nmass_kg = 0.01\n", "ball.radius_m", ("missing", "preset")),
    ("[contact]\n", "contact.restitution", ("missing",)),
    ("[contact]\nrestitution = 1.2\n", "contact.restitution", ("at most 1",)),
    ("[contact]\nrestitution = 0\n", "contact.restitution", ("above 0",)),
    ("[contact]\nrestitution = 0.9\nrestitution_spread = 0.2\n", "contact.restitution_spread", ("narrow",)),
    (
        "[contact]\nrestitution = 0.9\nrestitution_at = [[2, 0.9], [1, 0.8]]\n",
        "contact.restitution_at[1]",
        ("go up",),
    ),
    (
        "[contact]\nrestitution = 0.9\nrestitution_at = [[2, 1.9]]\n",
        "contact.restitution_at[0]",
        ("at most 1",),
    ),
]


@pytest.mark.parametrize(("section", "where", "words"), BAD_SECTIONS)
def test_bad_section(tmp_path: Path, section: str, where: str, words: tuple[str, ...]) -> None:
    only_fault(faults_of(tmp_path, cell=CELL + section), "cell.toml", where, *words)


def test_all_faults_of_all_files_at_once(tmp_path: Path) -> None:
    faults = faults_of(
        tmp_path,
        cell=replaced(CELL, "mass_kg = 0.2", "mass_kg = -1"),
        urdf=replaced(URDF, 'value="3.0"', 'value="-3"'),
        limits="[joints.j1]\nspeed = 3\n",
        log=LOG + "0.2,0,0,x,0,0,0,0\n",
    )
    expected = {"cell.toml", "arm.urdf", "limits.toml", "log.csv"}
    assert {Path(fault.file).name for fault in faults} == expected
    assert [fault.file for fault in faults] == sorted(fault.file for fault in faults)
    again = faults_of(
        tmp_path,
        cell=replaced(CELL, "mass_kg = 0.2", "mass_kg = -1"),
        urdf=replaced(URDF, 'value="3.0"', 'value="-3"'),
        limits="[joints.j1]\nspeed = 3\n",
        log=LOG + "0.2,0,0,x,0,0,0,0\n",
    )
    assert faults == again


def test_lines_are_ordered_as_numbers(tmp_path: Path) -> None:
    rows = "".join(f"{0.15 + 0.05 * i:.2f},0,0,{'x' if i in (0, 8) else 0},0,0,0,0\n" for i in range(10))
    faults = faults_of(tmp_path, log=LOG + rows)
    assert [fault.where for fault in faults] == ["line 5, column vz_m_s", "line 13, column vz_m_s"]


@pytest.mark.parametrize(
    ("text", "where", "words"),
    [
        ("[arm\n", "line 1, column 5", ("not valid TOML",)),
        ("[arm]\nurdf = \n", "line 2, column 8", ("not valid TOML",)),
        ("[arm]\n[arm]\n", "line 2, column 5", ("not valid TOML",)),
        ("a = '''", "end of file", ("not valid TOML",)),
        ("x = " + "[" * 5000, "file", ("too deep",)),
    ],
)
def test_broken_toml_tells_the_line(tmp_path: Path, text: str, where: str, words: tuple[str, ...]) -> None:
    only_fault(faults_of(tmp_path, cell=text), "cell.toml", where, *words)


@pytest.mark.parametrize(
    ("content", "where", "words"),
    [
        (b"[arm]\n\xff\xfe = 1\n", "line 2", ("UTF-8",)),
        (b"[arm]\n\n\0", "line 3", ("zero byte",)),
        (b"", "arm", ("missing",)),
    ],
)
def test_cell_that_is_no_text(tmp_path: Path, content: bytes, where: str, words: tuple[str, ...]) -> None:
    expect_fault(faults_of(tmp_path, cell=content), "cell.toml", where, *words)


def test_byte_order_mark_and_windows_line_ends(tmp_path: Path) -> None:
    plain = load(tmp_path)
    cell = load(tmp_path, cell=b"\xef\xbb\xbf" + CELL.replace("\n", "\r\n").encode())
    assert cell.arm == plain.arm and cell.paddle == plain.paddle


@pytest.mark.parametrize("named", ["arm.urdf", "limits.toml", "log.csv", "cell.toml"])
def test_missing_file(tmp_path: Path, named: str) -> None:
    path = write_cell(tmp_path)
    (tmp_path / named).unlink()
    with pytest.raises(InputError) as caught:
        load_cell(path)
    expect_fault(caught.value.faults, named, "file", "not found")


def test_directory_in_place_of_a_file(tmp_path: Path) -> None:
    path = write_cell(tmp_path)
    (tmp_path / "arm.urdf").unlink()
    (tmp_path / "arm.urdf").mkdir()
    with pytest.raises(InputError) as caught:
        load_cell(path)
    only_fault(caught.value.faults, "arm.urdf", "file", "directory", "arm.urdf in")


def test_name_that_is_no_path(tmp_path: Path) -> None:
    faults = faults_of(tmp_path, cell=replaced(CELL, '"arm.urdf"', '"a\\u0000b"'))
    assert len(faults) == 1 and "can't be read" in faults[0].what


@pytest.mark.parametrize(("named", "limit"), [("arm.urdf", "MAX_TEXT_BYTES"), ("log.csv", "MAX_LOG_BYTES")])
def test_too_large_a_file_is_refused_unread(tmp_path: Path, named: str, limit: str) -> None:
    path = write_cell(tmp_path)
    with open(tmp_path / named, "wb") as stream:
        stream.truncate(getattr(files, limit) + 1)  # sparse: takes no room on disk
    with pytest.raises(InputError) as caught:
        load_cell(path)
    only_fault(caught.value.faults, named, "file", "MB")


def test_follow_table_can_be_needed(tmp_path: Path) -> None:
    path = write_cell(tmp_path, cell=CELL[: CELL.index("[follow]")])
    assert load_cell(path).follow is None
    with pytest.raises(InputError) as caught:
        load_cell(path, need="follow")
    only_fault(caught.value.faults, "cell.toml", "follow", "missing", "[follow]")


AUTO = replaced(replaced(CELL, "start_deg = { j1 = 30.0 }\n", ""), "start_m = { j2 = 0.1 }", 'start = "auto"')
POSED_LOG = (
    "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s,px_m,py_m,pz_m,qw,qx,qy,qz\n"
    "0,0,0,0,0,0,0,0.1,0,0.8,1,0,0,0\n0.1,0,0,0,0,0,0,0.1,0,0.8,1,0,0,0\n"
)


def test_start_from_the_log(tmp_path: Path) -> None:
    assert load(tmp_path, cell=AUTO, log=POSED_LOG).arm.start is None
    only_fault(faults_of(tmp_path, cell=AUTO), "cell.toml", "arm.start", "pose columns")
    without = AUTO[: AUTO.index("[follow]")]
    only_fault(faults_of(tmp_path, cell=without), "cell.toml", "arm.start", "pose columns")


def test_no_start_posture_is_guessed(tmp_path: Path) -> None:
    cell = replaced(AUTO, 'start = "auto"', "")
    only_fault(
        faults_of(tmp_path, cell=cell), "cell.toml", "arm.start_rad", "missing", "j1 = 0.0", "j2 = 0.0"
    )


GIVEN = replaced(
    replaced(replaced(CELL, 'shape = "disc"', 'shape = "given"'), "thickness_m = 0.01\n", ""),
    "radius_m = 0.08",
    "com_m = [0, 0, 0]\ninertia_kg_m2 = SIX",
)


@pytest.mark.parametrize(
    ("six", "words"),
    [
        ("[1e-3, 1e-3, 3e-3, 0, 0, 0]", ("triangle",)),
        ("[1e-3, 1e-3, -1e-3, 0, 0, 0]", ("negative",)),
        ("[1e-3, 1e-3, 1e-3, 5e-3, 0, 0]", ("negative",)),
        ("[500.0, 500.0, 500.0, 0, 0, 0]", ("kg mm²",)),
        ("[0, 0, 0, 0, 0, 0]", ("zero",)),
        ("[1e-3, 1e-3]", ("must have 6",)),
    ],
)
def test_given_inertia_must_be_that_of_a_solid(tmp_path: Path, six: str, words: tuple[str, ...]) -> None:
    faults = faults_of(tmp_path, cell=replaced(GIVEN, "SIX", six))
    only_fault(faults, "cell.toml", "paddle.inertia_kg_m2", *words)


def test_given_inertia(tmp_path: Path) -> None:
    paddle = load(tmp_path, cell=replaced(GIVEN, "SIX", "[1e-3, 1e-3, 2e-3, 1e-5, 0, 0]")).paddle
    assert paddle.inertia_kg_m2 == (1e-3, 1e-3, 2e-3, 1e-5, 0, 0)
    assert paddle.com_m == (0, 0, 0)


def test_ball_presets(tmp_path: Path) -> None:
    """40 mm and 2.7 g: ITTF Technical Leaflet T3. 56.0-59.4 g, 6.54-6.86 cm: ITF Rules of Tennis, App. I.

    Squash, 23-25 g and 39.5-40.5 mm: WSF specification, from memory.
    """
    assert (BALLS["table tennis"].mass_kg, BALLS["table tennis"].radius_m) == (0.0027, 0.020)
    assert 0.0560 < BALLS["tennis"].mass_kg < 0.0594
    assert 0.0654 < 2 * BALLS["tennis"].radius_m < 0.0686
    assert 0.023 < BALLS["squash"].mass_kg < 0.025
    assert 0.0395 < 2 * BALLS["squash"].radius_m < 0.0405 and "from memory" in BALLS["squash"].source
    for name, preset in BALLS.items():
        ball = load(tmp_path, cell=CELL + f'[ball]\npreset = "{name}"\n').ball
        assert ball == preset
    heavier = load(tmp_path, cell=CELL + '[ball]\npreset = "tennis"\nmass_kg = 0.059\n').ball
    assert heavier is not None and heavier.mass_kg == 0.059
    assert "mass_kg from the cell" in heavier.source


def test_no_required_key_has_a_default() -> None:
    def walk(table: Table) -> int:
        count = 0
        for key, spec in table.keys.items():
            count += 1
            assert spec.default is None or not spec.required, key
            if isinstance(spec.kind, Table):
                count += walk(spec.kind)
        return count

    assert walk(CELL_KEYS) > 100


def test_off_chain_joint_is_held_at_the_limit_nearest_zero(tmp_path: Path) -> None:
    cell = load(tmp_path)
    assert [(joint.name, joint.value) for joint in cell.arm.held] == [("grip", 0.1)]
    assert any("grip" in note and "held at 0.1" in note for note in cell.notes)
    locked = load(tmp_path, cell=replaced(CELL, "[paddle]", "locked_rad = { grip = 0.5 }\n[paddle]"))
    assert locked.arm.held[0].value == 0.5


def test_wall_mount(tmp_path: Path) -> None:
    wall = "base = { xyz_m = [0, 0, 1], rpy_deg = [0, 90, 0] }\n[paddle]"
    base = load(tmp_path, cell=replaced(CELL, "[paddle]", wall)).arm.base
    assert base.xyz_m == (0, 0, 1)
    assert base.rpy_rad == pytest.approx((0, math.pi / 2, 0))


def test_sources_of_merged_limits(tmp_path: Path) -> None:
    j1, j2 = load(tmp_path).arm.joints
    assert j1.limits.position == Bound(-1.5, 2.0, "URDF")
    assert j1.limits.velocity == Bound(-1.5, 1.5, "invented data sheet")
    assert j2.limits.position is not None
    assert (j2.limits.position.lo, j2.limits.position.hi) == (0.05, 0.4)
    assert j2.limits.position.source.endswith("limits.toml / URDF")


def test_faults_and_notes_stay_on_one_line(tmp_path: Path) -> None:
    """Names may hold line ends and terminal codes; what is shown of them does not."""
    urdf = URDF.replace('"grip"', '"a&#10;b"')
    assert any("a\\u000ab" in note for note in load(tmp_path, urdf=urdf).notes)
    bad = urdf.replace('lower="0.1"', 'lower="9"')
    only_fault(faults_of(tmp_path, urdf=bad), "arm.urdf", "line 41, joint a\\u000ab, <limit>", "above upper")
    odd = CELL + '"\\u001b[31m" = 1\n'
    only_fault(faults_of(tmp_path, cell=odd), "cell.toml", 'follow."\\u001b[31m"', "unknown key")


def test_many_unknown_keys_are_cut_short(tmp_path: Path) -> None:
    many = CELL + "".join(f"x{i} = 1\n" for i in range(50))
    faults = faults_of(tmp_path, cell=many)
    assert len(faults) == 21
    expect_fault(faults, "cell.toml", "follow", "30 more")


@pytest.mark.parametrize("seed", range(8))
def test_bent_files_give_faults_and_nothing_else(tmp_path: Path, seed: int) -> None:
    """Cuts, swaps and odd words anywhere in any file: the cell loads or InputError tells why not."""
    random = np.random.default_rng(seed)
    words = [
        "nan",
        "inf",
        "-1",
        "0",
        '""',
        "[]",
        "{}",
        "true",
        "1e400",
        "é",
        "\0",
        "[",
        "<",
        ">",
        '"',
        "&",
        "=",
        ",",
    ]
    names = ("cell", "urdf", "limits", "log")
    for _ in range(60):
        bent = dict(zip(names, (CELL + FULL, URDF, LIMITS, LOG), strict=True))
        name = names[random.integers(4)]
        text = bent[name]
        at, size = int(random.integers(len(text))), int(random.integers(12))
        bent[name] = text[:at] + words[random.integers(len(words))] + text[at + size :]
        try:
            load(tmp_path, **bent)
        except InputError as error:
            assert error.faults
            assert all(fault.where and fault.what and "\n" not in str(fault) for fault in error.faults)


def test_readers_stand_on_numpy_alone() -> None:
    code = "import sys, reach.formats; print(*sys.modules)"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    loaded = {name.split(".")[0] for name in done.stdout.split()}
    assert "numpy" in loaded
    assert not loaded & {"pinocchio", "scipy", "qpsolvers", "matplotlib"}
