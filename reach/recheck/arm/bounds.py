"""What no motion passes: dual vectors as proofs of upper bounds, and refusals proved by links and levers alone."""

from __future__ import annotations

import math

import numpy as np

from reach.evidence.items import Check, Item
from reach.recheck import allowed
from reach.recheck.arm.chain import Array
from reach.recheck.arm.ground import Ground
from reach.recheck.stored import largest

VAST = 1e4  # rad/s or m/s: stands for a joint velocity without a limit
UNLIMITED_M_S = 100.0  # a strike speed above it counts as bounded by nothing
WAYS = ("still", "free")  # the paddle does not turn at the strike, or it may
DUAL = 1e-9  # of a dual vector: its product with the direction is 1, its part on open rates 0
FACE_RAD = 1e-6  # of the face in a posture found: searches end at 1e-9 m on the paddle, which may have 1 mm


def bound_item(
    ground: Ground,
    where: str,
    disc: bool,
    strike: tuple[Array, Array, Array],
    proofs: dict[str, tuple[Array, Array, float]],
) -> Item:
    """Whether the stored dual vectors prove both bounds in the stored postures.

    By weak duality any vector λ on the rows that a strike fixes, with λ·d = 1 on the direction, proves that its speed
    is at most Σ max(hi y, lo y), y = Jᵀλ (D. Bertsimas and J. Tsitsiklis, Introduction to Linear Optimization, 1997,
    theorem 4.3, from memory). Rows that are left open must have no part in λ: the spin of a disc about its normal, and
    all turning where the paddle may turn.

    Parameters
    ----------
    disc : whether the paddle may spin about its normal
    strike : position, normal and direction (3,)
    proofs : by way of striking posture (n,), dual vector (6,) and bound along the normal in m/s
    """
    position, normal, direction = strike
    checks = []
    for way in WAYS:
        q, dual, bound = proofs[way]
        place, axes, jacobian = ground.chain.jacobian(q)
        y = jacobian.T @ dual
        lo, hi = velocity_box(ground, q)
        value = float(np.maximum(hi * y, lo * y).sum())
        value = math.inf if value > UNLIMITED_M_S else value
        ours = min(value, cap_m_s(ground)) * float(direction @ normal)
        off = 0.0 if ours == bound else abs(ours - bound)
        loose = dual[3:] if way == "free" else np.atleast_1d(dual[3:] @ axes[:, 2] if disc else 0.0)
        checks += [
            Check(f"bound {way}", off, allowed.SPEED_M_S, "m/s"),
            Check(f"dual {way}", abs(float(dual[:3] @ direction) - 1), DUAL, "1"),
            Check(f"dual {way} on open rates", largest(loose), DUAL, "m"),
            Check(f"posture {way}, place", largest(place - position), allowed.PLACE_M, "m"),
            Check(f"posture {way}, normal", largest(axes[:, 2] - normal), FACE_RAD, "rad"),
            _inside(ground, f"posture {way}, travel", q),
        ]
    return Item("bound", where, tuple(checks))


def velocity_box(ground: Ground, q: Array) -> tuple[Array, Array]:
    """Joint velocities (n,) that a motion from rest to rest can have in a posture (n,), margins kept back.

    Within the velocity limit, and |v| <= √(2 a · travel): forward it is gained after the low end and lost before the
    high one, backward the other way round.
    """
    slow, fast = _kept(ground, "velocity")
    back, push = _kept(ground, "acceleration")
    low, high = ends(ground)
    with np.errstate(invalid="ignore"):
        gained = np.where(np.isfinite(push), push * np.maximum(q - low, 0.0), np.inf)
        lost = np.where(np.isfinite(back), -back * np.maximum(high - q, 0.0), np.inf)
    most = np.sqrt(2 * np.minimum(gained, lost))
    return np.maximum(np.maximum(slow, -VAST), -most), np.minimum(np.minimum(fast, VAST), most)


def ends(ground: Ground) -> tuple[Array, Array]:
    """Kept-back ends of travel (n,), infinite where there are none."""
    margins = [float(ground.margins[key]) for key in ("position_rad", "position_m")]
    margin = np.where(ground.sliding, margins[1], margins[0])
    low, high = _open(ground, "position")
    return low + margin, high - margin


def cap_m_s(ground: Ground) -> float:
    """The tool's kept-back cap."""
    return ground.tool_m_s * (1 - float(ground.margins["velocity_share"]))


def reach_item(ground: Ground, where: str, position: Array) -> Item:
    """Whether a point is farther from the first joint than the links' lengths add up to."""
    first, longest = ground.chain.reach(*_open(ground, "position"))
    gap = float(np.linalg.norm(position - first)) - longest
    return Item("reach proof", where, (Check("beyond the links", max(-gap, 0.0), allowed.PLACE_M, "m"),))


def speed_item(ground: Ground, where: str, strike: tuple[Array, Array, Array], required: float) -> Item:
    """Whether joint speeds times levers, or the tool's cap, stay below what is required in any posture at all."""
    position, normal, direction = strike
    most = min(covering_m_s(ground, position, direction), cap_m_s(ground)) * float(direction @ normal)
    over = max(most - required, 0.0) if math.isfinite(most) else math.inf
    return Item("speed proof", where, (Check("levers and cap", over, allowed.SPEED_M_S, "m/s"),))


def covering_m_s(ground: Ground, position: Array, direction: Array) -> float:
    """A speed along a direction at a point that no posture passes: every joint's speed times its longest lever.

    The first joint's axis is fixed, so its lever is known; another's is no longer than the links beyond it. A sliding
    joint adds its speed.
    """
    slow, fast = _kept(ground, "velocity")
    speeds = np.maximum(fast, -slow)
    levers = ground.chain.lengths(*_open(ground, "position"))
    place, axis = ground.chain.first()
    levers[0] = abs(float(np.cross(axis, position - place) @ direction))
    levers = np.where(ground.sliding, 1.0, levers)
    terms = [0.0 if lever == 0 else speed * lever for speed, lever in zip(speeds, levers, strict=True)]
    return float(sum(terms))


def _inside(ground: Ground, name: str, q: Array) -> Check:
    low, high = ends(ground)
    past = np.maximum(np.maximum(low - q, q - high), 0.0)
    worst = int(np.argmax(past))
    return Check(name, float(past[worst]), allowed.PLACE_M, ("rad", "m")[bool(ground.sliding[worst])])


def _kept(ground: Ground, kind: str) -> tuple[Array, Array]:
    """Both sides (n,) of a limit less its margin."""
    keep = 1 - float(ground.margins[f"{kind}_share"])
    low, high = _open(ground, kind)
    return low * keep, high * keep


def _open(ground: Ground, kind: str) -> tuple[Array, Array]:
    """Both stated sides (n,) of a limit, infinite where they are unknown."""
    low, high = ground.limits.lo[kind], ground.limits.hi[kind]
    return np.where(np.isnan(low), -np.inf, low), np.where(np.isnan(high), np.inf, high)
