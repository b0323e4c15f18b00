"""A hinge whose every motion has a closed form, logs for it, and logs from a given joint motion for any arm."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from typing import Any

import numpy as np
from builders import WEIGHTLESS, Body, chain_arm, turn

from reach.arm import Arm
from reach.cell import Accept, Array, Bound, Cell, CommandLog, Follow, JointLimits, SolverSpec

LENGTH_M = 0.5
MASS_KG = 1.0
INERTIA_KG_M2 = MASS_KG * LENGTH_M**2
UPRIGHT = np.array([0.0, 0.0, 1.0])
LEVEL = np.array([0.0, -1.0, 0.0])  # a positive angle raises the arm
WIDE = Accept(strike_tilt_error_rad=0.2, strike_lateral_m_s=0.2)


def limits(**values: float | tuple[float, float]) -> JointLimits:
    """Joint limits ± a value, or (lo, hi); what is left out is unknown."""
    bounds = {
        name: Bound(*(value if isinstance(value, tuple) else (-value, value)), "invented")
        for name, value in values.items()
    }
    return JointLimits(**bounds)


def hinge(known: JointLimits | None = None, axis: Array = UPRIGHT, start: float = 0.0, **more: Any) -> Cell:
    """A point mass on a massless link about one axis through the origin, stretched along x at zero.

    About the upright axis no torque is needed to stand. The face looks where a positive angle moves it. A second joint
    spins the paddle about its normal; it carries nothing but its rotor, as much as the first one carries, and has the
    first one's limits, and no command asks it to move. The null-space return is off.
    """
    known = known or JointLimits()
    axes = turn(np.array([1.0, 0.0, 0.0]), -np.pi / 2) if axis is UPRIGHT else np.eye(3)
    tip = np.array([LENGTH_M, 0.0, 0.0])
    bodies = [Body(np.zeros(3), axis, MASS_KG, tip), Body(tip, axes[:, 2])]
    spin = replace(known, armature=INERTIA_KG_M2)
    spec = chain_arm(bodies, np.zeros(3), axes, [known, spin])
    spec = replace(spec, start=(start, 0.0), start_velocity=(more.pop("start_velocity", 0.0), 0.0))
    settings: dict[str, Any] = {"period_s": 0.001, "solver": SolverSpec(posture_gain_per_s=0.0), **more}
    return Cell("built", spec, WEIGHTLESS, **settings)


def hinge_twist(cell: Cell, speed_rad_s: Array) -> Array:
    """Twists (N, 6) of the hinge's own motion, paddle axes, strike point."""
    arm = Arm(cell.arm, cell.paddle)
    _, axes, jacobian = arm.jacobian(np.zeros(2))
    own = np.concatenate([axes.T @ jacobian[:3, 0], axes.T @ jacobian[3:, 0]])
    return np.asarray(np.outer(speed_rad_s, own))


def hinge_log(cell: Cell, t_s: Array, speed_rad_s: Array, strike: Array | None = None, **follow: Any) -> Cell:
    """The hinge with a log of its own motion at the given speeds; `strike` marks rows."""
    log = CommandLog(t_s, hinge_twist(cell, speed_rad_s), strike, source="made by the test")
    return replace(cell, follow=Follow("paddle", "strike", log, **follow))


def bump(peak: float, lasts_s: float, period_s: float = 0.001) -> tuple[Array, Array, Array]:
    """Times, speeds peak sin²(pi t / T) and marks of one bump, its contact at the top."""
    count = round(lasts_s / period_s)
    t = period_s * np.arange(count + 1)
    return t, peak * np.sin(np.pi * t / lasts_s) ** 2, np.arange(count + 1) == count // 2


def along(
    cell: Cell,
    path: Callable[[Array], Array],
    speed: Callable[[Array], Array],
    t_s: Array,
    strike: Array | None = None,
    **follow: Any,
) -> Cell:
    """A cell whose log is the strike point's twist, world axes, of a joint motion q(t), v(t): (N,) -> (N, n)."""
    arm = Arm(cell.arm, cell.paddle)
    twist = np.array([arm.jacobian(q)[2] @ v for q, v in zip(path(t_s), speed(t_s), strict=True)])
    log = CommandLog(t_s, twist, strike, source="made by the test")
    first = tuple(float(x) for x in path(t_s[:1])[0])
    arm_spec = replace(cell.arm, start=first)
    return replace(cell, arm=arm_spec, follow=Follow("world", "strike", log, **follow))


def one_joint(cell: Cell, joint: int, peak: float, lasts_s: float, start: Array, **follow: Any) -> Cell:
    """A log that takes one joint alone through a bump of speed, the others at rest; contact at the top."""
    t, _, marks = bump(peak, lasts_s)
    unit = np.eye(len(start))[joint]

    def path(at: Array) -> Array:
        way = peak * (at / 2 - lasts_s / (4 * np.pi) * np.sin(2 * np.pi * at / lasts_s))
        return np.asarray(start + np.outer(way, unit))

    def speed(at: Array) -> Array:
        return np.outer(peak * np.sin(np.pi * at / lasts_s) ** 2, unit)

    return along(cell, path, speed, t, marks, interpolation="linear", **follow)


def limited(cell: Cell, joint: int, **values: float | tuple[float, float]) -> Cell:
    """The cell with some limits of one joint replaced."""
    given = limits(**values)
    changed = {name: getattr(given, name) for name in values}
    joints = list(cell.arm.joints)
    joints[joint] = replace(joints[joint], limits=replace(joints[joint].limits, **changed))
    return replace(cell, arm=replace(cell.arm, joints=tuple(joints)))


def unlimited(cell: Cell) -> Cell:
    """The cell with nothing known about its joints' limits, friction and rotor inertia."""
    joints = tuple(replace(j, limits=JointLimits()) for j in cell.arm.joints)
    return replace(cell, arm=replace(cell.arm, joints=joints))
