"""The fastest speed profile along a path by sequential linear programs, in the time domain.

A side of a stroke is pieces of constant jerk on a fixed horizon; way, speed and acceleration are linear in them, and
torque and its rate are linearised about the last answer. Timing along a path is convex in ṡ² only without a
torque-rate limit (Bobrow, IJRR 4(3) 1985; Verscheure et al., IEEE TAC 54(10) 2009); with it, a grid in that domain
gives an artefact of the stroke's ends, so the variables live in time here. The answer is a proposal: a measure decides
on it afterwards.
"""

from __future__ import annotations

from functools import cache
from typing import NamedTuple

import numpy as np

from reach.cell import Array
from reach.strike.path import Load
from reach.strike.profile import Side

HORIZON = 1.35  # of the double-S time
FIRST_TRUST = 0.1  # of the starting way: 0.03 m of 0.3 m
WIDER, NARROWER = 1.5, 0.35
LEAST_TRUST = 3e-4
ENOUGH = 2e-4  # relative gain of speed below which it has converged
ITERATIONS = 25
AT_TOP = 1 - 1e-4  # of the largest speed that joints and tool may have at the strike: nothing is left to gain
COST = 3.0  # of a relative violation, in speeds of the starting side: more than slowing it away would cost
SETTLED = 1e-7  # relative change of the merit that is none
QUIET = 2  # such gains in a row
WATCHED = 0.9  # of a limit: what may come that far in a step has a row
VAST = 1e9  # stands for "no limit known"
MOST_JERK = 5.0  # of the last answer's largest: keeps the linear program's numbers of one size
LEAST_LENGTH_M = 1e-3  # of a side: below it there is nothing to optimise


class _Points(NamedTuple):
    """A side at three points a piece (start, middle, end), e = 3 N of them.

    x distance to the strike, v speed, a acceleration, j jerk of the piece, all (e,)
    """

    x: Array
    v: Array
    a: Array
    j: Array


class SideProblem:
    """One side of one stroke: its load as smooth functions of the distance to the strike, and its limits.

    Parameters
    ----------
    load : of one stroke
    distance : (k,) of the side's nodes
    side : 0 the run-up, 1 the follow-through, which is looked at backwards in time
    window_s : the strike window
    """

    def __init__(self, load: Load, distance: Array, side: int, window_s: float):
        from scipy.interpolate import CubicSpline

        self._rows = load.lo.shape[1]
        parts = (load.a, load.b, load.c, load.viscous, load.dry)
        table = np.concatenate([part[0, side] for part in parts], axis=1)
        self._spline = CubicSpline(distance, np.column_stack([table, load.fastest[0, side]]))
        self._sign = (1.0, -1.0)[side]
        self.length, self.hold_s = float(distance[-1]), window_s / 2
        self._jerk, self._acceleration = float(load.jerk[0]), float(load.acceleration[0])
        bounded = np.isfinite(load.lo[0]) & np.isfinite(load.hi[0])
        lo, hi = np.where(bounded, load.lo[0], -VAST), np.where(bounded, load.hi[0], VAST)
        self._middle, self._half = (hi + lo) / 2, (hi - lo) / 2
        self._rate = np.where(np.isfinite(load.rate[0]), load.rate[0], VAST)
        self.top = float(load.fastest[0, side, 0])
        self._rub_width = load.rub_width[0, side].min(axis=0)

    def points(self, jerks: Array, horizon_s: float) -> _Points:
        """The side at jerks (N,) over a horizon."""
        way, speed, acceleration = _maps(len(jerks))
        t = horizon_s
        x = self._distances(way * t**3, speed * t**2) @ jerks
        return _Points(x, speed @ jerks * t**2, acceleration @ jerks * t, np.repeat(jerks, 3))

    def _distances(self, way: Array, speed: Array) -> Array:
        """Distance to the strike as rows (e, N) on the jerks."""
        return np.asarray(way[-1] - way + self.hold_s * speed[-1])

    def violation(self, at: _Points) -> float:
        """By how much, relative to its limit, the side passes its worst one."""
        value, rate = self._value(at)[0], self._rates(at)[0]
        worst = [np.abs(value).max(), np.abs(rate).max(), (at.v / self._split(at.x, 0)[1]).max()]
        worst += [np.abs(at.a).max() / self._acceleration, np.abs(at.j).max() / self._jerk]
        return float(max(0.0, max(worst) - 1, at.x[0] / self.length - 1))

    def improve(self, jerks: Array, horizon_s: float, trust_m: float, cost: float) -> Array | None:
        """The jerks (N,) of the linear program about given ones, None where it has no answer.

        Its rows: relative limits on torque-like values and their rates, speed, acceleration; a trust region on the
        distance; one slack, at a cost in m/s, for all that is about to be passed already.
        """
        from scipy.optimize import linprog

        t, count = horizon_s, len(jerks)
        way, speed, acceleration = _maps(count)
        way, speed, acceleration = way * t**3, speed * t**2, acceleration * t
        at = self.points(jerks, t)
        distances = self._distances(way, speed)
        state = (distances, speed, acceleration, np.repeat(np.eye(count), 3, axis=0))
        rows, sides = [], []
        swing, jerk = 2 * float(np.abs(at.a).max()), self._most_jerk(jerks)
        for value, slopes in (self._value(at), self._rates(at)):
            # How far a value may come: it, and all that a turned acceleration, and for a rate the jerk, could add.
            most = np.abs(value) + np.abs(slopes[2]) * swing
            if len(slopes) > 3:
                most += np.abs(slopes[3]) * jerk
            e, r = np.nonzero(most > WATCHED)
            slope = sum(part[e, r][:, None] * by[e] for part, by in zip(slopes, state, strict=False))
            for sign in (1.0, -1.0):
                rows.append(sign * slope)
                sides.append(1 - sign * value[e, r] + sign * (slope @ jerks))
        fastest, fastest_x = self._split(at.x, 0)[1], self._split(at.x, 1)[1]
        rows.append((speed - fastest_x[:, None] * distances) / fastest[:, None])
        sides.append((fastest - fastest_x * at.x) / fastest)
        soft = np.vstack(rows)
        hard = [(-speed, np.zeros(len(speed))), (distances[:1], np.array([self.length]))]
        if np.isfinite(self._acceleration):
            hard += [
                (sign * acceleration, np.full(len(acceleration), self._acceleration)) for sign in (1, -1)
            ]
        hard += [(sign * distances, trust_m + sign * at.x) for sign in (1, -1)]
        matrix = np.vstack([soft, *(part for part, _ in hard)])
        slack = np.zeros(len(matrix))
        slack[: len(soft)] = -1.0
        scale = max(np.abs(jerks).max(), 1.0)
        most = self._most_jerk(jerks) / scale
        answer = linprog(
            np.append(-speed[-1] * scale, cost),
            A_ub=np.column_stack([matrix * scale, slack]),
            b_ub=np.concatenate([*sides, *(side for _, side in hard)]),
            A_eq=np.append(acceleration[-1] * scale, 0.0)[None],
            b_eq=[0.0],
            bounds=[*[(-most, most)] * count, (0.0, None)],
            method="highs",
        )
        return answer.x[:count] * scale if answer.status == 0 else None

    def _most_jerk(self, jerks: Array) -> float:
        """Largest jerk that a step may take: the limit, or a multiple of what there is."""
        return min(self._jerk, MOST_JERK * max(float(np.abs(jerks).max()), 1.0))

    def _split(self, x: Array, order: int) -> tuple[list[Array], Array]:
        """The load's tables (e, r each), or their derivatives, and the largest speed (e,) at distances (e,)."""
        table = self._spline(np.clip(x, 0.0, self.length), order)
        n = self._rows
        return [table[:, k * n : (k + 1) * n] for k in range(5)], table[:, -1]

    def _value(self, at: _Points) -> tuple[Array, tuple[Array, ...]]:
        """Torque-like values (e, r) relative to their box, and their slopes by x, v and a."""
        (a, b, c, d, f), _ = self._split(at.x, 0)
        (ax, bx, cx, dx, fx), _ = self._split(at.x, 1)
        v, acc, s = at.v[:, None], at.a[:, None], self._sign
        rub = np.tanh(v / self._rub_width)
        value = s * a * acc + b * v**2 + c + d * v + f * rub
        by_x = s * ax * acc + bx * v**2 + cx + dx * v + fx * rub
        by_v = 2 * b * v + d + f * (1 - rub**2) / self._rub_width
        half = self._half
        return (value - self._middle) / half, (by_x / half, by_v / half, s * a / half)

    def _rates(self, at: _Points) -> tuple[Array, tuple[Array, ...]]:
        """Rates by time (e, r) relative to their limit, and their slopes by x, v, a and jerk.

        The distance falls as the side runs, hence the signs of what is differentiated by it.
        """
        (a, b, _, d, f), _ = self._split(at.x, 0)
        (ax, bx, cx, dx, fx), _ = self._split(at.x, 1)
        (axx, bxx, cxx, _, _), _ = self._split(at.x, 2)
        v, acc, j, s = at.v[:, None], at.a[:, None], at.j[:, None], self._sign
        rub = np.tanh(v / self._rub_width)
        own = d + f * (1 - rub**2) / self._rub_width
        rate = (
            s * (a * j - ax * v * acc)
            + 2 * b * v * acc
            - bx * v**3
            - cx * v
            + own * acc
            - dx * v**2
            - fx * rub * v
        )
        by_x = s * (ax * j - axx * v * acc) + 2 * bx * v * acc - bxx * v**3 - cxx * v + dx * acc
        by_v = (
            -s * ax * acc
            + 2 * b * acc
            - 3 * bx * v**2
            - cx
            - 2 * dx * v
            - 2 * rub / self._rub_width * (own - d) * acc
        )
        by_a = -s * ax * v + 2 * b * v + own
        most = self._rate
        return rate / most, (by_x / most, by_v / most, by_a / most, s * a / most)


def optimised(problem: SideProblem, start: Side, pieces: int) -> Side:
    """The fastest side found from a starting one; the start itself where nothing better is.

    Sequential linear programs with a trust region on the distance; a step is taken where speed less the cost of
    violation rises.
    """
    if problem.length < LEAST_LENGTH_M or start.end[1] <= 0:
        return start
    moving_s = start.total_s - problem.hold_s
    horizon = moving_s * (HORIZON if len(start.jerk) <= 4 else 1.0)
    jerks = _resampled(start, moving_s, horizon, pieces)
    at, way, quiet = problem.points(jerks, horizon), start.end[0], 0
    trust = FIRST_TRUST * way
    cost = COST * start.end[1]
    merit = at.v[-1] - cost * problem.violation(at)
    for _ in range(ITERATIONS):
        tried = problem.improve(jerks, horizon, trust, cost)
        there = None if tried is None else problem.points(tried, horizon)
        gained = -np.inf if there is None else there.v[-1] - cost * problem.violation(there) - merit
        if tried is None or there is None or gained <= 0:
            trust *= NARROWER
        else:
            quiet = quiet + 1 if gained < ENOUGH * at.v[-1] else 0
            jerks, at, merit, trust = tried, there, merit + gained, trust * WIDER
        if (
            abs(gained) < SETTLED * at.v[-1]
            or trust < LEAST_TRUST * way
            or quiet >= QUIET
            or merit >= AT_TOP * problem.top
        ):
            break
    duration = np.append(np.full(pieces, horizon / pieces), problem.hold_s)
    found = Side(duration, np.append(jerks, 0.0))
    return found if found.end[1] > start.end[1] else start


def _resampled(start: Side, moving_s: float, horizon_s: float, pieces: int) -> Array:
    """Jerks (pieces,) of a side stretched to a horizon: the same acceleration over time, slower by the stretch."""
    edges = np.linspace(0.0, moving_s, pieces + 1)
    slower = moving_s / horizon_s
    acceleration = start.at(edges)[2] * slower**2
    return np.asarray(np.diff(acceleration) / (horizon_s / pieces))


@cache
def _maps(pieces: int) -> tuple[Array, Array, Array]:
    """Way, speed, acceleration (3 N, N) at start, middle and end of each piece by the jerks; horizon 1, from rest."""
    h = 1.0 / pieces
    way, speed, acceleration = (np.zeros((3 * pieces, pieces)) for _ in range(3))
    for k in range(pieces):
        state = np.zeros(3)
        for i in range(k, pieces):
            j = 1.0 if i == k else 0.0
            for place, t in enumerate((0.0, h / 2, h)):
                x = state[0] + state[1] * t + state[2] * t**2 / 2 + j * t**3 / 6
                v = state[1] + state[2] * t + j * t**2 / 2
                way[3 * i + place, k], speed[3 * i + place, k] = x, v
                acceleration[3 * i + place, k] = state[2] + j * t
            state = np.array([x, v, acceleration[3 * i + 2, k]])
    return way, speed, acceleration
