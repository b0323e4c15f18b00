"""Whether a strike or the way between two may be done at all by joint velocities within the limits.

In given postures a strike's joint velocities are free but for what [accept] asks of the paddle's speed and direction,
and that it does not turn; the posture may lie off by what is accepted of place and tilt. Each joint by itself must get
from one strike to the next in exactly the flight. What a joint covers in a time is concave in its speeds at both ends,
so the speeds and postures that may do are a convex set; linear programs with cuts along its border find a point of it
or show that there is none. A point of the set proves nothing; that there is none refuses the postures.

Cutting planes: J. E. Kelley, "The cutting-plane method for solving convex programs", J. SIAM 8 (1960) 703.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from reach.cell import Array
from reach.rally.fastest import farthest, farthest_slopes, limits_of
from reach.rally.stance import STILL_RAD_S
from reach.strike.bound import strike_rows
from reach.strike.setting import Setting

CUTS = 25  # rounds of cuts before a posture counts as possible
NEAR = 1e-6  # rad or m: a way missed by less is met
LOOSE_RAD = 0.2  # a posture may lie off by this much of each joint, redundancy included


class Due(NamedTuple):
    """A strike as asked for: posture (n,), unit normal (3,), speed along it."""

    q: Array
    normal: Array
    speed_m_s: float


def most_speed(setting: Setting, q: Array, normal: Array) -> float:
    """The largest speed along a normal (3,) in a posture (n,), with what is accepted aside, by joint speeds alone."""
    from scipy.optimize import linprog

    lo, hi = (side[0] for side in setting.velocities(q[None]))
    aside, most = _aside(setting, q, normal)
    row = normal @ setting.chain.jacobians(q[None])[2][0, :3]
    done = linprog(
        -row, A_ub=np.vstack([aside, -aside]), b_ub=np.r_[most, most], bounds=np.column_stack([lo, hi])
    )
    return float(min(-done.fun, setting.tool_cap_m_s)) if done.status == 0 else np.inf


def possible_between(setting: Setting, begin: Due, end: Due, flight_s: float) -> bool:
    """Whether joint velocities and small changes of both postures may get each joint across in exactly the flight."""
    from scipy.optimize import linprog

    n, cuts = len(begin.q), _Cuts(setting, begin, end, flight_s)
    fixed, bound = _conditions(setting, begin, end, flight_s)
    velocity = setting.limits["velocity"]
    speeds = np.column_stack([np.maximum(velocity.kept_lo, -100.0), np.minimum(velocity.kept_hi, 100.0)])
    limits = np.vstack([speeds, speeds, np.tile([-LOOSE_RAD, LOOSE_RAD], (2 * n, 1)), [[0.0, np.inf]]])
    cost = np.r_[np.zeros(4 * n), 1.0]
    rows: list[Array] = []
    sides: list[float] = []
    cuts.add(np.zeros(4 * n + 1), rows, sides, everywhere=True)
    for _ in range(CUTS):
        done = linprog(cost, A_ub=np.vstack([fixed, *rows]), b_ub=np.r_[bound, sides], bounds=limits)
        if done.status == 2 or (done.status == 0 and done.fun > NEAR):
            return False
        if done.status != 0 or not cuts.add(done.x, rows, sides):
            return True
    return True


class _Cuts:
    """What each joint covers in the flight, as cuts on x = (speeds at both ends, changes of both postures, slack)."""

    def __init__(self, setting: Setting, begin: Due, end: Due, flight_s: float):
        self._n, self._time = len(begin.q), flight_s
        self._way = end.q - begin.q
        top, bottom, gain, brake = limits_of(setting)
        self._sides = ((1.0, gain, brake, top), (-1.0, brake, gain, -bottom))

    def add(self, x: Array, rows: list[Array], sides: list[float], everywhere: bool = False) -> bool:
        """Cut off x where a joint does not get across; whether it was cut."""
        n, found = self._n, False
        v0, v1, d0, d1 = (x[k * n : (k + 1) * n] for k in range(4))
        for sign, gain, brake, top in self._sides:
            a, b = sign * v0, sign * v1
            most = farthest(a, b, self._time, gain, brake, top)
            slopes = farthest_slopes(a, b, self._time, gain, brake, top)
            way = sign * (self._way + d1 - d0)
            over = np.isfinite(most) if everywhere else np.isfinite(most) & (way - x[-1] > most + NEAR)
            for i in np.flatnonzero(over).tolist():
                # sign (way + d1 − d0) − slack <= most + slopes · (change of the speeds)
                row = np.zeros(4 * n + 1)
                row[i], row[n + i] = -sign * slopes[0][i], -sign * slopes[1][i]
                row[2 * n + i], row[3 * n + i], row[-1] = -sign, sign, -1.0
                rows.append(row)
                tangent = most[i] - slopes[0][i] * a[i] - slopes[1][i] * b[i]
                sides.append(float(tangent - sign * self._way[i]))
                found = True
        return found


def _conditions(setting: Setting, begin: Due, end: Due, flight_s: float) -> tuple[Array, Array]:
    """Rows and sides that hold whatever a joint covers: what both strikes accept, and speeds that can change."""
    n, accept = len(begin.q), setting.accept
    blocks, sides = [], []
    for k, due in enumerate((begin, end)):
        aside, most = _aside(setting, due.q, due.normal)
        along = due.normal @ setting.chain.jacobians(due.q[None])[2][0, :3]
        slack = accept.strike_speed_error_share * abs(due.speed_m_s)
        rows = np.vstack([aside, -aside, along[None], -along[None]])
        blocks.append(_placed(rows, k, n))
        sides.append(np.r_[most, most, due.speed_m_s + slack, slack - due.speed_m_s])
        place, off = _place(setting, due.q)
        blocks.append(_placed(np.vstack([place, -place]), 2 + k, n))
        sides.append(np.r_[off, off])
    _, _, gain, brake = limits_of(setting)
    change = np.hstack([-np.eye(n), np.eye(n), np.zeros((n, 2 * n + 1))])
    blocks += [change, -change]
    sides += [gain * flight_s, brake * flight_s]
    return np.vstack(blocks), np.concatenate(sides)


def _placed(rows: Array, part: int, n: int) -> Array:
    out = np.zeros((len(rows), 4 * n + 1))
    out[:, part * n : (part + 1) * n] = rows
    return out


def _aside(setting: Setting, q: Array, normal: Array) -> tuple[Array, Array]:
    """Rows (r, n) of the paddle's speed across a normal in m/s and of its turning in rad/s, and the most accepted."""
    _, rotation, jacobian = (part[0] for part in setting.chain.jacobians(q[None]))
    accept = setting.accept
    across = np.linalg.svd(normal[None])[2][1:]
    turning = rotation[:, :2].T @ jacobian[3:]
    lateral = accept.strike_lateral_m_s
    return np.vstack([across @ jacobian[:3], turning]), np.array([lateral, lateral, STILL_RAD_S, STILL_RAD_S])


def _place(setting: Setting, q: Array) -> tuple[Array, Array]:
    """Rows (5, n) of the strike point's place in m and the tilt in rad, and the most accepted."""
    _, rotation, jacobian = setting.chain.jacobians(q[None])
    rows = strike_rows(jacobian, rotation, True, 1.0)[0]
    accept = setting.accept
    return rows, np.r_[np.full(3, accept.strike_position_m), np.full(2, accept.strike_tilt_error_rad)]
