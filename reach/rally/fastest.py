"""What no motion between two joint states passes: each joint by itself, by its speed and acceleration alone.

A joint that goes from one speed to another in a given time covers at most what it does by gaining speed, cruising at
its limit and braking, and at least what it does the other way round; any way between, and nothing beyond (time-optimal
control of a double integrator with bounded speed: A. E. Bryson and Y.-C. Ho, Applied Optimal Control, 1975, section
3.9). So times in which it gets there have a gap: a joint that must be where it was with the speed that it had is there
at once, or after it has gone back and come again.
"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.rally.quintic import States
from reach.strike.setting import Setting

UNLIMITED = 1e9  # stands for "no limit known", per s and per s²
ROUNDING = 1e-9  # of a way or a time


def shortest_s(setting: Setting, begin: States, end: States) -> Array:
    """Shortest time (m, n) in s in which each joint by itself gets from states to states (m, n).

    Kept-back limits count; a joint whose acceleration nobody stated changes its velocity at once.
    """
    return np.asarray(np.fmin(*_extreme_times(setting, begin, end)))


def settled_s(setting: Setting, begin: States, end: States) -> Array:
    """Time (m, n) from which on each joint by itself gets there in any time given."""
    up, down = _extreme_times(setting, begin, end)
    both = np.where(np.isfinite(up) & np.isfinite(down), np.maximum(up, down), np.minimum(up, down))
    return np.asarray(both)


def possible(setting: Setting, begin: States, end: States, time_s: Array) -> NDArray[np.bool_]:
    """Whether each joint (m, n) by itself can get there in exactly a time (m,)."""
    top, bottom, gain, brake = limits_of(setting)
    way, time = end.q - begin.q, np.asarray(time_s)[:, None]
    most = farthest(begin.v, end.v, time, gain, brake, top)
    least = -farthest(-begin.v, -end.v, time, brake, gain, -bottom)
    slack = ROUNDING * np.maximum(1.0, np.abs(way))
    return np.asarray((way <= most + slack) & (way >= least - slack))


def limits_of(setting: Setting) -> tuple[Array, Array, Array, Array]:
    """Largest and smallest velocity, largest acceleration and deceleration (n,)."""
    velocity, acceleration = setting.limits["velocity"], setting.limits["acceleration"]
    return (
        np.minimum(velocity.kept_hi, UNLIMITED),
        np.maximum(velocity.kept_lo, -UNLIMITED),
        np.minimum(acceleration.kept_hi, UNLIMITED),
        np.minimum(-acceleration.kept_lo, UNLIMITED),
    )


def _extreme_times(setting: Setting, begin: States, end: States) -> tuple[Array, Array]:
    """Times (m, n) of going up first and of going down first, inf where that does not lead there."""
    top, bottom, gain, brake = limits_of(setting)
    way = end.q - begin.q
    up = _one_way(way, begin.v, end.v, gain, brake, top)
    return up, _one_way(-way, -begin.v, -end.v, brake, gain, -bottom)


def _one_way(way: Array, v0: Array, v1: Array, gain: Array, brake: Array, top: Array) -> Array:
    """Time of: gain speed, cruise at the top, brake; inf where that does not lead there.

    A speed above the top, which a strike itself may ask for, is let be: the bound then only counts the change.
    """
    top = np.maximum(top, np.maximum(v0, v1))
    with np.errstate(divide="ignore", invalid="ignore"):
        # Peak speed p of the triangle: (p² − v0²) / 2 gain + (p² − v1²) / 2 brake = way.
        square = (2 * way + v0**2 / gain + v1**2 / brake) / (1 / gain + 1 / brake)
        peak = np.minimum(np.sqrt(np.where(square >= 0, square, np.nan)), top)
        cruise = way - (peak**2 - v0**2) / (2 * gain) - (peak**2 - v1**2) / (2 * brake)
        time = (peak - v0) / gain + (peak - v1) / brake
        still = np.abs(cruise) <= 1e-12 * np.maximum(1.0, np.abs(way))
        time = time + np.where(still, 0.0, cruise / peak)
        fits = (peak >= np.maximum(v0, v1) - 1e-12) & (cruise >= -ROUNDING) & np.isfinite(time)
    return np.where(fits, np.maximum(time, 0.0), np.inf)


def farthest(v0: Array, v1: Array, time: Array | float, gain: Array, brake: Array, top: Array) -> Array:
    """The longest way in a time from one speed to another, -inf where the speed can't be changed in it.

    Gaining speed, cruising at the top and braking; concave in both speeds.
    """
    peak = _peak(v0, v1, time, gain, brake, top)
    cruise_s = time - (peak - v0) / gain - (peak - v1) / brake
    way = (peak**2 - v0**2) / (2 * gain) + (peak**2 - v1**2) / (2 * brake) + peak * np.maximum(cruise_s, 0.0)
    return np.where(peak >= np.maximum(v0, v1) - ROUNDING, way, -np.inf)


def farthest_slopes(
    v0: Array, v1: Array, time: Array | float, gain: Array, brake: Array, top: Array
) -> tuple[Array, Array]:
    """Derivatives of the longest way by both speeds."""
    peak = _peak(v0, v1, time, gain, brake, top)
    return (peak - v0) / gain, (peak - v1) / brake


def _peak(v0: Array, v1: Array, time: Array | float, gain: Array, brake: Array, top: Array) -> Array:
    """The speed at which a joint turns from gaining to braking, or cruises."""
    top = np.maximum(top, np.maximum(v0, v1))
    return np.minimum((time + v0 / gain + v1 / brake) / (1 / gain + 1 / brake), top)
