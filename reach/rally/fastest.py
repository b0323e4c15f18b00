"""What no motion between two joint states passes: the shortest time of each joint by itself."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.rally.quintic import States
from reach.strike.setting import Setting

UNLIMITED = 1e9  # stands for "no limit known", per s and per s²


def shortest_s(setting: Setting, begin: States, end: States) -> Array:
    """Shortest time (m, n) in s in which each joint by itself gets from one state to another, in m pairs of states.

    Kept-back limits of velocity and acceleration alone count; a joint whose acceleration nobody stated changes its
    velocity at once. The time of the slowest joint bounds that of every motion.

    Notes
    -----
    Time-optimal control of a double integrator with bounded speed is bang-off-bang: one acceleration, cruise at the
    bound, the other acceleration (A. E. Bryson and Y.-C. Ho, Applied Optimal Control, 1975, section 3.9). Both orders
    are tried and the feasible shorter one counts.
    """
    velocity, acceleration = setting.limits["velocity"], setting.limits["acceleration"]
    top, bottom = np.minimum(velocity.kept_hi, UNLIMITED), np.maximum(velocity.kept_lo, -UNLIMITED)
    gain, brake = np.minimum(acceleration.kept_hi, UNLIMITED), np.minimum(-acceleration.kept_lo, UNLIMITED)
    way = end.q - begin.q
    up = _one_way(way, begin.v, end.v, gain, brake, top)
    down = _one_way(-way, -begin.v, -end.v, brake, gain, -bottom)
    return np.asarray(np.fmin(up, down))


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
        fits = (peak >= np.maximum(v0, v1) - 1e-12) & (cruise >= -1e-9) & np.isfinite(time)
    return np.where(fits, np.maximum(time, 0.0), np.inf)
