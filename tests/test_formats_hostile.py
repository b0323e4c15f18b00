"""Files meant to stall or crash the readers: numbers out of any sense, endless logs, and floods of faults."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from formats_case import CELL, LIMITS, LOG, URDF, expect_fault, faults_of, load, only_fault, replaced

from reach.cell import CommandLog
from reach.errors import Fault, FaultList, InputError
from reach.formats import MAX_PERIODS, check_arrays, check_span
from reach.formats.capped import MAX_SHOWN, cut_short
from reach.formats.chain import MAX_JOINTS
from reach.formats.schema import MAX_ROWS

RANGE = "out of any range that means something"
HEADER = LOG.splitlines()[0].removesuffix(",strike")


def span_of(seconds: float) -> CommandLog:
    return CommandLog(np.array([5.0, 5.0 + seconds]), np.zeros((2, 6)), None, None, (), "log")


def test_span_of_a_log_is_counted_in_periods() -> None:
    faults = FaultList("cell.toml")
    check_span(span_of(2000.0), 0.001, faults)
    assert not faults.faults and MAX_PERIODS == 2_000_000
    check_span(span_of(2001.0), 0.001, faults)
    check_span(span_of(2001.0), 0.01, faults)
    assert faults.faults == [
        Fault(
            "cell.toml",
            "follow.commands",
            "the log spans 2001 s, 2001000 control periods of 0.001 s, more than 2000000; "
            "cut it or raise control.period_s",
        )
    ]
    check_span(span_of(1e10), 1e-5, faults, where="commands")
    assert faults.faults[-1].where == "commands"


def test_log_with_too_many_periods(tmp_path: Path) -> None:
    """Two rows 3000 s apart, let through by a wide max_gap_s."""
    log = f"{HEADER}\n0,0,0,0,0,0,0\n3000,0,0,0,0,0,0\n"
    cell = CELL + "max_gap_s = 1e6\n"
    only_fault(faults_of(tmp_path, cell=cell, log=log), "cell.toml", "follow.commands", "3000000 control")
    assert load(tmp_path, cell=cell + "[control]\nperiod_s = 0.01\n", log=log).period_s == 0.01


@pytest.mark.parametrize("period", ["1e-300", "9e-6", "0.11", "-0.001"])
def test_control_period(tmp_path: Path, period: str) -> None:
    cell = CELL + f"[control]\nperiod_s = {period}\n"
    only_fault(faults_of(tmp_path, cell=cell), "cell.toml", "control.period_s", "at least 1e-05", "0.1")


BAD_CELLS = [
    ("mass_kg = 0.2", "mass_kg = 1e-10", "paddle.mass_kg", RANGE),
    ("thickness_m = 0.01", "thickness_m = 1e-300", "paddle.thickness_m", RANGE),
    ("rpy_deg = [0, 90, 0]", "rpy_deg = [0, 1e300, 0]", "paddle.mount.rpy_deg[1]", RANGE),
    ("j1 = 30.0", "j1 = -1e10", "arm.start_deg.j1", RANGE),
    ("[paddle]", "gravity_m_s2 = [0, 0, -101]\n[paddle]", "arm.gravity_m_s2[2]", "-100"),
    ("[paddle]", "base = { xyz_m = [1001, 0, 0] }\n[paddle]", "arm.base.xyz_m[0]", "1000"),
    ("[follow]", "[margins]\nposition_rad = 11\n[follow]", "margins.position_rad", "degrees"),
    ("[follow]", "[margins]\nposition_m = 11\n[follow]", "margins.position_m", "mm"),
    ("[follow]", "[margins]\ntorque_share = 1e-13\n[follow]", "margins.torque_share", RANGE),
    ("[follow]", "[accept]\nstrike_position_m = 11\n[follow]", "accept.strike_position_m", "mm"),
    ("[follow]", "[accept]\nstrike_lateral_m_s = 101\n[follow]", "accept.strike_lateral_m_s", "mm/s"),
    ("[follow]", "[accept]\nstrikes_share = 1e-10\n[follow]", "accept.strikes_share", RANGE),
    ("[follow]", "[tool]\nspeed_m_s = 1e-7\n[follow]", "tool.speed_m_s", RANGE),
    ("[follow]", "[ball]\npreset = 'tennis'\nair_kg_m3 = 1e10\n[follow]", "ball.air_kg_m3", RANGE),
    ("radius_m = 0.08", "radius_m = 0x" + "f" * 100_000, "paddle.radius_m", "too many digits"),
    ("radius_m = 0.08", "radius_m = [0x" + "f" * 9000 + "]", "paddle.radius_m", "[a number with too many"),
    ('shape = "disc"', "shape = 0x" + "f" * 9000, "paddle.shape", "too many digits"),
]


@pytest.mark.parametrize(("old", "new", "where", "word"), BAD_CELLS)
def test_cell_numbers_out_of_range(tmp_path: Path, old: str, new: str, where: str, word: str) -> None:
    faults = faults_of(tmp_path, cell=replaced(CELL, old, new))
    expect_fault(faults, "cell.toml", where, word)
    assert max(len(str(fault)) for fault in faults) < 1000


def test_rests_of_rounding_are_zero(tmp_path: Path) -> None:
    """What a program prints for zero, such as 6e-17, is no fault where both signs may stand."""
    cell = load(tmp_path, cell=replaced(CELL, "xyz_m = [0, 0, 0.05]", "xyz_m = [6e-17, -1e-300, 0.05]"))
    assert cell.paddle.mount.xyz_m == (0, 0, 0.05)
    urdf = replaced(URDF, 'xyz="0 0 0.15"', 'xyz="6e-17 -5e-324 0.15"')
    assert load(tmp_path, urdf=urdf).arm.model_xml == load(tmp_path).arm.model_xml


def test_decimal_number_with_too_many_digits(tmp_path: Path) -> None:
    cell = CELL + "[control]\nperiod_s = " + "1" * 100_000 + "\n"
    faults = faults_of(tmp_path, cell=cell)
    line = cell[: cell.index("period_s")].count("\n") + 1
    only_fault(faults, "cell.toml", f"line {line}", "a number with too many digits")
    assert "sys" not in faults[0].what


BAD_LIMITS = [
    ("velocity_rad_s = 1e-7", "velocity_rad_s", RANGE),
    ("velocity_rad_s = [-1e-7, 1]", "velocity_rad_s[0]", RANGE),
    ("velocity_rad_s = [-1e-300, 1]", "velocity_rad_s[0]", RANGE),
    ("jerk_rad_s3 = 1e10", "jerk_rad_s3", RANGE),
    ("torque_nm = 1e-300", "torque_nm", RANGE),
    ("torque_rate_nm_s = 1e300", "torque_rate_nm_s", RANGE),
    ("position_rad = [-1e300, 1e300]", "position_rad[0]", RANGE),
    ("armature_kg_m2 = 1e-13", "armature_kg_m2", RANGE),
    ("armature_kg_m2 = 2e6", "armature_kg_m2", "at most 1e+06"),
    ("damping_nm_s_rad = 2e6", "damping_nm_s_rad", "at most 1e+06"),
    ("friction_nm = 2e6", "friction_nm", "at most 1e+06"),
]


@pytest.mark.parametrize(("line", "key", "word"), BAD_LIMITS)
def test_limits_out_of_range(tmp_path: Path, line: str, key: str, word: str) -> None:
    expect_fault(
        faults_of(tmp_path, limits=f"[joints.j1]\n{line}\n"), "limits.toml", f"joints.j1.{key}", word
    )


BAD_URDFS = [
    ('value="3.0"', 'value="1e-300"', "line 5, link upper, <mass value>"),
    ('value="3.0"', 'value="1e300"', "line 5, link upper, <mass value>"),
    ('ixx="0.03"', 'ixx="1e300"', "line 5, link upper, <inertia ixx>"),
    ('xyz="0 0 0.15"', 'xyz="0 0 1e300"', "line 5, link upper, <origin xyz>"),
    ('xyz="0 0 0.2" rpy="0 0 0"', 'xyz="0 0 0.2" rpy="0 -1e10 0"', "line 25, joint j1, <origin rpy>"),
    ('velocity="2.0"', 'velocity="1e-7"', "line 25, joint j1, <limit velocity>"),
    ('effort="50"', 'effort="1e10"', "line 25, joint j1, <limit effort>"),
    ('upper="2.0"', 'upper="1e16"', "line 25, joint j1, <limit upper>"),
    ('effort="50"/>', 'effort="50"/><dynamics damping="2e6"/>', "line 25, joint j1, <dynamics damping>"),
    ('effort="50"/>', 'effort="50"/><dynamics friction="1e-13"/>', "line 25, joint j1, <dynamics friction>"),
]


@pytest.mark.parametrize(("old", "new", "where"), BAD_URDFS)
def test_urdf_numbers_out_of_range(tmp_path: Path, old: str, new: str, where: str) -> None:
    expect_fault(faults_of(tmp_path, urdf=replaced(URDF, old, new)), "arm.urdf", where, RANGE)


def test_ignored_ends_of_a_continuous_joint_may_be_any_number(tmp_path: Path) -> None:
    urdf = replaced(URDF, 'name="j1" type="revolute"', 'name="j1" type="continuous"')
    urdf = replaced(urdf, 'lower="-1.5" upper="2.0"', 'lower="-1e16" upper="1e16"')
    position = load(tmp_path, urdf=urdf).arm.joints[0].limits.position
    assert position is not None and position.source == "continuous joint"


@pytest.mark.parametrize(
    ("row", "where"),
    [
        ("1e11,0,0,0,0,0,0", "line 3, column t_s"),
        ("-1e300,0,0,0,0,0,0", "line 3, column t_s"),
        ("0.1,1e300,1e300,0,0,0,0", "line 3, column vx_m_s"),
        ("0.1,0,0,0,0,-1e10,0", "line 3, column wy_rad_s"),
    ],
)
def test_log_values_out_of_range(tmp_path: Path, row: str, where: str) -> None:
    """Numpy's overflow warnings are errors here, so none is raised on the way."""
    faults = faults_of(tmp_path, log=f"{HEADER}\n0,0,0,0,0,0,0\n{row}\n")
    expect_fault(faults, "log.csv", where, RANGE)


def test_arrays_out_of_range() -> None:
    times, twist = np.array([0.0, 0.1]), np.zeros((2, 6))
    pose = np.array([[0, 0, 0, 1.0, 0, 0, 0], [1e200, 0, 0, 1e200, 0, 0, 0]])
    with pytest.raises(InputError, match=RANGE) as caught:
        check_arrays(times, twist, pose=pose)
    assert [fault.where for fault in caught.value.faults] == ["row 2, column px_m", "row 2, column qw"]
    wide = np.full((2, 6), np.longdouble("1e4000"))
    with pytest.raises(InputError, match="finite"):
        check_arrays(times, wide)


def test_many_values_out_of_range_are_counted() -> None:
    twist = np.full((1000, 6), np.nan)
    twist[:, 5] = 1e12
    with pytest.raises(InputError) as caught:
        check_arrays(np.arange(1000) / 100, twist)
    told = [fault.what for fault in caught.value.faults]
    assert len(told) == 2 * (MAX_SHOWN + 1)
    assert "… and 4980 more: not finite" in told and "… and 980 more: out of range" in told


def test_field_that_is_too_long(tmp_path: Path) -> None:
    row = "0.1,0,0,0,0,0,x" + "0" * 200_000
    faults = faults_of(tmp_path, log=f"{HEADER}\n0,0,0,0,0,0,0\n{row}\n")
    only_fault(faults, "log.csv", "line 3", "a field is longer than 131072 characters")
    faults = faults_of(tmp_path, log="t" * 200_000 + ",x\n0,0\n")
    only_fault(faults, "log.csv", "line 1", "a field is longer than 131072 characters")


def chain_of(count: int) -> tuple[str, str]:
    """A cell and its URDF with so many turning joints in a row."""
    body = '<inertial><mass value="1"/><inertia ixx="1" iyy="1" izz="1" ixy="0" ixz="0" iyz="0"/></inertial>'
    links = "".join(f'<link name="l{i}">{body}</link>' for i in range(count + 1))
    joints = "".join(
        f'<joint name="q{i}" type="revolute"><parent link="l{i}"/><child link="l{i + 1}"/>'
        '<limit lower="-1" upper="1" velocity="1" effort="9"/></joint>'
        for i in range(count)
    )
    start = ", ".join(f"q{i} = 0" for i in range(count))
    cell = replaced(replaced(CELL, "j1 = 30.0", start), "start_m = { j2 = 0.1 }\n", "")
    cell = replaced(replaced(cell, 'limits = "limits.toml"\n', ""), '"flange"', f'"l{count}"')
    return cell, f'<robot name="r">{links}{joints}</robot>'


def test_joints_of_a_chain_are_counted(tmp_path: Path) -> None:
    cell, urdf = chain_of(MAX_JOINTS)
    assert len(load(tmp_path, cell=cell, urdf=urdf).arm.joints) == MAX_JOINTS == 20
    cell, urdf = chain_of(MAX_JOINTS + 1)
    only_fault(faults_of(tmp_path, cell=cell, urdf=urdf), "cell.toml", "arm.tip", "21 moving joints", "20")


def test_parts_are_counted(tmp_path: Path) -> None:
    part = "[[paddle.part]]\nmass_kg = 0.001\ncom_m = [0, 0, 0]\n"
    assert len(load(tmp_path, cell=CELL + part * (MAX_ROWS - 1)).paddle.parts) == MAX_ROWS
    faults = faults_of(tmp_path, cell=CELL + part * MAX_ROWS)
    only_fault(faults, "cell.toml", "paddle.part", "1001", "at most 1000")


def test_unknown_joints_are_cut_short(tmp_path: Path) -> None:
    many = "".join(f"[joints.x{i}]\nvelocity_rad_s = 1\n" for i in range(3000))
    faults = faults_of(tmp_path, limits=LIMITS + many)
    assert len(faults) == MAX_SHOWN + 1
    expect_fault(faults, "limits.toml", "file", "2980 more", "joints")
    names = ", ".join(f"x{i} = 0" for i in range(3000))
    faults = faults_of(tmp_path, cell=replaced(CELL, "j1 = 30.0", f"j1 = 30.0, {names}"))
    assert len(faults) == MAX_SHOWN + 1
    expect_fault(faults, "cell.toml", "arm.start_deg", "2980 more", "joints")
    locked = f"locked_rad = {{ {names} }}\n[paddle]"
    faults = faults_of(tmp_path, cell=replaced(CELL, "[paddle]", locked))
    assert len(faults) == MAX_SHOWN + 1
    expect_fault(faults, "cell.toml", "arm.locked_rad", "2980 more")


def test_joints_without_their_links_are_cut_short(tmp_path: Path) -> None:
    joints = "".join(
        f'<joint name="x{i}" type="fixed"><parent link="flange"/><child link="no{i}"/></joint>'
        for i in range(3000)
    )
    faults = faults_of(tmp_path, urdf=replaced(URDF, "</robot>", joints + "</robot>"))
    assert len(faults) == MAX_SHOWN + 1
    expect_fault(faults, "arm.urdf", "file", "2980 more", "links")


def test_faults_that_differ_by_numbers_alone_are_cut_short(tmp_path: Path) -> None:
    bad = ", ".join(f"[0, 0, {i}]" for i in range(11, 111))
    faults = faults_of(tmp_path, cell=CELL + f"[contact]\nrestitution = 0.9\nrestitution_at = [{bad}]\n")
    assert len(faults) == MAX_SHOWN + 1
    expect_fault(faults, "cell.toml", "file", "80 more of a kind", "numbers")
    mixed = [Fault("a", str(i), f'"x{i}" is {i} of "many"; y{i}') for i in range(30)]
    kept = list(cut_short([*mixed, Fault("a", "z", "other"), Fault("b", "0", mixed[0].what)]))
    assert len(kept) == MAX_SHOWN + 3
    assert kept[-1] == Fault("a", "file", "… and 10 more of a kind: is of")


def test_array_of_tables_is_named_as_such(tmp_path: Path) -> None:
    faults = faults_of(tmp_path, limits="[[joints.j1]]\nvelocity_rad_s = 1\n")
    only_fault(faults, "limits.toml", "joints.j1", "is an array of tables; give a table [joints.j1]")
    expect_fault(faults_of(tmp_path, cell=CELL + "[[control]]\n"), "cell.toml", "control", "array of tables")


@pytest.mark.parametrize(
    ("character", "escaped"),
    [("\u202e", "\\u202e"), ("\u200b", "\\u200b"), ("\u2066", "\\u2066"), ("\U000e0041", "\\U000e0041")],
)
def test_characters_that_turn_the_text_are_escaped(tmp_path: Path, character: str, escaped: str) -> None:
    faults = faults_of(tmp_path, cell=CELL + f'"a{character}b" = 1\n')
    only_fault(faults, "cell.toml", f'follow."a{escaped}b"', "unknown key")
    plain = faults_of(tmp_path, cell=CELL + '"größe" = 1\n')
    only_fault(plain, "cell.toml", 'follow."größe"', "unknown key")
