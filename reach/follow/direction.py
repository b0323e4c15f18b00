"""Falling short along the commanded direction: keep the direction first, then as much speed as the limits give.

Scaling the task where its exact direction is feasible: Flacco, De Luca & Khatib, ICRA 2012; IEEE T-RO 31(3) 2015. Where
limits bite while the direction turns, J v⁺ = s ν has no solution, so three levels are solved one after the other: the
least part off the direction, then the largest s <= 1, then the posture.
"""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.follow.step import POSTURE_WEIGHT, Step, Stepper
from reach.limits.base import Now
from reach.qp.problem import QpProblem, QpStatus

EXACT_M_S = 1e-7  # shortfall below which the closest step is already all three levels' answer
RANK_SHARE = 1e-6  # singular values below this share of the largest count as zero


def same_direction(stepper: Stepper, now: Now, target: Array, posture_velocity: Array) -> Step:
    """The step whose twist keeps the direction of the target (6,) best and then its size."""
    first = stepper.closest(now, target, posture_velocity)
    wanted = stepper.weight * target
    size = float(np.linalg.norm(wanted))
    if first.status != "solved" or first.shortfall < EXACT_M_S or size < EXACT_M_S:
        return first
    problem = stepper.rows.fill(now)
    stepper.cost(now.state, now.v, target, posture_velocity, problem)
    along = wanted / size
    # The twist reached is task @ change + reached0; error is that less what is wanted.
    reached = stepper.error + wanted
    aside = np.eye(6) - np.outer(along, along)
    change, fell_back = np.zeros(len(now.q)), first.fell_back
    free = np.eye(len(now.q))
    solution = first.solution
    levels = [(aside @ stepper.task, aside @ reached), ((along @ stepper.task)[None], np.array([along @ reached - size]))]
    for rows, offset in levels:
        level = _level(problem, rows @ free, offset + rows @ change, free, change, now, posture_velocity)
        answer = stepper.solver.solve(level)
        if answer.status is not QpStatus.SOLVED:
            return first
        change, fell_back = change + free @ answer.x, fell_back or answer.fell_back
        free = free @ _null_space(rows @ free)
        if free.shape[1] == 0:
            break
    return stepper.outcome(change, "solved", solution, None, fell_back)


def _level(
    problem: QpProblem, rows: Array, offset: Array, free: Array, change: Array, now: Now, posture: Array
) -> QpProblem:
    """Least squares ‖rows y + offset‖² in the directions still free, all limits kept."""
    share = POSTURE_WEIGHT / len(problem.q) * np.trace(problem.P)
    P = rows.T @ rows + share * np.eye(free.shape[1])
    q = offset @ rows + share * (now.v + change - posture) @ free
    G = np.vstack([problem.G @ free, free, -free])
    h = np.concatenate([problem.h - problem.G @ change, problem.ub - change, change - problem.lb])
    wide = np.full(free.shape[1], 1e3)
    return QpProblem(P, q, G, np.maximum(h, 0.0) if not change.any() else h, -wide, wide)


def _null_space(rows: Array) -> Array:
    _, values, axes = np.linalg.svd(rows)
    rank = int(np.sum(values > RANK_SHARE * max(values.max(initial=0.0), 1e-12)))
    return np.asarray(axes[rank:].T)
