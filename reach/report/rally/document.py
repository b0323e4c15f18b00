"""The answer on an envelope as plain data: figures, edges and bounces, no row a point."""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

import numpy as np

from reach.cell import Rally
from reach.evidence.rallies import RallyEvidence
from reach.report.cautions import with_speed
from reach.report.document import whole
from reach.report.rally import numbers
from reach.result import RallyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

VERSION = 1  # of the schema


def document(result: RallyResult) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema."""
    evidence = result.evidence
    own = {
        "figures": figures(result),
        "edges": [_in_degrees(asdict(edge)) for edge in evidence.edges],
        "offsets": [_in_degrees(asdict(edge)) for edge in evidence.offsets],
        "centres": [asdict(centre) for centre in evidence.centres],
        "bounces": [_bounce(asdict(bounce), bounce) for bounce in evidence.bounces],
        "impact": _impact(result),
        "stopped": evidence.stopped,
        "rally": settings(result.cell.rally),
    }
    return whole(result, VERSION, own, evidence.unknown, cautions(result))


def figures(result: RallyResult) -> dict[str, Any]:
    """Return the numbers that compare two cells."""
    evidence, points = result.evidence, result.evidence.points
    counts, total, done = numbers.verdict_counts(points), len(points.verdict), numbers.held(points)
    best, smallest = numbers.best_offset(evidence.offsets), numbers.smallest_offset(evidence.offsets)
    return {
        "points": total,
        "deliverable": counts[DELIVERABLE],
        "not_deliverable": counts[NOT_DELIVERABLE],
        "undecided": counts[UNDECIDED],
        "deliverable_share": _share(counts[DELIVERABLE], total),
        "not_deliverable_share": _share(counts[NOT_DELIVERABLE], total),
        "undecided_share": _share(counts[UNDECIDED], total),
        "deliverable_without_margins_share": _share(int(points.margin_free.sum()), total),
        "recovered_offset_most_m": None if best is None else best.largest_m,
        "recovered_offset_least_m": None if smallest is None else smallest.largest_m,
        "margin_least_s": numbers.least(points.margin_s[done]),
        "margin_median_s": numbers.middle(points.margin_s[done]),
        "paddle_speed_least_m_s": numbers.least(points.paddle_speed_m_s),
        "paddle_speed_most_m_s": numbers.most(points.paddle_speed_m_s),
        "face_tilt_most_deg": math.degrees(numbers.most(points.face_tilt_rad)),
        **_uncertainty(evidence),
        "centres": len(evidence.centres),
        "centres_with_all": numbers.full_centres(evidence.centres),
        "centres_with_some": sum(centre.deliverable > 0 for centre in evidence.centres),
        "drag": evidence.drag,
        "lift": evidence.lift,
    }


def settings(rally: Rally | None) -> dict[str, Any] | None:
    """Return what was asked, as plain data; None where the cell has no such table."""
    return None if rally is None else dict(vars(rally))


def cautions(result: RallyResult) -> tuple[str, ...]:
    """Return the cautions for the strikes."""
    points = result.evidence.points
    peak = numbers.most(points.paddle_speed_m_s[points.verdict == DELIVERABLE])
    return with_speed(peak if peak > 0 else None, "the strikes demonstrated", more=True)


def _uncertainty(evidence: RallyEvidence) -> dict[str, Any]:
    points = evidence.points
    row = numbers.lowest_row(points.feasible_share, numbers.held(points))
    found: dict[str, Any] = {
        "nominal_only": evidence.nominal_only,
        "feasible_share_least": None if row is None else points.feasible_share[row],
        "feasible_low_share": None if row is None else points.feasible_low[row],
        "feasible_high_share": None if row is None else points.feasible_high[row],
        "feasible_share_median": numbers.middle(points.feasible_share[numbers.held(points)]),
    }
    for field, _, kind in numbers.TOLERANCES:
        scale = math.degrees(1.0) if kind == "angle" else 1.0
        median, least = numbers.borne(points, field)
        name = field.replace("_rad", "_deg")
        found |= {f"{name}_median": scale * median, f"{name}_least": scale * least}
    return found


def _impact(result: RallyResult) -> dict[str, Any]:
    """The hardest hit at the centre: joints free to give, and joints locked."""
    evidence = result.evidence
    joints = [
        {
            "joint": joint.name,
            "velocity_jump_free": jump,
            "velocity_unit": "m/s" if joint.sliding else "rad/s",
            "impulse_locked": impulse,
            "impulse_unit": "N·s" if joint.sliding else "N·m·s",
        }
        for joint, jump, impulse in zip(
            result.cell.arm.joints, evidence.velocity_jump, evidence.joint_impulse, strict=True
        )
    ]
    return {"effective_mass_kg": evidence.effective_mass_kg, "joints": joints}


def _bounce(content: dict[str, Any], bounce: Any) -> dict[str, Any]:
    return {
        **content,
        "stable_by_itself": numbers.stable_by_itself(bounce),
        "could_be_stable_by_itself": numbers.could_be_stable(bounce),
    }


def _in_degrees(content: dict[str, Any]) -> dict[str, Any]:
    """The same with the bearing in degrees, in its place."""
    return {
        ("bearing_deg" if name == "bearing_rad" else name): (
            float(np.round(np.degrees(value), 9)) if name == "bearing_rad" else value
        )
        for name, value in content.items()
    }


def _share(count: int, of: int) -> float | None:
    return count / of if of else None
