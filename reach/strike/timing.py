"""The fastest double-S along given paths that surely keeps every limit: the quick, lower side of a strike's speed.

From rest the path coordinate gains speed with one acceleration and one jerk, holds the strike speed over the strike
window and slows down likewise. For a speed u the largest safe acceleration A over the stretch used is where a corner
{0, A} × {0, u²} of (s̈, ṡ²) meets the torque box; for shares of A the largest safe jerk follows from the torque rate

    |τ̇| <= |a| jerk + (|a'| + 2|b|) u A + |b'| u³ + |c'| u + losses' (|q'| A + |q''| u²)

and the stretch needed from both. The largest u whose stretch fits is found by bisection, for many strokes, shares and
stretches at once. Phase-plane bounds are Bobrow's (IJRR 4(3), 1985); the constant-jerk form is this project's own.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.path import Load

SHARES = np.array(
    [1.0, 0.85, 0.7, 0.55, 0.4, 0.25, 0.15]
)  # of the largest acceleration that is safe and left room
STRETCHES = (16, 13, 10, 7, 5, 3)  # last node of the stretch that may be used
BISECTIONS = 40
RESOLUTION = 1e-4  # of the speed
UNLIMITED = 1e9  # stands for "no limit known" in m/s² and m/s³ of the path
AT_REST = 1e-4  # m/s: a strike slower than this is none


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


def fastest(load: Load, distance: Array, window_s: float, ceiling: Array) -> Timing:
    """The fastest double-S of each stroke.

    Parameters
    ----------
    distance : (m, 2, k) of the nodes
    window_s : over which the speed is held around the strike
    ceiling : (m,) m/s, no speed above it is looked at (the upper bound in that posture)
    """
    m = len(ceiling)
    low, high = np.zeros((m, 2)), np.repeat(np.minimum(ceiling, UNLIMITED)[:, None], 2, axis=1)
    known = _fits(load, distance, high, window_s)[0]
    low = np.where(known, high, low)
    for _ in range(BISECTIONS):
        middle = (low + high) / 2
        going = high - low > RESOLUTION * high  # a stroke's answer does not depend on who shares its batch
        if not going.any():
            break
        fits = _fits(load, distance, middle, window_s)[0]
        low, high = np.where(fits & going, middle, low), np.where(fits | ~going, high, middle)
    speed = low.min(axis=1)
    speed[speed < AT_REST] = 0.0
    fits, acceleration, jerk = _fits(load, distance, np.repeat(speed[:, None], 2, axis=1), window_s)
    # A side that could be faster is timed anew for the common speed, which a uniform slowing shows to be safe.
    slow = speed[:, None] / np.maximum(low, AT_REST)
    again = _fits(load, distance, low, window_s)
    acceleration = np.where(fits, acceleration, again[1] * slow**2)
    jerk = np.where(fits, jerk, again[2] * slow**3)
    return Timing(speed, acceleration, jerk)


def stretch(speed: Array, acceleration: Array, jerk: Array) -> Array:
    """Way from rest to a speed with one acceleration and one jerk, both taken from and given back to zero."""
    with np.errstate(divide="ignore", invalid="ignore"):
        ramped = speed / 2 * (speed / acceleration + acceleration / jerk)
        pointed = speed * np.sqrt(speed / jerk)
    return np.asarray(np.where(speed >= acceleration**2 / jerk, ramped, pointed))


def _fits(
    load: Load, distance: Array, speed: Array, window_s: float
) -> tuple[NDArray[np.bool_], Array, Array]:
    """Whether each side (m, 2) fits a speed (m, 2), and the acceleration and jerk of its shortest stretch."""
    safe, room, drag = _safe(load, speed)
    # Gaining speed faster than this would use up some rate by itself and leave no jerk to get there.
    with np.errstate(divide="ignore", invalid="ignore"):
        spent = np.where(drag > 0, room / drag, np.inf).min(axis=3)
    safe = np.minimum(safe, np.minimum.accumulate(spent, axis=2))
    best = np.full(speed.shape, np.inf)
    acceleration, jerk = np.zeros(speed.shape), np.zeros(speed.shape)
    most_jerk = np.minimum(load.jerk, UNLIMITED)[:, None]
    hold = speed * window_s / 2
    for last in STRETCHES:
        top = safe[:, :, last]
        for share in SHARES:
            tried = share * top
            with np.errstate(invalid="ignore"):
                slack = (room[:, :, : last + 1] - drag[:, :, : last + 1] * tried[:, :, None, None]).min(
                    axis=(2, 3)
                )
            j = np.minimum(slack, most_jerk)
            good = (tried > 0) & (j > 0)
            way = stretch(speed, np.where(good, tried, 1.0), np.where(good, j, 1.0)) + hold
            good &= way <= distance[:, :, last]
            if last == STRETCHES[0] or good.any():
                good &= _fast_enough(load, distance, speed, tried, last)
            better = good & (way < best)
            best = np.where(better, way, best)
            acceleration, jerk = np.where(better, tried, acceleration), np.where(better, j, jerk)
    return np.isfinite(best), acceleration, jerk


def _fast_enough(load: Load, distance: Array, speed: Array, tried: Array, last: int) -> NDArray[np.bool_]:
    """Whether joints and tool may go as fast as the stroke does at each node; near its end it is slow."""
    left = distance[:, :, last, None] - distance[:, :, : last + 1]
    going = np.minimum(speed[:, :, None], np.sqrt(2 * np.maximum(tried, 0.0)[:, :, None] * left))
    return np.asarray((going <= load.fastest[:, :, : last + 1] * (1 + 1e-12)).all(axis=2))


def _safe(load: Load, speed: Array) -> tuple[Array, Array, Array]:
    """For a speed (m, 2): largest safe acceleration (m, 2, k) up to each node, and what is left of each row's rate
    over |a|, as room - drag · acceleration (m, 2, k, r)."""
    u = speed[:, :, None, None]
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
    room = (rate - spent) / size
    drag = ((np.abs(load.da) + 2 * np.abs(load.b)) * u + load.rub * load.turning) / size
    return np.minimum.accumulate(safe, axis=2), room, drag
