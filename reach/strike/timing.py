"""The fastest double-S along given paths that surely keeps every limit: the quick, lower side of a strike's speed.

From rest the path coordinate gains speed with one acceleration A and one jerk j, holds the strike speed over the
strike window and slows down likewise. For a speed u the largest safe A over the stretch used is where a corner
{0, A} × {0, u²} of (s̈, ṡ²) meets the torque box; the jerk is what the torque rate leaves at every node,

    |τ̇| <= |a| j + (|a'| + 2|b|) u A + |b'| u³ + |c'| u + losses' (|q'| A + |q''| u²)

that is j <= room - drag A. A stretch L asks for j >= u A² / (2 L A - u²), where u² / 2L < A <= u² / L. The two meet in
a quadratic of A, so each row leaves an interval of A, and a speed fits where the intervals have a point in common:
exact, and never narrower where a limit is looser or the speed lower. The largest u that fits is found by bisection,
for many strokes and stretches at once. Phase-plane bounds are Bobrow's (IJRR 4(3), 1985); the constant-jerk form is
this project's own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.path import NODES, Load

STRETCHES = np.array([16, 13, 10, 7, 5, 3])  # last node of the stretch that may be used
WITHIN = np.arange(NODES) <= STRETCHES[:, None]  # (stretches, nodes)
BISECTIONS = 40
RESOLUTION = 1e-5  # of the speed
UNLIMITED = 1e9  # stands for "no limit known" in m/s² and m/s³ of the path
ENDLESS = 1e30  # m/s³: room of a row without a limit; its square is still a number
AT_REST = 1e-4  # m/s: a strike slower than this is none
BLOCK = 64  # strokes at once


@dataclass(frozen=True, eq=False)
class Timing:
    """Double-S timings of m strokes.

    Attributes
    ----------
    speed : (m,) strike speed along the path, m/s; 0 where none is safe
    acceleration, jerk : (m, 2) of the run-up and of the follow-through
    """

    speed: Array
    acceleration: Array
    jerk: Array


def fastest(
    load: Load, distance: Array, window_s: float, ceiling: Array, floor: Array | None = None
) -> Timing:
    """The fastest double-S of each stroke.

    Parameters
    ----------
    distance : (m, 2, k) of the nodes
    window_s : over which the speed is held around the strike
    ceiling : (m,) m/s, no speed above it is looked at (the upper bound in that posture)
    floor : (m,) m/s, a stroke that can't go as fast comes back with speed 0
    """
    m = len(ceiling)
    least = np.full(m, AT_REST) if floor is None else np.maximum(floor, AT_REST)
    out = Timing(np.zeros(m), np.zeros((m, 2)), np.zeros((m, 2)))
    for k in range(0, m, BLOCK):
        rows = np.flatnonzero(least[k : k + BLOCK] <= ceiling[k : k + BLOCK]) + k
        if len(rows):
            rows = rows[_fits(load.take(rows), distance[rows], least[rows], window_s)]
        if len(rows):
            some, nodes = load.take(rows), distance[rows]
            speed = _bisected(some, nodes, window_s, least[rows], np.minimum(ceiling[rows], UNLIMITED))
            out.speed[rows] = speed
            out.acceleration[rows], out.jerk[rows] = _chosen(some, nodes, speed, window_s)
    return out


def stretch(speed: Array, acceleration: Array, jerk: Array) -> Array:
    """Way from rest to a speed with one acceleration and one jerk, both taken from and given back to zero."""
    with np.errstate(divide="ignore", invalid="ignore"):
        ramped = speed / 2 * (speed / acceleration + acceleration / jerk)
        pointed = speed * np.sqrt(speed / jerk)
    return np.asarray(np.where(speed >= acceleration**2 / jerk, ramped, pointed))


def _bisected(load: Load, distance: Array, window_s: float, low: Array, high: Array) -> Array:
    """The largest speeds (m,) that fit, between ones that do and ones not to be passed."""
    low = np.where(_fits(load, distance, high, window_s), high, low)
    for _ in range(BISECTIONS):
        going = high - low > RESOLUTION * high  # a stroke's answer does not depend on who shares its batch
        if not going.any():
            break
        middle = (low + high) / 2
        fits = _fits(load, distance, middle, window_s)
        low, high = np.where(fits & going, middle, low), np.where(fits | ~going, high, middle)
    return low


def _fits(load: Load, distance: Array, speed: Array, window_s: float) -> NDArray[np.bool_]:
    """Whether both sides of each stroke (m,) fit a speed (m,)."""
    low, high = _accelerations(load, distance, speed, window_s)[:2]
    each = np.asarray((low <= high).any(axis=2))
    return np.asarray(each.all(axis=1))


def _chosen(load: Load, distance: Array, speed: Array, window_s: float) -> tuple[Array, Array]:
    """Acceleration and jerk (m, 2) of strokes at speeds (m,) that fit: of all stretches, the shortest way."""
    low, high, room, drag = _accelerations(load, distance, speed, window_s)
    fits = low <= high
    middle = np.sqrt(np.where(fits, low, 0.0) * high)
    slack = room[:, :, None] - drag[:, :, None] * middle[..., None, None]
    jerk = np.where(WITHIN[:, :, None], slack, _most_jerk(load)[:, None, None, None, None]).min(axis=(3, 4))
    jerk = np.minimum(jerk, _most_jerk(load)[:, None, None])
    good = fits & (jerk > 0)
    way = np.where(
        good, stretch(speed[:, None, None], np.where(good, middle, 1.0), np.where(good, jerk, 1.0)), np.inf
    )
    best = np.argmin(way, axis=2)[:, :, None]
    return np.take_along_axis(middle, best, 2)[:, :, 0], np.take_along_axis(jerk, best, 2)[:, :, 0]


def _accelerations(
    load: Load, distance: Array, speed: Array, window_s: float
) -> tuple[Array, Array, Array, Array]:
    """With which accelerations a speed (m,) is gained, each side and stretch by itself.

    Returns
    -------
    low, high : (m, 2, stretches) least and largest one; the least is above the largest where there is none
    room, drag : (m, 2, k, r) of the jerk at each node
    """
    u = speed[:, None, None]
    safe, room, drag = _safe(load, speed)
    way = distance[:, :, STRETCHES] - u * window_s / 2
    none = way <= 0
    way = np.where(none, 1.0, way)
    low, high = _interval(u, way, _most_jerk(load)[:, None, None], np.zeros((1, 1, 1)))
    u_row = u[..., None]
    for i, last in enumerate(STRETCHES):
        part = slice(None), slice(None), slice(last + 1)
        least, largest = _interval(u_row, way[:, :, i, None, None], room[part], drag[part])
        low[:, :, i] = np.maximum(low[:, :, i], least.max(axis=(2, 3)))
        high[:, :, i] = np.minimum(high[:, :, i], largest.min(axis=(2, 3)))
    high = np.minimum.reduce([high, u**2 / way, safe[:, :, STRETCHES], _slow_enough(load, distance, speed)])
    return np.where(none, np.inf, low), np.where(none, 0.0, high), room, drag


def _interval(u: Array, way: Array, room: Array, drag: Array) -> tuple[Array, Array]:
    """Least and largest A with (room - drag A) (2 way A - u²) >= u A², both brackets positive; inf and 0 where none."""
    bend = 2 * way * drag + u
    half = way * room + drag * (u**2 / 2)
    last = room * u**2
    square = half**2 - bend * last
    with np.errstate(invalid="ignore", divide="ignore"):
        top = half + np.sqrt(square)
        largest, least = top / bend, last / top
        good = (room > 0) & (2 * way * largest > u**2)  # nan where the square is negative
    return np.where(good, least, np.inf), np.where(good, largest, 0.0)


def _slow_enough(load: Load, distance: Array, speed: Array) -> Array:
    """Largest acceleration (m, 2, stretches) with which a stroke, near its end, is as slow as joints and tool must be.

    So far from its end it goes at √(2 A · way) or at its full speed.
    """
    top = np.full((*distance.shape[:2], len(STRETCHES)), np.inf)
    at = np.nonzero(speed[:, None, None] > load.fastest * (1 + 1e-12))
    if len(at[0]):
        left = distance[at[0], at[1]][:, STRETCHES] - distance[at][:, None]
        with np.errstate(divide="ignore"):
            most = np.where(left > 0, load.fastest[at][:, None] ** 2 / (2 * left), np.inf)
        np.minimum.at(top, at[:2], most)
    return top


def _most_jerk(load: Load) -> Array:
    return np.minimum(load.jerk, UNLIMITED)


def _safe(load: Load, speed: Array) -> tuple[Array, Array, Array]:
    """For a speed (m,): largest safe acceleration (m, 2, k) up to each node, and what is left of each row's rate over
    |a|, as room - drag · acceleration (m, 2, k, r)."""
    u = speed[:, None, None, None]
    lo, hi, rate = (side[:, None, None, :] for side in (load.lo, load.hi, load.rate))
    rubbing = load.viscous * u + load.dry
    curve = load.b * u**2
    above = hi - load.c - np.maximum(curve, 0.0) - np.maximum(rubbing, 0.0)
    below = load.c + np.minimum(curve, 0.0) + np.minimum(rubbing, 0.0) - lo
    size = np.maximum(np.abs(load.a), 1e-12)
    push = load.a * np.array([1.0, -1.0])[None, :, None, None]  # s̈ >= 0 before the strike, <= 0 after it
    with np.errstate(invalid="ignore"):
        own = np.where(push > 0, above, below) / size
        own = np.where((above < 0) | (below < 0), -1.0, own)
    safe = np.minimum(own.min(axis=3), np.minimum(load.acceleration, UNLIMITED)[:, None, None])
    spent = np.abs(load.db) * u**3 + np.abs(load.dc) * u + load.rub * load.bending * u**2
    drag = ((np.abs(load.da) + 2 * np.abs(load.b)) * u + load.rub * load.turning) / size
    known = np.isfinite(rate)
    room = np.where(known, (rate - spent) / size, ENDLESS)
    return np.minimum.accumulate(safe, axis=2), room, np.where(known, drag, 0.0)
