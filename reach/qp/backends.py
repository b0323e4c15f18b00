"""The quadratic-programming solvers, called through qpsolvers; its only importer.

Allowed are solvers that never gave a false answer or hung on the problems of this program. Others flag
infeasible or non-finite answers as found, or hang on badly scaled rows. To add one: a line in BACKENDS, and the tests' problem set
must pass.
"""

from __future__ import annotations


import numpy as np
import qpsolvers

from reach.cell import Array
from reach.errors import SolverFailure
from reach.qp.problem import KKT_TOLERANCE, PRIMAL_TOLERANCE, QpProblem, QpSolution, QpStatus, residuals

BACKENDS: dict[str, dict[str, object]] = {
    "daqp": {},
    "piqp": {"eps_abs": 1e-10, "eps_rel": 0.0},
    "clarabel": {"tol_gap_abs": 1e-10, "tol_gap_rel": 1e-10, "tol_feas": 1e-10},
}


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
                raise SolverFailure(f'solver "{wanted}" is not installed (found: {found}); pip install {wanted}')
        self.names = (name, fallback)
        self._problems: dict[int, qpsolvers.Problem] = {}

    def solve(self, problem: QpProblem) -> QpSolution:
        """Solve, check, and where the check fails ask the second solver.

        INFEASIBLE is claimed only where both agree that there is no feasible point; anything else that fails the check
        is FAILED.
        """
        none_found = 0
        for attempt, name in enumerate(self.names):
            found, x, z, z_box = self.attempt(problem, name)
            if found:
                primal, kkt = residuals(problem, x, z, z_box)
                if primal <= PRIMAL_TOLERANCE and kkt <= KKT_TOLERANCE:
                    return QpSolution(x, z, z_box, QpStatus.SOLVED, attempt > 0)
            else:
                none_found += 1
        empty = np.full(len(problem.q), np.nan)
        status = QpStatus.INFEASIBLE if none_found == len(self.names) else QpStatus.FAILED
        return QpSolution(empty, np.zeros(len(problem.h)), np.zeros(len(problem.q)), status, True)

    def attempt(self, problem: QpProblem, name: str) -> tuple[bool, Array, Array, Array]:
        """One solver's raw answer: whether it says it found one, x, z, z_box."""
        held = self._problems.get(id(problem))
        if held is None or held.G is not problem.G:
            held = qpsolvers.Problem(
                problem.P, problem.q, problem.G, problem.h, None, None, problem.lb, problem.ub
            )
            self._problems[id(problem)] = held
        try:
            answer = qpsolvers.solve_problem(held, name, **BACKENDS[name])
        except Exception:  # noqa: BLE001 - whatever a backend throws counts as "it gave no answer"
            return False, problem.q, problem.h, problem.q
        if not answer.found or answer.x is None:
            return False, problem.q, problem.h, problem.q
        return True, answer.x, answer.z, answer.z_box
