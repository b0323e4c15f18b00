"""The quadratic-programming solvers, called through qpsolvers; its only importer.

Allowed are solvers that never gave a false answer or hung on the problems of this program. Others flag
infeasible or non-finite answers as found, or hang on badly scaled rows. To add one: a line in BACKENDS, and the
tests' problem set must pass.
"""

from __future__ import annotations

from typing import Any

import numpy as np
import qpsolvers

from reach.cell import Array
from reach.errors import SolverFailure
from reach.qp.problem import KKT_TOLERANCE, PRIMAL_TOLERANCE, QpProblem, QpSolution, QpStatus, residuals

BACKENDS: dict[str, dict[str, Any]] = {
    "daqp": {},
    "piqp": {"eps_abs": 1e-10, "eps_rel": 0.0},
    "clarabel": {"tol_gap_abs": 1e-10, "tol_gap_rel": 1e-10, "tol_feas": 1e-10},
}

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
            answer = self.attempt(problem, name)
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
        """The first solver's answer, not yet checked; None where it has none."""
        return self.attempt(problem, self.names[0])

    def attempt(self, problem: QpProblem, name: str) -> Answer | None:
        """One solver's raw answer, None where it says that it found none."""
        form = problem.form
        if form is None:
            form = problem.form = qpsolvers.Problem(
                problem.P, problem.q, problem.G, problem.h, None, None, problem.lb, problem.ub
            )
        try:
            answer = qpsolvers.solve_problem(form, name, **BACKENDS[name])
        except Exception:  # whatever a backend throws counts as "it gave no answer"
            return None
        if not answer.found or answer.x is None or answer.z is None or answer.z_box is None:
            return None
        return answer.x, answer.z, answer.z_box
