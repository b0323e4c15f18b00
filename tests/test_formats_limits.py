"""The limits file: keys and units by kind of joint, and its merger with the URDF."""

from __future__ import annotations

from pathlib import Path

import pytest
from formats_case import CELL, URDF, expect_fault, faults_of, load, only_fault, replaced

from reach.cell import Bound, JointLimits

BAD = [
    ("[joints.k1]\nvelocity_rad_s = 1\n", "joints.k1", ("no joint", '"j1"')),
    ("[joints.'a b']\n", 'joints."a b"', ("no joint",)),
    ("[joints.j1]\nspeed_rad_s = 1\n", "joints.j1.speed_rad_s", ("unknown key",)),
    ("[joints.j1]\nvelocity = 1\n", "joints.j1.velocity", ('did you mean "velocity_rad_s"',)),
    ("[joints.j2]\nvelocity_rad_s = 1\n", "joints.j2.velocity_rad_s", ("slides", "velocity_m_s")),
    ("[joints.j1]\nvelocity_m_s = 1\n", "joints.j1.velocity_m_s", ("turns", "velocity_rad_s")),
    ("[joints.j2]\ntorque_rate_nm_s = 1\n", "joints.j2.torque_rate_nm_s", ("torque_rate_n_s",)),
    ("[joints.j1]\narmature_kg = 1\n", "joints.j1.armature_kg", ("armature_kg_m2",)),
    ("[joints.j1]\nvelocity_rad_s = 0\n", "joints.j1.velocity_rad_s", ("above 0", "not known")),
    ("[joints.j1]\nvelocity_rad_s = -1\n", "joints.j1.velocity_rad_s", ("above 0",)),
    ("[joints.j1]\nvelocity_rad_s = nan\n", "joints.j1.velocity_rad_s", ("finite",)),
    ("[joints.j1]\nvelocity_rad_s = true\n", "joints.j1.velocity_rad_s", ("number",)),
    ("[joints.j1]\nvelocity_rad_s = [1, 2]\n", "joints.j1.velocity_rad_s", ("leaves out 0",)),
    ("[joints.j1]\nvelocity_rad_s = [1, -1]\n", "joints.j1.velocity_rad_s", ("no room",)),
    ("[joints.j1]\nvelocity_rad_s = [-1, 0, 1]\n", "joints.j1.velocity_rad_s", ("must have 2",)),
    ("[joints.j1]\nvelocity_rad_s = [-1, 'x']\n", "joints.j1.velocity_rad_s[1]", ("number",)),
    ("[joints.j1]\nposition_rad = 1\n", "joints.j1.position_rad", ("[lo, hi]",)),
    ("[joints.j1]\nposition_rad = [1, 1]\n", "joints.j1.position_rad", ("no room",)),
    ("[joints.j1]\nposition_rad = [3, 4]\n", "joints.j1.position_rad", ("[-1.5, 2]", "override = true")),
    ("[joints.j1]\nfriction_nm = -1\n", "joints.j1.friction_nm", ("at least 0",)),
    ("[joints.j1]\nsource = 3\n", "joints.j1.source", ("text",)),
    ("[joints.j1]\noverride = 'yes'\n", "joints.j1.override", ("true or false",)),
    ("[joints]\nj1 = 3\n", "joints.j1", ("table",)),
    ("[joint.j1]\n", "joint", ('did you mean "joints"',)),
    ("", "joints", ("missing",)),
    ("[joints.j1\n", "line 1, column 11", ("not valid TOML",)),
]


@pytest.mark.parametrize(("text", "where", "words"), BAD)
def test_bad_limits(tmp_path: Path, text: str, where: str, words: tuple[str, ...]) -> None:
    expect_fault(faults_of(tmp_path, limits=text), "limits.toml", where, *words)


def limits_of(folder: Path, text: str, urdf: str = URDF) -> tuple[JointLimits, JointLimits]:
    j1, j2 = load(folder, limits=text, urdf=urdf).arm.joints
    return j1.limits, j2.limits


def test_every_key_of_both_kinds_of_joint(tmp_path: Path) -> None:
    turning, sliding = limits_of(
        tmp_path,
        """[joints.j1]
position_rad = [-1, 1]
velocity_rad_s = [-0.5, 1]
acceleration_rad_s2 = 5
jerk_rad_s3 = 50
torque_nm = 20
torque_rate_nm_s = 300
torque_continuous_nm = 8
armature_kg_m2 = 0.2
damping_nm_s_rad = 0.3
friction_nm = 0
source = "s"
[joints.j2]
position_m = [0, 0.3]
velocity_m_s = 0.5
acceleration_m_s2 = 2
jerk_m_s3 = 20
torque_n = 100
torque_rate_n_s = 1000
torque_continuous_n = 40
armature_kg = 2
damping_n_s_m = 3
friction_n = 4
source = "s"
""",
    )
    assert turning == JointLimits(
        Bound(-1, 1, "s"),
        Bound(-0.5, 1, "s"),
        Bound(-5, 5, "s"),
        Bound(-50, 50, "s"),
        Bound(-20, 20, "s"),
        Bound(-300, 300, "s"),
        Bound(-8, 8, "s"),
        0.2,
        0.3,
        0.0,
    )
    assert sliding == JointLimits(
        Bound(0, 0.3, "URDF / s"),
        Bound(-0.5, 0.5, "s"),
        Bound(-2, 2, "s"),
        Bound(-20, 20, "s"),
        Bound(-100, 100, "s"),
        Bound(-1000, 1000, "s"),
        Bound(-40, 40, "s"),
        2,
        3,
        4,
    )


def test_stricter_side_holds(tmp_path: Path) -> None:
    text = (
        "[joints.j1]\nposition_rad = [-1, 3]\nvelocity_rad_s = 9\ntorque_nm = [-60, 40]\nsource = 'sheet'\n"
    )
    limits, _ = limits_of(tmp_path, text)
    assert limits.position == Bound(-1, 2, "sheet / URDF")
    assert limits.velocity == Bound(-2, 2, "URDF")
    assert limits.torque == Bound(-50, 40, "URDF / sheet")


def test_override_lets_the_file_hold(tmp_path: Path) -> None:
    text = "[joints.j1]\noverride = true\nposition_rad = [-3, 3]\nvelocity_rad_s = 9\nsource = 'sheet'\n"
    limits, _ = limits_of(tmp_path, text)
    assert limits.position == Bound(-3, 3, "sheet")
    assert limits.velocity == Bound(-9, 9, "sheet")
    assert limits.torque == Bound(-50, 50, "URDF")


@pytest.mark.parametrize("written", ['velocity="0"', ""])
def test_zero_or_missing_is_unknown_until_the_file_says(tmp_path: Path, written: str) -> None:
    urdf = replaced(URDF, 'velocity="2.0"', written)
    cell = load(tmp_path, urdf=urdf, limits="[joints.j1]\ntorque_nm = 50\n")
    assert cell.arm.joints[0].limits.velocity is None
    assert any("velocity limit not known of j1" in note for note in cell.notes)
    told = load(tmp_path, urdf=urdf, limits="[joints.j1]\nvelocity_rad_s = 1\n")
    assert told.arm.joints[0].limits.velocity is not None
    assert not any("not known" in note for note in told.notes)


def test_position_may_come_from_the_file_alone(tmp_path: Path) -> None:
    urdf = replaced(URDF, 'lower="-1.5" upper="2.0" ', "")
    only_fault(
        faults_of(tmp_path, urdf=urdf),
        "arm.urdf",
        "line 25, joint j1",
        "locks the joint at 0",
        "position_rad = [lo, hi]",
        "[joints.j1]",
    )
    limits, _ = limits_of(tmp_path, "[joints.j1]\nposition_rad = [-1, 1]\nsource = 's'\n", urdf)
    assert limits.position == Bound(-1, 1, "s")


def test_continuous_joint_may_be_given_limits(tmp_path: Path) -> None:
    urdf = replaced(URDF, 'name="j1" type="revolute"', 'name="j1" type="continuous"')
    free, _ = limits_of(tmp_path, "[joints.j2]\n", urdf)
    assert free.position == Bound(-float("inf"), float("inf"), "continuous joint")
    kept, _ = limits_of(tmp_path, "[joints.j1]\nposition_rad = [-9, 9]\nsource = 's'\n", urdf)
    assert kept.position == Bound(-9, 9, "s")


def test_source_defaults_to_the_file(tmp_path: Path) -> None:
    limits, _ = limits_of(tmp_path, "[joints.j1]\ntorque_rate_nm_s = 9\n")
    assert limits.torque_rate is not None
    assert Path(limits.torque_rate.source) == tmp_path / "limits.toml"


@pytest.mark.parametrize(
    ("text", "words"),
    [
        ("[joints.j1]\n", "says nothing of j2"),
        ("[joints.grip]\nvelocity_rad_s = 1\n", "off the chain: grip"),
        ("[joints.j1]\nposition_rad = [-180, 180]\noverride = true\n", "is it in degrees?"),
        ("[joints.j2]\nposition_m = [0, 400]\noverride = true\n", "is it in mm?"),
    ],
)
def test_notes(tmp_path: Path, text: str, words: str) -> None:
    assert any(words in note for note in load(tmp_path, limits=text).notes)


def test_same_effort_everywhere_is_pointed_out(tmp_path: Path) -> None:
    """Four turning joints with effort 100 each; a limits file that confirms it takes the note away."""
    names = ["a", "b", "c", "d"]
    body = '<inertial><mass value="1"/><inertia ixx="1" iyy="1" izz="1" ixy="0" ixz="0" iyz="0"/></inertial>'
    links = "".join(f'<link name="l{name}">{body}</link>' for name in names)
    joints = "".join(
        f'<joint name="{name}" type="revolute"><parent link="{parent}"/><child link="l{name}"/>'
        '<limit lower="-1" upper="1" velocity="1" effort="100"/></joint>'
        for name, parent in zip(names, ["root", "la", "lb", "lc"], strict=True)
    )
    urdf = f'<robot name="r"><link name="root"/>{links}{joints}</robot>'
    start = ", ".join(f"{name} = 0" for name in names)
    cell = replaced(replaced(CELL, "j1 = 30.0", start), "start_m = { j2 = 0.1 }", "")
    cell = replaced(cell, 'tip = "flange"', 'tip = "ld"')
    plain = load(tmp_path, cell=cell, urdf=urdf, limits="[joints.a]\n")
    assert any("placeholder" in note for note in plain.notes)
    confirmed = load(tmp_path, cell=cell, urdf=urdf, limits="[joints.a]\ntorque_nm = 99\n")
    assert not any("placeholder" in note for note in confirmed.notes)
