"""The limits file: what a URDF does not say of a joint, or corrects; and its merger with the URDF."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from dataclasses import dataclass, field, fields, replace
from functools import partial
from typing import Any, Literal

from reach.cell import Bound, Joint, JointLimits
from reach.errors import FaultList, nearest
from reach.formats.capped import ByKind
from reach.formats.kinds import Flag, ListOf, Number, Text, dotted, shown
from reach.formats.magnitude import LEAST_LIMIT
from reach.formats.schema import DRIVE_VALUE, LIMIT_KEYS
from reach.formats.urdf import UrdfJoint, stricter

MANY_TURNS_RAD = 20.0  # a position limit beyond three turns is more often in degrees
FAR_SLIDE_M = 20.0  # and a slide longer than this more often in mm

_KINDS: dict[str, Literal["revolute", "continuous", "prismatic"]] = {
    "revolute": "revolute",
    "continuous": "continuous",
    "prismatic": "prismatic",
}
_PAIRS = {
    "range": ListOf(Number(), 2, what="numbers lo, hi"),
    "around zero": ListOf(Number(least=LEAST_LIMIT), 2, what="numbers lo, hi"),
}


@dataclass(frozen=True)
class Stated:
    """What a limits file says of one joint."""

    limits: JointLimits = field(default_factory=JointLimits)
    override: bool = False


def read_limits(
    document: Mapping[str, Any], urdf_joints: Mapping[str, UrdfJoint], faults: FaultList
) -> dict[str, Stated]:
    """Read the joint tables of a limits file.

    Parameters
    ----------
    document : the parsed TOML
    urdf_joints : every joint of the URDF by name, to tell turning from sliding
    """
    kinds = ByKind(faults)
    for key in document:
        if key != "joints":
            kinds.add("unknown keys", dotted("", key), f"unknown key{nearest(key, ['joints'])}")
    tables = document.get("joints")
    if not isinstance(tables, dict):
        kinds.close()
        faults.add("joints", "missing; give one table per joint, such as [joints.j1]")
        return {}
    read: dict[str, Stated] = {}
    for name, table in tables.items():
        where = dotted("joints", name)
        if name not in urdf_joints:
            kinds.add("joints that the URDF does not have", where, partial(_no_joint, name, urdf_joints))
        elif not isinstance(table, dict):
            faults.add(where, f"is {shown(table)}; give a table [{where}]")
        else:
            read[name] = _joint(table, urdf_joints[name].kind == "prismatic", where, faults)
    kinds.close()
    return read


def _no_joint(name: str, known: Iterable[str]) -> str:
    return f"the URDF has no joint of that name{nearest(name, known)}"


def _joint(table: Mapping[str, Any], sliding: bool, where: str, faults: FaultList) -> Stated:
    """One joint's table; the key tells the unit, so a key of the other kind of joint is a fault."""
    own = {keys[sliding]: (name, keys[2]) for name, keys in LIMIT_KEYS.items()}
    foreign = {keys[not sliding]: keys[sliding] for keys in LIMIT_KEYS.values()}
    source = faults.file
    if "source" in table:
        source = Text().read(table["source"], dotted(where, "source"), faults) or source
    override = False
    if "override" in table:
        override = bool(Flag().read(table["override"], dotted(where, "override"), faults))
    found: dict[str, Any] = {}
    for key, value in table.items():
        place = dotted(where, key)
        if key in own:
            name, holds = own[key]
            found[name] = _value(value, holds, source, place, faults)
        elif key in foreign:
            motion = "slides" if sliding else "turns"
            faults.add(place, f'the joint {motion}; write "{foreign[key]}", in that unit')
        elif key not in ("source", "override"):
            faults.add(place, f"unknown key{nearest(key, [*own, 'source', 'override'])}")
    return Stated(JointLimits(**found), override)


def _value(value: Any, holds: str, source: str, where: str, faults: FaultList) -> Bound | float | None:
    if holds == "value":
        return DRIVE_VALUE.read(value, where, faults)
    if isinstance(value, list):
        pair = _PAIRS[holds].read(value, where, faults)
        if pair is None:
            return None
        lo, hi = pair
        if not lo < hi:
            faults.add(where, f"[{lo:g}, {hi:g}] has no room; the first must be below the second")
            return None
        if holds == "around zero" and not lo <= 0 <= hi:
            faults.add(
                where, f"[{lo:g}, {hi:g}] leaves out 0; the first must be at most 0, the second at least"
            )
            return None
        return Bound(lo, hi, source)
    if holds == "range":
        faults.add(where, f"is {shown(value)}; give [lo, hi]")
        return None
    hint = "leave it out when it is not known"
    size = Number(above=0, hint=hint, least=LEAST_LIMIT).read(value, where, faults)
    return None if size is None else Bound(-size, size, source)


def merge(
    chain: tuple[UrdfJoint, ...], stated: Mapping[str, Stated] | None, urdf: FaultList, limits: FaultList
) -> tuple[tuple[Joint, ...], tuple[str, ...]]:
    """Join URDF and limits file: the stricter side by side, or the limits file alone under `override`.

    Parameters
    ----------
    stated : what the limits file says, None without one
    urdf, limits : fault lists of the two files

    Returns
    -------
    The chain's joints, and notes.
    """
    joints = []
    for joint in chain:
        said = (stated or {}).get(joint.name, Stated())
        merged = _merged(joint, said, limits)
        if merged.position is None and joint.limits.position is None and said.limits.position is None:
            key = LIMIT_KEYS["position"][joint.kind == "prismatic"]
            urdf.add(
                joint.place,
                "gives no lower and upper limit, which locks the joint at 0 in many programs; add them to "
                f"<limit>, or {key} = [lo, hi] under [{dotted('joints', joint.name)}] in a limits file",
            )
        joints.append(Joint(joint.name, _KINDS[joint.kind], merged))
    notes = _unknown(joints, urdf.file) + _unlikely(joints)
    if stated is not None:
        silent = [joint.name for joint in joints if joint.name not in stated]
        if silent:
            notes.append(f"{limits.file}: says nothing of {', '.join(silent)}")
        unused = [name for name in stated if name not in {joint.name for joint in joints}]
        if unused:
            notes.append(f"{limits.file}: not used, because off the chain: {', '.join(unused)}")
    return tuple(joints), tuple(notes)


def _merged(joint: UrdfJoint, said: Stated, limits: FaultList) -> JointLimits:
    found: dict[str, Any] = {}
    for item in fields(JointLimits):
        own, other = getattr(joint.limits, item.name), getattr(said.limits, item.name)
        if isinstance(own, Bound) and isinstance(other, Bound) and not said.override:
            both = stricter(own, other)
            if both is not None and both.lo >= both.hi:
                key = LIMIT_KEYS[item.name][joint.kind == "prismatic"]
                theirs = f"[{own.lo:g}, {own.hi:g}]"
                limits.add(
                    dotted(dotted("joints", joint.name), key),
                    f"[{other.lo:g}, {other.hi:g}] leaves no room within the URDF's {theirs}; "
                    "correct one, or set override = true to let this file hold",
                )
                both = None
            found[item.name] = both
        else:
            found[item.name] = own if other is None else other
    return replace(joint.limits, **found)


def _unknown(joints: list[Joint], file: str) -> list[str]:
    """Notes on limits that stay unknown, and on efforts that look like placeholders."""
    notes = []
    for name, attribute in (("velocity", "velocity"), ("torque", "effort")):
        lacking = [joint.name for joint in joints if getattr(joint.limits, name) is None]
        if lacking:
            notes.append(
                f"{file}: {name} limit not known of {', '.join(lacking)}: "
                f"{attribute} is 0 or missing and no limits file gives it"
            )
    efforts = [joint.limits.torque for joint in joints]
    alike = {(bound.lo, bound.hi, bound.source) for bound in efforts if bound is not None}
    if len(joints) >= 4 and None not in efforts and len(alike) == 1 and next(iter(alike))[2] == "URDF":
        notes.append(
            f"{file}: effort is {next(iter(alike))[1]:g} on every joint, which is often a placeholder; "
            "confirm it in a limits file"
        )
    return notes


def _unlikely(joints: list[Joint]) -> list[str]:
    notes = []
    for joint in joints:
        bound = joint.limits.position
        if bound is None or not math.isfinite(bound.hi - bound.lo):
            continue
        far, unit, slip = (FAR_SLIDE_M, "m", "mm") if joint.sliding else (MANY_TURNS_RAD, "rad", "degrees")
        if max(abs(bound.lo), abs(bound.hi)) > far:
            limit = f"position limit [{bound.lo:g}, {bound.hi:g}] {unit}"
            notes.append(f"{bound.source}: {joint.name}: {limit}; is it in {slip}?")
    return notes
