"""The [arm] table: URDF, limits file, what is held, and the start posture, made into one ArmSpec."""

from __future__ import annotations

import math
from collections.abc import Iterable, Mapping
from functools import partial
from typing import Any

from reach.cell import ArmSpec, HeldJoint, Joint, Pose
from reach.errors import FaultList, nearest
from reach.formats.bodies import check_inertias
from reach.formats.capped import ByKind
from reach.formats.chain import Tree, read_tree
from reach.formats.files import MAX_TEXT_BYTES, Reading, beside
from reach.formats.kinds import dotted
from reach.formats.limits_toml import merge, read_limits
from reach.formats.model_xml import write_model
from reach.formats.toml_text import parse_toml
from reach.formats.urdf import HELD_AS_DRAWN, UrdfJoint, read_urdf

_STARTS = (("start_rad", False, 1.0), ("start_deg", False, math.pi / 180), ("start_m", True, 1.0))
_VELOCITIES = (("start_velocity_rad_s", False, 1.0), ("start_velocity_m_s", True, 1.0))


def pose_of(placement: Mapping[str, Any]) -> Pose:
    """A table of xyz_m and rpy_deg as a Pose."""
    roll, pitch, yaw = (math.radians(angle) for angle in placement["rpy_deg"])
    return Pose(placement["xyz_m"], (roll, pitch, yaw))


def read_arm(
    arm: Mapping[str, Any],
    given: Mapping[str, Any],
    torque_counts: bool,
    needs_start: bool,
    faults: FaultList,
    reading: Reading,
) -> ArmSpec | None:
    """Read the arm that a checked [arm] table describes.

    Parameters
    ----------
    arm : the table as the schema read it
    given : the table as written, to tell what was given from what is a default
    torque_counts : whether torque or torque rate is among what is required
    needs_start : whether the start posture must be given
    faults : those of the cell file
    reading : gathers the faults, inputs and notes of the URDF and the limits file

    Returns
    -------
    ArmSpec, or None after noting why there is none.
    """
    if not arm["urdf"]:
        return None
    path = beside(faults.file, arm["urdf"])
    urdf_faults = FaultList(path)
    content = reading.read(path, MAX_TEXT_BYTES, f"arm.urdf in {faults.file}")
    urdf = None if content is None else read_urdf(content, urdf_faults)
    limits_path = beside(faults.file, arm["limits"]) if arm["limits"] else ""
    limits_faults = FaultList(limits_path)
    document = None
    if limits_path:
        text = reading.read_text(limits_path, MAX_TEXT_BYTES, f"arm.limits in {faults.file}")
        document = None if text is None else parse_toml(text, limits_faults)
    spec = None
    if urdf is not None and arm["tip"]:
        reading.notes.extend(urdf.notes)
        joints = {joint.name: joint for joint in urdf.joints}
        stated = None if document is None else read_limits(document, joints, limits_faults)
        tree = read_tree(urdf, arm["tip"], (faults, "arm.tip"), urdf_faults)
        if tree is not None:
            held, held_notes = _held(tree, arm, faults)
            reading.notes.extend(held_notes)
            reading.notes.extend(check_inertias(tree, held, torque_counts, urdf_faults))
            chain, notes = merge(tree.chain, stated, urdf_faults, limits_faults)
            reading.notes.extend(notes)
            spec = _spec(tree, chain, held, arm, given, needs_start, faults)
    for found in (urdf_faults, limits_faults):
        reading.faults.extend(found.faults)
    return spec


def _spec(
    tree: Tree,
    chain: tuple[Joint, ...],
    held: Mapping[str, float],
    arm: Mapping[str, Any],
    given: Mapping[str, Any],
    needs_start: bool,
    faults: FaultList,
) -> ArmSpec:
    off_chain = {joint.name for joint in tree.order} - {joint.name for joint in chain}
    xml, model_names = write_model(tree)
    return ArmSpec(
        urdf_path=tree.urdf.path,
        model_xml=xml,
        tip=tree.tip,
        joints=chain,
        held=tuple(HeldJoint(name, model_names[name], value) for name, value in held.items()),
        base=pose_of(arm["base"]),
        gravity_m_s2=arm["gravity_m_s2"],
        start=_start(chain, off_chain, arm, given, needs_start, faults),
        start_velocity=_velocity(chain, off_chain, arm, faults),
    )


def _held(tree: Tree, arm: Mapping[str, Any], faults: FaultList) -> tuple[dict[str, float], list[str]]:
    """Value of every joint beside the chain: the cell's, else 0, else the limit nearest 0; and notes."""
    beside_chain = {joint.name: joint for joint in tree.beside}
    known = {joint.name: joint for joint in tree.order}
    values: dict[str, float] = {}
    for key, sliding in (("locked_rad", False), ("locked_m", True)):
        kinds = ByKind(faults, f"arm.{key}")
        for name, value in arm[key].items():
            where = dotted(f"arm.{key}", name)
            if name not in beside_chain:
                told = partial(_not_lockable, name, known, beside_chain)
                kinds.add("joints that can't be locked", where, told)
                continue
            joint = beside_chain[name]
            if (joint.kind == "prismatic") != sliding:
                other, motion = ("locked_rad", "turns") if sliding else ("locked_m", "slides")
                faults.add(where, f"the joint {motion}; give it in {other}")
                continue
            bound = joint.limits.position
            if bound is not None and not bound.lo <= value <= bound.hi:
                faults.add(where, f"is {value:g}, outside its limits [{bound.lo:g}, {bound.hi:g}]")
            values[name] = value
        kinds.close()
    notes: list[str] = []
    at_zero: list[str] = []
    for name, joint in beside_chain.items():
        if name in values:
            continue
        bound = joint.limits.position
        values[name] = 0.0 if bound is None else min(max(0.0, bound.lo), bound.hi)
        if values[name] == 0:
            at_zero.append(name)
        else:
            notes.append(
                f"{tree.urdf.path}: {name}: off the chain, held at {values[name]:g}, its limit nearest 0"
            )
    if at_zero:
        notes.append(f"{tree.urdf.path}: off the chain, held at 0: {', '.join(at_zero)}")
    drawn = [joint.name for joint in tree.order if joint.kind in HELD_AS_DRAWN]
    if drawn:
        notes.append(f"{tree.urdf.path}: floating or planar, held as drawn: {', '.join(drawn)}")
    return {name: values[name] for name in beside_chain}, notes


def _not_lockable(name: str, known: Mapping[str, UrdfJoint], beside_chain: Mapping[str, UrdfJoint]) -> str:
    if name not in known:
        return f"the URDF has no joint of that name{nearest(name, beside_chain)}"
    if known[name].kind in ("fixed", *HELD_AS_DRAWN):
        return f"the joint is {known[name].kind} and stays as drawn; drop it here"
    return "the joint is on the chain to the tip, so it moves; only joints off the chain can be locked"


def _no_joint(name: str, known: Iterable[str]) -> str:
    return f"the chain has no joint of that name{nearest(name, known)}"


def _by_joint(
    chain: tuple[Joint, ...],
    off_chain: set[str],
    arm: Mapping[str, Any],
    tables: tuple[tuple[str, bool, float], ...],
    faults: FaultList,
) -> dict[str, tuple[float, str]]:
    """Values in SI units and their dotted keys by joint name, from tables split by unit."""
    joints = {joint.name: joint for joint in chain}
    found: dict[str, tuple[float, str]] = {}
    for key, sliding, unit in tables:
        kinds = ByKind(faults, f"arm.{key}")
        for name, value in arm[key].items():
            where = dotted(f"arm.{key}", name)
            if name in off_chain:
                faults.add(
                    where, "the joint is not on the chain to the tip; hold it with locked_rad or locked_m"
                )
            elif name not in joints:
                kinds.add("joints that the chain does not have", where, partial(_no_joint, name, joints))
            elif joints[name].sliding != sliding:
                other = next(k for k, slides, _ in tables if slides != sliding)
                motion = "slides" if joints[name].sliding else "turns"
                faults.add(where, f"the joint {motion}; give it in {other}")
            elif name in found:
                faults.add(where, f"given twice, also as {found[name][1]}; keep one")
            else:
                found[name] = value * unit, where
        kinds.close()
    return found


def _start(
    chain: tuple[Joint, ...],
    off_chain: set[str],
    arm: Mapping[str, Any],
    given: Mapping[str, Any],
    needed: bool,
    faults: FaultList,
) -> tuple[float, ...] | None:
    named = [key for key, _, _ in _STARTS if key in given]
    if "start" in given:
        if named:
            faults.add("arm.start", f'stands beside {", ".join(named)}; keep the posture, or start = "auto"')
        return None
    if not named and not needed:
        return None
    if not named:
        names = ", ".join(f"{joint.name} = 0.0" for joint in chain)
        faults.add(
            "arm.start_rad",
            f"missing; give the start posture of every chain joint, such as {{ {names} }}; "
            "there is no default because the verdict depends on it",
        )
        return None
    if not all(isinstance(given[key], dict) for key in named):
        return None
    found = _by_joint(chain, off_chain, arm, _STARTS, faults)
    for joint in chain:
        if joint.name not in found:
            if any(joint.name in given[key] for key in named if isinstance(given[key], dict)):
                continue  # already a fault of its own
            key = "start_m" if joint.sliding else "start_rad"
            faults.add(dotted(f"arm.{key}", joint.name), "missing; the start posture needs every chain joint")
            continue
        value, where = found[joint.name]
        bound = joint.limits.position
        if bound is not None and not bound.lo <= value <= bound.hi:
            unit = "m" if joint.sliding else "rad"
            limit = f"[{bound.lo:g}, {bound.hi:g}] {unit} ({bound.source})"
            faults.add(where, f"is {value:.6g} {unit}, outside the position limit {limit}; start inside")
    return tuple(found[joint.name][0] if joint.name in found else 0.0 for joint in chain)


def _velocity(
    chain: tuple[Joint, ...], off_chain: set[str], arm: Mapping[str, Any], faults: FaultList
) -> tuple[float, ...]:
    found = _by_joint(chain, off_chain, arm, _VELOCITIES, faults)
    for joint in chain:
        value, where = found.get(joint.name, (0.0, ""))
        bound = joint.limits.velocity
        if where and bound is not None and not bound.lo <= value <= bound.hi:
            faults.add(where, f"is {value:g}, outside the velocity limit [{bound.lo:g}, {bound.hi:g}]")
    return tuple(found[joint.name][0] if joint.name in found else 0.0 for joint in chain)
