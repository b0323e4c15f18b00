"""The arm's kinematics from its URDF alone: placements multiplied forward, velocities as sums of joint screws."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.errors import FaultList
from reach.formats.xml_tree import Element, parse
from reach.recheck.stored import CELL, BadFolder
from reach.recheck.turns import exponential, from_rpy

Array = NDArray[np.float64]

TURNING, SLIDING = ("revolute", "continuous"), ("prismatic",)
STILL = ("fixed", "floating", "planar")  # the last two are held as drawn
LARGEST = 1e9  # of a number in a robot file; larger ones mean nothing in any unit
BLOCK = 4096  # samples looked at together, so that they stay in the processor's cache
_X_AXIS = (1.0, 0.0, 0.0)  # of a joint that states none


@dataclass(frozen=True)
class UrdfJoint:
    """A joint as the file has it: lengths in m, angles in rad, `axis` of length one."""

    name: str
    kind: str
    parent: str
    child: str
    xyz: tuple[float, ...]
    rpy: tuple[float, ...]
    axis: tuple[float, ...]

    @property
    def moves(self) -> bool:
        """Whether it has a value of its own."""
        return self.kind not in STILL

    @property
    def slides(self) -> bool:
        """Whether that value is a length."""
        return self.kind in SLIDING


class Seen(NamedTuple):
    """What f samples of a motion look like at the strike point, in world axes.

    Attributes
    ----------
    place : (f, 3) m
    axes : (f, 3, 3) the face's x, y and z as columns
    linear, angular : (f, 3) m/s and rad/s
    """

    place: Array
    axes: Array
    linear: Array
    angular: Array

    @property
    def normal(self) -> Array:
        """The face's normal (f, 3)."""
        return self.axes[:, :, 2]


@dataclass(frozen=True, eq=False)
class Chain:
    """The chain with everything beside its joints at rest merged into constant placements.

    Attributes
    ----------
    turns (n, 3, 3), shifts (n, 3) : each joint in the frame of the one before, of the world for the first
    axes : (n, 3) in the joint's own frame
    sliding : (n,) bool
    face_turn (3, 3), face_shift (3,) : the face in the last joint's frame
    """

    turns: Array
    shifts: Array
    axes: Array
    sliding: NDArray[np.bool_]
    face_turn: Array
    face_shift: Array

    @staticmethod
    def read(
        xml: bytes,
        file: str,
        names: Sequence[str],
        tip: str,
        held: Mapping[str, float],
        base: Mapping[str, Any],
        mount: Mapping[str, Any],
    ) -> Chain:
        """The chain of the joints `names` from the root to `tip`; every other moving joint is held.

        Parameters
        ----------
        xml, file : a URDF and the name that faults call it by
        held : value of joints in rad or m, 0 where none is given
        base, mount : root link in the world and face on the tip link, `xyz_m` and `rpy_rad`

        Raises
        ------
        BadFolder
            Where the file is no such arm.
        """
        path = way(joints_of(root_of(xml, file), file), tip, file)
        wanted = set(names)
        chain = [joint for joint in path if joint.moves and joint.name in wanted]
        if [joint.name for joint in chain] != list(names) or not names:
            raise BadFolder("joints", f"are not {', '.join(names)[:200]} from the root to the tip link", file)
        shift, rpy = placement(base, "arm.base")
        turn = from_rpy(rpy)
        turns, shifts = [], []
        for joint in path:
            turn, shift = turn @ from_rpy(np.array(joint.rpy)), shift + turn @ np.array(joint.xyz)
            if joint in chain:
                turns.append(turn)
                shifts.append(shift)
                turn, shift = np.eye(3), np.zeros(3)
            elif joint.slides:
                shift = shift + turn @ np.array(joint.axis) * held.get(joint.name, 0.0)
            elif joint.moves:
                turn = turn @ exponential(np.array([joint.axis]) * held.get(joint.name, 0.0))[0]
        face_shift, rpy = placement(mount, "paddle.mount")
        return Chain(
            np.array(turns),
            np.array(shifts),
            np.array([joint.axis for joint in chain]),
            np.array([joint.slides for joint in chain]),
            turn @ from_rpy(rpy),
            shift + turn @ face_shift,
        )

    def seen(self, q: Array, v: Array) -> Seen:
        """The strike point at joint positions and velocities (f, n)."""
        parts = [slice(start, start + BLOCK) for start in range(0, max(len(q), 1), BLOCK)]
        with np.errstate(over="ignore", invalid="ignore"):  # numbers that mean nothing show as nan
            seen = [self._seen(np.asarray(q[part], dtype=np.float64), v[part]) for part in parts]
        return Seen(*(np.concatenate(pieces) for pieces in zip(*seen, strict=True)))

    def _seen(self, q: Array, v: Array) -> Seen:
        place, axes, anchors, screws = self._forward(q)
        linear, angular = np.zeros_like(place), np.zeros_like(place)
        for i in range(len(self.axes)):
            moving = screws[i] * v[:, i, None]
            if self.sliding[i]:
                linear += moving
            else:
                linear += np.cross(moving, place - anchors[i])
                angular += moving
        return Seen(place, axes, linear, angular)

    def jacobian(self, q: Array) -> tuple[Array, Array, Array]:
        """Place (3,), face axes (3, 3) and Jacobian (6, n) of the strike point at joint positions (n,).

        Rows are linear then angular, in world axes.
        """
        place, axes, anchors, screws = self._forward(np.asarray(q, dtype=np.float64)[None])
        out = np.zeros((6, len(self.axes)))
        for i in range(len(self.axes)):
            if self.sliding[i]:
                out[:3, i] = screws[i][0]
            else:
                out[:3, i] = np.cross(screws[i][0], place[0] - anchors[i][0])
                out[3:, i] = screws[i][0]
        return place[0], axes[0], out

    def first(self) -> tuple[Array, Array]:
        """Place (3,) in m and axis (3,) of the first joint, in the world; a sliding one is taken at 0."""
        return self.shifts[0], self.turns[0] @ self.axes[0]

    def lengths(self, lo: Array, hi: Array) -> Array:
        """The longest way (n,) in m from each joint to the strike point, by adding links.

        Parameters
        ----------
        lo, hi : (n,) travel; that of sliding joints counts, with nan as infinite
        """
        ways = np.empty(len(self.axes))
        for i, link in enumerate([*self.shifts[1:], self.face_shift]):
            ends = (float(lo[i]), float(hi[i])) if self.sliding[i] else (0.0,)
            far = [
                np.linalg.norm(link + self.axes[i] * end) if math.isfinite(end) else math.inf for end in ends
            ]
            ways[i] = max(far)
        return np.asarray(np.cumsum(ways[::-1])[::-1])

    def reach(self, lo: Array, hi: Array) -> tuple[Array, float]:
        """Place (3,) in m of the first joint, and how far from it the strike point can be at most; see `lengths`."""
        return self.shifts[0], float(self.lengths(lo, hi)[0])

    def _forward(self, q: Array) -> tuple[Array, Array, list[Array], list[Array]]:
        """Of postures (f, n): place (f, 3), face axes (f, 3, 3), and of each joint its place and axis (f, 3)."""
        f = len(q)
        turn, place = np.broadcast_to(np.eye(3), (f, 3, 3)), np.zeros((f, 3))
        anchors, screws = [], []
        for i in range(len(self.axes)):
            place = place + turn @ self.shifts[i]
            turn = _times(turn, self.turns[i])
            screw = turn @ self.axes[i]
            anchors.append(place)
            screws.append(screw)
            if self.sliding[i]:
                place = place + screw * q[:, i, None]
            else:
                cross = _cross_matrix(self.axes[i])
                sine, rest = np.sin(q[:, i])[:, None, None], 1 - np.cos(q[:, i])[:, None, None]
                turn = turn + sine * _times(turn, cross) + rest * _times(turn, cross @ cross)
        return place + turn @ self.face_shift, _times(turn, self.face_turn), anchors, screws


def root_of(xml: bytes, file: str) -> Element:
    """The <robot> of a URDF; nothing in it is expanded or fetched.

    Raises
    ------
    BadFolder
        Where it is none.
    """
    faults = FaultList(file)
    root = parse(xml, faults)
    if root is None:
        first = faults.faults[0]
        raise BadFolder(first.where, first.what, file)
    if root.tag != "robot":
        raise BadFolder(f"line {root.line}", "is no <robot>", file)
    return root


def joints_of(root: Element, file: str) -> list[UrdfJoint]:
    """Every joint of a URDF, checked."""
    links = [element.attributes.get("name", "") for element in root.all("link")]
    known = set(links)
    if len(known) != len(links) or not all(links):
        raise BadFolder("links", "do not each have a name of their own", file)
    joints = [_joint(element, file) for element in root.all("joint")]
    if len({joint.name for joint in joints}) != len(joints):
        raise BadFolder("joints", "do not each have a name of their own", file)
    if len({joint.child for joint in joints}) != len(joints):
        raise BadFolder("links", "do not each hang on one joint", file)
    for joint in joints:
        if joint.parent not in known or joint.child not in known:
            raise BadFolder(f"joint {joint.name[:80]}", "joins links that do not exist", file)
    return joints


def way(joints: Sequence[UrdfJoint], tip: str, file: str) -> list[UrdfJoint]:
    """The joints from the root link to `tip`."""
    above = {joint.child: joint for joint in joints}
    path: list[UrdfJoint] = []
    link = tip
    while link in above:
        if len(path) > len(joints):
            raise BadFolder("joints", "go round in a circle", file)
        path.append(above[link])
        link = path[-1].parent
    return path[::-1]


def numbers(
    element: Element | None, key: str, default: tuple[float, ...], where: str, file: str
) -> tuple[float, ...]:
    """As many finite numbers from an attribute as `default` has; the default where it is absent."""
    text = None if element is None else element.attributes.get(key)
    if text is None:
        return default
    try:
        found = tuple(float(word) for word in text.split())
    except ValueError:
        found = ()
    sound = len(found) == len(default) and all(abs(value) <= LARGEST for value in found) and "_" not in text
    if not sound:
        raise BadFolder(
            where, f'{key}="{text[:60]}" is not {len(default)} finite number(s) of a sensible size', file
        )
    return found


def placement(pose: Any, where: str) -> tuple[Array, Array]:
    """The xyz (3,) in m and rpy (3,) in rad of a placement as cell.json has it."""
    parts = []
    for key in ("xyz_m", "rpy_rad"):
        found = pose.get(key) if isinstance(pose, Mapping) else None
        if not isinstance(found, list | tuple) or len(found) != 3:
            raise BadFolder(f"{where}.{key}", "is not three numbers", CELL)
        parts.append([sensible(value, f"{where}.{key}") for value in found])
    return np.array(parts[0]), np.array(parts[1])


def sensible(value: Any, where: str) -> float:
    """A number of cell.json that is finite and of a size that means something."""
    if isinstance(value, bool) or not isinstance(value, int | float) or not abs(value) <= LARGEST:
        raise BadFolder(where, "is no finite number of a sensible size", CELL)
    return float(value)


def _cross_matrix(axis: Array) -> Array:
    x, y, z = (float(part) for part in axis)
    return np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])


def _times(many: Array, one: Array) -> Array:
    """Products (f, 3, 3) of many matrices with one; a single large product is faster than f small ones."""
    return (many.reshape(-1, 3) @ one).reshape(many.shape)


def only(element: Element, tag: str, where: str, file: str) -> Element | None:
    """The one element of a tag inside another, None where there is none."""
    found = element.all(tag)
    if len(found) > 1:
        raise BadFolder(where, f"has {len(found)} <{tag}>", file)
    return found[0] if found else None


def _joint(element: Element, file: str) -> UrdfJoint:
    name, kind = element.attributes.get("name", ""), element.attributes.get("type", "")
    where = f"line {element.line}, joint {name[:80]}"
    if not name or kind not in (*TURNING, *SLIDING, *STILL):
        raise BadFolder(where, f'has no name, or its type "{kind[:40]}" is none', file)
    ends = [only(element, role, where, file) for role in ("parent", "child")]
    parent, child = ("" if end is None else end.attributes.get("link", "") for end in ends)
    origin = only(element, "origin", where, file)
    axis = (
        numbers(only(element, "axis", where, file), "xyz", _X_AXIS, where, file)
        if kind not in STILL
        else _X_AXIS
    )
    size = math.hypot(*axis)
    if size < 1e-9:
        raise BadFolder(where, "its axis is zero", file)
    zero = (0.0, 0.0, 0.0)
    return UrdfJoint(
        name,
        kind,
        parent,
        child,
        numbers(origin, "xyz", zero, where, file),
        numbers(origin, "rpy", zero, where, file),
        tuple(part / size for part in axis),
    )
