"""The URDF pre-check, inertias before merging, and the canonical model against Pinocchio's own reading."""

from __future__ import annotations

import math
import sysconfig
import xml.etree.ElementTree as ElementTree
from pathlib import Path

import numpy as np
import pinocchio as pin
import pytest
from formats_case import CELL, URDF, expect_fault, faults_of, load, only_fault, replaced

from reach.cell import Bound, Cell
from reach.formats import inertia, xml_tree

UPPER = '<inertia ixx="0.03" iyy="0.03" izz="0.004" ixy="0" ixz="0" iyz="0"/>'
J1_LIMIT = '<limit lower="-1.5" upper="2.0" velocity="2.0" effort="50"/>'
J1 = "line 25, joint j1"
UPPER_PLACE = "line 5, link upper"


def test_positions_of_the_places_used_here() -> None:
    lines = URDF.splitlines()
    assert 'name="j1"' in lines[24] and "<inertial>" in lines[4]


BAD_XML = [
    ("", "line 1", ("not well-formed", "no element found")),
    ("<robot>", "line 1", ("not well-formed",)),
    ("hello", "line 1", ("not well-formed",)),
    ("\x00\x01", "line 1", ("not well-formed",)),
    ("<robot name='a' name='b'/>", "line 1", ("duplicate attribute",)),
    ("<sdf/>", "line 1", ("<sdf>", "<robot>", "convert")),
    ("<html/>", "line 1", ("<html>", "<robot>")),
    ("<robot/>", "line 1", ("no <link>",)),
    ("<!DOCTYPE robot>\n<robot/>", "line 1", ("document type",)),
    ("<!DOCTYPE r [<!ENTITY a 'x'>]>\n<robot>&a;</robot>", "line 1", ("document type",)),
    ("<!DOCTYPE r SYSTEM 'file:///etc/hosts'>\n<robot/>", "line 1", ("document type",)),
    ("<robot>\n&nothing;</robot>", "line 2", ("not well-formed", "undefined entity")),
    ("<robot>\n<xacro:macro name='m'/></robot>", "line 2", ("xacro", "expand it first")),
    ("<robot>\n<link name='${prefix}base'/></robot>", "line 2", ("${prefix}base", "expand it first")),
    ("<robot>\n<link name='$(arg p)base'/></robot>", "line 2", ("expand it first",)),
    ("<robot>" + "<a>" * 200 + "</a>" * 200 + "</robot>", "line 1", ("deeper than 100",)),
    ("<robot>" + "<a/>" * 20_001 + "</robot>", "line 1", ("20000 elements",)),
    ("<?xml version='1.0' encoding='nonesuch'?><robot/>", "file", ("unknown encoding",)),
]


@pytest.mark.parametrize(("urdf", "where", "words"), BAD_XML)
def test_bad_xml(tmp_path: Path, urdf: str, where: str, words: tuple[str, ...]) -> None:
    only_fault(faults_of(tmp_path, urdf=urdf), "arm.urdf", where, *words)


def test_expanded_xacro_may_keep_its_namespace(tmp_path: Path) -> None:
    urdf = replaced(URDF, 'name="invented"', 'name="invented" xmlns:xacro="http://ros.org/wiki/xacro"')
    assert load(tmp_path, urdf=urdf).arm == load(tmp_path).arm


def test_element_lines() -> None:
    from reach.errors import FaultList

    root = xml_tree.parse(b"<a>\n<b/>\n\n<c>\n<d/></c></a>", FaultList("x"))
    assert root is not None
    assert [child.line for child in root.children] == [2, 4]
    assert root.children[1].children[0].line == 5


BAD_TREE = [
    ('<link name="foot"/>', '<link name="upper"/>', "line 4, link upper", ("already used in line 3",)),
    ('<link name="foot"/>', "<link/>", "line 3", ("no name",)),
    ('<joint name="j2"', '<joint name="j1"', "line 31, joint j1", ("already used in line 25",)),
    ('<joint name="j1" type="revolute">', '<joint type="revolute">', "line 25", ("no name",)),
    ('"j1" type="revolute"', '"j1" type="revolut"', J1, ("no joint type", '"revolute"')),
    ('<parent link="foot"/>', "", J1, ("no parent link",)),
    ('<child link="upper"/>', "<child/>", J1, ("no child link",)),
    ('<parent link="foot"/>', '<parent link="food"/>', J1, ('"food" does not exist', '"foot"')),
    ('<child link="jaw"/>', '<child link="upper"/>', "line 41, joint grip", ("already hangs on", "j1")),
    ('<parent link="foot"/>', '<parent link="jaw"/>', J1, ("loop",)),
    ('<link name="foot"/>', '<link name="foot"/><link name="lone"/>', "line 3, link lone", ("2 root links",)),
    ('"j1" type="revolute"', '"j1" type="floating"', J1, ("floating", "can't be driven")),
    ('"j1" type="revolute"', '"j1" type="planar"', J1, ("planar", "can't be driven")),
    (J1_LIMIT, J1_LIMIT + '<mimic joint="j2"/>', J1, ('mimics "j2"', "not supported")),
    (J1_LIMIT, J1_LIMIT + J1_LIMIT, "line 29, joint j1", ("2 <limit>",)),
    ('xyz="0 0 0.2" rpy', 'xyz="0 0" rpy', f"{J1}, <origin xyz>", ("three finite numbers",)),
    ('xyz="0 0 0.2" rpy', 'xyz="0,0,0.2" rpy', f"{J1}, <origin xyz>", ("three finite numbers",)),
    ('xyz="0 0 0.2" rpy', 'xyz="0 0 nan" rpy', f"{J1}, <origin xyz>", ("three finite numbers",)),
    ('xyz="0 0 0.2" rpy="0 0 0"', 'quat_xyzw="0 0 0 1"', f"{J1}, <origin quat_xyzw>", ("rpy",)),
    ('<axis xyz="0 1 0"/>', '<axis xyz="0 0 0"/>', f"{J1}, <axis xyz>", ("zero",)),
    ('<axis xyz="0 1 0"/>', '<axis xyz="0 x 0"/>', f"{J1}, <axis xyz>", ("three finite numbers",)),
    ('lower="-1.5"', 'lower="a"', f"{J1}, <limit lower>", ("no finite number",)),
    ('lower="-1.5"', 'lower="-inf"', f"{J1}, <limit lower>", ("no finite number",)),
    ('lower="-1.5"', 'lower="3"', f"{J1}, <limit>", ("above upper", "swap")),
    ('lower="-1.5" upper="2.0"', "", J1, ("locks the joint",)),
    (J1_LIMIT, "", J1, ("locks the joint",)),
    ('effort="50"', 'effort="-50"', f"{J1}, <limit effort>", ("negative",)),
    ('velocity="2.0"', 'velocity="-1"', f"{J1}, <limit velocity>", ("negative",)),
    ('velocity="2.0"', 'velocity="2,0"', f"{J1}, <limit velocity>", ("no finite number",)),
    (J1_LIMIT, J1_LIMIT + '<dynamics damping="-1"/>', f"{J1}, <dynamics damping>", ("negative",)),
    (
        J1_LIMIT,
        J1_LIMIT + '<safety_controller soft_lower_limit="1" soft_upper_limit="-1" k_velocity="1"/>',
        f"{J1}, <safety_controller>",
        ("above",),
    ),
]


@pytest.mark.parametrize(("old", "new", "where", "words"), BAD_TREE)
def test_bad_tree(tmp_path: Path, old: str, new: str, where: str, words: tuple[str, ...]) -> None:
    expect_fault(
        faults_of(tmp_path, urdf=replaced(URDF, old, new), limits=NO_LIMITS), "arm.urdf", where, *words
    )


NO_LIMITS = "[joints.j2]\n"

BAD_INERTIA = [
    ('value="3.0"', 'value="-3.0"', UPPER_PLACE, ("mass -3 kg is negative",)),
    ('value="3.0"', 'value="nan"', f"{UPPER_PLACE}, <mass value>", ("no finite number",)),
    ('value="3.0"', 'value="0"', UPPER_PLACE, ("mass is 0",)),
    ('<mass value="3.0"/>', "", UPPER_PLACE, ("no mass",)),
    (UPPER, "", UPPER_PLACE, ("no <inertia>",)),
    (UPPER, UPPER.replace('iyz="0"', ""), f"{UPPER_PLACE}, <inertia>", ("no iyz",)),
    (UPPER, UPPER.replace('ixx="0.03"', 'ixx="-0.03"'), UPPER_PLACE, ("no negative one",)),
    (UPPER, UPPER.replace('ixy="0"', 'ixy="0.04"'), UPPER_PLACE, ("no negative one",)),
    (UPPER, UPPER.replace('ixx="0.03"', 'ixx="0.3"'), UPPER_PLACE, ("triangle inequality", "I1 + I2")),
    (
        UPPER,
        '<inertia ixx="30000" iyy="30000" izz="4000" ixy="0" ixz="0" iyz="0"/>',
        UPPER_PLACE,
        ("radius of gyration of 100 m", "kg mm²"),
    ),
    ('xyz="0 0 0.15"', 'xyz="0 0 150"', UPPER_PLACE, ("far off the link", "mm")),
    # the jaw hangs on the tip and is held, but moves with it
    ('<mass value="0.1"/>', '<mass value="-0.1"/>', "line 20, link jaw", ("negative",)),
]


@pytest.mark.parametrize(("old", "new", "where", "words"), BAD_INERTIA)
def test_bad_inertia(tmp_path: Path, old: str, new: str, where: str, words: tuple[str, ...]) -> None:
    expect_fault(faults_of(tmp_path, urdf=replaced(URDF, old, new)), "arm.urdf", where, *words)


def test_triangle_inequality_allows_rounding(tmp_path: Path) -> None:
    """A thin plate has I1 + I2 = I3; printed digits may break that by under one per cent."""
    urdf = replaced(URDF, UPPER, UPPER.replace('izz="0.004"', 'izz="0.0601"'))
    assert any("taken as rounding" in note for note in load(tmp_path, urdf=urdf).notes)
    exact = replaced(URDF, UPPER, UPPER.replace('izz="0.004"', 'izz="0.06"'))
    assert not any("break the triangle" in note for note in load(tmp_path, urdf=exact).notes)


@pytest.mark.parametrize(
    ("mass", "six", "word"),
    [
        (2.0, (0.4 * 2, 0.4 * 2, 0.4 * 2, 0, 0, 0), ""),  # solid ball of radius 1 m: 2/5 m r²
        (2.0, (0.0, 0.1, 0.1, 0, 0, 0), ""),  # thin rod
        (0.0, (0.0,) * 6, ""),  # a massless frame
        (2.0, (800.0, 800.0, 800.0, 0, 0, 0), "another unit"),
        (2.0, (8e5, 8e5, 8e5, 0, 0, 0), "kg mm²"),
        (2.0, (8e9, 8e9, 8e9, 0, 0, 0), "g mm²"),
    ],
)
def test_solids(mass: float, six: tuple[float, ...], word: str) -> None:
    fault, _ = inertia.judge(mass, inertia.matrix(six))
    assert bool(fault) == bool(word) and word in fault


LINK_BODY = URDF[URDF.index("    <inertial>") : URDF.index("  </link>")]


def test_moving_body_without_inertia_is_a_fault(tmp_path: Path) -> None:
    urdf = replaced(URDF, LINK_BODY, "")
    where = "line 20, joint j1"
    only_fault(faults_of(tmp_path, urdf=urdf), "arm.urdf", where, "no inertia", "upper", "add <inertial>")
    relaxed = CELL + '[accept]\nrequire = ["position", "velocity"]\n'
    notes = load(tmp_path, cell=relaxed, urdf=urdf).notes
    assert any("no inertia" in note and "too small" in note for note in notes)


def test_body_that_the_paddle_alone_gives_inertia_is_noted(tmp_path: Path) -> None:
    start = URDF.index("    <inertial>", URDF.index('name="slide"'))
    end = URDF.index("  </link>", start)
    jaw = URDF.index("    <inertial>", URDF.index('name="jaw"'))
    urdf = URDF[:start] + URDF[end:jaw] + URDF[URDF.index("  </link>", jaw) :]
    assert any("but the paddle's" in note for note in load(tmp_path, urdf=urdf).notes)


def test_point_mass_on_its_own_axis_does_not_count_as_inertia(tmp_path: Path) -> None:
    zero = '<inertia ixx="0" iyy="0" izz="0" ixy="0" ixz="0" iyz="0"/>'
    beside_axis = replaced(URDF, UPPER, zero)
    assert any("those of a point" in note for note in load(tmp_path, urdf=beside_axis).notes)
    on_axis = replaced(beside_axis, 'xyz="0 0 0.15"', 'xyz="0 0.15 0"')
    only_fault(faults_of(tmp_path, urdf=on_axis), "arm.urdf", J1, "no inertia about its axis")


def test_held_bodies_count_where_they_are_held(tmp_path: Path) -> None:
    """A bare turntable carries a point mass on an arm off the chain: on the axis or off it, as it is held."""
    point = '<inertia ixx="0" iyy="0" izz="0" ixy="0" ixz="0" iyz="0"/>'
    body = f'<inertial><mass value="1"/><origin xyz="0 0 1"/>{point}</inertial>'
    urdf = f"""<robot name="r"><link name="foot"/><link name="table"/>
    <link name="boom">{body}</link><link name="tip">{body}</link>
    <joint name="turn" type="continuous"><parent link="foot"/><child link="table"/><axis xyz="0 0 1"/></joint>
    <joint name="tilt" type="revolute"><parent link="table"/><child link="boom"/><axis xyz="1 0 0"/>
    <limit lower="-2" upper="2"/></joint>
    <joint name="lift" type="prismatic"><parent link="table"/><child link="tip"/><axis xyz="0 0 1"/>
    <limit lower="0" upper="1"/></joint></robot>"""
    cell = replaced(CELL, "start_deg = { j1 = 30.0 }", "start_rad = { turn = 0 }")
    cell = replaced(replaced(cell, "j2 = 0.1", "lift = 0.1"), '"flange"', '"tip"')
    cell = replaced(cell, 'limits = "limits.toml"\n', "")
    upright = replaced(cell, "[paddle]", "locked_rad = { tilt = 0 }\n[paddle]")
    only_fault(faults_of(tmp_path, cell=upright, urdf=urdf), "arm.urdf", "line 3, joint turn", "no inertia")
    tilted = replaced(cell, "[paddle]", "locked_rad = { tilt = 1.5 }\n[paddle]")
    assert load(tmp_path, cell=tilted, urdf=urdf).arm.held[0].value == 1.5


def test_inertia_that_does_not_move_is_not_judged(tmp_path: Path) -> None:
    body = '<inertial><mass value="9"/><inertia ixx="-1" iyy="0" izz="0" ixy="0" ixz="0" iyz="0"/></inertial>'
    urdf = replaced(URDF, '<link name="foot"/>', f'<link name="foot">{body}</link>')
    assert len(load(tmp_path, urdf=urdf).arm.joints) == 2


NOTED = [
    ('<axis xyz="0 1 0"/>', '<axis xyz="0 2 0"/>', "axis of length 2"),
    ('lower="-1.5" upper="2.0"', 'upper="2.0"', "no lower: 0"),
    (J1_LIMIT, J1_LIMIT + '<dynamics damping="0" friction="0"/>', "friction 0 read as unknown"),
    ('effort="50"', 'effort="0"', "torque limit not known of j1"),
    ('"grip" type="revolute"', '"grip" type="floating"', "held as drawn: grip"),
    (
        J1_LIMIT,
        J1_LIMIT + '<safety_controller soft_lower_limit="-9" soft_upper_limit="1" k_velocity="1"/>',
        "soft limits lie outside",
    ),
]


@pytest.mark.parametrize(("old", "new", "words"), NOTED)
def test_noted(tmp_path: Path, old: str, new: str, words: str) -> None:
    cell = load(tmp_path, urdf=replaced(URDF, old, new), limits=NO_LIMITS)
    assert any(words in note for note in cell.notes), cell.notes


def test_axis_is_normalised(tmp_path: Path) -> None:
    cell = load(tmp_path, urdf=replaced(URDF, '<axis xyz="0 1 0"/>', '<axis xyz="0 2 0"/>'))
    assert cell.arm.model_xml == load(tmp_path).arm.model_xml


def test_soft_limits_hold_where_they_are_stricter(tmp_path: Path) -> None:
    soft = '<safety_controller soft_lower_limit="-1" soft_upper_limit="1.9" k_velocity="1"/>'
    limits = load(tmp_path, urdf=replaced(URDF, J1_LIMIT, J1_LIMIT + soft)).arm.joints[0].limits
    assert limits.position == Bound(-1.0, 1.9, "URDF safety_controller")


def test_continuous_joint_ignores_position_limits(tmp_path: Path) -> None:
    cell = load(tmp_path, urdf=replaced(URDF, '"j1" type="revolute"', '"j1" type="continuous"'))
    assert cell.arm.joints[0].limits.position == Bound(-math.inf, math.inf, "continuous joint")
    assert any("lower and upper are ignored" in note for note in cell.notes)
    assert "continuous" not in cell.arm.model_xml


def test_dynamics_and_version_1_2_attributes(tmp_path: Path) -> None:
    limit = J1_LIMIT.replace("/>", ' acceleration="7" jerk="70"/><dynamics damping="0.5" friction="0.25"/>')
    limits = load(tmp_path, urdf=replaced(URDF, J1_LIMIT, limit), limits=NO_LIMITS).arm.joints[0].limits
    assert limits.acceleration == Bound(-7, 7, "URDF 1.2") and limits.jerk == Bound(-70, 70, "URDF 1.2")
    assert (limits.damping, limits.friction) == (0.5, 0.25)


@pytest.mark.parametrize("name", ["my joint", "<b>j</b>", 'say "j"', "Gelenk-ä", "🏓", "a&b", "j.1", "-"])
def test_any_text_is_a_name(tmp_path: Path, name: str) -> None:
    import tomllib
    from xml.sax.saxutils import quoteattr

    urdf = replaced(URDF, '<joint name="j1"', f"<joint name={quoteattr(name)}")
    quoted = '"' + name.replace('"', '\\"') + '"'
    assert tomllib.loads(f"{quoted} = 1") == {name: 1}
    cell = load(
        tmp_path,
        urdf=urdf,
        cell=replaced(CELL, "j1 = 30.0", f"{quoted} = 30.0"),
        limits=f"[joints.{quoted}]\nvelocity_rad_s = 1\n",
    )
    assert cell.arm.joints[0].name == name
    assert cell.arm.model_xml == load(tmp_path).arm.model_xml


def test_canonical_model(tmp_path: Path) -> None:
    root = ElementTree.fromstring(load(tmp_path).arm.model_xml)
    assert [link.get("name") for link in root.findall("link")] == [
        "base",
        "link_0",
        "link_1",
        "tip",
        "link_3",
    ]
    names = [(joint.get("name"), joint.get("type")) for joint in root.findall("joint")]
    assert names == [
        ("chain_0", "revolute"),
        ("chain_1", "prismatic"),
        ("fixed_0", "fixed"),
        ("held_0", "revolute"),
    ]
    for limit in root.iter("limit"):
        assert limit.attrib == {"lower": "-1e9", "upper": "1e9", "effort": "1e9", "velocity": "1e9"}


ROBOTS = Path(sysconfig.get_paths()["purelib"], "cmeel.prefix", "share", "example-robot-data", "robots")

PUBLISHED = [
    ("panda_description/urdf/panda.urdf", "panda_hand", 7),
    ("ur_description/urdf/ur5_robot.urdf", "tool0", 6),
    ("ur_description/urdf/ur3_gripper.urdf", "tool0", 6),
    ("xarm_description/urdf/xarm7.urdf", "link7", 7),
    ("z1_description/urdf/z1.urdf", "link06", 6),
    ("so_arm_description/urdf/so101.urdf", "gripper_link", 5),
    ("kinova_description/robots/kinova.urdf", "j2s6s200_end_effector", 6),
    ("tiago_description/robots/tiago.urdf", "wrist_ft_tool_link", 8),
]


def published_cell(folder: Path, robot: str, tip: str) -> tuple[Cell, Path]:
    """The published file in a cell that starts in the middle of every joint's travel."""
    source = ROBOTS / robot
    start: dict[bool, list[str]] = {False: [], True: []}
    for joint in ElementTree.parse(source).getroot().findall("joint"):
        limit = joint.find("limit")
        if (
            joint.get("type") in ("revolute", "prismatic", "continuous")
            and joint.get("name") in CHAINS[robot]
        ):
            bounded = limit is not None and joint.get("type") != "continuous"
            middle = (
                (float(limit.get("lower", "0")) + float(limit.get("upper", "0"))) / 2
                if bounded and limit is not None
                else 0.0
            )
            start[joint.get("type") == "prismatic"].append(f'"{joint.get("name")}" = {middle!r}')
    cell = f"""[arm]
urdf = '{source}'
tip = "{tip}"
start_rad = {{ {", ".join(start[False])} }}
start_m = {{ {", ".join(start[True])} }}
[paddle]
mount = {{}}
radius_m = 0.08
mass_kg = 0.2
"""
    return load(folder, cell=cell), source


def chain_of(source: Path, tip: str) -> list[str]:
    """Names of the moving joints between root and tip, by walking up from the tip."""
    above = {}
    for joint in ElementTree.parse(source).getroot().findall("joint"):
        parent, child = joint.find("parent"), joint.find("child")
        assert parent is not None and child is not None
        above[child.get("link")] = (parent.get("link"), joint.get("name"), joint.get("type"))
    names: list[str] = []
    link: str | None = tip
    while link in above:
        link, name, kind = above[link]
        if kind != "fixed":
            names.insert(0, str(name))
    return names


CHAINS = {robot: chain_of(ROBOTS / robot, tip) for robot, tip, _ in PUBLISHED}


@pytest.mark.parametrize(("robot", "tip", "joints"), PUBLISHED)
def test_published_arms_have_the_same_dynamics_as_in_pinocchio(
    tmp_path: Path, robot: str, tip: str, joints: int
) -> None:
    """Mass matrix, bias and tip placement of the canonical model equal those of the file read directly."""
    cell, source = published_cell(tmp_path, robot, tip)
    names = [joint.name for joint in cell.arm.joints]
    assert len(names) == joints and names == CHAINS[robot]
    held = {joint.name: joint.value for joint in cell.arm.held}
    direct, direct_frame = reduced(pin.buildModelFromUrdf(str(source)), held, tip)
    ours, our_frame = reduced(
        pin.buildModelFromXML(cell.arm.model_xml), {j.model_name: j.value for j in cell.arm.held}, "tip"
    )
    assert list(direct.names)[1:] == names
    assert list(ours.names)[1:] == [f"chain_{i}" for i in range(joints)]
    random = np.random.default_rng(7)
    for _ in range(5):
        angles, v = random.uniform(-1, 1, (2, joints))
        results = []
        for model, frame in ((direct, direct_frame), (ours, our_frame)):
            data = model.createData()
            q = pin.integrate(model, pin.neutral(model), angles)
            mass, bias = pin.crba(model, data, q).copy(), pin.nonLinearEffects(model, data, q, v).copy()
            pin.framesForwardKinematics(model, data, q)
            results.append((np.triu(mass), bias, data.oMf[frame].homogeneous.copy()))
        for one, other in zip(*results, strict=True):
            np.testing.assert_allclose(one, other, rtol=1e-9, atol=1e-10)


def reduced(model: pin.Model, held: dict[str, float], tip: str) -> tuple[pin.Model, int]:
    """The model with joints held at values, and the frame of the tip link."""
    change = np.zeros(model.nv)
    for name, value in held.items():
        change[model.joints[model.getJointId(name)].idx_v] = value
    q = pin.integrate(model, pin.neutral(model), change)
    small = pin.buildReducedModel(model, [model.getJointId(name) for name in held], q)
    return small, small.getFrameId(tip, pin.BODY)


def test_published_file_with_impossible_inertias_is_refused(tmp_path: Path) -> None:
    """Two links of this file state moments 0.001, 0.001, 0.01 kg m², which no solid has."""
    source = ROBOTS / "pr2_description" / "urdf" / "pr2.urdf"
    arm = f"[arm]\nurdf = '{source}'\ntip = 'r_wrist_roll_link'\n"
    cell = arm + "[paddle]\nmount = {}\nradius_m = 0.1\nmass_kg = 1\n"
    faults = [fault for fault in faults_of(tmp_path, cell=cell) if fault.file == str(source)]
    assert [fault.where.split(", ")[1] for fault in faults] == [
        "link sensor_mount_link",
        "link double_stereo_link",
    ]
    assert all("triangle" in fault.what for fault in faults)
