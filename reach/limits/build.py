"""All limit kinds of a cell, what nobody stated of them, and what a verdict leaves out."""

from __future__ import annotations

from reach.cell import Cell
from reach.limits import LIMITS
from reach.limits.base import Limit

ALWAYS_UNCHECKED = ("clearance", "stand flexibility")


def build_limits(cell: Cell) -> dict[str, Limit]:
    """Every limit kind of LIMITS for a cell, by name."""
    return {name: kind(cell) for name, kind in LIMITS.items()}


def unknown_limits(limits: dict[str, Limit]) -> tuple[tuple[str, str | None], ...]:
    """The (limit, joint) pairs that nobody stated; joint None: the tool."""
    return tuple(
        (name, joint)
        for name, limit in limits.items()
        for joint, known in zip(limit.joints, limit.known, strict=True)
        if not known
    )


def not_checked(cell: Cell, limits: dict[str, Limit]) -> tuple[str, ...]:
    """Names of what a verdict on this cell leaves out: limits with an unknown joint, then the model's gaps."""
    names = [name for name, limit in limits.items() if not limit.known.all()]
    if cell.drive is None:
        names.append("drive tracking")
    joints = [joint.limits for joint in cell.arm.joints]
    if any(item.friction is None for item in joints):
        names.append("friction")
    if any(item.armature is None for item in joints):
        names.append("reflected inertia")
    return (*names, *ALWAYS_UNCHECKED)
