"""What a URDF and a limits file say of the joints from the root to the tip, read for this package alone."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from reach.errors import FaultList
from reach.formats.xml_tree import Element, parse
from reach.recheck.stored import BadFolder

Values = tuple[float, ...]
"""Both sides of a limit, the outer ones infinite where it is known to be none; one number of a drive."""

FIELDS: dict[str, tuple[tuple[str, str], tuple[str, str]]] = {
    "position": (("position_rad", "rad"), ("position_m", "m")),
    "velocity": (("velocity_rad_s", "rad/s"), ("velocity_m_s", "m/s")),
    "acceleration": (("acceleration_rad_s2", "rad/s²"), ("acceleration_m_s2", "m/s²")),
    "jerk": (("jerk_rad_s3", "rad/s³"), ("jerk_m_s3", "m/s³")),
    "torque": (("torque_nm", "N·m"), ("torque_n", "N")),
    "torque_rate": (("torque_rate_nm_s", "N·m/s"), ("torque_rate_n_s", "N/s")),
    "torque_continuous": (("torque_continuous_nm", "N·m"), ("torque_continuous_n", "N")),
    "armature": (("armature_kg_m2", "kg·m²"), ("armature_kg", "kg")),
    "damping": (("damping_nm_s_rad", "N·m·s/rad"), ("damping_n_s_m", "N·s/m")),
    "friction": (("friction_nm", "N·m"), ("friction_n", "N")),
}
"""Field of cell.json -> key in a limits file and unit, of a turning joint and of a sliding one."""
DRIVE = ("armature", "damping", "friction")  # single numbers, not two sides
MOVING = ("revolute", "continuous", "prismatic")
URDF_SIZES = {"velocity": "velocity", "acceleration": "acceleration", "jerk": "jerk", "torque": "effort"}
"""Field -> attribute of <limit> that gives its size; acceleration and jerk since URDF 1.2."""
EVERYWHERE = (-math.inf, math.inf)


@dataclass(frozen=True)
class Said:
    """One joint: name, kind, and by field what is known of it; a field that is missing is unknown."""

    name: str
    kind: str
    values: Mapping[str, Values]

    @property
    def sliding(self) -> bool:
        """Whether its position is a length."""
        return self.kind == "prismatic"

    def unit(self, field: str) -> str:
        """The unit of a field."""
        return FIELDS[field][self.sliding][1]


def read_joints(xml: bytes, file: str, tip: str) -> tuple[tuple[Said, ...], tuple[Said, ...]]:
    """The joints that move the tip, from the base on, and the other joints that can move.

    Raises
    ------
    BadFolder
        Where the file is no URDF with that link.
    """
    root = parse(xml, FaultList(file))
    if root is None or root.tag != "robot":
        raise BadFolder("file", "is no URDF that can be read", file)
    elements = root.all("joint")
    leads = {_link(joint, "child"): joint for joint in elements}
    path: list[Element] = []
    link = tip
    while link in leads and len(path) <= len(elements):
        path.insert(0, leads[link])
        link = _link(leads[link], "parent")
    moving = [joint for joint in elements if joint.attributes.get("type") in MOVING]
    on_path = {id(joint) for joint in path}
    if not any(id(joint) in on_path for joint in moving) or len(path) > len(elements):
        raise BadFolder("arm.tip", f'no chain of joints leads to "{tip}"', file)
    chain = [joint for joint in path if joint.attributes.get("type") in MOVING]
    beside = [joint for joint in moving if id(joint) not in on_path]
    return tuple(map(_joint, chain)), tuple(map(_joint, beside))


def with_limits_file(joints: Sequence[Said], document: Mapping[str, Any]) -> tuple[Said, ...]:
    """Joints with what a limits file says of them: the narrower side of both, or under `override` the file's alone."""
    tables = document.get("joints", {})
    return tuple(_merged(joint, tables.get(joint.name, {})) for joint in joints)


def _merged(joint: Said, table: Mapping[str, Any]) -> Said:
    values = dict(joint.values)
    for field, keys in FIELDS.items():
        key = keys[joint.sliding][0]
        if key not in table:
            continue
        said = table[key]
        if field in DRIVE:
            values[field] = (float(said),)
            continue
        low, high = map(float, said) if isinstance(said, list) else (-float(said), float(said))
        own = EVERYWHERE if table.get("override") is True else values.get(field, EVERYWHERE)
        values[field] = (max(own[0], low), min(own[1], high))
    return Said(joint.name, joint.kind, values)


def _joint(element: Element) -> Said:
    kind = element.attributes["type"]
    values: dict[str, Values] = {}
    for field, attribute in URDF_SIZES.items():
        size = _number(element, "limit", attribute)
        if size:  # zero stands for "not known"
            values[field] = (-size, size)
    for field in ("damping", "friction"):
        size = _number(element, "dynamics", field)
        if size:
            values[field] = (size,)
    if kind == "continuous":
        values["position"] = EVERYWHERE
    else:
        low, high = (_number(element, "limit", side) for side in ("lower", "upper"))
        if low is not None or high is not None:
            values["position"] = _softened(element, low or 0.0, high or 0.0)
    return Said(element.attributes.get("name", ""), kind, values)


def _softened(element: Element, low: float, high: float) -> Values:
    """Both ends of the travel, narrowed by a safety controller that states some of its own."""
    soft = [_number(element, "safety_controller", f"soft_{side}_limit") or 0.0 for side in ("lower", "upper")]
    return (max(low, soft[0]), min(high, soft[1])) if any(soft) else (low, high)


def _link(joint: Element, role: str) -> str:
    found = joint.all(role)
    return found[0].attributes.get("link", "") if found else ""


def _number(joint: Element, tag: str, key: str) -> float | None:
    found = joint.all(tag)
    return float(found[0].attributes[key]) if found and key in found[0].attributes else None
