"""The answer on a law as plain data: outcomes and figures, no row a bounce."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

import numpy as np

from reach.cell import Trial
from reach.evidence.trials import Run
from reach.report.cautions import with_speed
from reach.report.document import whole
from reach.report.trial import numbers
from reach.result import TrialResult

VERSION = 1  # of the schema


def document(result: TrialResult) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema."""
    evidence = result.evidence
    own = {
        "law": evidence.law,
        "gains": dict(evidence.gains),
        "recovered_share": evidence.recovered_share,
        "recovered_low_share": evidence.low,
        "recovered_high_share": evidence.high,
        "figures": figures(result),
        "outcomes": [asdict(ending) for ending in numbers.endings(evidence)],
        "lost_by": [asdict(loss) for loss in numbers.losses(evidence)],
        "outcome": [_outcome(place, run) for place, run in enumerate(evidence.runs, start=1)],
        "blocked": evidence.blocked,
        "stopped": evidence.stopped,
        "trial": settings(result.cell.trial),
    }
    return whole(result, VERSION, own, evidence.unknown, cautions(result))


def figures(result: TrialResult) -> dict[str, Any]:
    """Return the numbers that compare two laws."""
    evidence = result.evidence
    made, swing = numbers.bounces(evidence), numbers.oscillations(evidence)
    settled = np.array([run.recovered_at for run in evidence.runs if run.recovered_at is not None])
    worst = numbers.worst_run(evidence.runs)
    return {
        "starts": evidence.asked,
        "tried": len(evidence.runs),
        "recovered": int(evidence.recovered.sum()),
        "bounces_median": numbers.middle(made),
        "bounces_least": int(made.min()) if len(made) else None,
        "recovered_at_median": numbers.middle(settled),
        "recovered_at_most": int(settled.max()) if len(settled) else None,
        "oscillation_median_m": numbers.middle(swing),
        "oscillation_most_m": float(swing.max()) if len(swing) else None,
        "use_most": None if worst is None else numbers.known(evidence.runs[worst])[0].utilisation,
        "elastic_steps": sum(run.elastic_steps for run in evidence.runs),
        "failed_steps": sum(run.failed_steps for run in evidence.runs),
    }


def settings(trial: Trial | None) -> dict[str, Any] | None:
    """Return what was asked, as plain data; None where the cell has no such table."""
    return None if trial is None else {**asdict(trial), "gains": dict(trial.gains)}


def cautions(result: TrialResult) -> tuple[str, ...]:
    """Return the cautions for the trials."""
    return with_speed(numbers.peak_speed(result.evidence.runs), "the trials", more=True)


def _outcome(place: int, run: Run) -> dict[str, Any]:
    """One trial, its start counted from 1."""
    return {
        "start": place,
        "offset_x_m": run.offset[0],
        "offset_y_m": run.offset[1],
        "lateral_x_m_s": run.lateral[0],
        "lateral_y_m_s": run.lateral[1],
        "outcome": run.outcome,
        "text": run.text,
        "recovered": run.recovered,
        "recovered_at": run.recovered_at,
        "bounces": run.bounces,
        "limit": run.limit,
        "joint": run.joint,
        "oscillation_m": run.oscillation_m,
        "ended_s": run.ended_s,
        "broken": run.broken,
    }
