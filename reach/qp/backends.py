"""The quadratic-programming solvers, called through qpsolvers; its only importer.

Allowed are solvers that never gave a false answer or hung on the problems of this program. Others flag
infeasible or non-finite answers as found, or hang on badly scaled rows. To add one: a line in BACKENDS, and the
tests' problem set must pass.
"""

from __future__ import annotations

import warnings
from typing import Any

import numpy as np
import qpsolvers
from scipy.sparse import csc_matrix

from reach.cell import Array
from reach.errors import SolverFailure
from reach.qp.problem import KKT_TOLERANCE, PRIMAL_TOLERANCE, QpProblem, QpSolution, QpStatus, residuals

BACKENDS: dict[str, dict[str, Any]] = {
    "daqp": {},
    "piqp": {"eps_abs": 1e-10, "eps_rel": 0.0},
    "clarabel": {"tol_gap_abs": 1e-10, "tol_gap_rel": 1e-10, "tol_feas": 1e-10},
}
SPARSE = ("clarabel",)  # take their matrices in sparse form alone

Answer = tuple[Array, Array, Array]  # x, z, z_box


class Solver:
    """Two solvers and our own check between them.

    Parameters
    ----------
    name, fallback : str
        Keys of BACKENDS.

    Raises
    ------
    SolverFailure
        When a named solver is not installed.
    """

    def __init__(self, name: str, fallback: str):
        for wanted in (name, fallback):
            if wanted not in qpsolvers.available_solvers:
                found = ", ".join(s for s in qpsolvers.available_solvers if s in BACKENDS)
                raise SolverFailure(
                    f'solver "{wanted}" is not installed (found: {found}); pip install {wanted}'
                )
        self.names = (name, fallback)

    def solve(self, problem: QpProblem) -> QpSolution:
        """Solve, check, and where the check fails ask the second solver.

        INFEASIBLE is claimed only where both find no feasible point; anything else that fails the check is FAILED.
        """
        none_found = 0
        for attempt, name in enumerate(self.names):
            try:
                answer = self.attempt(problem, name)
            except Exception:  # whatever a backend throws proves nothing, neither way
                continue
            if answer is None:
                none_found += 1
                continue
            primal, kkt = residuals(problem, *answer)
            if primal <= PRIMAL_TOLERANCE and kkt <= KKT_TOLERANCE:
                return QpSolution(*answer, QpStatus.SOLVED, attempt > 0)
        n = len(problem.q)
        status = QpStatus.INFEASIBLE if none_found == len(self.names) else QpStatus.FAILED
        return QpSolution(np.full(n, np.nan), np.zeros(len(problem.h)), np.zeros(n), status, True)

    def first(self, problem: QpProblem) -> Answer | None:
        """The first solver's answer, not yet checked; None where it has none or fails."""
        try:
            return self.attempt(problem, self.names[0])
        except Exception:  # the careful solve that follows tells what it was
            return None

    def attempt(self, problem: QpProblem, name: str) -> Answer | None:
        """One solver's raw answer, None where it says that it found none."""
        if name in SPARSE:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # it warns of what `found` says
                form = _form(problem, csc_matrix(problem.P), csc_matrix(problem.G))
                answer = qpsolvers.solve_problem(form, name, **BACKENDS[name])
        else:
            if problem.form is None:
                problem.form = _form(problem, problem.P, problem.G)
            answer = qpsolvers.solve_problem(problem.form, name, **BACKENDS[name])
        if not answer.found or answer.x is None or answer.z is None or answer.z_box is None:
            return None
        return answer.x, answer.z, answer.z_box


def _form(problem: QpProblem, P: Any, G: Any) -> qpsolvers.Problem:
    """The problem as qpsolvers takes it; its arrays stay ours, so writing them anew changes it."""
    return qpsolvers.Problem(P, problem.q, G, problem.h, None, None, problem.lb, problem.ub)
