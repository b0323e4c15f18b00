"""The quadratic-programming solvers, called through qpsolvers; its only importer.

Allowed are solvers that never gave a false answer or hung on the problems of this program. Others flag
infeasible or non-finite answers as found, or hang on badly scaled rows. To add one: a line in BACKENDS, and the
tests' problem set must pass.
"""

from __future__ import annotations

import math
import warnings
from typing import Any

import numpy as np
import qpsolvers
from scipy.sparse import csc_matrix

from reach.cell import Array
from reach.errors import SolverFailure, SolverHung
from reach.qp.problem import KKT_TOLERANCE, PRIMAL_TOLERANCE, QpProblem, QpSolution, QpStatus, residuals
from reach.qp.watch import Watch

# Their own bounds on the work of a solve stay as they come, since to state them costs daqp half a solve: daqp ends
# after 10000 iterations and where it comes to the same set again, piqp after 250, clarabel after 200.
BACKENDS: dict[str, dict[str, Any]] = {
    "daqp": {},
    "piqp": {"eps_abs": 1e-10, "eps_rel": 0.0},
    "clarabel": {"tol_gap_abs": 1e-10, "tol_gap_rel": 1e-10, "tol_feas": 1e-10},
}
SPARSE = ("clarabel",)  # take their matrices in sparse form alone

# A false answer taken at its word costs the whole block that follows it. So after three close to each other the first
# solver's answers are checked one by one, until so many passed.
DOUBT = 8  # answers that must pass for each false one
DOUBTED = 2 * DOUBT
MOST_DOUBT = 8 * DOUBT

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
        self._watch = Watch()
        self._doubt = 0

    def solve(self, problem: QpProblem) -> QpSolution:
        """Solve, check, and where the check fails ask the second solver.

        INFEASIBLE is claimed only where both find no feasible point; anything else that fails the check is FAILED.

        Raises
        ------
        SolverHung
            When a solver does not come back.
        """
        none_found = 0
        for attempt, name in enumerate(self.names):
            try:
                answer = self.attempt(problem, name)
            except SolverHung:
                raise
            except Exception:  # whatever a backend throws proves nothing, neither way
                self._believe(attempt, False)
                continue
            if answer is None:
                none_found += 1
                continue
            primal, kkt = residuals(problem, *answer)
            good = bool(primal <= PRIMAL_TOLERANCE and kkt <= KKT_TOLERANCE)
            self._believe(attempt, good)
            if good:
                return QpSolution(*answer, QpStatus.SOLVED, attempt > 0)
        n = len(problem.q)
        status = QpStatus.INFEASIBLE if none_found == len(self.names) else QpStatus.FAILED
        return QpSolution(np.full(n, np.nan), np.zeros(len(problem.h)), np.zeros(n), status, True)

    def first(self, problem: QpProblem) -> Answer | None:
        """The first solver's answer, not yet checked; None where it has none, fails, or failed too often before."""
        if self._doubt > DOUBTED:
            return None
        try:
            return self.attempt(problem, self.names[0])
        except SolverHung:
            raise
        except Exception:  # the careful solve that follows tells what it was
            return None

    def attempt(self, problem: QpProblem, name: str) -> Answer | None:
        """One solver's raw answer, None where it says that it found none.

        Raises
        ------
        ArithmeticError
            Where the answer is not of the problem's size, or its point not finite.
        SolverHung
            Where it does not come back.
        """
        self._watch.begin(name)
        try:
            answer = self._asked(problem, name)
        finally:
            self._watch.end()
        if not answer.found or answer.x is None or answer.z is None or answer.z_box is None:
            return None
        x, z, z_box = answer.x, answer.z, answer.z_box
        if not (len(x) == len(z_box) == len(problem.q) and len(z) == len(problem.h)):
            raise ArithmeticError("an answer of another size")
        if not math.isfinite(x.dot(x)):
            raise ArithmeticError("a point that is not finite")
        return x, z, z_box

    def _believe(self, attempt: int, good: bool) -> None:
        """Note whether the first solver's answer passed."""
        if attempt == 0:
            self._doubt = max(self._doubt - 1, 0) if good else min(self._doubt + DOUBT, MOST_DOUBT)

    def _asked(self, problem: QpProblem, name: str) -> qpsolvers.Solution:
        if name in SPARSE:
            with warnings.catch_warnings():
                warnings.simplefilter("ignore")  # it warns of what `found` says
                form = _form(problem, csc_matrix(problem.P), csc_matrix(problem.G))
                return qpsolvers.solve_problem(form, name, **BACKENDS[name])
        if problem.form is None:
            problem.form = _form(problem, problem.P, problem.G)
        return qpsolvers.solve_problem(problem.form, name, **BACKENDS[name])


def _form(problem: QpProblem, P: Any, G: Any) -> qpsolvers.Problem:
    """The problem as qpsolvers takes it; its arrays stay ours, so writing them anew changes it."""
    return qpsolvers.Problem(P, problem.q, G, problem.h, None, None, problem.lb, problem.ub)
