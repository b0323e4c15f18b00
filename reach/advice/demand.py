"""The demand: what exact tracking would ask of each joint, with no limit in the way."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from scipy.linalg.lapack import dposv

from reach.arm import Arm
from reach.cell import Array, Cell
from reach.evidence.measure import Measured
from reach.evidence.motion import Motion
from reach.follow.reference import Reference
from reach.follow.step import POSTURE_WEIGHT, start_velocity, task_weight

RUNAWAY = 1e3  # rad/s or m/s: a demand beyond it (at a singularity) is cut there, which is far past any joint


@dataclass(frozen=True, eq=False)
class Demand:
    """The demanded motion and its measures."""

    motion: Motion
    measured: Measured


def demanded_motion(cell: Cell, arm: Arm, reference: Reference, start: Array) -> Motion:
    """The joint motion (from the start state) that tracks the command exactly, as far as the posture lets it.

    Each period's end velocity is the damped least-squares answer for the commanded twist, the same cost as the
    step's without its limits. Damping and the null-space return are the step's own.
    """
    dt, n = cell.period_s, arm.n
    weight = task_weight(cell)
    commanded = int(np.ceil((reference.end_s - reference.t_s[0]) / dt - 1e-6))
    targets = reference.targets(dt, commanded)
    gain, column = cell.solver.posture_gain_per_s, weight[:, None]
    task, matrix = np.empty((6, n)), np.empty((n, n))
    flat, diagonal = task.reshape(-1), matrix.reshape(-1)[:: n + 1]
    q, v = start.copy(), start_velocity(cell)
    rows_q, rows_v = [q], [v]
    for target in targets:
        jacobian, drift = arm.twist_terms(q, v)
        np.multiply(jacobian, column, out=task)
        np.dot(task.T, task, out=matrix)
        share = POSTURE_WEIGHT / n * flat.dot(flat)  # of the trace
        diagonal += share
        wanted = (weight * (target - drift * dt)).dot(task)
        wanted += (share * gain) * (start - q)
        _, next_v, _ = dposv(matrix, wanted)
        np.minimum(np.maximum(next_v, -RUNAWAY, out=next_v), RUNAWAY, out=next_v)
        q = q + (v + next_v) * (dt / 2)
        v = next_v
        rows_q.append(q)
        rows_v.append(v)
    speeds = np.array(rows_v)
    accelerations = np.vstack([np.diff(speeds, axis=0) / dt, np.zeros((1, n))])
    return Motion(float(reference.t_s[0]), dt, np.array(rows_q), speeds, accelerations)
