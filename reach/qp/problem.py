"""A quadratic program and its answer, and the check that trusts no solver's word."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum
from typing import Any

import numpy as np

from reach.cell import Array

# All rows are scaled by their limits and all variables are velocities of order one: one tolerance serves. A
# violation below it is rounding (some solvers call lb ≈ ub infeasible at 1e-13).
PRIMAL_TOLERANCE = 1e-6
KKT_TOLERANCE = 1e-6


class QpStatus(Enum):
    """How a solve ended; the value says what happened and what to do."""

    SOLVED = "solved and checked"
    INFEASIBLE = "no point satisfies all rows; let some of them give way"
    FAILED = "neither solver gave an answer that passes the check; please report the problem"


@dataclass(eq=False, slots=True)
class QpProblem:
    """minimise ½ xᵀ P x + qᵀ x subject to G x <= h and lb <= x <= ub.

    P (n, n) positive definite, q (n,), G (m, n), h (m,), lb, ub (n,), all finite. The arrays are a workspace: a
    step writes them anew, so that nothing is allocated in the loop. `form` is the backend's own view of them.
    """

    P: Array
    q: Array
    G: Array
    h: Array
    lb: Array
    ub: Array
    form: Any = None


@dataclass(frozen=True, eq=False, slots=True)
class QpSolution:
    """Answer to a QpProblem.

    Attributes
    ----------
    x : (n,)
    z : (m,) multipliers of G x <= h, none below zero
    z_box : (n,) multipliers of the box: above zero at ub, below zero at lb
    status : QpStatus
    fell_back : whether the second solver gave the answer
    """

    x: Array
    z: Array
    z_box: Array
    status: QpStatus
    fell_back: bool = False


class QpBlock:
    """Many problems of one size side by side, solved one by one and checked together.

    The check of one answer costs as much as half a solve; of a whole block it costs next to nothing.

    Attributes
    ----------
    problems : list of QpProblem, views into the block's arrays
    x, z, z_box : (size, …) the answers, to be written by whoever solved
    """

    def __init__(self, size: int, n: int, m: int):
        self.P, self.q = np.empty((size, n, n)), np.empty((size, n))
        self.G, self.h = np.empty((size, m, n)), np.empty((size, m))
        self.lb, self.ub = np.empty((size, n)), np.empty((size, n))
        self.x, self.z, self.z_box = np.empty((size, n)), np.empty((size, m)), np.empty((size, n))
        arrays = (self.P, self.q, self.G, self.h, self.lb, self.ub)
        self.problems = [QpProblem(*(array[k] for array in arrays)) for k in range(size)]

    def first_bad(self, slots: list[int]) -> int | None:
        """The first of some slots whose answer fails the check, None where all pass."""
        part = [a[slots] for a in (self.P, self.q, self.G, self.h, self.lb, self.ub)]
        primal, kkt = residuals(QpProblem(*part), self.x[slots], self.z[slots], self.z_box[slots])
        good = (primal <= PRIMAL_TOLERANCE) & (kkt <= KKT_TOLERANCE)
        return None if good.all() else slots[int(np.argmin(good))]


def residuals(p: QpProblem, x: Array, z: Array, z_box: Array) -> tuple[Array, Array]:
    """Largest primal violation, and largest residual of the other KKT conditions, nan where x is not finite.

    Stationarity P x + q + Gᵀz + z_box, signs of z, complementarity of each multiplier and its slack; relative to
    one plus the largest entry of q. Leading axes of all arrays run over problems.
    """
    slack = p.h - (p.G @ x[..., None])[..., 0]
    above, below = p.ub - x, x - p.lb
    primal = -np.minimum(np.minimum(above, below).min(-1), slack.min(-1, initial=0.0))
    gradient = (p.P @ x[..., None])[..., 0] + p.q + (z[..., None, :] @ p.G)[..., 0, :] + z_box
    sign = -z.min(-1, initial=0.0)
    gap = np.abs(z * np.maximum(slack, 0.0)).sum(-1)
    gap += (np.maximum(z_box, 0) * np.maximum(above, 0) - np.minimum(z_box, 0) * np.maximum(below, 0)).sum(-1)
    worst = np.maximum(np.maximum(np.abs(gradient).max(-1), sign), gap)
    return np.maximum(primal, 0.0), worst / (1 + np.abs(p.q).max(-1))
