"""Whether a strike or the way between two may be done at all by joint velocities within the limits.

In given postures a strike's joint velocities are free but for what [accept] asks of the paddle's speed and direction,
and that it does not turn; the posture may lie off by what is accepted of place and tilt. Each joint by itself must get
from one strike to the next in exactly the flight. What a joint covers in a time is concave in its speeds at both ends,
so the speeds and postures that may do are a convex set; linear programs with cuts along its border find a point of it
or show that there is none. A point of the set proves nothing; that there is none refuses the postures.

The multipliers of a program that falls short prove it: they add its conditions up to one that no value within the
ranges keeps, whatever the program's own tolerances (Farkas' lemma; J. Farkas, J. reine angew. Math. 124 (1902) 1, from
memory). What they prove counts, not what the program says.

Cutting planes: J. E. Kelley, "The cutting-plane method for solving convex programs", J. SIAM 8 (1960) 703.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.rallies import LegProof
from reach.rally.fastest import farthest, farthest_slopes, limits_of
from reach.rally.stance import STILL_RAD_S
from reach.strike.bound import VAST
from reach.strike.setting import Setting

CUTS = 25  # rounds of cuts before a posture counts as possible
NEAR = 1e-6  # rad or m: a way missed by less is met
LOOSE_RAD = 0.2  # a posture may lie off by this much of each joint, redundancy included
FASTEST = 100.0  # rad/s or m/s: no joint is taken to be faster
GIVE = 0.01  # of a way missed, in m/s or rad/s: by so much the other conditions give way too, so that none stops a
# program from having an answer; a way missed by NEAR lets them give way by less than any tolerance


class Due(NamedTuple):
    """A strike as asked for: posture (n,), unit normal (3,), speed along it."""

    q: Array
    normal: Array
    speed_m_s: float


class Most(NamedTuple):
    """The largest speed of a posture in m/s, and the dual vector (6,) that proves a bound on it."""

    speed_m_s: float
    dual: Array
    bound_m_s: float


def most_speed(setting: Setting, q: Array, normal: Array) -> Most:
    """The largest speed along a normal (3,) in a posture (n,), with what is accepted aside, by joint speeds alone."""
    from scipy.optimize import linprog

    lo, hi = (side[0] for side in setting.velocities(q[None]))
    strike = _Strike(setting, q, normal)
    aside, most = strike.aside()
    row = normal @ strike.jacobian[:3]
    done = linprog(
        -row, A_ub=np.vstack([aside, -aside]), b_ub=np.r_[most, most], bounds=np.column_stack([lo, hi])
    )
    if done.status != 0:
        return Most(np.inf, np.zeros(6), np.inf)
    up, down = -done.ineqlin.marginals[:4], -done.ineqlin.marginals[4:]
    dual = np.r_[normal, np.zeros(3)] - strike.world(up - down)
    y = dual @ strike.jacobian
    proved = np.maximum(y * np.minimum(hi, VAST), y * np.maximum(lo, -VAST)).sum() + strike.freedom(dual)
    cap = setting.tool_cap_m_s
    return Most(float(min(-done.fun, cap)), dual, float(min(proved, cap)))


def impossible_between(
    setting: Setting, begin: Due, end: Due, flight_s: float, leg: int, stance: Array
) -> LegProof | None:
    """What proves that no joint velocities and small changes of both postures get each joint across in the flight.

    Parameters
    ----------
    leg, stance : of which the proof is

    Returns
    -------
    LegProof or None, where none was found
    """
    from scipy.optimize import linprog

    asked = _Asked(setting, begin, end, flight_s)
    fixed, bound = asked.conditions()
    n, cuts = asked.n, _Cuts(setting, begin, end, flight_s)
    limits = np.vstack([asked.ranges, [[0.0, np.inf]]])
    cost = np.r_[np.zeros(4 * n), 1.0]
    cuts.add(np.zeros(4 * n + 1), everywhere=True)
    for _ in range(CUTS):
        rows, sides = np.array(cuts.rows).reshape(-1, 4 * n + 1), np.array(cuts.sides)
        done = linprog(cost, A_ub=np.vstack([fixed, rows]), b_ub=np.r_[bound, sides], bounds=limits)
        if done.status != 0:
            return None
        if done.fun > NEAR:
            return asked.proof(np.maximum(-done.ineqlin.marginals, 0.0), cuts, leg, stance)
        if not cuts.add(done.x):
            return None
    return None


class _Strike:
    """A posture (n,) with a normal (3,): what is accepted of the paddle's motion and place there.

    `rows` : (4, 6) across the normal in m/s and about the face's own axes in rad/s, on the paddle's twist
    """

    def __init__(self, setting: Setting, q: Array, normal: Array):
        _, self.rotation, self.jacobian = (part[0] for part in setting.chain.jacobians(q[None]))
        self.accept, self.normal = setting.accept, normal
        self.rows = np.zeros((4, 6))
        self.rows[:2, :3] = np.linalg.svd(normal[None])[2][1:]
        self.rows[2:, 3:] = self.rotation[:, :2].T
        self.placing = np.zeros((5, 6))
        self.placing[:3, :3] = np.eye(3)
        self.placing[3:, 3:] = self.rotation[:, :2].T

    def aside(self) -> tuple[Array, Array]:
        """Rows (4, n) of speed across the normal in m/s and of turning in rad/s, and the most accepted (4,)."""
        lateral = self.accept.strike_lateral_m_s
        return self.rows @ self.jacobian, np.array([lateral, lateral, STILL_RAD_S, STILL_RAD_S])

    def place(self) -> tuple[Array, Array]:
        """Rows (5, n) of the strike point's place in m and the tilt in rad, and the most accepted (5,)."""
        accept = self.accept
        most = np.r_[np.full(3, accept.strike_position_m), np.full(2, accept.strike_tilt_error_rad)]
        return self.placing @ self.jacobian, most

    def world(self, weights: Array) -> Array:
        """Weights (4,) of the rows of `aside` as a dual vector (6,) on the Jacobian's rows."""
        return np.asarray(weights @ self.rows)

    def freedom(self, dual: Array) -> float:
        """The most that the motion accepted aside adds to dual (6,) times the twist."""
        across = dual[:3] - (dual[:3] @ self.normal) * self.normal
        lateral, turning = np.linalg.norm(across), np.linalg.norm(dual[3:])
        return float(self.accept.strike_lateral_m_s * lateral + STILL_RAD_S * turning)

    def looseness(self, dual: Array) -> float:
        """The most that the change of place and tilt accepted adds to dual (6,) times it."""
        place, tilt = np.linalg.norm(dual[:3]), np.linalg.norm(dual[3:])
        return float(self.accept.strike_position_m * place + self.accept.strike_tilt_error_rad * tilt)


class _Asked:
    """What holds whatever a joint covers, on x = (speeds at both ends, changes of both postures, way missed).

    ranges : (4n, 2) of the first four
    """

    def __init__(self, setting: Setting, begin: Due, end: Due, flight_s: float):
        self.n, self.dues, self.flight_s = len(begin.q), (begin, end), flight_s
        self.strikes = [_Strike(setting, due.q, due.normal) for due in self.dues]
        share = setting.accept.strike_speed_error_share
        self.slack = [share * abs(due.speed_m_s) for due in self.dues]
        velocity = setting.limits["velocity"]
        lo, hi = np.maximum(velocity.kept_lo, -FASTEST), np.minimum(velocity.kept_hi, FASTEST)
        speeds = np.column_stack([lo, hi])
        self.ranges = np.vstack([speeds, speeds, np.tile([-LOOSE_RAD, LOOSE_RAD], (2 * self.n, 1))])
        _, _, self.gain, self.brake = limits_of(setting)

    def conditions(self) -> tuple[Array, Array]:
        """Rows and sides: what both strikes accept, and speeds that can change."""
        n, blocks, sides = self.n, [], []
        for k, (due, strike, slack) in enumerate(zip(self.dues, self.strikes, self.slack, strict=True)):
            aside, most = strike.aside()
            along = due.normal @ strike.jacobian[:3]
            rows = np.vstack([aside, -aside, along[None], -along[None]])
            blocks.append(self._placed(rows, k))
            sides.append(np.r_[most, most, due.speed_m_s + slack, slack - due.speed_m_s])
            place, off = strike.place()
            blocks.append(self._placed(np.vstack([place, -place]), 2 + k))
            sides.append(np.r_[off, off])
        change = np.hstack([-np.eye(n), np.eye(n), np.zeros((n, 2 * n + 1))])
        blocks += [change, -change]
        sides += [self.gain * self.flight_s, self.brake * self.flight_s]
        whole = np.vstack(blocks)
        whole[:, -1] = -GIVE
        return whole, np.concatenate(sides)

    def proof(self, weights: Array, cuts: _Cuts, leg: int, stance: Array) -> LegProof | None:
        """What multipliers of the conditions and of the cuts prove; None where they prove nothing."""
        n, begin, end = self.n, *self.dues
        velocity, place, at = np.zeros((2, 6)), np.zeros((2, 6)), 0
        for k, strike in enumerate(self.strikes):
            up, down, forth, back = np.split(weights[at : at + 10], [4, 8, 9])
            velocity[k] = strike.world(up - down)
            velocity[k, :3] += (forth - back) * strike.normal
            up, down = np.split(weights[at + 10 : at + 20], 2)
            place[k] = (up - down) @ strike.placing
            at += 20
        change = weights[at : at + n] - weights[at + n : at + 2 * n]
        used = np.flatnonzero(weights[at + 2 * n :] > 0).astype(np.int64)
        weight = weights[at + 2 * n :][used]
        rows, sides = cuts.taken(used)
        short = self._short(velocity, place, change, weight @ rows[:, :-1]) - float(weight @ sides)
        if not short > NEAR:
            return None
        joint, sign, speeds = cuts.at(used)
        normal = np.array([due.normal for due in self.dues])
        speed = np.array([due.speed_m_s for due in self.dues])
        q = np.array([begin.q, end.q])
        given = (leg, stance, q, normal, speed, self.flight_s, velocity, place, change)
        return LegProof(*given, joint, sign, speeds, weight, short)

    def _short(self, velocity: Array, place: Array, change: Array, cut: Array) -> float:
        """By how much the conditions' sum stays above its side, the cuts' side aside; `cut` (4n,) is their sum."""
        y = cut.copy()
        side = float(np.maximum(change * self.gain, -change * self.brake).sum()) * self.flight_s
        for k, (due, strike) in enumerate(zip(self.dues, self.strikes, strict=True)):
            along = float(velocity[k, :3] @ due.normal)
            side += along * due.speed_m_s + abs(along) * self.slack[k]
            side += strike.freedom(velocity[k]) + strike.looseness(place[k])
            y[k * self.n : (k + 1) * self.n] += velocity[k] @ strike.jacobian
            y[(2 + k) * self.n : (3 + k) * self.n] += place[k] @ strike.jacobian
        y[: self.n] -= change
        y[self.n : 2 * self.n] += change
        return float(np.minimum(y * self.ranges[:, 0], y * self.ranges[:, 1]).sum()) - side

    def _placed(self, rows: Array, part: int) -> Array:
        out = np.zeros((len(rows), 4 * self.n + 1))
        out[:, part * self.n : (part + 1) * self.n] = rows
        return out


class _Cuts:
    """What each joint covers in the flight, as cuts on x = (speeds at both ends, changes of both postures, slack)."""

    def __init__(self, setting: Setting, begin: Due, end: Due, flight_s: float):
        self._n, self._time = len(begin.q), flight_s
        self._way = end.q - begin.q
        top, bottom, gain, brake = limits_of(setting)
        self._sides = ((1.0, gain, brake, top), (-1.0, brake, gain, -bottom))
        self.rows: list[Array] = []
        self.sides: list[float] = []
        self._where: list[tuple[int, float, float, float]] = []

    def add(self, x: Array, everywhere: bool = False) -> bool:
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
                tangent = most[i] - slopes[0][i] * a[i] - slopes[1][i] * b[i]
                self.rows.append(row)
                self.sides.append(float(tangent - sign * self._way[i]))
                self._where.append((i, sign, float(a[i]), float(b[i])))
                found = True
        return found

    def taken(self, used: NDArray[np.int64]) -> tuple[Array, Array]:
        """Rows (c, 4n + 1) and sides (c,) of some cuts."""
        return np.array(self.rows).reshape(-1, 4 * self._n + 1)[used], np.array(self.sides)[used]

    def at(self, used: NDArray[np.int64]) -> tuple[NDArray[np.int64], Array, Array]:
        """Joint and sign (c,) of some cuts, and the speeds (c, 2) where they were taken."""
        where = [self._where[k] for k in used.tolist()]
        joint, sign = (np.array([one[i] for one in where]) for i in (0, 1))
        speeds = np.array([one[2:] for one in where]).reshape(-1, 2)
        return joint.astype(np.int64), sign.astype(np.float64), speeds
