"""Cells and arms for tests: from Denavit-Hartenberg rows, screws, the project's robots and published URDFs."""

from __future__ import annotations

import importlib.metadata
import tempfile
from collections.abc import Iterable, Mapping, Sequence
from dataclasses import dataclass, field, replace
from functools import cache
from pathlib import Path

import numpy as np

from reach.cell import ArmSpec, Array, Cell, CommandLog, Follow, Joint, JointLimits, Margins, Paddle, Pose
from reach.formats import load_cell

ROBOTS = Path(__file__).parents[1] / "robots"
NO_MARGINS = Margins(*([0.0] * 7))
WEIGHTLESS = Paddle(Pose(), 0.0, "given", com_m=(0.0, 0.0, 0.0), inertia_kg_m2=(0.0,) * 6)
"""A paddle that leaves a published arm as published."""

# An ordinary paddle, invented: a disc of 0.25 kg with a holder behind it.
PADDLE_TOML = """
[paddle]
mount = { xyz_m = [0.01, -0.02, 0.06], rpy_deg = [10.0, -5.0, 20.0] }
shape = "disc"
radius_m = 0.085
thickness_m = 0.012
mass_kg = 0.25
[[paddle.part]]
mass_kg = 0.10
com_m = [0.0, 0.01, -0.06]
"""

# Working postures of the project's robots, invented, in rad: face up, away from singularities.
WORKING = {
    "bench7": {"j1": 0.0, "j2": -0.5, "j3": 0.0, "j4": 1.6, "j5": 0.0, "j6": 2.1, "j7": 0.0},
    "bench6": {"j1": 0.0, "j2": 0.3, "j3": 0.2, "j4": 0.3, "j5": -1.2, "j6": 0.0},
    "link2": {"j1": 0.4, "j2": 0.7},
}


@dataclass(frozen=True, eq=False)
class Body:
    """One moving body: a joint's placement in the body before (3, 3) and (3,), its unit axis, and the mass it carries.

    com (3,) in m, com_axes (3, 3) the axes of `inertia` (3, 3), which is about the com.
    """

    offset: Array
    axis: Array
    mass_kg: float = 0.0
    com: Array = field(default_factory=lambda: np.zeros(3))
    inertia: Array = field(default_factory=lambda: np.zeros((3, 3)))
    rotation: Array = field(default_factory=lambda: np.eye(3))
    com_axes: Array = field(default_factory=lambda: np.eye(3))


def chain_arm(
    bodies: Sequence[Body],
    tip_offset: Array,
    tip_rotation: Array | None = None,
    limits: Iterable[JointLimits] | None = None,
    gravity_m_s2: tuple[float, float, float] = (0.0, 0.0, -9.80665),
    base: Pose | None = None,
) -> ArmSpec:
    """An ArmSpec of bodies in series, turning joints only, the tip welded to the last body."""
    lines = ['<robot name="arm">', '  <link name="base"/>']
    names = ["base", *(f"link_{i}" for i in range(len(bodies)))]
    for i, body in enumerate(bodies):
        lines += [
            f'  <link name="{names[i + 1]}">{_inertial(body)}</link>',
            f'  <joint name="chain_{i}" type="revolute">',
            f'    <parent link="{names[i]}"/><child link="{names[i + 1]}"/>',
            f"    {_origin(body.offset, body.rotation)}",
            f'    <axis xyz="{_text(body.axis)}"/>',
            '    <limit lower="-1e9" upper="1e9" effort="1e9" velocity="1e9"/>',
            "  </joint>",
        ]
    lines += [
        '  <link name="tip"/>',
        f'  <joint name="fixed_0" type="fixed"><parent link="{names[-1]}"/><child link="tip"/>',
        f"    {_origin(tip_offset, np.eye(3) if tip_rotation is None else tip_rotation)}</joint>",
        "</robot>",
    ]
    given = list(limits) if limits is not None else [JointLimits()] * len(bodies)
    joints = tuple(Joint(f"j{i + 1}", "revolute", item) for i, item in enumerate(given))
    return ArmSpec("built", "\n".join(lines), "tip", joints, (), base or Pose(), gravity_m_s2)


def standard_dh(
    d: Sequence[float],
    a: Sequence[float],
    alpha: Sequence[float],
    mass_kg: Sequence[float],
    com: Sequence[Sequence[float]],
    moments: Sequence[Sequence[float]],
) -> tuple[list[Body], Array, Array]:
    """Bodies, tip offset and tip rotation of an arm by its standard Denavit-Hartenberg rows.

    The link frame is after Rz(q) Tz(d) Tx(a) Rx(alpha); com and principal moments about it are in that frame.
    """
    bodies, offset, rotation = [], np.zeros(3), np.eye(3)
    for i in range(len(d)):
        after, after_offset = turn(np.array([1.0, 0, 0]), alpha[i]), np.array([a[i], 0.0, d[i]])
        centre = after_offset + after @ np.array(com[i])
        z = np.array([0.0, 0, 1])
        bodies.append(Body(offset, z, mass_kg[i], centre, np.diag(moments[i]), rotation, after))
        offset, rotation = after_offset, after
    return bodies, offset, rotation


def screw(omega: Sequence[float], v: Sequence[float]) -> tuple[Array, Array, float]:
    """Unit axis (3,), a point on it (3,), and the length of a pure rotation's screw (omega, v = -omega × point)."""
    w = np.array(omega, dtype=float)
    size = float(np.linalg.norm(w))
    return w / size, np.cross(w, np.array(v)) / size**2, size


def screw_bodies(axes: Sequence[tuple[Array, Array]]) -> list[Body]:
    """Massless bodies with space-parallel axes in the zero posture, from (unit axis, point on it)."""
    before = np.zeros(3)
    bodies = []
    for axis, point in axes:
        bodies.append(Body(point - before, axis))
        before = point
    return bodies


def planar_point_masses(
    lengths: Sequence[float], masses: Sequence[float], gravity: float = 9.81, base: Pose | None = None
) -> ArmSpec:
    """Links in the x-y plane, axes z, each with its mass in a point at its end, gravity along -y."""
    bodies = []
    for i, (length, mass) in enumerate(zip(lengths, masses, strict=True)):
        offset = np.array([lengths[i - 1] if i else 0.0, 0.0, 0.0])
        bodies.append(Body(offset, np.array([0.0, 0, 1]), mass, np.array([length, 0.0, 0.0])))
    return chain_arm(bodies, np.array([lengths[-1], 0.0, 0.0]), gravity_m_s2=(0.0, -gravity, 0.0), base=base)


def turn(axis: Array, angle: float) -> Array:
    """Rotation (3, 3) about a unit axis (3,) by an angle in rad (Rodrigues)."""
    x, y, z = axis
    cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    return np.asarray(np.eye(3) + np.sin(angle) * cross + (1 - np.cos(angle)) * (cross @ cross))


def published_urdf(folder: str, name: str) -> Path:
    """A URDF of the installed example-robot-data distribution."""
    wanted = f"{folder}/urdf/{name}"
    files = importlib.metadata.distribution("example-robot-data").files or []
    return Path(next(str(f.locate()) for f in files if str(f).endswith(wanted)))


def cell_text(
    urdf: Path,
    tip: str,
    start_rad: Mapping[str, float],
    limits: Path | None = None,
    arm: str = "",
    paddle: str = PADDLE_TOML,
    rest: str = "",
) -> str:
    """The text of a cell file; `arm` and `rest` are further lines of [arm] and further tables."""
    lines = ["[arm]", f"urdf = '{urdf.as_posix()}'", f'tip = "{tip}"']
    lines += [f"limits = '{limits.as_posix()}'"] if limits else []
    lines += ["start_rad = { " + ", ".join(f"{k} = {v!r}" for k, v in start_rad.items()) + " }", arm]
    return "\n".join([*lines, paddle, rest])


def load_text(text: str) -> Cell:
    """A cell by the text of its file."""
    with tempfile.TemporaryDirectory() as folder:
        path = Path(folder, "cell.toml")
        path.write_text(text, encoding="utf-8")
        return load_cell(path)


@cache
def robot_cell(name: str, arm: str = "", paddle: str = PADDLE_TOML, rest: str = "") -> Cell:
    """A cell of one of the project's robots in its working posture."""
    urdf, limits = ROBOTS / name / f"{name}.urdf", ROBOTS / name / f"{name}.limits.toml"
    return load_text(cell_text(urdf, "flange", WORKING[name], limits, arm, paddle, rest))


def following(cell: Cell, t_s: Array, twist: Array, **follow: object) -> Cell:
    """The cell with a command log, world axes, about the strike point."""
    log = CommandLog(np.asarray(t_s), np.asarray(twist), source="made by the test")
    return replace(cell, follow=Follow("world", "strike", log, **follow))


# Limits of the seven-axis research arm FER from its maker's documentation (frankarobotics/docs @5f28326,
# source/control-parameters-joint-fer.csv; torque and torque rate also libfranka @6474466 rate_limiting.h).
FER = {
    "position_hi": (2.8973, 1.7628, 2.8973, -0.0698, 2.8973, 3.7525, 2.8973),
    "position_lo": (-2.8973, -1.7628, -2.8973, -3.0718, -2.8973, -0.0175, -2.8973),
    "velocity": (2.175, 2.175, 2.175, 2.175, 2.61, 2.61, 2.61),
    "acceleration": (15.0, 7.5, 10.0, 12.5, 15.0, 20.0, 20.0),
    "jerk": (7500.0, 3750.0, 5000.0, 6250.0, 7500.0, 10000.0, 10000.0),
    "torque": (87.0, 87.0, 87.0, 87.0, 12.0, 12.0, 12.0),
    "torque_rate": (1000.0,) * 7,
}
FER_READY_RAD = (0.0, -np.pi / 4, 0.0, -3 * np.pi / 4, 0.0, np.pi / 2, np.pi / 4)


def fer_limits_text() -> str:
    """A limits file with the FER's table."""
    lines = []
    for i in range(7):
        lines += [
            f"[joints.panda_joint{i + 1}]",
            f"position_rad = [{FER['position_lo'][i]}, {FER['position_hi'][i]}]",
            f"velocity_rad_s = {FER['velocity'][i]}",
            f"acceleration_rad_s2 = {FER['acceleration'][i]}",
            f"jerk_rad_s3 = {FER['jerk'][i]}",
            f"torque_nm = {FER['torque'][i]}",
            f"torque_rate_nm_s = {FER['torque_rate'][i]}",
            'source = "maker, FER"',
        ]
    return "\n".join(lines) + "\n"


def fer_cell(folder: Path, tip: str = "panda_link8", paddle: str = PADDLE_TOML, rest: str = "") -> Cell:
    """The published FER model with its published limits, fingers held at 0.01 and 0.02 m; files in `folder`."""
    limits = folder / "fer.limits.toml"
    limits.write_text(fer_limits_text(), encoding="utf-8")
    start = {f"panda_joint{i + 1}": float(q) for i, q in enumerate(FER_READY_RAD)}
    arm = "locked_m = { panda_finger_joint1 = 0.01, panda_finger_joint2 = 0.02 }"
    urdf = published_urdf("panda_description", "panda.urdf")
    path = folder / "cell.toml"
    path.write_text(cell_text(urdf, tip, start, limits, arm, paddle, rest), encoding="utf-8")
    return load_cell(path)


def _inertial(body: Body) -> str:
    i = body.inertia
    moments = " ".join(
        f'{name}="{float(value)!r}"'
        for name, value in zip(
            ("ixx", "iyy", "izz", "ixy", "ixz", "iyz"),
            (i[0, 0], i[1, 1], i[2, 2], i[0, 1], i[0, 2], i[1, 2]),
            strict=True,
        )
    )
    mass = f'<mass value="{float(body.mass_kg)!r}"/>'
    return f"<inertial>{_origin(body.com, body.com_axes)}{mass}<inertia {moments}/></inertial>"


def _origin(offset: Array, rotation: Array) -> str:
    pitch = np.arctan2(-rotation[2, 0], np.hypot(rotation[0, 0], rotation[1, 0]))
    if np.cos(pitch) > 1e-9:
        roll, yaw = np.arctan2(rotation[2, 1], rotation[2, 2]), np.arctan2(rotation[1, 0], rotation[0, 0])
    else:
        roll, yaw = np.arctan2(-rotation[1, 2], rotation[1, 1]), 0.0
    return f'<origin xyz="{_text(offset)}" rpy="{_text([roll, pitch, yaw])}"/>'


def _text(values: Iterable[float]) -> str:
    return " ".join(repr(float(value)) for value in values)
