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

FAST_SHARE = 0.9  # of the peak or of the cap: periods from there on are looked at finely


@dataclass(frozen=True, eq=False)
class Measured:
    """A motion with its torques, the strike point's path, and every limit's use.

    Attributes
    ----------
    fine : Fine
    torque : (m, n) at the motion's rows
    position (m, 3), rotation (m, 3, 3), twist (m, 6) : strike point at the motion's rows
    uses : tuple of Use, demand_peak not yet filled in (nan)
    rms_torque : (n,)
    """

    fine: Fine
    torque: Array
    position: Array
    rotation: Array
    twist: Array
    uses: tuple[Use, ...]
    rms_torque: Array


def measure(arm: Arm, chain: Chain, limits: dict[str, Limit], motion: Motion) -> Measured:
    """Measure a finished motion.

    Every limit kind gives its values on the fine grid; each joint's peak is the value of largest use.
    """
    t, q, v, a = motion.fine()
    torque = arm.torque(q, v, a)
    before = arm.torque(motion.q[:1], motion.v[:1], np.zeros((1, arm.n)))[0]
    position, rotation, twist = chain.twists(motion.q, motion.v)
    fine = Fine(
        t, q, v, a, torque, _speed(chain, limits, q, v, twist), FINE, np.zeros(arm.n), before, motion.period_s
    )
    uses = tuple(use for limit in limits.values() for use in limit_uses(limit, fine, len(motion.q)))
    rms = np.sqrt(np.mean(fine.torque**2, axis=0))
    return Measured(fine, fine.torque[::FINE], position, rotation, twist, uses, rms)


def base_load(arm: Arm, motion: Motion) -> BaseLoad:
    """What the moving part puts on its stand at most, over the motion's rows."""
    wrench = arm.base_wrench(motion.q, motion.v, motion.a)
    return BaseLoad(*(float(np.sqrt((part**2).sum(1).max())) for part in (wrench[:, :3], wrench[:, 3:])))


def _speed(chain: Chain, limits: dict[str, Limit], q: Array, v: Array, twist: Array) -> Array:
    """Speed (f,) of the strike point on the fine grid; far from any peak a row's own speed for its period."""
    rows = np.linalg.norm(twist[:, :3], axis=1)
    fine = np.repeat(rows, FINE)[: len(q)]
    cap = limits["tool speed"].hi[0]
    close = np.flatnonzero(fine >= FAST_SHARE * min(rows.max(), cap))
    fine[close] = np.linalg.norm(chain.twists(q[close], v[close])[2][:, :3], axis=1)
    return np.asarray(fine)


def limit_uses(limit: Limit, fine: Fine, rows: int) -> list[Use]:
    """A limit's use by each joint of a motion of `rows` control rows."""
    values = limit.measure(fine)
    share = limit.utilisation(values)
    unbounded = limit.known & np.isinf(limit.hi) & np.isinf(limit.lo)
    strength = np.where(np.isnan(share) | unbounded, np.abs(values), share)
    uses = []
    for i, joint in enumerate(limit.joints):
        at = int(np.argmax(strength[:, i]))
        worst = _largest_in_period(values[:, i], strength[:, i], fine.per_period, rows)
        known = bool(limit.known[i])
        uses.append(
            Use(
                limit.name,
                joint,
                limit.joint_units[i],
                lo=float(limit.lo[i]) if known else None,
                hi=float(limit.hi[i]) if known else None,
                kept_lo=float(limit.kept_lo[i]) if known else None,
                kept_hi=float(limit.kept_hi[i]) if known else None,
                source=limit.sources[i],
                peak=float(values[at, i]),
                time_s=None if limit.family == "none" else float(fine.t_s[at]),
                utilisation=None if not known else 0.0 if unbounded[i] else float(share[at, i]),
                demand_peak=np.nan,
                series=worst,
            )
        )
    return uses


def _largest_in_period(values: Array, strength: Array, per_period: int, rows: int) -> Array:
    """Value of largest strength in each control period, shape (rows,); the last row stands alone."""
    whole = (rows - 1) * per_period
    blocks = strength[:whole].reshape(rows - 1, per_period)
    pick = np.argmax(blocks, axis=1) + per_period * np.arange(rows - 1)
    return np.append(values[pick], values[whole])
