"""A finished joint motion: constant acceleration inside each control period, exact everywhere."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array

FINE = 4  # samples a control period in every measurement


@dataclass(frozen=True, eq=False)
class Motion:
    """Joint motion on a uniform control grid.

    Attributes
    ----------
    start_s : time of row 0, in the log's own time
    period_s : control period
    q, v, a : (m, n) rad, rad/s, rad/s² (m for sliding joints)
        q and v are the values at row k's instant; a holds from there until the next row. The last row's a
        is zero: the arm rests there.
    """

    start_s: float
    period_s: float
    q: Array
    v: Array
    a: Array

    @property
    def t_s(self) -> Array:
        """Times of the rows, shape (m,)."""
        return np.asarray(self.start_s + self.period_s * np.arange(len(self.q)), dtype=np.float64)

    def at(self, t_s: Array) -> tuple[Array, Array, Array]:
        """Joint position, velocity and acceleration at times (k,): three arrays (k, n).

        Exact for constant acceleration in a period; before the first row the arm is in its first state,
        after the last one at rest.
        """
        steps = (np.asarray(t_s) - self.start_s) / self.period_s
        row = np.clip(np.floor(steps + 1e-9).astype(int), 0, len(self.q) - 1)
        ahead = np.clip((steps - row) * self.period_s, 0.0, self.period_s)[:, None]
        return self.advance(row, ahead)

    def advance(self, row: np.ndarray, ahead: Array) -> tuple[Array, Array, Array]:
        """State `ahead` (k, 1) seconds after rows (k,)."""
        q, v, a = self.q[row], self.v[row], self.a[row]
        return q + v * ahead + a * ahead**2 / 2, v + a * ahead, a

    def fine(self) -> tuple[Array, Array, Array, Array]:
        """Times (f,) and states (f, n) on a grid FINE times as fine, the last row included once."""
        m = len(self.q)
        row = np.append(np.repeat(np.arange(m - 1), FINE), m - 1)
        ahead = np.append(np.tile(np.arange(FINE), m - 1), 0) * (self.period_s / FINE)
        return self.start_s + row * self.period_s + ahead, *self.advance(row, ahead[:, None])
