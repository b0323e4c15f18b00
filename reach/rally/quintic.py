"""Joint motions as quintics between states: many legs at once, and a whole motion on the control grid."""

from __future__ import annotations

from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.motion import Motion
from reach.evidence.rallies import Knots

# Rows: value, slope and curvature at the start, then at the end, of a leg of length one; columns: powers 0 to 5 of
# the share of the leg gone.
HERMITE = np.array(
    [
        [1, 0, 0, -10, 15, -6],
        [0, 1, 0, -6, 8, -3],
        [0, 0, 0.5, -1.5, 1.5, -0.5],
        [0, 0, 0, 10, -15, 6],
        [0, 0, 0, -4, 7, -3],
        [0, 0, 0, 0.5, -1, 0.5],
    ]
)
POWERS = np.arange(6)


class States(NamedTuple):
    """States (m, n) of m legs' ends: joint position, velocity, acceleration."""

    q: Array
    v: Array
    a: Array

    @staticmethod
    def at_rest(q: Array) -> States:
        """Postures (m, n) at rest."""
        return States(q, np.zeros_like(q), np.zeros_like(q))

    @staticmethod
    def moving(q: Array, v: Array) -> States:
        """States (m, n) whose velocity does not change."""
        return States(q, v, np.zeros_like(v))

    def take(self, rows: NDArray[Any] | slice) -> States:
        """Some of the states."""
        return States(self.q[rows], self.v[rows], self.a[rows])


class Legs(NamedTuple):
    """Legs (m) as polynomials: coefficients (m, 6, n) of powers of the share gone, and durations (m,) in s."""

    coefficients: Array
    duration_s: Array

    def at(self, share: Array, order: int) -> Array:
        """The order-th derivative by time (m, k, n) at shares (k,), or (m, k) of their own, of each leg."""
        factor = np.ones(6)
        for k in range(order):
            factor = factor * np.maximum(POWERS - k, 0)
        basis = factor * np.asarray(share)[..., None] ** np.maximum(POWERS - order, 0)
        return np.asarray(basis @ self.coefficients / self.duration_s[:, None, None] ** order)


def legs(begin: States, end: States, duration_s: Array) -> Legs:
    """The quintics from states to states (m, n) in durations (m,)."""
    time = np.asarray(duration_s)[:, None]
    ends = [begin.q, begin.v * time, begin.a * time**2, end.q, end.v * time, end.a * time**2]
    return Legs(np.einsum("rp,rmn->mpn", HERMITE, np.array(ends)), np.asarray(duration_s))


def motion_of(knots: Knots, period_s: float) -> Motion:
    """The motion through knots on the control grid; it starts at t = 0 and ends at rest on the last row.

    Velocities are the quintics' at the rows, accelerations constant between them, positions by exact integration from
    the first knot: they leave the quintics by a twelfth of the period squared times the acceleration.
    """
    rows = int(np.ceil(knots.t_s[-1] / period_s - 1e-9)) + 1
    t = np.minimum(period_s * np.arange(rows), knots.t_s[-1])
    piece = np.clip(np.searchsorted(knots.t_s, t, side="right") - 1, 0, len(knots.t_s) - 2)
    states = States(knots.q, knots.v, knots.a)
    whole = legs(states.take(slice(None, -1)), states.take(slice(1, None)), np.diff(knots.t_s))
    share = (t - knots.t_s[piece]) / whole.duration_s[piece]
    v = Legs(whole.coefficients[piece], whole.duration_s[piece]).at(share[:, None], 1)[:, 0]
    v[-1] = knots.v[-1]
    a = np.concatenate([np.diff(v, axis=0) / period_s, np.zeros((1, v.shape[1]))])
    way = np.concatenate([np.zeros((1, v.shape[1])), np.cumsum((v[1:] + v[:-1]) / 2 * period_s, axis=0)])
    return Motion(0.0, period_s, knots.q[0] + way, v, a)
