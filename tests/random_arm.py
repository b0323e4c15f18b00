"""Random serial arms with kinematics and dynamics of their own: plain products of frames and sums over masses."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.random import Generator
from numpy.typing import NDArray

from reach.cell import Array

STILL = {
    False: 0.1,
    True: 0.05,
}  # rad/s, m/s sliding: width over which dry friction is smoothed (DEVELOPERS.md)
KINDS = ("revolute", "prismatic", "continuous")
EYE = np.eye(3)


@dataclass(frozen=True, eq=False)
class Origin:
    """A placement as files state it: xyz (3,) m, then roll, pitch, yaw (3,) rad about fixed axes."""

    xyz: Array
    rpy: Array

    @property
    def turn(self) -> Array:
        """Rotation (3, 3)."""
        (a, b, c), (s, t, u) = np.cos(self.rpy), np.sin(self.rpy)
        x = np.array([[1, 0, 0], [0, a, -s], [0, s, a]])
        y = np.array([[b, 0, t], [0, 1, 0], [-t, 0, b]])
        z = np.array([[c, -u, 0], [u, c, 0], [0, 0, 1]])
        return np.asarray(z @ y @ x)

    @property
    def matrix(self) -> Array:
        """Homogeneous matrix (4, 4)."""
        out = np.eye(4)
        out[:3, :3], out[:3, 3] = self.turn, self.xyz
        return out


@dataclass(frozen=True, eq=False)
class Mass:
    """A solid: mass kg, centre and turn of its axes, principal moments (3,) kg·m² about the centre."""

    mass: float
    at: Origin
    moments: Array


@dataclass(frozen=True, eq=False)
class Bone:
    """One chain joint: what is fixed before it, its origin, kind and unit axis, how the axis is written, its solids.

    side : a branch held beside the chain: its origin, axis, value in rad and solid
    """

    fixed: Origin | None
    origin: Origin
    kind: str
    axis: Array
    axis_scale: float
    solid: Mass
    fixed_solid: Mass | None = None
    side: tuple[Origin, Array, float, Mass] | None = None


@dataclass(frozen=True, eq=False)
class Load:
    """A mass that rides on a chain joint: joint index, mass kg, centre (3,) and inertia (3, 3) in the joint's frame."""

    joint: int
    mass: float
    com: Array
    inertia: Array


@dataclass(frozen=True, eq=False)
class Arm:
    """A serial arm with its paddle.

    Attributes
    ----------
    before : (n, 4, 4) from the joint before, the base for the first, to the joint at zero
    axes : (n, 3), sliding : (n,) ; face : (4, 4) from the last joint's frame to the face frame
    mount : (4, 4) from the tip link to the face frame ; base : (4, 4)
    armature, damping, friction : (n,) SI units, 0 where nobody states them
    """

    before: Array
    axes: Array
    sliding: NDArray[np.bool_]
    face: Array
    mount: Array
    base: Array
    loads: tuple[Load, ...]
    gravity: Array = field(default_factory=lambda: np.array([0.0, 0.0, -9.80665]))
    armature: Array = field(default_factory=lambda: np.zeros(0))
    damping: Array = field(default_factory=lambda: np.zeros(0))
    friction: Array = field(default_factory=lambda: np.zeros(0))

    @property
    def n(self) -> int:
        """How many joints."""
        return len(self.axes)

    def frames(self, q: Array) -> tuple[Array, Array, Array, Array, Array]:
        """Turns (f, n, 3, 3), origins and axes (f, n, 3) of the joints, the face's turn (f, 3, 3) and place (f, 3)."""
        f = len(q)
        turns, places, axes = np.empty((f, self.n, 3, 3)), np.empty((f, self.n, 3)), np.empty((f, self.n, 3))
        turn, place = np.broadcast_to(EYE, (f, 3, 3)), np.zeros((f, 3))
        for i in range(self.n):
            place = place + turn @ self.before[i, :3, 3]
            turn = turn @ self.before[i, :3, :3]
            axes[:, i] = turn @ self.axes[i]
            if self.sliding[i]:
                place = place + axes[:, i] * q[:, i, None]
            else:
                turn = turn @ about(self.axes[i], q[:, i])
            turns[:, i], places[:, i] = turn, place
        return turns, places, axes, turn @ self.face[:3, :3], place + turn @ self.face[:3, 3]

    def jacobian(self, q: Array) -> tuple[Array, Array, Array]:
        """Jacobians (f, 6, n) of the strike point, linear then angular, world axes; the face's turn and place."""
        _, places, axes, turn, place = self.frames(q)
        swept = cross(axes, place[:, None] - places)
        slide = self.sliding[:, None]
        rows = np.concatenate([np.where(slide, axes, swept), np.where(slide, 0.0, axes)], axis=2)
        return rows.transpose(0, 2, 1), turn, place

    def torque(self, q: Array, v: Array, a: Array) -> Array:
        """Joint torques (f, n) by Newton's and Euler's laws, body by body in world axes, rubbing included."""
        turns, places, axes, _, _ = self.frames(q)
        f = len(q)
        spin, swing = np.zeros((f, 3)), np.zeros((f, 3))
        pull, last = np.broadcast_to(-self.gravity, (f, 3)), np.zeros((f, 3))
        force, moment = np.zeros((f, self.n, 3)), np.zeros((f, self.n, 3))
        for i in range(self.n):
            z, way = axes[:, i], places[:, i] - last
            pull = pull + cross(swing, way) + cross(spin, cross(spin, way))
            last, rate, more = places[:, i], v[:, i, None], a[:, i, None]
            if self.sliding[i]:
                pull = pull + 2 * cross(spin, z * rate) + z * more
            else:
                swing = swing + cross(spin, z * rate) + z * more
                spin = spin + z * rate
            for load in (load for load in self.loads if load.joint == i):
                arm = turns[:, i] @ load.com
                inertia = turns[:, i] @ load.inertia @ turns[:, i].transpose(0, 2, 1)
                push = load.mass * (pull + cross(swing, arm) + cross(spin, cross(spin, arm)))
                turning = (inertia @ swing[..., None])[..., 0]
                turning += cross(spin, (inertia @ spin[..., None])[..., 0])
                force[:, i] += push
                moment[:, i] += turning + cross(last + arm, push)
        force, moment = (np.cumsum(x[:, ::-1], axis=1)[:, ::-1] for x in (force, moment))
        bare = np.where(self.sliding[:, None], force, moment - cross(places, force))
        width = np.where(self.sliding, STILL[True], STILL[False])
        rubbing = self.armature * a + self.damping * v + self.friction * np.tanh(v / width)
        return np.asarray(np.einsum("fni,fni->fn", bare, axes) + rubbing)

    def levers(self, farthest: Array) -> Array:
        """Longest lever (n,) m of the strike point about each joint, sliding joints out to `farthest` (n,) m."""
        lengths = np.linalg.norm(self.before[:, :3, 3], axis=1) + np.where(self.sliding, farthest, 0.0)
        beyond = np.append(lengths[1:], np.linalg.norm(self.face[:3, 3]))
        return np.asarray(np.cumsum(beyond[::-1])[::-1])


def cross(one: Array, other: Array) -> Array:
    """Cross products (…, 3); numpy's own takes most of a case's time to sort its axes."""
    a, b, c = one[..., 0], one[..., 1], one[..., 2]
    x, y, z = other[..., 0], other[..., 1], other[..., 2]
    return np.stack([b * z - c * y, c * x - a * z, a * y - b * x], axis=-1)


def about(axis: Array, angle: Array) -> Array:
    """Turns (f, 3, 3) about a unit axis (3,) by angles (f,) rad (Rodrigues)."""
    x, y, z = axis
    turned = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    sine, cosine = np.sin(angle)[:, None, None], np.cos(angle)[:, None, None]
    return np.asarray(EYE + sine * turned + (1 - cosine) * (turned @ turned))


def direction(rng: Generator) -> Array:
    """A random unit vector (3,)."""
    vector = rng.normal(size=3)
    return np.asarray(vector / np.linalg.norm(vector))


def draw_bones(rng: Generator, style: str, n: int) -> tuple[Bone, ...]:
    """Joints in series: "aligned" with axes and offsets along x, y, z; "parallel" with one axis; "skew" with any."""
    size = rng.uniform(0.6, 1.6) / n
    slides = rng.choice((0.0, 0.15, 0.4), p=(0.5, 0.35, 0.15))
    bones = []
    for i in range(n):
        rest = 1 - slides
        kind = str(rng.choice(KINDS, p=(0.85 * rest, slides, 0.15 * rest)))
        long = size * rng.uniform(0.3, 1.5)
        if style == "parallel":
            axis, xyz, rpy = np.array([0.0, 0, 1]), long * direction(rng) * [1, 1, 0.3], np.zeros(3)
            if kind == "prismatic":
                axis = np.array([1.0, 0, 0])
            rpy[2] = rng.uniform(-np.pi, np.pi)
        elif style == "aligned":
            axis = EYE[rng.integers(3)] * rng.choice((-1, 1))
            xyz = long * EYE[rng.integers(3)]
            rpy = rng.integers(-1, 3, 3) * np.pi / 2 if rng.random() < 0.4 else np.zeros(3)
        else:
            axis, xyz, rpy = direction(rng), long * direction(rng), rng.uniform(-np.pi, np.pi, 3)
        fixed = Origin(0.03 * direction(rng), rng.uniform(-1, 1, 3)) if rng.random() < 0.2 else None
        heavy = rng.uniform(0.4, 4.0) * (1 - 0.6 * i / n)
        bones.append(
            Bone(
                fixed,
                Origin(xyz, np.asarray(rpy, dtype=float)),
                kind,
                np.asarray(axis, dtype=float),
                rng.choice((1.0, 2.0), p=(0.9, 0.1)),
                draw_solid(rng, heavy, long),
                draw_solid(rng, 0.2, 0.05) if fixed and rng.random() < 0.5 else None,
                draw_side(rng) if rng.random() < 0.12 else None,
            )
        )
    return tuple(bones)


def draw_solid(rng: Generator, mass: float, long: float) -> Mass:
    """A solid box, or a rod, somewhere along a link, turned anyhow."""
    a, b, c = rng.uniform(0.03, 0.1), rng.uniform(0.03, 0.1), rng.uniform(0.5, 1.2) * max(long, 0.05)
    if rng.random() < 0.3:
        b = a = 0.02
    moments = mass / 12 * np.array([b * b + c * c, a * a + c * c, a * a + b * b])
    at = Origin(0.5 * long * rng.uniform(0, 1) * direction(rng), rng.uniform(-np.pi, np.pi, 3))
    return Mass(mass, at, moments)


def draw_side(rng: Generator) -> tuple[Origin, Array, float, Mass]:
    """A branch beside the chain, held at a value."""
    origin = Origin(0.1 * direction(rng), rng.uniform(-np.pi, np.pi, 3))
    return origin, direction(rng), float(rng.uniform(-1, 1)), draw_solid(rng, rng.uniform(0.1, 0.6), 0.1)


def carried(joint: int, mass: Mass, place: Array) -> Load:
    """A solid, stated in a frame at `place` (4, 4) in a joint's frame, as a load on the joint."""
    turn = place[:3, :3] @ mass.at.turn
    return Load(
        joint, mass.mass, place[:3, :3] @ mass.at.xyz + place[:3, 3], turn @ np.diag(mass.moments) @ turn.T
    )


def assembled(
    bones: tuple[Bone, ...], tip: Origin | None, mount: Origin, base: Origin, on_face: list[Load]
) -> Arm:
    """The arm of bones, the paddle's solids `on_face` given in the face frame."""
    before, loads = [], []
    for i, bone in enumerate(bones):
        fixed = bone.fixed.matrix if bone.fixed is not None else np.eye(4)
        before.append(fixed @ bone.origin.matrix)
        loads.append(carried(i, bone.solid, np.eye(4)))
        if bone.fixed_solid is not None and i > 0:
            loads.append(carried(i - 1, bone.fixed_solid, fixed))
        if bone.side is not None:
            origin, axis, value, mass = bone.side
            swung = np.eye(4)
            swung[:3, :3] = about(axis, np.array([value]))[0]
            loads.append(carried(i, mass, origin.matrix @ swung))
    before[0] = base.matrix @ before[0]
    face = (tip.matrix if tip is not None else np.eye(4)) @ mount.matrix
    turn, last = face[:3, :3], len(bones) - 1
    for load in on_face:
        loads.append(Load(last, load.mass, turn @ load.com + face[:3, 3], turn @ load.inertia @ turn.T))
    zeros = [np.zeros(len(bones)) for _ in range(3)]
    return Arm(
        np.array(before),
        np.array([bone.axis for bone in bones]),
        np.array([bone.kind == "prismatic" for bone in bones]),
        face,
        mount.matrix,
        base.matrix,
        tuple(loads),
        armature=zeros[0],
        damping=zeros[1],
        friction=zeros[2],
    )


def urdf_text(bones: tuple[Bone, ...], tip: Origin | None, limits: list[str]) -> str:
    """The arm as a URDF; `limits` holds each joint's <limit> element."""
    lines, last = ['<?xml version="1.0"?>', '<robot name="drawn">', '  <link name="base"/>'], "base"
    for i, bone in enumerate(bones):
        if bone.fixed is not None:
            lines.append(f'  <link name="plate_{i}">{_inertial(bone.fixed_solid)}</link>')
            lines.append(_joint(f"weld_{i}", "fixed", last, f"plate_{i}", bone.fixed, ""))
            last = f"plate_{i}"
        lines.append(f'  <link name="link_{i}">{_inertial(bone.solid)}</link>')
        written = f'<axis xyz="{numbers(bone.axis * bone.axis_scale)}"/>{limits[i]}'
        lines.append(_joint(f"j{i + 1}", bone.kind, last, f"link_{i}", bone.origin, written))
        last = f"link_{i}"
        if bone.side is not None:
            origin, axis, _, mass = bone.side
            held = f'<axis xyz="{numbers(axis)}"/><limit lower="-2" upper="2" effort="1" velocity="1"/>'
            lines.append(f'  <link name="side_{i}">{_inertial(mass)}</link>')
            lines.append(_joint(f"held_{i}", "revolute", last, f"side_{i}", origin, held))
    if tip is not None:
        lines.append('  <link name="flange"/>')
        lines.append(_joint("weld_tip", "fixed", last, "flange", tip, ""))
    return "\n".join([*lines, "</robot>", ""])


def _joint(name: str, kind: str, parent: str, child: str, origin: Origin, inside: str) -> str:
    ends = f'<parent link="{parent}"/><child link="{child}"/>'
    return f'  <joint name="{name}" type="{kind}">{ends}{_origin(origin)}{inside}</joint>'


def _inertial(solid: Mass | None) -> str:
    if solid is None:
        return ""
    xx, yy, zz = (float(x) for x in solid.moments)
    inertia = f'<inertia ixx="{xx!r}" iyy="{yy!r}" izz="{zz!r}" ixy="0" ixz="0" iyz="0"/>'
    return f'<inertial>{_origin(solid.at)}<mass value="{float(solid.mass)!r}"/>{inertia}</inertial>'


def _origin(origin: Origin) -> str:
    return f'<origin xyz="{numbers(origin.xyz)}" rpy="{numbers(origin.rpy)}"/>'


def numbers(values: Array) -> str:
    """Numbers apart by blanks, in full precision."""
    return " ".join(repr(float(x)) for x in values)
