"""Figures of trials: outcomes, what lost the ball, bounces, oscillation, use of limits."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.record import Use
from reach.evidence.trials import Run, TrialEvidence


@dataclass(frozen=True)
class Ending:
    """How many trials ended in one way, and how many of these count as recovered."""

    outcome: str
    trials: int
    recovered: int


@dataclass(frozen=True)
class Loss:
    """How many lost trials one limit of one joint held back; limit "" where nothing did."""

    limit: str
    joint: str
    trials: int


def endings(evidence: TrialEvidence) -> list[Ending]:
    """Return the ways in which trials ended, the most frequent first."""
    count = Counter(run.outcome for run in evidence.runs)
    recovered = Counter(run.outcome for run in evidence.runs if run.recovered)
    return [Ending(outcome, trials, recovered[outcome]) for outcome, trials in count.most_common()]


def losses(evidence: TrialEvidence) -> list[Loss]:
    """Return what held the arm back in the trials not recovered, the most frequent first."""
    count = Counter((run.limit, run.joint) for run in evidence.runs if not run.recovered)
    return [Loss(limit, joint, trials) for (limit, joint), trials in count.most_common()]


def bounces(evidence: TrialEvidence) -> NDArray[np.int64]:
    """Return the contacts made in each trial (r,)."""
    return np.array([run.bounces for run in evidence.runs], dtype=np.int64)


def oscillations(evidence: TrialEvidence) -> Array:
    """Return the residual oscillation (k,) m of the trials in which it is known."""
    found = np.array([run.oscillation_m for run in evidence.runs], dtype=np.float64)
    return found[np.isfinite(found)]


def middle(values: Array | NDArray[np.int64]) -> float:
    """Return the median, nan of nothing."""
    return float(np.median(values)) if len(values) else math.nan


def known(run: Run) -> list[Use]:
    """Return the uses of a trial whose share of the limit is known, the largest first."""
    found = [use for use in run.uses if use.utilisation is not None and not math.isnan(use.utilisation)]
    return sorted(found, key=lambda use: -(use.utilisation or 0.0))


def worst_run(runs: Sequence[Run]) -> int | None:
    """Return the trial that used most of a limit, None where none is known."""
    peaks = [(uses[0].utilisation or 0.0, -place) for place, run in enumerate(runs) if (uses := known(run))]
    return -max(peaks)[1] if peaks else None


def peak_speed(runs: Sequence[Run]) -> float | None:
    """Return the largest speed of the strike point that was seen, m/s; None where there is none."""
    seen = [0.0]
    for run in runs:
        seen += [float(np.max(run.contacts.paddle_m_s, initial=0.0))]
        seen += [use.peak for use in run.uses if use.limit == "tool speed" and math.isfinite(use.peak)]
        if len(run.trace.t_s) > 1:
            way = np.linalg.norm(np.diff(run.trace.paddle, axis=0), axis=1)
            seen.append(float(np.max(way / np.diff(run.trace.t_s))))
    peak = max(value for value in seen if math.isfinite(value))
    return peak if peak > 0 else None


def typical(runs: Sequence[Run]) -> int | None:
    """Return the recovered trial that took a middling number of bounces to settle, None where there is none."""
    found = sorted((run.recovered_at or 0, place) for place, run in enumerate(runs) if run.recovered)
    return found[len(found) // 2][1] if found else None


def first_lost(runs: Sequence[Run]) -> int | None:
    """Return the first trial that is not recovered, None where there is none."""
    return next((place for place, run in enumerate(runs) if not run.recovered), None)
