"""The ground of the second opinion against the first one's arm, against formulas, and against hostile folders."""

from __future__ import annotations

import hashlib
import json
import sys
from dataclasses import asdict
from pathlib import Path
from typing import Any
from xml.sax.saxutils import quoteattr

import numpy as np
import pytest
from builders import cell_text, load_text, published_urdf, robot_cell

from reach.arm import Arm
from reach.cell import Cell
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE
from reach.evidence.motion import Motion
from reach.evidence.rallies import Knots
from reach.posture import reach_bound
from reach.rally.quintic import motion_of
from reach.recheck.arm.chain import Chain
from reach.recheck.arm.engine import available
from reach.recheck.arm.ground import Ground, ground
from reach.recheck.arm.limits import KINDS, TOOL, Limits, kept, motion_items, overshoot, torques, values
from reach.recheck.arm.trace import FINE, Trace, fine, quintic
from reach.recheck.stored import BadFolder, Stored
from reach.report.document import strict

# Both sides multiply a dozen matrices of numbers around one in double precision: 1e-12 m, rad, m/s is wide of that.
SAME = 1e-12
TORQUE_SHARE = 1e-6  # of the largest torque; 5e-12 found on forty published robots
STEP_RAD = 1e-5  # of difference quotients, good to its square

SEVEN = tuple(f"joint{i + 1}" for i in range(7))
FER = tuple(f"panda_joint{i + 1}" for i in range(7))
PARTS = ("shoulder_pan", "shoulder_lift", "elbow", "wrist_1", "wrist_2", "wrist_3")
UR = tuple(f"{part}_joint" for part in PARTS)
PUBLISHED = {  # folder, file, tip, joints, a posture inside their ranges; two with fingers off the chain
    "panda with hand": ("panda_description", "panda.urdf", "panda_link8", FER, (0, 0, 0, -1.5, 0, 1.5, 0)),
    "ur3 with gripper": ("ur_description", "ur3_gripper.urdf", "tool0", UR, (0,) * 6),
    "xarm7": ("xarm_description", "xarm7.urdf", "link7", SEVEN, (0,) * 7),
}
TILTED = "base = { xyz_m = [0.1, 0.2, 1.5], rpy_deg = [120.0, 30.0, 25.0] }"
FLAT = """
[paddle]
mount = { xyz_m = [0.01, -0.02, 0.06], rpy_deg = [100.0, -50.0, 20.0] }
shape = "plate"
size_m = [0.15, 0.2]
mass_kg = 0.25
"""
GIVEN = """
[paddle]
mount = { xyz_m = [0.01, -0.02, 0.06], rpy_deg = [10.0, -5.0, 20.0] }
shape = "given"
mass_kg = 0.3
com_m = [0.02, -0.01, -0.03]
inertia_kg_m2 = [2e-3, 3e-3, 4e-3, 4e-4, -3e-4, 2e-4]
[[paddle.part]]
mass_kg = 0.2
com_m = [0.0, 0.03, -0.05]
inertia_kg_m2 = [1e-4, 2e-4, 2.5e-4, 2e-5, 1e-5, -3e-5]
"""


def inertial(mass: float, xyz: str, rpy: str, six: str) -> str:
    """An <inertial>; six moments xx yy zz xy xz yz."""
    keys = ("ixx", "iyy", "izz", "ixy", "ixz", "iyz")
    moments = " ".join(f'{key}="{value}"' for key, value in zip(keys, six.split(), strict=True))
    return f'<inertial><origin xyz="{xyz}" rpy="{rpy}"/><mass value="{mass}"/><inertia {moments}/></inertial>'


# Links: a solid turned in its frame, a rod along z, a body whose moments break the triangle inequality by rounding, a
# point, one without mass. Joints: names that need escapes, a slide, an origin and an axis left out, an axis not of
# length one, fixed ones between; beside the chain held, mimicking and floating ones, all with mass.
ODD_LINKS = {
    "world": "",
    "stand": inertial(5.0, "0 0 0", "0 0 0", "1 1 1 0 0 0"),
    "a <1>": inertial(2.0, "0.1 0.02 -0.03", "0.3 -0.2 1.1", "0.03 0.04 0.05 0.002 -0.003 0.004"),
    "b": inertial(1.0, "0 0 0.2", "0 0 0", "0.013 0.013 0 0 0 0"),
    "b-end": inertial(0.4, "0.1 0 0", "0.5 0.6 0.7", "0.001 0.001 0.00201 0 0 0"),
    "c": inertial(0.7, "0.05 0.05 0.1", "0 0 0", "0 0 0 0 0 0"),
    "c-end": "",
    "d": inertial(0.5, "0 0.03 0.04", "0 0 0.4", "0.002 0.003 0.004 0 0.0005 0"),
    "tip": "",
    "finger": inertial(0.3, "0.05 0 0", "0 0 0", "0.001 0.002 0.0025 0 0 0"),
    "claw": inertial(0.2, "0 0.02 0", "0 0 0", "0.0004 0.0005 0.0006 0 0 0"),
    "echo": inertial(0.15, "0 0 0.02", "0 0 0", "0.0004 0.0005 0.0006 0 0 0"),
    "loose": inertial(0.25, "0.01 0 0", "0 0 0", "0.0004 0.0005 0.0006 0 0 0"),
}
ODD_JOINTS = (
    ("mast", "fixed", "world", "stand", '<origin xyz="0.2 0 0.3" rpy="0.1 0.2 -0.3"/>'),
    (
        'turn "1" & <é>',
        "revolute",
        "stand",
        "a <1>",
        '<origin xyz="0 0.1 0.2" rpy="0 0.4 0"/><axis xyz="0 0 2"/>',
    ),
    ("slide", "prismatic", "a <1>", "b", '<origin xyz="0.2 0 0.1" rpy="1 0.2 0.3"/><axis xyz="0.6 0 0.8"/>'),
    ("plate", "fixed", "b", "b-end", '<origin xyz="0.1 0.1 0" rpy="-0.4 0.5 2"/>'),
    ("spin", "continuous", "b-end", "c", ""),
    ("flange", "fixed", "c", "c-end", '<origin rpy="0 1.2 0"/>'),
    ("last", "revolute", "c-end", "d", '<origin xyz="0 0 0.25"/><axis xyz="0.1 -1 0.3"/>'),
    ("end", "fixed", "d", "tip", '<origin xyz="0.03 0.02 0.1" rpy="0.2 0.1 -3"/>'),
    ("grip", "revolute", "d", "finger", '<origin xyz="0 0.05 0.02" rpy="0.3 0 0"/><axis xyz="0 1 0"/>'),
    ("jaw", "prismatic", "finger", "claw", '<origin xyz="0.08 0 0"/><axis xyz="1 1 0"/>'),
    (
        "follower",
        "revolute",
        "d",
        "echo",
        '<origin xyz="0 -0.05 0"/><axis xyz="0 0 1"/><mimic joint="grip"/>',
    ),
    ("hose", "floating", "a <1>", "loose", '<origin xyz="0.3 0.1 0" rpy="0 0 0.5"/>'),
)
ODD_CHAIN = ('turn "1" & <é>', "slide", "spin", "last")
ODD_CELL = """
[arm]
urdf = "odd.urdf"
tip = "tip"
base = { xyz_m = [-0.3, 0.2, 0.9], rpy_deg = [170.0, 25.0, -60.0] }
gravity_m_s2 = [1.0, -2.0, -9.0]
start_rad = { "turn \\"1\\" & <é>" = 0.3, spin = 0.1, last = -0.2 }
start_m = { slide = 0.1 }
locked_rad = { grip = 0.7 }
locked_m = { jaw = 0.03 }
"""


def odd_urdf() -> bytes:
    """A robot of all that a URDF may have."""
    lines = [f"<link name={quoteattr(name)}>{inside}</link>" for name, inside in ODD_LINKS.items()]
    for name, kind, parent, child, inside in ODD_JOINTS:
        limit = '<limit lower="-2" upper="2" effort="50" velocity="3"/>'
        lines.append(
            f'<joint name={quoteattr(name)} type="{kind}"><parent link={quoteattr(parent)}/>'
            f"<child link={quoteattr(child)}/>{inside}{limit}</joint>"
        )
    return ("<robot name='odd'>" + "\n".join(lines) + "</robot>").encode()


@pytest.fixture(scope="module")
def odd(tmp_path_factory) -> Cell:
    folder = tmp_path_factory.mktemp("odd")
    (folder / "odd.urdf").write_bytes(odd_urdf())
    text = ODD_CELL.replace("odd.urdf", (folder / "odd.urdf").as_posix())
    return load_text(text + GIVEN)


def cell_named(name: str, odd: Cell) -> Cell:
    """One of the cells that both sides are compared on."""
    if name == "odd":
        return odd
    if name in PUBLISHED:
        folder, file, tip, joints, posture = PUBLISHED[name]
        start = dict(zip(joints, posture, strict=True))
        return load_text(cell_text(published_urdf(folder, file), tip, start, arm=TILTED))
    robot, _, paddle = name.partition(" ")
    arm = "locked_rad = { wrist_cam = 0.4 }" if robot == "bench7" else TILTED
    return robot_cell(robot, arm, FLAT) if paddle else robot_cell(robot, arm)


ARMS = ("bench7", "bench6", "bench6 flat", "link2", *PUBLISHED, "odd")


def stored_of(cell: Cell, change: dict[str, Any] | None = None) -> Stored:
    """What a run of a cell stores of the arm; `change` replaces things at dotted places."""
    content = {
        "command": "follow",
        "period_s": cell.period_s,
        "arm": asdict(cell.arm),
        "paddle": asdict(cell.paddle),
        "tool": None if cell.tool is None else asdict(cell.tool),
        "margins": asdict(cell.margins),
        "accept": asdict(cell.accept),
        "inputs": [asdict(source) for source in cell.inputs],
    }
    content = json.loads(json.dumps(strict(content, digits=None)))
    for place, value in (change or {}).items():
        *path, last = place.split(".")
        inside: Any = content
        for key in path:
            inside = inside[int(key) if isinstance(inside, list) else key]
        if value is ...:
            del inside[last]
        else:
            inside[int(last) if isinstance(inside, list) else last] = value
    return Stored("run", "follow", content, {}, {}, ())


def states(n: int, count: int, seed: int) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
    """Random states (count, n): within ±2 rad or m, ±3 per s, ±20 per s²."""
    rng = np.random.default_rng(seed)
    return rng.uniform(-2, 2, (count, n)), rng.uniform(-3, 3, (count, n)), rng.uniform(-20, 20, (count, n))


@pytest.mark.parametrize("name", ARMS)
@pytest.mark.parametrize("source", ["the user's file", "cell.json"])
def test_both_programs_see_the_same_arm(name: str, source: str, odd: Cell) -> None:
    """Places, axes, speeds and torques of random states agree, from the user's file and from cell.json alike."""
    cell = cell_named(name, odd)
    arm = Arm(cell.arm, cell.paddle)
    found = ground(stored_of(cell, {"inputs": []} if source == "cell.json" else None))
    assert found.source == (cell.arm.urdf_path if source == "the user's file" else "run/evidence/cell.json")
    assert found.engine is not None and found.names == arm.names
    q, v, a = states(arm.n, 12, 1)
    seen = found.chain.seen(q, v)
    for k in range(len(q)):
        place, axes, jacobian = arm.jacobian(q[k])
        twist = jacobian @ v[k]
        assert np.abs(seen.place[k] - place).max() < SAME and np.abs(seen.axes[k] - axes).max() < SAME
        assert np.abs(np.append(seen.linear[k], seen.angular[k]) - twist).max() < 10 * SAME
        for one, other in zip(found.engine.stands(q[k]), (place, axes), strict=True):
            assert np.abs(one - other).max() < SAME
    expected = arm.torque(q, v, a)
    off = np.abs(found.engine.torque(q, v, a) - expected).max()
    assert off < TORQUE_SHARE * np.abs(expected).max()


def test_a_joint_on_the_way_may_be_held() -> None:
    """The chain without a joint, held at a value, is the whole chain with it there."""
    pose = {"xyz_m": [0.1, 0.2, 0.3], "rpy_rad": [0.3, -0.2, 0.1]}
    whole = Chain.read(odd_urdf(), "odd", ODD_CHAIN, "tip", {}, pose, pose)
    q = states(4, 1, 4)[0]
    for i in range(4):
        rest = [name for name in ODD_CHAIN if name != ODD_CHAIN[i]]
        part = Chain.read(odd_urdf(), "odd", rest, "tip", {ODD_CHAIN[i]: q[0, i]}, pose, pose)
        less = np.delete(q, i, axis=1)
        one, other = part.seen(less, less), whole.seen(q, np.insert(less, i, 0.0, axis=1))
        for mine, all_ in zip(one, other, strict=True):
            assert np.abs(mine - all_).max() < SAME


@pytest.mark.parametrize("name", ["bench6", "odd"])
def test_jacobian_against_difference_quotients(name: str, odd: Cell) -> None:
    found = ground(stored_of(cell_named(name, odd)))
    for q in states(len(found.names), 5, 2)[0]:
        place, axes, jacobian = found.chain.jacobian(q)
        for i in range(len(q)):
            step = np.zeros_like(q)
            step[i] = STEP_RAD
            ahead, behind = found.chain.jacobian(q + step), found.chain.jacobian(q - step)
            turning = (ahead[1] - behind[1]) / (2 * STEP_RAD) @ axes.T
            slope = np.append(
                (ahead[0] - behind[0]) / (2 * STEP_RAD), [turning[2, 1], turning[0, 2], turning[1, 0]]
            )
            # The step's square times the third derivative, about 1, and rounding over the step: 1e-10 and 1e-11.
            assert np.abs(slope - jacobian[:, i]).max() < 1e-9
        assert np.abs(place - found.chain.seen(q[None], 0 * q[None]).place[0]).max() < SAME


@pytest.mark.parametrize("name", ARMS)
def test_no_posture_is_out_of_reach_and_no_lever_too_long(name: str, odd: Cell) -> None:
    cell = cell_named(name, odd)
    found = ground(stored_of(cell))
    lo, hi = found.limits.lo["position"], found.limits.hi["position"]
    place, length = found.chain.reach(lo, hi)
    origin, bound = reach_bound(Arm(cell.arm, cell.paddle))
    assert np.abs(place - origin).max() < SAME
    # A slide's travel is added along its own axis here, by its size there.
    assert length <= bound + SAME and (length >= bound - SAME or found.sliding.any())
    lengths = found.chain.lengths(lo, hi)
    assert lengths[0] == length
    box = np.maximum(lo, -3.0), np.minimum(hi, 3.0)
    for q in np.random.default_rng(3).uniform(*box, (200, len(lo))):
        at, _, jacobian = found.chain.jacobian(q)
        assert np.linalg.norm(at - place) <= length + SAME
        levers = np.linalg.norm(jacobian[:3], axis=0)
        assert (levers[~found.sliding] <= lengths[~found.sliding] + SAME).all()
    _, axis = found.chain.first()
    assert np.abs(jacobian[3:, 0] - axis).max() < SAME


def test_a_slide_without_known_travel_reaches_anywhere(odd: Cell) -> None:
    found = ground(stored_of(odd))
    nothing = np.full(4, np.nan)
    assert found.chain.lengths(nothing, nothing).tolist()[:2] == [np.inf, np.inf]
    assert np.isfinite(found.chain.lengths(nothing, nothing)[2:]).all()


# A lift: one upright slide that carries 2 kg and a paddle of 0.5 kg.
LIFT = b"""<robot name="lift"><link name="floor"/><link name="tip"><inertial><mass value="2"/>
<inertia ixx="0.1" iyy="0.1" izz="0.1" ixy="0" ixz="0" iyz="0"/></inertial></link>
<joint name="chain_0" type="prismatic"><parent link="floor"/><child link="tip"/><axis xyz="0 0 1"/></joint></robot>"""
LIFTED_KG, GRAVITY, DAMPING, FRICTION, PERIOD = 2.5, 9.80665, 3.0, 2.0, 0.01
START_M = -0.5
GAINS = np.array([1.0, 1.0, -3.0, 2.0, -1.0, 0.0])  # m/s² in each period; it ends at rest
SHARE_PAST = 0.01  # by which a limit is put inside the motion's peak
ROUNDING = 1e-9  # of a peak


def lift(limits: dict[str, Any] | None = None, tool: float | None = None, xml: str | None = None) -> Ground:
    """The lift with some limits stated, or another robot in its place."""
    fields = ("position", "velocity", "acceleration", "jerk", "torque", "torque_rate", "torque_continuous")
    known = {**dict.fromkeys(fields), **(limits or {})}
    known |= {"armature": None, "damping": DAMPING, "friction": FRICTION}
    pose = {"xyz_m": [0.0, 0.0, 0.0], "rpy_rad": [0.0, 0.0, 0.0]}
    content = {
        "period_s": PERIOD,
        "arm": {
            "urdf_path": "nowhere.urdf",
            "model_xml": xml if xml is not None else LIFT.decode(),
            "tip": "tip",
            "joints": [{"name": "up", "kind": "prismatic", "limits": known}],
            "held": [],
            "base": pose,
            "gravity_m_s2": [0.0, 0.0, -GRAVITY],
        },
        "paddle": {
            "mount": pose,
            "mass_kg": 0.5,
            "shape": "disc",
            "radius_m": 0.1,
            "thickness_m": 0.01,
            "parts": [],
        },
        "tool": None if tool is None else {"speed_m_s": tool, "source": "test"},
        "margins": {},
        "accept": {},
        "inputs": [],
    }
    return ground(Stored("run", "survey", content, {}, {}, ()))


def rise() -> Trace:
    """The lift's motion."""
    v = np.append(0.0, np.cumsum(GAINS[:-1] * PERIOD))
    q = START_M + np.append(0.0, np.cumsum(v[:-1] * PERIOD + GAINS[:-1] * PERIOD**2 / 2))
    return fine(q[:, None], v[:, None], GAINS[:, None], PERIOD)


def by_hand() -> dict[str, list[float]]:
    """Values of each kind in the lift's motion, sample by sample by its equation of motion."""
    q, v = START_M, 0.0
    rest = LIFTED_KG * GRAVITY
    out: dict[str, list[float]] = {kind: [] for kind in KINDS}
    for k, a in enumerate(GAINS.tolist()):
        for part in range(FINE if k < len(GAINS) - 1 else 1):
            t = part * PERIOD / FINE
            speed = v + a * t
            force = LIFTED_KG * (GRAVITY + a) + DAMPING * speed + FRICTION * float(np.tanh(speed / 0.05))
            out["position"].append(q + v * t + a * t**2 / 2)
            out["velocity"].append(speed)
            out["acceleration"].append(a)
            out["jerk"].append((a - (GAINS[k - 1] if k else 0.0)) / PERIOD)
            out["torque"].append(force)
            before = out["torque"][-1 - FINE] if len(out["torque"]) > FINE else rest
            out["torque rate"].append((force - before) / PERIOD)
        q, v = q + v * PERIOD + a * PERIOD**2 / 2, v + a * PERIOD
    out["duty"] = [float(np.sqrt(np.mean(np.square(out["torque"]))))]
    return out


def checks_of(found: Ground, **asked: bool) -> dict[str, Any]:
    """The lift's checks by name."""
    return {
        check.name: check for item in motion_items(found, "swing", rise(), **asked) for check in item.checks
    }


FIELD = {**{kind: kind for kind in KINDS}, "torque rate": "torque_rate", "duty": "torque_continuous"}


def test_every_sample_of_a_motion_is_measured() -> None:
    found = values(rise(), *torques(lift(), rise()))
    for kind, expected in by_hand().items():
        assert found[kind][:, 0] == pytest.approx(expected, rel=ROUNDING, abs=ROUNDING)


SIDES = [(kind, side) for kind in KINDS for side in ("lo", "hi") if (kind, side) != ("duty", "lo")]


@pytest.mark.parametrize(("kind", "side"), SIDES)
def test_a_motion_past_a_limit_shows_by_how_much(kind: str, side: str) -> None:
    values = by_hand()[kind]
    peak, inward = (min(values), 1.0) if side == "lo" else (max(values), -1.0)
    assert abs(peak) > 1e-3
    wide = {field: {"lo": -1e6, "hi": 1e6} for field in FIELD.values()}
    for past in (SHARE_PAST * abs(peak), 0.0):
        bound = {"lo": None, "hi": None} | {side: peak + inward * past}
        found = checks_of(lift({**wide, FIELD[kind]: bound}))
        assert set(found) == set(KINDS)
        assert found[kind].difference == pytest.approx(past, abs=ROUNDING * abs(peak))
        assert found[kind].agrees == (past == 0.0)
        assert all(check.difference == 0.0 for name, check in found.items() if name != kind)


def test_the_joint_that_passes_its_limit_by_the_largest_share_is_named() -> None:
    joints = [{"name": name, "kind": "revolute", "limits": dict.fromkeys(FIELD.values())} for name in "ab"]
    for joint, size in zip(joints, (100.0, 1.0), strict=True):
        joint["limits"]["velocity"] = {"lo": -size, "hi": size}
    limits = Limits.of(joints)
    past = overshoot(limits, {"velocity": np.array([[100.1, 0.0], [0.0, -1.05]])})["velocity"]
    assert past.tolist() == pytest.approx([0.1, 0.05])
    check = kept(limits, "velocity", past)
    assert (check.text, check.difference, check.unit) == ("b", pytest.approx(0.05), "rad/s")
    assert not kept(limits, "velocity", np.array([0.0, np.nan])).agrees


def test_the_tools_cap_is_a_limit() -> None:
    peak = max(map(abs, by_hand()["velocity"]))
    past = checks_of(lift(tool=peak - 0.001))
    assert set(past) == {TOOL} and past[TOOL].difference == pytest.approx(0.001, abs=ROUNDING)
    assert not past[TOOL].agrees and checks_of(lift(tool=peak))[TOOL].agrees


def test_of_unknown_limits_nothing_is_claimed() -> None:
    assert motion_items(lift(), "swing", rise()) == []
    assert lift().unknown == {*KINDS, TOOL}
    one = lift({"torque": {"lo": -99.0, "hi": None}}, tool=2.0)
    assert set(checks_of(one)) == {"torque", TOOL} and one.unknown == set(KINDS) - {"torque"}


def test_duty_is_left_out_where_it_is_not_asked_for() -> None:
    found = lift({"torque_continuous": {"lo": -1.0, "hi": 1.0}, "velocity": {"lo": -9.0, "hi": 9.0}})
    assert set(checks_of(found)) == {"duty", "velocity"} and set(checks_of(found, duty=False)) == {"velocity"}


def test_without_the_engine_torque_is_left_out(monkeypatch) -> None:
    """Kinematics, limits and the rest are there; the item says how to get the engine."""
    monkeypatch.setitem(sys.modules, "mujoco", None)
    assert not available()
    found = lift({"torque": {"lo": -99.0, "hi": 99.0}, "velocity": {"lo": -1.0, "hi": 1.0}})
    assert found.engine is None and "second-opinion" in found.why_no_engine
    limits, torque = motion_items(found, "swing", rise())
    assert (limits.kind, limits.status) == ("limits", AGREE)
    assert (torque.kind, torque.status, torque.left_out) == ("torque", NOT_CHECKABLE, found.why_no_engine)


def test_an_arm_that_the_engine_refuses_leaves_the_rest(odd: Cell) -> None:
    many = "".join(f'<link name="x{i}"/>{fixed("tip", f"x{i}")}' for i in range(600))
    xml = cell_xml(odd).replace("</robot>", many + "</robot>")
    found = ground(stored_of(odd, {"inputs": [], "arm.model_xml": xml}))
    assert found.engine is None and "500 links" in found.why_no_engine
    assert np.isfinite(found.chain.jacobian(np.zeros(4))[2]).all()


def test_a_motion_on_the_fine_grid_is_the_first_programs() -> None:
    rng = np.random.default_rng(5)
    v = rng.normal(size=(7, 3))
    a = np.vstack([np.diff(v, axis=0) / PERIOD, np.zeros((1, 3))])
    q = np.vstack([np.zeros((1, 3)), np.cumsum((v[1:] + v[:-1]) / 2 * PERIOD, axis=0)])
    mine = fine(q, v, a, PERIOD, start_s=0.3, strike=4)
    t, *rest = Motion(0.3, PERIOD, q, v, a).fine()
    assert len(mine.t_s) == FINE * 6 + 1 and mine.strike == 16
    assert np.abs(mine.t_s - t).max() < SAME
    for one, other in zip((mine.q, mine.v, mine.a), rest, strict=True):
        assert np.abs(one - other).max() < SAME


def test_quintics_are_sampled_exactly() -> None:
    """Of knots on one polynomial: its velocity at the rows, and positions by exact integration from the first knot."""
    rng = np.random.default_rng(6)
    curve = [np.polynomial.Polynomial(part) for part in rng.normal(size=(3, 6))]
    knots = np.array([0.0, 0.1337, 0.3, 0.4042])
    q, v, a = (np.column_stack([p.deriv(k)(knots) if k else p(knots) for p in curve]) for k in range(3))
    place, speed, gain = quintic(knots, q, v, a, PERIOD)
    t = np.minimum(np.arange(42) * PERIOD, knots[-1])
    assert len(place) == 42
    assert np.abs(speed - np.column_stack([p.deriv()(t) for p in curve])).max() < 1e-10  # rad/s
    assert np.abs(np.diff(speed, axis=0) - gain[:-1] * PERIOD).max() < SAME and (gain[-1] == 0).all()
    steps = speed[:-1] * PERIOD + gain[:-1] * PERIOD**2 / 2
    assert np.abs(np.diff(place, axis=0) - steps).max() < SAME and (place[0] == q[0]).all()
    first = motion_of(Knots(knots, q, v, a, ()), PERIOD)
    assert np.abs(place - first.q).max() < 1e-10 and np.abs(speed - first.v).max() < 1e-10


@pytest.mark.parametrize("t", [[0.0], [0.0, 0.0], [0.2, 0.1], [0.0, np.nan], [0.0, 1e9]])
def test_knots_out_of_order_are_no_motion(t: list[float]) -> None:
    rows = np.zeros((len(t), 1))
    with pytest.raises(BadFolder):
        quintic(np.array(t), rows, rows, rows, PERIOD)
    with pytest.raises(BadFolder):
        fine(rows[:0], rows[:0], rows[:0], PERIOD)


def fixed(parent: str, child: str, inside: str = "") -> str:
    """A fixed joint."""
    ends = f'<parent link="{parent}"/><child link="{child}"/>'
    return f'<joint name="to {child}" type="fixed">{ends}{inside}</joint>'


def cell_xml(cell: Cell) -> str:
    """The robot as cell.json has it."""
    return cell.arm.model_xml


LIFT_TEXT = LIFT.decode()
BOMB = '<!DOCTYPE r [<!ENTITY a "aaaa"><!ENTITY b "&a;&a;&a;&a;">]><robot name="&b;"/>'
HOSTILE = {
    "nothing": "",
    "no XML": "<robot",
    "entities": BOMB,
    "outside entity": '<!DOCTYPE r [<!ENTITY a SYSTEM "file:///nowhere">]><robot>&a;</robot>',
    "another format": "<mujoco><include file='x.xml'/></mujoco>",
    "deep": "<robot>" + "<link>" * 5000,
    "no link": LIFT_TEXT.replace('<link name="floor"/>', ""),
    "no joint": LIFT_TEXT.replace("chain_0", "other"),
    "a link twice": LIFT_TEXT.replace("floor", "tip"),
    "no name": LIFT_TEXT.replace('name="chain_0" ', ""),
    "no kind": LIFT_TEXT.replace("prismatic", "ball"),
    "no axis": LIFT_TEXT.replace("0 0 1", "0 0 0"),
    "nan": LIFT_TEXT.replace("0 0 1", "0 nan 1"),
    "infinite": LIFT_TEXT.replace("0 0 1", "0 inf 1"),
    "huge": LIFT_TEXT.replace("0 0 1", "0 1e300 1"),
    "two numbers": LIFT_TEXT.replace("0 0 1", "0 1"),
    "words": LIFT_TEXT.replace("0 0 1", "0 1_0 1"),
    "negative mass": LIFT_TEXT.replace('value="2"', 'value="-2"'),
    "mass nan": LIFT_TEXT.replace('value="2"', 'value="nan"'),
    "moment": LIFT_TEXT.replace('iyy="0.1"', 'iyy="x"'),
    "two inertias": LIFT_TEXT.replace("</inertial>", "</inertial><inertial/>"),
    "two roots": LIFT_TEXT.replace("</robot>", '<link name="far"/></robot>'),
    "circle": LIFT_TEXT.replace("</robot>", fixed("tip", "floor") + "</robot>"),
    "circle aside": LIFT_TEXT.replace(
        "</robot>", '<link name="a"/><link name="b"/>' + fixed("a", "b") + fixed("b", "a") + "</robot>"
    ),
    "two parents": LIFT_TEXT.replace("</robot>", fixed("floor", "tip") + "</robot>"),
    "itself": LIFT_TEXT.replace('parent link="floor"', 'parent link="tip"'),
}


@pytest.mark.parametrize("what", HOSTILE)
def test_hostile_robots_are_refused(what: str) -> None:
    with pytest.raises(BadFolder) as raised:
        lift(xml=HOSTILE[what])
    assert raised.value.exit_code == 2 and str(raised.value)


WRONG: dict[str, Any] = {
    "period_s": 0.0,
    "arm": None,
    "arm.joints": [],
    "arm.joints.0": 7,
    "arm.joints.0.name": None,
    "arm.joints.0.kind": "ball",
    "arm.joints.1.name": "spin",
    "arm.joints.0.limits": [],
    "arm.joints.0.limits.jerk": ...,
    "arm.joints.0.limits.velocity": {"lo": -1.0},
    "arm.joints.0.limits.torque": {"lo": 1.0, "hi": -1.0},
    "arm.joints.0.limits.position": {"lo": float("nan"), "hi": 1.0},
    "arm.joints.0.limits.acceleration": {"lo": "-1", "hi": 1.0},
    "arm.joints.0.limits.torque_rate": {"lo": -(10**400), "hi": 1.0},
    "arm.joints.0.limits.friction": -1.0,
    "arm.joints.0.limits.damping": True,
    "arm.joints.0.limits.armature": [1.0],
    "arm.held": {"grip": 0.7},
    "arm.held.0.value": 1e300,
    "arm.held.1.value": 10**400,
    "arm.held.1.name": 3,
    "arm.base": [],
    "arm.base.xyz_m": [0.0, 0.0],
    "arm.base.rpy_rad": [0.0, float("inf"), 0.0],
    "arm.gravity_m_s2": [0.0, None, 0.0],
    "arm.model_xml": 3,
    "arm.tip": None,
    "inputs": None,
    "paddle": None,
    "paddle.mount": None,
    "paddle.mount.xyz_m": [0.0, 0.0, "0"],
    "paddle.shape": "ring",
    "paddle.mass_kg": None,
    "paddle.parts.0": {"mass_kg": -1.0, "com_m": [0.0] * 3, "inertia_kg_m2": [0.0] * 6},
    "paddle.com_m": [0.0, 0.0],
    "paddle.inertia_kg_m2": [float("nan")] * 6,
    "paddle.parts": [3],
    "paddle.parts.0.mass_kg": float("inf"),
    "tool": 3,
    "paddle.thickness_m": -(10**400),
    "margins": ...,
    "accept": [],
}


@pytest.mark.parametrize("place", WRONG)
def test_a_hostile_cell_is_refused(place: str, odd: Cell) -> None:
    """Whatever is wrong in cell.json is told as a fault of the folder, with exit code 2."""
    change = {place: WRONG[place]}
    if place == "arm.model_xml":
        change["inputs"] = []
    with pytest.raises(BadFolder) as raised:
        ground(stored_of(odd, change))
    assert raised.value.exit_code == 2


def test_a_robot_file_that_changed_since_is_refused(tmp_path: Path, odd: Cell) -> None:
    path = tmp_path / "odd.urdf"
    path.write_bytes(odd_urdf())
    digest = hashlib.sha256(odd_urdf()).hexdigest()
    change = {"arm.urdf_path": str(path), "inputs": [{"path": str(path), "sha256": digest}]}
    assert ground(stored_of(odd, change)).source == str(path)
    path.write_bytes(odd_urdf().replace(b"0 0 0.25", b"0 0 0.26"))
    with pytest.raises(BadFolder, match="changed since"):
        ground(stored_of(odd, change))
    path.unlink()
    assert ground(stored_of(odd, change)).source == "run/evidence/cell.json"


def test_numbers_that_mean_nothing_differ_and_do_not_raise() -> None:
    found = lift({field: {"lo": -1.0, "hi": 1.0} for field in FIELD.values()}, tool=1.0)
    wild = np.array([[0.0], [1e308], [-1e308], [0.0]])
    items = motion_items(found, "swing", fine(wild, wild, wild, PERIOD))
    assert [item.status for item in items] == [DIFFER, DIFFER]
