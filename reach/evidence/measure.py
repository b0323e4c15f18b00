"""Exact measures of a finished motion, on a grid four times finer than the control: what the verdict rests on."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.arm import Arm
from reach.cell import Array
from reach.evidence.motion import FINE, Motion
from reach.evidence.record import BaseLoad, Use
from reach.kinematics import Chain
from reach.limits.base import Fine, Limit


@dataclass(frozen=True, eq=False)
class Measured:
    """A motion with its torques, the strike point's path, and every limit's use.

    Attributes
    ----------
    fine : Fine
    torque : (m, n) at the motion's rows
    position (m, 3), rotation (m, 3, 3), twist (m, 6) : strike point at the motion's rows
    uses : tuple of Use, demand_peak not yet filled in (nan)
    base_load : BaseLoad
    rms_torque : (n,)
    """

    fine: Fine
    torque: Array
    position: Array
    rotation: Array
    twist: Array
    uses: tuple[Use, ...]
    base_load: BaseLoad
    rms_torque: Array


def refine(arm: Arm, chain: Chain, motion: Motion) -> tuple[Fine, Array, Array, Array]:
    """The fine grid of a motion, with strike points (f, 3), paddle axes (f, 3, 3) and base wrench (f, 6)."""
    t, q, v, a = motion.fine()
    torque, wrench = arm.torque_and_base_load(q, v, a)
    position, rotation, twist = chain.twists(q, v)
    before = arm.torque(motion.q[:1], motion.v[:1], np.zeros((1, arm.n)))[0]
    fine = Fine(t, q, v, a, torque, twist, FINE, np.zeros(arm.n), before, motion.period_s)
    return fine, position, rotation, wrench


def measure(arm: Arm, chain: Chain, limits: dict[str, Limit], motion: Motion) -> Measured:
    """Measure a finished motion.

    Every limit kind gives its values on the fine grid; each joint's peak is the value of largest use. Base
    load is that of the moving part on the stand, the opposite of what holds it.
    """
    fine, position, rotation, wrench = refine(arm, chain, motion)
    uses = tuple(use for limit in limits.values() for use in limit_uses(limit, fine, len(motion.q)))
    load = BaseLoad(
        float(np.linalg.norm(wrench[:, :3], axis=1).max()), float(np.linalg.norm(wrench[:, 3:], axis=1).max())
    )
    rms = np.sqrt(np.mean(fine.torque**2, axis=0))
    rows = slice(None, None, FINE)
    return Measured(fine, fine.torque[rows], position[rows], rotation[rows], fine.twist[rows], uses, load, rms)


def limit_uses(limit: Limit, fine: Fine, rows: int) -> list[Use]:
    """A limit's use by each joint of a motion of `rows` control rows."""
    values = limit.measure(fine)
    share = limit.utilisation(values)
    strength = np.where(np.isnan(share), np.abs(values), share)
    starts = np.minimum(np.arange(rows) * fine.per_period, len(values) - 1)
    uses = []
    for i, joint in enumerate(limit.joints):
        at = int(np.argmax(strength[:, i]))
        worst = _largest_in_period(values[:, i], strength[:, i], fine.per_period, rows)
        known = bool(limit.known[i])
        unbounded = known and np.isinf(limit.hi[i]) and np.isinf(limit.lo[i])
        uses.append(
            Use(
                limit.name,
                joint,
                limit.joint_units[i],
                *(
                    float(bound[i]) if known else None
                    for bound in (limit.lo, limit.hi, limit.kept_lo, limit.kept_hi)
                ),
                limit.sources[i],
                float(values[at, i]),
                float(fine.t_s[at]),
                None if not known else 0.0 if unbounded else float(share[at, i]),
                np.nan,
                worst[: len(starts)],
            )
        )
    return uses


def _largest_in_period(values: Array, strength: Array, per_period: int, rows: int) -> Array:
    """Value of largest strength in each control period, shape (rows,); the last row stands alone."""
    whole = (rows - 1) * per_period
    blocks = strength[:whole].reshape(rows - 1, per_period)
    pick = np.argmax(blocks, axis=1) + per_period * np.arange(rows - 1)
    return np.append(values[pick], values[whole])
