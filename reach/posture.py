"""Inverse kinematics: joint postures for a pose of the strike frame, from several seeded starts."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.arm import Arm
from reach.cell import Array
from reach.kinematics import logarithm

STARTS = 24  # seeded starts before a pose counts as not found
POSITION_TOLERANCE_M = 1e-7
TILT_TOLERANCE_RAD = 1e-6
SAME_POSTURE_RAD = 0.05  # solutions closer than this in every joint count as one
WIDE_RANGE_RAD = np.pi  # a joint without position limit is started within ± this


@dataclass(frozen=True, eq=False)
class Postures:
    """Postures (k, n) found for a pose, best first, and how they were looked for.

    Attributes
    ----------
    basis : "searched" or, where the pose lies farther than the links reach, "proved"
    text : the same in words
    """

    q: Array
    basis: str
    text: str


def reach_bound(arm: Arm) -> tuple[Array, float]:
    """First joint's origin (3,) in the world and the farthest that the links' lengths let the strike point be from it.

    A sliding joint adds its longest travel.
    """
    chain = arm.chain()
    length = float(np.linalg.norm(arm.face_placement()[1]))
    for i, (_, offset, _) in enumerate(chain):
        length += float(np.linalg.norm(offset)) if i > 0 else 0.0
        position = arm.spec.joints[i].limits.position
        if arm.sliding[i]:
            length += max(abs(position.lo), abs(position.hi)) if position else np.inf
    return chain[0][1], length


def postures(
    arm: Arm, position: Array, rotation: Array, near: Array | None = None, seed: int = 0, starts: int = STARTS
) -> Postures:
    """Postures inside the position limits that put the strike frame at a pose.

    Parameters
    ----------
    position : (3,) m ; rotation : (3, 3)
    near : (n,) posture to start from first; solutions are ordered by distance to it, else to mid-range

    Notes
    -----
    Bounded nonlinear least squares (scipy's trust-region reflective method, Branch, Coleman & Li 1999) from
    `near` and from uniform seeded starts.
    """
    from scipy.optimize import least_squares

    origin, length = reach_bound(arm)
    gap = float(np.linalg.norm(position - origin)) - length
    if gap > 0:
        text = f"the pose lies {gap:.3f} m farther from the first joint than the links reach ({length:.3f} m)"
        return Postures(np.empty((0, arm.n)), "proved", text)
    lo, hi, middle = _ranges(arm)
    rng = np.random.default_rng(seed)
    guesses = [np.clip(near if near is not None else middle, lo, hi)]
    guesses += list(
        rng.uniform(
            np.maximum(lo, middle - WIDE_RANGE_RAD),
            np.minimum(hi, middle + WIDE_RANGE_RAD),
            (starts - 1, arm.n),
        )
    )
    scale = np.r_[np.ones(3), np.full(3, max(length, 0.1))]

    def errors(q: Array) -> Array:
        p, axes = arm.pose(q)
        return np.asarray(np.r_[p - position, logarithm(axes @ rotation.T)] * scale)

    def slopes(q: Array) -> Array:
        return np.asarray(arm.jacobian(q)[2] * scale[:, None])

    found: list[Array] = []
    for guess in guesses:
        inside = np.clip(guess, lo + 1e-9, hi - 1e-9)
        answer = least_squares(
            errors, inside, slopes, bounds=(lo, hi), xtol=1e-14, ftol=1e-14, gtol=1e-14, max_nfev=200
        )
        miss = errors(answer.x) / scale
        if np.abs(miss[:3]).max() < POSITION_TOLERANCE_M and np.abs(miss[3:]).max() < TILT_TOLERANCE_RAD:
            if all(np.abs(answer.x - other).max() > SAME_POSTURE_RAD for other in found):
                found.append(answer.x)
    anchor = near if near is not None else middle
    found.sort(key=lambda q: float(np.abs(q - anchor).max()))
    text = f"searched from {len(guesses)} starts, {len(found)} postures found"
    return Postures(np.array(found).reshape(-1, arm.n), "searched", text)


def _ranges(arm: Arm) -> tuple[Array, Array, Array]:
    bounds = [joint.limits.position for joint in arm.spec.joints]
    lo = np.array([b.lo if b else -np.inf for b in bounds])
    hi = np.array([b.hi if b else np.inf for b in bounds])
    bounded = np.isfinite(lo) & np.isfinite(hi)
    with np.errstate(invalid="ignore"):
        middle = np.where(bounded, (lo + hi) / 2, 0.0)
    return lo, hi, middle
