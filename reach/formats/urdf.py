"""A URDF's links and joints as it states them, with the line of each and every number checked."""

from __future__ import annotations

import math
from dataclasses import dataclass, field, replace

from reach.cell import Bound, JointLimits, Pose, Vec3
from reach.errors import FaultList, nearest
from reach.formats.magnitude import (
    DUST,
    LARGEST,
    LARGEST_DRIVE,
    LEAST_LIMIT,
    LEAST_POSITIVE,
    misfit,
    without_dust,
)
from reach.formats.xml_tree import Element, parse

MOVING = ("revolute", "continuous", "prismatic")
HELD_AS_DRAWN = ("floating", "planar")
KINDS = ("fixed", *MOVING, *HELD_AS_DRAWN)

_UNIT_AXIS = 1e-3  # an axis further from length one than this is worth a note


@dataclass(frozen=True)
class Inertial:
    """Mass, and inertia about its centre in axes turned by the origin's rpy."""

    origin: Pose
    mass_kg: float
    inertia: tuple[float, ...]  # xx, yy, zz, xy, xz, yz in kg·m²
    line: int


@dataclass(frozen=True)
class UrdfLink:
    """One link."""

    name: str
    line: int
    inertial: Inertial | None = None


@dataclass(frozen=True)
class UrdfJoint:
    """One joint. In `limits`, None is what the file leaves unknown; zero effort or velocity is so read."""

    name: str
    line: int
    kind: str
    parent: str
    child: str
    origin: Pose = field(default_factory=Pose)
    axis: Vec3 = (1.0, 0.0, 0.0)
    limits: JointLimits = field(default_factory=JointLimits)
    mimics: str | None = None

    @property
    def place(self) -> str:
        """Where in the file."""
        return _place(self.line, "joint", self.name)


@dataclass(frozen=True)
class Urdf:
    """All links and joints of a file, in its order."""

    path: str
    links: tuple[UrdfLink, ...]
    joints: tuple[UrdfJoint, ...]
    notes: tuple[str, ...] = ()


def read_urdf(content: bytes, faults: FaultList) -> Urdf | None:
    """Read the links and joints of a URDF, or None when it can't be taken apart at all."""
    root = parse(content, faults)
    if root is None:
        return None
    if root.tag != "robot":
        other = " (SDF and MJCF are other formats: convert it first)" if root.tag in ("sdf", "mujoco") else ""
        faults.add(f"line {root.line}", f"root element is <{root.tag}>; a URDF starts with <robot>{other}")
        return None
    reader = _Reader(faults)
    links = [reader.link(element) for element in root.all("link")]
    joints = [reader.joint(element) for element in root.all("joint")]
    if not links:
        faults.add(f"line {root.line}", "has no <link>; name a finished URDF")
        return None
    return Urdf(
        faults.file,
        tuple(link for link in links if link.name),
        tuple(joint for joint in joints if joint is not None),
        tuple(f"{faults.file}: {note}" for note in reader.notes),
    )


def _place(line: int, what: str, name: str) -> str:
    return f"line {line}, {what} {name}" if name else f"line {line}"


class _Reader:
    """Takes elements apart; faults and notes gather on the way."""

    def __init__(self, faults: FaultList):
        self.faults = faults
        self.notes: list[str] = []

    def link(self, element: Element) -> UrdfLink:
        name = self._name(element)
        found = self._only(element, "inertial")
        return UrdfLink(name, element.line, None if found is None else self._inertial(found, name))

    def joint(self, element: Element) -> UrdfJoint | None:
        name = self._name(element)
        place = _place(element.line, "joint", name)
        kind = element.attributes.get("type", "")
        if kind not in KINDS:
            self.faults.add(place, f'type "{kind}" is no joint type{nearest(kind, KINDS)}')
            kind = ""
        parent, child = (self._link_of(element, role, place) for role in ("parent", "child"))
        origin = self._origin(element, place)
        axis = self._axis(element, place) if kind in MOVING else (1.0, 0.0, 0.0)
        limits = self._limits(element, kind, place) if kind in MOVING else JointLimits()
        mimic = self._only(element, "mimic")
        if not (name and kind and parent and child):
            return None
        mimics = None if mimic is None else mimic.attributes.get("joint", "")
        return UrdfJoint(name, element.line, kind, parent, child, origin, axis, limits, mimics)

    def _name(self, element: Element) -> str:
        name = element.attributes.get("name", "")
        if not name:
            self.faults.add(f"line {element.line}", f'<{element.tag}> has no name; add name="…"')
        return name

    def _only(self, element: Element, tag: str) -> Element | None:
        found = element.all(tag)
        if len(found) > 1:
            where = _place(found[1].line, element.tag, element.attributes.get("name", ""))
            self.faults.add(where, f"has {len(found)} <{tag}> elements; keep one")
        return found[0] if found else None

    def _link_of(self, element: Element, role: str, place: str) -> str:
        found = self._only(element, role)
        name = "" if found is None else found.attributes.get("link", "")
        if not name:
            self.faults.add(place, f'names no {role} link; add <{role} link="…"/>')
        return name

    def _number(
        self,
        element: Element | None,
        key: str,
        place: str,
        least: float = 0.0,
        most: float = LARGEST,
        signed: bool = True,
    ) -> float | None:
        """The number in an attribute, None where it is absent, or unusable and noted.

        Its size is 0 or from `least` to `most`; rests of rounding around 0 count as 0 where `least` is 0.
        """
        text = None if element is None else element.attributes.get(key)
        if element is None or text is None:
            return None
        value = _finite(text)
        where = f"{place}, <{element.tag} {key}>"
        if value is None:
            self.faults.add(where, f'"{text[:60]}" is no finite number; correct it')
            return None
        if value < 0 and not signed:
            self.faults.add(where, f"{value:g} is negative; give its size, or drop it when unknown")
            return None
        value = value if least else without_dust(value)
        wrong = misfit(value, least, most)
        if wrong:
            self.faults.add(where, wrong)
            return None
        return value

    def _vector(self, element: Element | None, key: str, default: Vec3, place: str) -> Vec3:
        text = None if element is None else element.attributes.get(key)
        if element is None or text is None:
            return default
        values = [_finite(word) for word in text.split()]
        if len(values) != 3 or any(value is None for value in values):
            self.faults.add(
                f"{place}, <{element.tag} {key}>", f'"{text[:60]}" is not three finite numbers; correct it'
            )
            return default
        x, y, z = (without_dust(value) for value in values if value is not None)
        wrong = next(filter(None, (misfit(value, DUST) for value in (x, y, z))), "")
        if wrong:
            self.faults.add(f"{place}, <{element.tag} {key}>", wrong)
            return default
        return x, y, z

    def _origin(self, element: Element, place: str) -> Pose:
        origin = self._only(element, "origin")
        if origin is not None and "quat_xyzw" in origin.attributes:
            self.faults.add(f"{place}, <origin quat_xyzw>", "quaternions are not read; write the turn as rpy")
        zero = (0.0, 0.0, 0.0)
        return Pose(self._vector(origin, "xyz", zero, place), self._vector(origin, "rpy", zero, place))

    def _axis(self, element: Element, place: str) -> Vec3:
        axis = self._vector(self._only(element, "axis"), "xyz", (1.0, 0.0, 0.0), place)
        length = math.hypot(*axis)
        if length < 1e-9:
            self.faults.add(f"{place}, <axis xyz>", "the axis is zero; give its direction")
            return axis
        if abs(length - 1) > _UNIT_AXIS:
            self.notes.append(f"{place}: axis of length {length:.6g} taken as a direction alone")
        x, y, z = axis
        return axis if length == 1 else (x / length, y / length, z / length)

    def _inertial(self, element: Element, link: str) -> Inertial | None:
        place = _place(element.line, "link", link)
        mass_element, inertia_element = self._only(element, "mass"), self._only(element, "inertia")
        mass = self._number(mass_element, "value", place, LEAST_POSITIVE)
        if mass_element is None or "value" not in mass_element.attributes:
            self.faults.add(place, '<inertial> has no mass; add <mass value="…"/>, or drop <inertial>')
        keys = ("ixx", "iyy", "izz", "ixy", "ixz", "iyz")
        six = [self._number(inertia_element, key, place) for key in keys]
        if inertia_element is None:
            self.faults.add(place, "<inertial> has no <inertia>; add its six values, or drop <inertial>")
        else:
            absent = [key for key in keys if key not in inertia_element.attributes]
            if absent:
                self.faults.add(f"{place}, <inertia>", f"has no {', '.join(absent)}; add it")
        origin = self._origin(element, place)
        if mass is None or any(value is None for value in six):
            return None
        return Inertial(origin, mass, tuple(value for value in six if value is not None), element.line)

    def _limits(self, element: Element, kind: str, place: str) -> JointLimits:
        limit, dynamics = self._only(element, "limit"), self._only(element, "dynamics")

        def symmetric(key: str, source: str = "URDF") -> Bound | None:
            value = self._number(limit, key, place, LEAST_LIMIT, signed=False)
            return Bound(-value, value, source) if value else None

        def stated(key: str) -> float | None:
            value = self._number(dynamics, key, place, DUST, LARGEST_DRIVE, signed=False)
            if value == 0:
                self.notes.append(f"{place}: {key} 0 read as unknown; the limits file can state a true zero")
            return value or None

        limits = JointLimits(
            velocity=symmetric("velocity"),
            torque=symmetric("effort"),
            acceleration=symmetric("acceleration", "URDF 1.2"),
            jerk=symmetric("jerk", "URDF 1.2"),
            damping=stated("damping"),
            friction=stated("friction"),
        )
        most = math.inf if kind == "continuous" else LARGEST  # what is ignored may be any number
        lower, upper = (self._number(limit, key, place, most=most) for key in ("lower", "upper"))
        if kind == "continuous":
            if lower or upper:
                self.notes.append(f"{place}: continuous, so lower and upper are ignored")
            return replace(limits, position=Bound(-math.inf, math.inf, "continuous joint"))
        hard = self._pair(lower, upper, limit, "lower", "upper", place)
        return replace(limits, position=self._soften(hard, element, place))

    def _pair(
        self, low: float | None, high: float | None, element: Element | None, *keys_and_place: str
    ) -> Bound | None:
        """Lower and upper as a Bound; one that is absent is 0, as the URDF format has it."""
        low_key, high_key, place = keys_and_place
        if element is None or (low is None and high is None):
            return None
        bound = Bound(low or 0.0, high or 0.0, "URDF")
        if low is None or high is None:
            absent = low_key if low is None else high_key
            self.notes.append(f"{place}: <{element.tag}> has no {absent}: 0, as the URDF format has it")
        if bound.lo > bound.hi:
            where = f"{place}, <{element.tag}>"
            self.faults.add(where, f"{low_key} {bound.lo:g} is above {high_key} {bound.hi:g}; swap them")
            return None
        return bound

    def _soften(self, hard: Bound | None, element: Element, place: str) -> Bound | None:
        """The more restrictive of the hard limits and those of a safety controller."""
        safety = self._only(element, "safety_controller")
        keys = ("soft_lower_limit", "soft_upper_limit")
        low, high = (self._number(safety, key, place) for key in keys)
        if hard is None or safety is None or not (low or high):
            return hard
        soft = self._pair(low, high, safety, *keys, place)
        if soft is None:
            return hard
        if soft.lo < hard.lo or soft.hi > hard.hi:
            self.notes.append(f"{place}: soft limits lie outside the hard ones, which hold there")
        return stricter(hard, replace(soft, source="URDF safety_controller"))


def stricter(one: Bound | None, other: Bound | None) -> Bound | None:
    """Side by side the narrower of two bounds, the first where they agree; the source says which it was."""
    if one is None or other is None:
        return one or other
    low = one if one.lo >= other.lo else other
    high = one if one.hi <= other.hi else other
    source = low.source if low.source == high.source else f"{low.source} / {high.source}"
    return Bound(low.lo, high.hi, source)


def _finite(text: str) -> float | None:
    try:
        value = float(text)
    except ValueError:
        return None
    return value if math.isfinite(value) and "_" not in text else None
