"""What a survey shows of each strike, as frozen data: the verdict and the report read nothing else."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.motion import Motion

Texts = NDArray[np.str_]

SWING = "swing"
STRAIGHT = "straight"


@dataclass(frozen=True, eq=False)
class Profiles:
    """Speed profiles of m strokes, each a run of pieces of constant jerk along its path coordinate.

    The path coordinate s (m of strike-point travel at the strike's speed, 0 at the strike) starts at rest at the first
    piece's start and ends at rest at the last one's end.

    Attributes
    ----------
    first : (m + 1,) index of each stroke's first piece; strokes without a motion have none
    duration_s, jerk_m_s3 : (pieces,)
    before : (pieces,) bool, pieces that lie before the strike
    """

    first: NDArray[np.int64]
    duration_s: Array
    jerk_m_s3: Array
    before: NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class Points:
    """Strikes of a survey, m of them, one row each; nan and "" where there is nothing.

    Attributes
    ----------
    position (m, 3) in m, normal (m, 3), direction (m, 3) of the strike, required_m_s (m,) along the normal
    verdict, basis : (m,) in the words of the interface
    demonstrated_m_s : (m,) paddle speed along the normal of a whole motion that keeps every limit
    bound_still_m_s, bound_free_m_s : (m,) what no motion passes in the postures compared, the paddle not turning
        at the strike, or turning
    limit, joint, phase : (m,) what stops it from being faster
    family : (m,) of the posture q (m, n)
    reason : (m,) a sentence on the verdict
    family_demonstrated_m_s : (m, families)
    effective_mass_kg : (m,) along the normal, joints free
    to_limit_share : (m,) least distance of a joint to its travel's end, 1 in mid-range, 0 at the end
    approach_m_s : (m,) speed at which ball and face meet
    velocity_jump : (m, n) of the joints by one hit, joints free to give, rad/s; joint_impulse : (m, n) by one hit,
        joints locked, N·m·s; ball_impulse : (m, 2) free and locked, N·s
    postures, starts : (m,) how many postures were compared, and from how many starts they were found
    stroke : (m,) SWING, STRAIGHT or ""
    tangent : (m, n) joint velocity at the strike per m/s along the direction
    profiles : Profiles of the strokes
    motions : motions of the straight strokes by row; a swing follows from q, tangent and its profile
    q_still, q_free : (m, n) postures of the bounds; dual_still (m, 6), dual_free (m, 6): their dual vectors
    margin_free : (m,) bool, deliverable with the margins at zero
    """

    position: Array
    normal: Array
    direction: Array
    required_m_s: Array
    verdict: Texts
    basis: Texts
    demonstrated_m_s: Array
    bound_still_m_s: Array
    bound_free_m_s: Array
    limit: Texts
    joint: Texts
    phase: Texts
    family: Texts
    reason: tuple[str, ...]
    family_demonstrated_m_s: Array
    q: Array
    effective_mass_kg: Array
    to_limit_share: Array
    approach_m_s: Array
    velocity_jump: Array
    joint_impulse: Array
    ball_impulse: Array
    postures: NDArray[np.int64]
    starts: NDArray[np.int64]
    stroke: Texts
    tangent: Array
    profiles: Profiles
    motions: dict[int, Motion]
    q_still: Array
    q_free: Array
    dual_still: Array
    dual_free: Array
    margin_free: NDArray[np.bool_]


@dataclass(frozen=True, eq=False)
class SurveyEvidence:
    """Everything the verdict on a survey rests on.

    Attributes
    ----------
    points : Points
    shape : (nx, ny, nz, faces) of a box, whose strikes go x slowest, then y, z and face; None for listed strikes
    families : names of the posture families, as in Points.family and its family columns
    kinds : names of the limit kinds
    unknown : (limit, joint) pairs nobody stated
    not_checked : names of what was not checked at all
    outline : (k, 3) joint origins from the base to the strike point in a posture that strikes, world, m
    reach_m : the farthest that the links let the strike point be from the first joint
    stopped : whether the run was stopped before all strikes were looked at; those left are undecided
    """

    points: Points
    shape: tuple[int, int, int, int] | None
    families: tuple[str, ...]
    kinds: tuple[str, ...]
    unknown: tuple[tuple[str, str | None], ...]
    not_checked: tuple[str, ...]
    outline: Array
    reach_m: float
    stopped: bool
