"""A cell with one thing changed: what the searches and the remedies re-run."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import replace
from typing import Any

from reach.cell import Bound, Cell, JointLimits, Margins, Pose

FIELDS = {
    "velocity": "velocity",
    "acceleration": "acceleration",
    "jerk": "jerk",
    "torque": "torque",
    "torque rate": "torque_rate",
    "duty": "torque_continuous",
    "position": "position",
}

NO_MARGINS = Margins(0.0, 0.0, 0.0, 0.0, 0.0, 0.0, 0.0)


def without_margins(cell: Cell) -> Cell:
    """The cell planned right up to its stated limits."""
    return replace(cell, margins=NO_MARGINS)


def scaled_limits(cell: Cell, factor: float) -> Cell:
    """Every limit but position times a factor, the tool's cap too."""

    def scaled(limits: JointLimits) -> JointLimits:
        changed: dict[str, Any] = {}
        for name in FIELDS.values():
            bound = getattr(limits, name)
            if bound is not None and name != "position":
                changed[name] = Bound(bound.lo * factor, bound.hi * factor, bound.source)
        return replace(limits, **changed)

    tool = replace(cell.tool, speed_m_s=cell.tool.speed_m_s * factor) if cell.tool else None
    return replace(_with_limits(cell, lambda _, limits: scaled(limits)), tool=tool)


def one_limit_scaled(cell: Cell, limit: str, joint: str | None, factor: float) -> Cell:
    """One kind of limit times a factor, of one joint or (None) of all; a range of position about its middle."""
    if limit == "tool speed":
        tool = replace(cell.tool, speed_m_s=cell.tool.speed_m_s * factor) if cell.tool else None
        return replace(cell, tool=tool)

    def scaled(name: str, limits: JointLimits) -> JointLimits:
        bound: Bound | None = getattr(limits, FIELDS[limit])
        if bound is None or joint not in (None, name):
            return limits
        middle = (
            (bound.lo + bound.hi) / 2 if limit == "position" and math.isfinite(bound.hi - bound.lo) else 0.0
        )
        lo, hi = (middle + (side - middle) * factor for side in (bound.lo, bound.hi))
        changed: dict[str, Any] = {FIELDS[limit]: Bound(lo, hi, bound.source)}
        return replace(limits, **changed)

    return _with_limits(cell, scaled)


def with_bounds(cell: Cell, values: dict[tuple[str, str | None], float | None], source: str) -> Cell:
    """Limits by (limit, joint) set to ± a value; None takes a limit away. Joint None: the tool."""

    def changed(joint: str, limits: JointLimits) -> JointLimits:
        new: dict[str, Any] = {}
        for (limit, name), value in values.items():
            if name == joint and limit in FIELDS:
                new[FIELDS[limit]] = None if value is None else Bound(-value, value, source)
        return replace(limits, **new) if new else limits

    cell = _with_limits(cell, changed)
    if ("tool speed", None) in values:
        cap = values[("tool speed", None)]
        tool = replace(cell.tool, speed_m_s=cap) if cell.tool and cap is not None else None
        cell = replace(cell, tool=tool)
    return cell


def with_position_range(cell: Cell, joint: str, widen: float) -> Cell:
    """One joint's position range widened by `widen` rad (m) on either side."""

    def changed(name: str, limits: JointLimits) -> JointLimits:
        if name != joint or limits.position is None:
            return limits
        bound = limits.position
        return replace(limits, position=Bound(bound.lo - widen, bound.hi + widen, bound.source))

    return _with_limits(cell, changed)


def slower(cell: Cell, factor: float) -> Cell:
    """The same path in `factor` times the time."""
    assert cell.follow is not None
    log = cell.follow.commands
    stretched = replace(log, t_s=log.t_s[0] + (log.t_s - log.t_s[0]) * factor, twist=log.twist / factor)
    return replace(cell, follow=replace(cell.follow, commands=stretched))


def lighter(cell: Cell, factor: float) -> Cell:
    """Paddle and parts at `factor` times their mass, same shape."""
    paddle = cell.paddle
    given = paddle.inertia_kg_m2
    parts = tuple(
        replace(p, mass_kg=p.mass_kg * factor, inertia_kg_m2=tuple(i * factor for i in p.inertia_kg_m2))
        for p in paddle.parts
    )
    inertia = None if given is None else tuple(i * factor for i in given)
    return replace(
        cell, paddle=replace(paddle, mass_kg=paddle.mass_kg * factor, inertia_kg_m2=inertia, parts=parts)
    )


def started_at(cell: Cell, posture: tuple[float, ...]) -> Cell:
    """The cell with another start posture."""
    return replace(cell, arm=replace(cell.arm, start=posture))


def raised_base(cell: Cell, by_m: float) -> Cell:
    """The base moved along world z."""
    x, y, z = cell.arm.base.xyz_m
    return replace(cell, arm=replace(cell.arm, base=Pose((x, y, z + by_m), cell.arm.base.rpy_rad)))


def without_pose_gain(cell: Cell) -> Cell:
    """The log replayed as sent."""
    assert cell.follow is not None
    return replace(cell, follow=replace(cell.follow, pose_gain_per_s=0.0))


def _with_limits(cell: Cell, change: Callable[[str, JointLimits], JointLimits]) -> Cell:
    joints = tuple(replace(j, limits=change(j.name, j.limits)) for j in cell.arm.joints)
    return replace(cell, arm=replace(cell.arm, joints=joints))
