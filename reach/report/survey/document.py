"""The answer of a survey as plain data: figures and counts, no row a strike."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

import numpy as np

from reach.cell import Survey
from reach.report.cautions import with_speed
from reach.report.document import whole
from reach.report.survey import numbers
from reach.report.survey.numbers import PROVED, SHARES, Hit
from reach.result import SurveyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

VERSION = 1  # of the schema


def document(result: SurveyResult) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema."""
    evidence = result.evidence
    own = {
        "figures": figures(result),
        "limits_worst": [asdict(count) for count in numbers.worst_limits(evidence.points)],
        "families": [asdict(family) for family in numbers.families(result)],
        "impact": [_hit(hit) for hit in numbers.hits(result)],
        "stopped": evidence.stopped,
        "survey": settings(result.cell.survey),
    }
    return whole(result, VERSION, own, evidence.unknown, cautions(result))


def figures(result: SurveyResult) -> dict[str, Any]:
    """Return the numbers that compare two cells; a speed is in m/s along the face normal.

    Where strikes are unreachable, the speeds of a share of all strikes count them as zero, and medians leave them out.
    """
    points, survey = result.evidence.points, result.cell.survey
    counts, away = numbers.verdict_counts(points), numbers.unreachable(points)
    total, reachable = len(points.verdict), int((~away).sum())
    done = numbers.demonstrated(points)
    bound = numbers.bound_in_force(points, survey)
    region = numbers.region(result)
    turning = np.array([not joint.sliding for joint in result.cell.arm.joints], dtype=bool)
    proved = int((away & (points.basis == PROVED)).sum())
    return {
        "strikes": total,
        "deliverable": counts[DELIVERABLE],
        "not_deliverable": counts[NOT_DELIVERABLE],
        "undecided": counts[UNDECIDED],
        "deliverable_share": _share(counts[DELIVERABLE], total),
        "not_deliverable_share": _share(counts[NOT_DELIVERABLE], total),
        "undecided_share": _share(counts[UNDECIDED], total),
        "deliverable_of_reachable_share": _share(counts[DELIVERABLE], reachable),
        "deliverable_without_margins_share": _share(int(points.margin_free.sum()), total),
        "unreachable": total - reachable,
        "unreachable_proved": proved,
        "unreachable_searched": total - reachable - proved,
        "required_min_m_s": numbers.extent(points.required_m_s)[0],
        "required_max_m_s": numbers.extent(points.required_m_s)[1],
        "speed_for_share": [
            {
                "strikes_share": share,
                "demonstrated_m_s": numbers.speed_of_share(done, share),
                "bound_m_s": numbers.speed_of_share(bound, share),
            }
            for share in SHARES
        ],
        "demonstrated_median_m_s": numbers.middle(done[~away]),
        "demonstrated_max_m_s": numbers.most(done),
        "bound": numbers.way_of_striking(survey),
        "bound_still_median_m_s": numbers.middle(points.bound_still_m_s[~away]),
        "bound_free_median_m_s": numbers.middle(points.bound_free_m_s[~away]),
        "effective_mass_median_kg": numbers.middle(points.effective_mass_kg),
        "approach_median_m_s": numbers.middle(points.approach_m_s),
        "velocity_jump_free_max_rad_s": numbers.most(points.velocity_jump[:, turning]),
        "joint_impulse_locked_max_nm_s": numbers.most(points.joint_impulse[:, turning]),
        "ball_impulse_min_n_s": numbers.extent(points.ball_impulse)[0],
        "ball_impulse_max_n_s": numbers.extent(points.ball_impulse)[1],
        "region": None if region is None else {**asdict(region), "unit": region.unit},
    }


def settings(survey: Survey | None) -> dict[str, Any] | None:
    """Return what was asked, as plain data; None where the cell has no such table."""
    if survey is None:
        return None
    return {
        name: value.tolist() if isinstance(value, np.ndarray) else value
        for name, value in vars(survey).items()
        if name != "listed" or value is not None
    }


def cautions(result: SurveyResult) -> tuple[str, ...]:
    """Return the cautions for the strikes."""
    peak = numbers.most(numbers.demonstrated(result.evidence.points))
    return with_speed(peak if peak > 0 else None, "the strikes demonstrated", more=True)


def _share(count: int, of: int) -> float | None:
    return count / of if of else None


def _hit(hit: Hit) -> dict[str, Any]:
    return {
        "joint": hit.joint,
        "velocity_jump_free_max": hit.velocity_jump,
        "velocity_unit": "m/s" if hit.sliding else "rad/s",
        "impulse_locked_max": hit.impulse,
        "impulse_unit": "N·s" if hit.sliding else "N·m·s",
    }
