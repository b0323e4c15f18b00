"""Falling short along the commanded direction: keep the direction first, then as much speed as the limits give.

Scaling the task where its exact direction is feasible: Flacco, De Luca & Khatib, ICRA 2012; IEEE T-RO 31(3) 2015. Where
limits bite while the direction turns, J v⁺ = s ν has no solution, so three levels are solved one after the other: the
least part off the direction, then the largest s <= 1, then the posture.
"""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.follow.step import POSTURE_WEIGHT, Step, Stepper
from reach.qp.problem import QpProblem, QpStatus

EXACT_SHARE = 1e-3  # of the twist: a closest step that misses it by less is already all three levels' answer
STILL_M_S = 1e-7  # a twist below it has no direction
RANK_SHARE = 1e-6  # singular values below this share of the largest count as zero
LEVEL_TOLERANCE = 1e-9  # a level's own rounding, given to the next one in every row


def same_direction(stepper: Stepper, problem: QpProblem, slot: int, target: Array) -> Step:
    """The step whose twist keeps the direction of the target (6,) best and then its size.

    Parameters
    ----------
    problem : from `Stepper.problem` for the same slot
    """
    first = stepper.careful(problem)
    task, error = stepper.task[slot], stepper.error[slot]
    wanted = stepper.weight * target
    size = float(np.linalg.norm(wanted))
    short = float(np.linalg.norm(error + task @ first.change))
    if first.status != "solved" or size < STILL_M_S or short < EXACT_SHARE * size:
        return first
    along = wanted / size
    reached = error + wanted  # the twist without a change of velocity, weighted
    aside = np.eye(6) - np.outer(along, along)
    levels = (
        (aside @ task, aside @ reached),
        ((along @ task)[None], np.array([along @ reached - size])),
    )
    n = len(problem.q)
    change, free, fell_back = np.zeros(n), np.eye(n), first.fell_back
    for rows, offset in levels:
        answer = stepper.solver.solve(_level(problem, rows @ free, offset + rows @ change, free, change))
        if answer.status is not QpStatus.SOLVED:
            return first
        change, fell_back = change + free @ answer.x, fell_back or answer.fell_back
        free = free @ _null_space(rows @ free)
        if free.shape[1] == 0:
            break
    else:
        last = _level(problem, np.zeros((0, free.shape[1])), np.zeros(0), free, change)
        last.P, last.q = free.T @ problem.P @ free, (problem.q + problem.P @ change) @ free
        answer = stepper.solver.solve(last)
        if answer.status is QpStatus.SOLVED:
            change = change + free @ answer.x
    return first._replace(change=change, fell_back=fell_back)


def _level(problem: QpProblem, rows: Array, offset: Array, free: Array, change: Array) -> QpProblem:
    """Least squares ‖rows y + offset‖² in the directions still free, all limits kept, small in the posture's cost."""
    gradient = problem.q + problem.P @ change
    P = rows.T @ rows + POSTURE_WEIGHT * (free.T @ problem.P @ free) + 1e-9 * np.eye(free.shape[1])
    q = offset @ rows + POSTURE_WEIGHT * (gradient @ free)
    G = np.vstack([problem.G @ free, free, -free])
    h = np.concatenate([problem.h - problem.G @ change, problem.ub - change, change - problem.lb])
    wide = np.full(free.shape[1], 1e3)
    return QpProblem(P, q, G, h + LEVEL_TOLERANCE, -wide, wide)


def _null_space(rows: Array) -> Array:
    _, values, axes = np.linalg.svd(rows)
    rank = int(np.sum(values > RANK_SHARE * max(values.max(initial=0.0), 1e-12)))
    return np.asarray(axes[rank:].T)
