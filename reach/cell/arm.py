"""The arm: its chain, what is known of each joint, and where it stands."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

from reach.cell.basics import STANDARD_GRAVITY_M_S2, Bound, Pose, Vec3


@dataclass(frozen=True)
class JointLimits:
    """What is known of one joint; None is unknown, never zero and never infinite.

    Units: rad (m for a sliding joint), per s, per s², per s³; N·m (N), N·m/s (N/s);
    armature (reflected rotor inertia) kg·m² (kg), damping N·m·s/rad (N·s/m), dry friction N·m (N).
    """

    position: Bound | None = None
    velocity: Bound | None = None
    acceleration: Bound | None = None
    jerk: Bound | None = None
    torque: Bound | None = None
    torque_rate: Bound | None = None
    torque_continuous: Bound | None = None
    armature: float | None = None
    damping: float | None = None
    friction: float | None = None


@dataclass(frozen=True)
class Joint:
    """One joint of the chain from base to tip, in the user's own name."""

    name: str
    kind: Literal["revolute", "continuous", "prismatic"]
    limits: JointLimits = field(default_factory=JointLimits)

    @property
    def sliding(self) -> bool:
        """True for a prismatic joint, whose position is in metres."""
        return self.kind == "prismatic"


@dataclass(frozen=True)
class HeldJoint:
    """A joint off the chain, held at a value in rad or m; `name` is the user's, `model_name` that of `model_xml`."""

    name: str
    model_name: str
    value: float


@dataclass(frozen=True)
class ArmSpec:
    """The arm as read and checked.

    Attributes
    ----------
    urdf_path : str
    model_xml : str
        A URDF of links, joints and inertias alone, rewritten from the checked one: canonical names
        (joint i of the chain is "chain_i", the tip link is "tip"), every limit attribute present,
        continuous joints written as revolute, no geometry.
    tip : str
        The tip link's name in the user's file.
    joints : tuple of Joint
        The chain in order from base to tip.
    held : tuple of HeldJoint
    base : Pose
        Base (root link) in the world.
    gravity_m_s2 : Vec3
        In world axes.
    start : tuple of float, or None
        Start posture, one value a joint; None asks for a posture for the log's first pose.
    start_velocity : tuple of float
    """

    urdf_path: str
    model_xml: str
    tip: str
    joints: tuple[Joint, ...]
    held: tuple[HeldJoint, ...] = ()
    base: Pose = Pose()
    gravity_m_s2: Vec3 = (0.0, 0.0, -STANDARD_GRAVITY_M_S2)
    start: tuple[float, ...] | None = None
    start_velocity: tuple[float, ...] = ()
