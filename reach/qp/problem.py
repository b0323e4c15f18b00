"""A quadratic program and its answer, which re-checks itself."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

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


@dataclass(eq=False)
class QpProblem:
    """minimise ½ xᵀ P x + qᵀ x subject to G x <= h and lb <= x <= ub.

    P (n, n) positive definite, q (n,), G (m, n), h (m,), lb, ub (n,), all finite. The arrays are a workspace: a
    step writes them anew, so that nothing is allocated in the loop.
    """

    P: Array
    q: Array
    G: Array
    h: Array
    lb: Array
    ub: Array


@dataclass(frozen=True, eq=False)
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


def residuals(p: QpProblem, x: Array, z: Array, z_box: Array) -> tuple[float, float]:
    """Largest primal violation, and largest residual of the other KKT conditions, nan where x is not finite.

    Stationarity P x + q + Gᵀz + z_box, signs of z, complementarity of each multiplier and its slack; relative to
    one plus the largest entry of q.
    """
    slack = p.h - p.G @ x
    above, below = p.ub - x, x - p.lb
    primal = -min(slack.min(initial=0.0), above.min(), below.min())
    stationarity = np.abs(p.P @ x + p.q + z @ p.G + z_box).max()
    sign = -z.min(initial=0.0)
    gap = np.abs(z @ np.maximum(slack, 0.0)) + np.maximum(z_box, 0) @ np.maximum(above, 0)
    gap -= np.minimum(z_box, 0) @ np.maximum(below, 0)
    return float(primal), float(max(stationarity, sign, gap) / (1 + np.abs(p.q).max()))
