"""Postures for striking around a centre, and the joint velocities of strikes there."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.bound import maximisers, strike_rows, upper_bounds
from reach.strike.setting import Setting
from reach.strike.sides import alone, promise, upper
from reach.survey.family import Folds
from reach.survey.inverse import Library, from_library, reach_strikes, strike_errors
from reach.survey.selfmotion import improved

BY_PROMISE = 4  # stances by what to expect of them, and one more of each other family
WEIGHTED_STEPS = 4  # toward a strike, each joint by what it can do, before the plain ones
STEPS = 20  # of inverse kinematics from a stance to a strike near it
RIDGE = 1e-9  # of the rows' mean square, so that a singular posture gives a finite answer
STILL_RAD_S = (
    0.2  # a paddle that turns no faster counts as still at a strike: by a tenth of a degree in 10 ms
)
SAME = 0.05  # rad or m: closer in every joint, two stances are one
UP = np.array([[0.0, 0.0, 1.0]])


def stances(setting: Setting, folds: Folds, library: Library, point: Array, near: Array | None) -> Array:
    """Postures (k, n) that put a level face at a strike point (3,), most promising first.

    Parameters
    ----------
    near : (n,) a posture of the user's, whose nearest solution comes along
    """
    place = point[None]
    found, _ = from_library(setting, library, place, UP, deep=True)
    if not len(found.q):
        return found.q
    moved = improved(setting, found, place, UP, UP, count=12).found
    q = np.concatenate([moved.q, found.q])
    direction = np.repeat(UP, len(q), axis=0)
    hope = promise(setting, upper(setting, q, direction), q, direction, direction)
    q = q[np.argsort(-hope, kind="stable")]
    picked = list(range(min(BY_PROMISE, len(q))))
    _, first = np.unique(folds.numbers(q), return_index=True)
    picked += [k for k in sorted(first.tolist()) if k not in picked]
    chosen = q[picked]
    if near is not None:
        own, met = reach_strikes(setting, near[None], place, UP, STEPS)
        chosen = np.concatenate([own[met], chosen])
    return _distinct(chosen)


def _distinct(q: Array) -> Array:
    kept: list[int] = []
    for k in range(len(q)):
        if all(np.abs(q[k] - q[other]).max() > SAME for other in kept):
            kept.append(k)
    return q[kept]


def postures(
    setting: Setting, stance: Array, point: Array, normal: Array, gain: Array
) -> tuple[Array, NDArray[np.bool_]]:
    """Postures (m, n) near a stance (n,) for strikes (m, 3), (m, 3), and which are met.

    Joints go there in proportion to what they can do: Newton steps least in √Σ (Δq / gain)² with accelerations (n,).
    """
    lo, hi = setting.ends
    q = np.repeat(stance[None], len(point), axis=0)
    for _ in range(WEIGHTED_STEPS):
        rows, error = strike_errors(setting.chain, q, point, normal, setting.length_m)
        q = np.clip(q + _least_gained(rows, error, gain), lo, hi)
    return reach_strikes(setting, q, point, normal, STEPS)


def _least_gained(rows: Array, target: Array, gain: Array) -> Array:
    """Joint values (m, n) that the rows (m, r, n) make into targets (m, r), least in √Σ (value / gain)²."""
    scaled = rows * gain
    gram = scaled @ scaled.transpose(0, 2, 1)
    ridge = RIDGE * np.trace(gram, axis1=1, axis2=2)
    gram[:, range(gram.shape[1]), range(gram.shape[1])] += ridge[:, None]
    return np.asarray(
        gain * np.einsum("mrn,mr->mn", scaled, np.linalg.solve(gram, target[:, :, None])[:, :, 0])
    )


def velocities(setting: Setting, q: Array, normal: Array, speed_m_s: Array, gain: Array) -> Array:
    """Joint velocities (m, n) of strikes along normals (m, 3) at speeds (m,) in postures (m, n), no turning.

    Those for which the joints need the least time, √Σ (v / gain)² with the accelerations (n,) that each has by itself;
    where that passes a joint's velocity limit, those of the upper bound.
    """
    _, rotation, jacobian = setting.chain.jacobians(q)
    rows = strike_rows(jacobian, rotation, setting.spin_free, setting.length_m)
    target = np.zeros((len(q), rows.shape[1]))
    target[:, :3] = normal * speed_m_s[:, None]
    v = _least_gained(rows, target, gain)
    velocity = setting.limits["velocity"]
    over = np.flatnonzero(((v > velocity.kept_hi) | (v < velocity.kept_lo)).any(axis=1))
    if len(over):
        lo, hi = setting.velocities(q[over])
        bounds = upper_bounds(rows[over], normal[over], lo, hi)
        most = maximisers(rows[over], normal[over], lo, hi, bounds)
        with np.errstate(divide="ignore", invalid="ignore"):
            other = most * (speed_m_s[over] / bounds.speed)[:, None]
        usable = np.isfinite(other).all(axis=1)
        v[over[usable]] = other[usable]
    return np.asarray(v)


def gains(setting: Setting, stance: Array) -> Array:
    """Acceleration (n,) that each joint could have by itself in a stance (n,)."""
    return np.asarray(alone(setting, stance[None])[0])
