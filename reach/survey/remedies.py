"""What would help a survey: one change at a time, tried on some strikes, the best of each sort re-run on all."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Callable
from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from reach.cell import Cell
from reach.evidence.points import Points, SurveyEvidence
from reach.evidence.record import Remedy
from reach.survey.grid import Strikes
from reach.survey.rounds import Progress
from reach.survey.sweep import Retrial, retrials
from reach.variants import FIELDS, one_limit_scaled, raised_base, scaled_limits
from reach.verdict import DELIVERABLE

RAISED = 1.25  # times a limit that is tried
LIMITS_TRIED = 4
RUN_UPS = (1.5, 2.0)  # times the run-up
BASE_STEPS_M = (0.1, -0.1, 0.2, -0.2)
SAMPLE = 48  # strikes of each sort that a change is tried on first
HEADROOM_SAMPLE = 160  # strikes that the headroom is looked for on
SHRUNK = (0.95, 0.9, 0.8, 0.7, 0.6, 0.5)
GROWN = (1.05, 1.1, 1.2, 1.35, 1.5, 2.0)

Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class Change:
    """A changed cell: its sort (one of each is claimed), the words for it, and whether it may lose strikes."""

    sort: str
    words: str
    cell: Cell
    may_lose: bool = False


@dataclass(frozen=True)
class Advice:
    """What would help, what was tried in vain (in words), and by how much all limits may shrink or must grow."""

    remedies: tuple[Remedy, ...]
    in_vain: tuple[str, ...]
    headroom_share: float | None
    headroom_text: str


def advice(
    cell: Cell, strikes: Strikes, evidence: SurveyEvidence, workers: int, seed: int, progress: Progress | None
) -> Advice:
    """Remedies and headroom of a survey, every one re-run."""
    assert cell.survey is not None
    delivered = evidence.points.verdict == DELIVERABLE
    needed = math.ceil(cell.survey.required_share * len(strikes) - 1e-9)
    with retrials(workers, seed, progress) as trial:
        found, in_vain = _remedies(cell, strikes, evidence, delivered, trial)
        share, text = _headroom(cell, strikes, evidence, delivered, needed, trial)
    return Advice(found, in_vain, share, text)


def _remedies(
    cell: Cell, strikes: Strikes, evidence: SurveyEvidence, delivered: Mask, trial: Retrial
) -> tuple[tuple[Remedy, ...], tuple[str, ...]]:
    """The best change of each sort that gains strikes, and the changes that gain none."""
    if delivered.all():
        return (), ()
    missing, kept = np.flatnonzero(~delivered), np.flatnonzero(delivered)
    changes = [*_limits(cell, evidence.points, delivered), *_run_ups(cell), *_bases(cell)]
    few, some = _spread(missing, SAMPLE), _spread(kept, SAMPLE)
    tasks = [
        (change.cell, strikes.take(np.concatenate([few, some]) if change.may_lose else few))
        for change in changes
    ]
    answers = trial.delivered("remedies, a sample", tasks)
    best: dict[str, tuple[float, Change]] = {}
    for change, won in zip(changes, answers, strict=True):
        gain = won[: len(few)].mean() * len(missing)
        if change.may_lose and len(some):
            gain -= (1 - won[len(few) :].mean()) * len(kept)
        if gain > 0 and gain > best.get(change.sort, (0.0, change))[0]:
            best[change.sort] = (gain, change)
    chosen = [change for _, change in sorted(best.values(), key=lambda pair: -pair[0])]
    rerun = [(change.cell, strikes if change.may_lose else strikes.take(missing)) for change in chosen]
    found = []
    for change, won in zip(chosen, trial.delivered("remedies, all strikes", rerun), strict=True):
        gained = int(won[missing].sum() if change.may_lose else won.sum())
        lost = int((~won[kept]).sum()) if change.may_lose else 0
        if gained > lost:
            found.append(
                (gained - lost, Remedy(change.words, _effect(gained, lost, len(missing), len(strikes)), True))
            )
    helps = tuple(remedy for _, remedy in sorted(found, key=lambda pair: -pair[0]))
    claimed = {change.sort for change in chosen if change.words in {remedy.change for remedy in helps}}
    return helps, tuple(change.words for change in changes if change.sort not in claimed)


def _effect(gained: int, lost: int, missing: int, total: int) -> str:
    text = f"{gained} of the {missing} missing strikes become deliverable"
    if lost:
        text += f", {lost} others are lost"
    share = 100 * (total - missing + gained - lost) / total
    return f"{text}; {share:.1f} % of all then"


def _limits(cell: Cell, points: Points, delivered: Mask) -> list[Change]:
    """The limits that stop most missing strikes, each raised by itself."""
    stops = Counter(
        pair
        for pair in zip(points.limit[~delivered].tolist(), points.joint[~delivered].tolist(), strict=True)
        if pair[0] in FIELDS or pair[0] == "tool speed"
    )
    changes = []
    for (limit, joint), _ in stops.most_common(LIMITS_TRIED):
        changed = one_limit_scaled(cell, limit, joint or None, RAISED)
        of = f" of {joint}" if joint else ""
        verb = "widened" if limit == "position" else "raised"
        what = f"travel{of}" if limit == "position" else f"{limit}{of}"
        changes.append(Change("limit", f"{what} {verb} to {RAISED:g} times what is stated", changed))
    return changes


def _run_ups(cell: Cell) -> list[Change]:
    survey = cell.survey
    if survey is None or survey.run_up_m is None:
        return []
    return [
        Change(
            "run-up",
            f"a run-up of {factor * survey.run_up_m:.3g} m instead of {survey.run_up_m:.3g} m",
            replace(cell, survey=replace(survey, run_up_m=factor * survey.run_up_m)),
        )
        for factor in RUN_UPS
    ]


def _bases(cell: Cell) -> list[Change]:
    return [
        Change(
            "base",
            f"{'raise' if step > 0 else 'lower'} the base by {abs(step):.2f} m",
            raised_base(cell, step),
            True,
        )
        for step in BASE_STEPS_M
    ]


def _spread(rows: NDArray[np.int64], count: int) -> NDArray[np.int64]:
    """At most so many of the rows, evenly spread over them."""
    if len(rows) <= count:
        return rows
    return np.asarray(rows[np.linspace(0, len(rows) - 1, count).round().astype(int)])


def _headroom(
    cell: Cell, strikes: Strikes, evidence: SurveyEvidence, delivered: Mask, needed: int, trial: Retrial
) -> tuple[float | None, str]:
    """How far all limits but position may shrink together, or must grow, for the required share."""
    points = evidence.points
    if delivered.sum() >= needed:
        rows = _spread(np.flatnonzero(delivered), HEADROOM_SAMPLE)
        # Of the strikes delivered so many may be lost.
        spare = (delivered.sum() - needed) / max(delivered.sum(), 1)
        factor = _last_holding(SHRUNK, lambda f: _share(cell, strikes, rows, f, trial) >= 1 - spare - 1e-9)
        if factor is None:
            return (
                0.0,
                f"0 %: with all limits but position {100 * (1 - SHRUNK[0]):.0f} % lower it no longer is",
            )
        share = 1 - factor
        return (
            share,
            f"{100 * share:.0f} %: all limits but position may shrink by that together{_sampled(rows, delivered)}",
        )
    reached = points.limit != "reach"
    if reached.sum() < needed:
        gone = int((~reached).sum())
        return None, f"none: {gone} strikes are out of reach, which no limit mends"
    rows = _spread(np.flatnonzero(reached & ~delivered), HEADROOM_SAMPLE)
    lacking = (needed - delivered.sum()) / max(int((reached & ~delivered).sum()), 1)
    less = 1.0
    for factor in GROWN:
        if _share(cell, strikes, rows, factor, trial) >= lacking - 1e-9:
            enough, short = (f"{100 * (x - 1):.0f} %" for x in (factor, less))
            return (
                1 - factor,
                f"-{enough}: all limits but position must grow; {short} is too little, {enough} enough",
            )
        less = factor
    return None, f"none: not even with all limits but position at {GROWN[-1]:g} times what is stated"


def _last_holding(factors: tuple[float, ...], holds: Callable[[float], bool]) -> float | None:
    """The last of the factors, in their order, before the first that does not hold."""
    last = None
    for factor in factors:
        if not holds(factor):
            break
        last = factor
    return last


def _share(cell: Cell, strikes: Strikes, rows: NDArray[np.int64], factor: float, trial: Retrial) -> float:
    won = trial.delivered(
        f"headroom, limits at {factor:g}", [(scaled_limits(cell, factor), strikes.take(rows))]
    )[0]
    return float(won.mean()) if len(won) else 1.0


def _sampled(rows: NDArray[np.int64], delivered: Mask) -> str:
    total = int(delivered.sum())
    return f" (tried on {len(rows)} of {total} strikes)" if len(rows) < total else ""
