"""From one strike to the next: ways to move the arm between them, and the shortest time that each way takes.

Around a strike joint velocities stay constant over the strike window. Between two windows the arm goes

- through: one quintic from the end of the first window to the start of the next, as long as the flight; where the ball
  is seen late, first along the stop until it is, or some time longer, and from there on;
- by rest: a quintic to the ready posture, a wait, and a quintic from there into the next window.

Quintics in joint space are a feasible family, no more: a way that is not found proves nothing.
"""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.rally.fastest import shortest_s
from reach.rally.gauge import Gauge
from reach.rally.quintic import Legs, States, legs

LEGAL = 0.998  # of the kept-back limits at the nodes: what the peaks between nodes may be off
LONGEST_S = 3.0  # a leg that needs more is no cycle
LEAST_S = 0.02
SCAN = np.geomspace(LEAST_S, LONGEST_S, 22)  # durations tried, each 1.27 times the one before
HALVINGS = 5  # between the shortest legal duration of the scan and the one before: to under 1 %
TURNS_S = (
    0.01,
    0.02,
    0.035,
    0.05,
    0.07,
    0.1,
    0.14,
    0.2,
)  # later turns that are tried where the earliest is illegal
STOP = 8  # every how many: durations tried at once, the short ones first


class Ways(NamedTuple):
    """Ways found for m legs.

    Attributes
    ----------
    legal : (m,) whether one keeps every kept-back limit within its time
    uses : (m, c) largest shares of the limits on the better way
    rest : (m,) whether it is by rest; stop_s, start_s : (m,) s of its two parts, nan where they were not looked for
    turn_s : (m,) when after the first window's end a way through turns to the next strike
    """

    legal: NDArray[np.bool_]
    uses: Array
    rest: NDArray[np.bool_]
    stop_s: Array
    start_s: Array
    turn_s: Array


class Cycles:
    """Finds ways between strikes.

    Parameters
    ----------
    ready : (n,) posture to rest in
    window_s : strike window
    latency_s : from a contact on, until which the arm does not know where the ball goes
    """

    def __init__(self, gauge: Gauge, ready: Array, window_s: float, latency_s: float):
        self.gauge, self.ready = gauge, ready
        self.half, self.latency_s = window_s / 2, latency_s

    def after(self, q: Array, v: Array) -> States:
        """States (m, n) at the end of the windows of strikes (m, n)."""
        return States.moving(q + v * self.half, v)

    def before(self, q: Array, v: Array) -> States:
        """States (m, n) at the start of the windows."""
        return States.moving(q - v * self.half, v)

    def ways(self, begin: States, end: States, flight_s: Array, stop_s: Array | None = None) -> Ways:
        """Ways from windows to windows within flights (m,): through where that is legal, else by rest.

        `stop_s` (m,) is that of `begin` where it is known already.
        """
        m = len(flight_s)
        stop = np.full(m, np.nan) if stop_s is None else stop_s.copy()
        start = np.full(m, np.nan)
        if self.latency_s > self.half and stop_s is None:
            stop = self.stop_s(begin)
        uses, turn = self._through(begin, end, flight_s, stop)
        legal = uses.max(axis=1) <= LEGAL
        rest = np.zeros(m, dtype=bool)
        left = np.flatnonzero(~legal & (self._least_rest_s(begin, end) <= flight_s))
        if len(left):
            if self.latency_s <= self.half and stop_s is None:
                stop[left] = self.stop_s(begin.take(left))
            start[left] = self.start_s(end.take(left))
            fits = self.rest_s(stop[left], start[left]) <= flight_s[left]
            legal[left], rest[left] = fits, fits
            part = left[fits]
            uses[part] = self._by_rest(begin.take(part), end.take(part), stop[part], start[part])
        return Ways(legal, uses, rest, stop, start, turn)

    def _least_rest_s(self, begin: States, end: States) -> Array:
        """What no way (m,) by rest passes."""
        setting, ready = self.gauge.setting, self._ready(len(begin.q))
        parts = (shortest_s(setting, *pair).max(axis=1) for pair in ((begin, ready), (ready, end)))
        return self.rest_s(*parts)

    def rest_s(self, stop_s: Array, start_s: Array) -> Array:
        """How long (m,) a way by rest takes from contact to contact."""
        return np.asarray(np.maximum(self.half + stop_s, self.latency_s) + start_s + self.half)

    def shortest(self, begin: States, end: States) -> tuple[Array, Array]:
        """The shortest legal time (m,) found from contact to contact, inf where none is, and the uses (m, c) there."""
        through = least_duration(self.gauge, begin, end) + 2 * self.half
        rest = self.stop_s(begin) + self.start_s(end) + 2 * self.half
        best = np.minimum(through, rest)
        by_through = np.isfinite(through) & (through <= rest)
        time = np.where(by_through, best - 2 * self.half, LONGEST_S)
        return best, self.gauge.uses(legs(begin, end, time))

    def stop_s(self, begin: States) -> Array:
        """Shortest legal time (m,) from states to rest in the ready posture."""
        return least_duration(self.gauge, begin, self._ready(len(begin.q)))

    def start_s(self, end: States) -> Array:
        """Shortest legal time (m,) from rest in the ready posture to states."""
        return least_duration(self.gauge, self._ready(len(end.q)), end)

    def turn(self, begin: States, stop_s: Array, turn_s: Array) -> States:
        """States (m, n) at times (m,) after the first window's end, on the way to a stop that takes stop_s (m,)."""
        length = np.where(np.isfinite(stop_s), stop_s, LONGEST_S)
        stops = legs(begin, self._ready(len(begin.q)), length)
        share = np.minimum(turn_s / length, 1.0)[:, None]
        states = States(*(stops.at(share, order)[:, 0] for order in range(3)))
        at_once = (turn_s == 0.0)[:, None]
        return States(*(np.where(at_once, a, b) for a, b in zip(begin, states, strict=True)))

    def _through(self, begin: States, end: States, flight_s: Array, stop_s: Array) -> tuple[Array, Array]:
        """Shares (m, c) of the limits on the best ways through, infinite where there is no time for one, and when (m,)
        after the first window's end they turn to the next strike."""
        m, known = len(flight_s), max(0.0, self.latency_s - self.half)
        best, turn_s = np.full((m, len(self.gauge.columns)), np.inf), np.full(m, known)
        first = np.zeros_like(best)
        if known > 0:
            first = self.gauge.uses(legs(begin, self._ready(m), np.fmin(stop_s, LONGEST_S)))
        for turn in (known, *(t for t in TURNS_S if t > known > 0)):
            rows = np.flatnonzero(best.max(axis=1) > LEGAL)
            left = flight_s[rows] - 2 * self.half - turn
            rows, left = rows[left > LEAST_S], left[left > LEAST_S]
            if not len(rows):
                break
            middle = self.turn(begin.take(rows), stop_s[rows], np.full(len(rows), turn))
            uses = np.maximum(self.gauge.uses(legs(middle, end.take(rows), left)), first[rows])
            better = uses.max(axis=1) < best[rows].max(axis=1)
            best[rows[better]], turn_s[rows[better]] = uses[better], turn
        return best, turn_s

    def _by_rest(self, begin: States, end: States, stop_s: Array, start_s: Array) -> Array:
        """Shares (m, c) of the limits on ways by rest."""
        ready = self._ready(len(stop_s))
        return np.maximum(
            self.gauge.uses(legs(begin, ready, stop_s)), self.gauge.uses(legs(ready, end, start_s))
        )

    def _ready(self, count: int) -> States:
        return States.at_rest(np.repeat(self.ready[None], count, axis=0))


def least_duration(gauge: Gauge, begin: States, end: States) -> Array:
    """Shortest legal duration (m,) found of the quintics between states, inf where none is.

    Legality need not be monotone in the duration: the shortest legal one of a scan, then halved toward the one before.
    """
    m = len(begin.q)
    best, low = np.full(m, np.inf), np.zeros(m)
    for first in range(0, len(SCAN), STOP):
        left = np.flatnonzero(np.isinf(best))
        if not len(left):
            break
        durations = SCAN[first : first + STOP]
        legal = _legal(gauge, begin, end, np.repeat(left, len(durations)), np.tile(durations, len(left)))
        legal = legal.reshape(len(left), len(durations))
        found = legal.any(axis=1)
        k = first + legal.argmax(axis=1)
        best[left[found]] = SCAN[k[found]]
        low[left[found]] = np.where(k[found] > 0, SCAN[k[found] - 1], 0.0)
    going = np.flatnonzero(np.isfinite(best))
    for _ in range(HALVINGS if len(going) else 0):
        middle = (low[going] + best[going]) / 2
        legal = _legal(gauge, begin, end, going, middle)
        best[going[legal]] = middle[legal]
        low[going[~legal]] = middle[~legal]
    return best


def _legal(
    gauge: Gauge, begin: States, end: States, rows: NDArray[np.int64], duration_s: Array
) -> NDArray[np.bool_]:
    made: Legs = legs(begin.take(rows), end.take(rows), duration_s)
    return np.asarray(gauge.uses(made).max(axis=1) <= LEGAL)
