"""The bodies that the chain's joints move: where their links sit, and whether their inertias are possible."""

from __future__ import annotations

import math
from collections.abc import Mapping
from typing import NamedTuple

import numpy as np

from reach.cell import Array, Pose, Vec3
from reach.errors import FaultList
from reach.formats import inertia
from reach.formats.chain import Tree
from reach.formats.urdf import UrdfJoint, UrdfLink

MOVABLE_KG_M2 = (
    1e-9  # inertia about its joint below which a body counts as having none; a servo horn has 1e-7
)
MOVABLE_KG = 1e-6


class Carried(NamedTuple):
    """Where a link sits in the frame of the chain joint that carries it."""

    joint: UrdfJoint
    rotation: Array
    shift: Array


def check_inertias(
    tree: Tree, held: Mapping[str, float], torque_counts: bool, faults: FaultList
) -> tuple[str, ...]:
    """Check the inertia of every link that moves with the chain, before anything is merged.

    For each chain joint the body it carries (up to the next chain joint) must have inertia about the
    joint's own axis, which makes the mass matrix positive definite in every posture: in any motion the
    first joint that moves then already gives kinetic energy. The tip's body may owe it to the paddle.

    Parameters
    ----------
    held : value in rad or m by name, of joints beside the chain
    torque_counts : without torque in the acceptance an absent inertia is a note, not a fault

    Returns
    -------
    Notes.
    """
    links = {link.name: link for link in tree.urdf.links}
    carried = _carried(tree, held)
    notes: list[str] = []
    inertias = {joint.name: 0.0 for joint in tree.chain}
    for name, place in carried.items():
        if _possible(links[name], faults, notes):
            inertias[place.joint.name] += _about_axis(links[name], place)
        else:
            inertias[place.joint.name] = math.inf  # told already; no second fault for the body it belongs to
    tip_joint = carried[tree.tip].joint
    for joint in tree.chain:
        least = MOVABLE_KG if joint.kind == "prismatic" else MOVABLE_KG_M2
        if inertias[joint.name] > least:
            continue
        body = ", ".join(name for name, place in carried.items() if place.joint is joint)
        lack = f"what it moves ({body}) has no inertia about its axis"
        if joint is tip_joint:
            notes.append(f"{faults.file}: {joint.place}: {lack} but the paddle's")
        elif torque_counts:
            faults.add(joint.place, f"{lack}, so its torque would come out too small; add <inertial> there")
        else:
            notes.append(f"{faults.file}: {joint.place}: {lack}; torque would come out too small")
    return tuple(notes)


def _carried(tree: Tree, held: Mapping[str, float]) -> dict[str, Carried]:
    """Every link that moves with the chain, by name; links before the first chain joint stand still."""
    chain = {joint.name for joint in tree.chain}
    carried: dict[str, Carried] = {}
    for joint in tree.order:
        if joint.name in chain:
            carried[joint.child] = Carried(joint, np.eye(3), np.zeros(3))
        elif joint.parent in carried:
            place = carried[joint.parent]
            rotation, shift = turned(joint.origin, joint.kind, joint.axis, held.get(joint.name, 0.0))
            carried[joint.child] = Carried(
                place.joint, place.rotation @ rotation, place.shift + place.rotation @ shift
            )
    return carried


def _possible(link: UrdfLink, faults: FaultList, notes: list[str]) -> bool:
    """Whether a solid can have this link's inertia; the reasons why not are noted."""
    own = link.inertial
    if own is None:
        return True
    where = f"line {own.line}, link {link.name}"
    fault, note = inertia.judge(own.mass_kg, inertia.matrix(own.inertia))
    if not fault and math.hypot(*own.origin.xyz_m) > inertia.FAR_COM_M:
        fault = f"centre of mass {own.origin.xyz_m} m lies far off the link; is it in mm?"
    if fault:
        faults.add(where, fault)
    if note:
        notes.append(f"{faults.file}: {where}: {note}")
    return not fault


def _about_axis(link: UrdfLink, place: Carried) -> float:
    """Inertia of one link about the axis of the joint that carries it (its mass for a sliding joint)."""
    own = link.inertial
    if own is None:
        return 0.0
    if place.joint.kind == "prismatic":
        return own.mass_kg
    axis = np.array(place.joint.axis)
    turn = place.rotation @ own.origin.rotation
    arm = np.cross(axis, place.shift + place.rotation @ np.array(own.origin.xyz_m))
    return float(axis @ turn @ inertia.matrix(own.inertia) @ turn.T @ axis + own.mass_kg * arm @ arm)


def turned(pose: Pose, kind: str, axis: Vec3, value: float) -> tuple[Array, Array]:
    """Rotation (3, 3) and translation (3,) across a joint at `value`: its origin, then its own motion.

    The turn about the axis is Rodrigues' formula.
    """
    rotation, shift = pose.rotation, np.array(pose.xyz_m)
    direction = np.array(axis)
    if kind == "prismatic":
        return rotation, shift + rotation @ direction * value
    if kind in ("revolute", "continuous"):
        x, y, z = axis
        cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
        rotation = rotation @ (np.eye(3) + math.sin(value) * cross + (1 - math.cos(value)) * cross @ cross)
    return rotation, shift
