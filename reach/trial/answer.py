"""The whole answer on a law: every start tried, on this process or on workers, and the verdict."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass

import numpy as np

from reach.cell import Array, Cell, Vec3
from reach.errors import Fault, InputError
from reach.evidence.points import Texts
from reach.evidence.record import Reason, Remedy
from reach.evidence.trials import Run, TrialEvidence
from reach.limits import LIMITS
from reach.limits.build import build_limits, not_checked, unknown_limits
from reach.rally.spread import interval
from reach.result import TrialResult
from reach.survey.rounds import Progress, Rounds
from reach.trial.advice import recovers, remedies
from reach.trial.bout import Ground, play
from reach.trial.laws import gains_of, law_class
from reach.trial.ready import centre_of, ready
from reach.trial.starts import Start, starts_of
from reach.variants import without_margins
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED, Verdict, judge_trials, unknown_required
from reach.workers import worker_pool

MOTIONS_KEPT = 40  # trials whose joint motion goes into the evidence: some 4 MB each
NO_POSTURE = "no posture puts a level face at the centre"
NO_CODE = (
    "names a Python file; it runs only with --allow-code (allow_code=True), with all that you may do yourself"
)

_kept: dict[str, Ground] = {}  # the Ground of this process


def answer(
    cell: Cell,
    workers: int = 1,
    allow_code: bool = False,
    with_advice: bool = True,
    progress: Progress | None = None,
    seed: int = 0,
) -> TrialResult:
    """Try a cell's law from every start.

    Parameters
    ----------
    allow_code : whether the user's Python file may run
    with_advice : also try what would help, where starts are lost
    seed : of random starts, noise and postures

    Raises
    ------
    InputError
        A law that may not run, can't be loaded, or has no such gain.
    """
    trial = cell.trial
    assert trial is not None, "the cell has no trial"
    if trial.law_file is not None and not allow_code:
        raise InputError([Fault(cell.path, "trial.law", NO_CODE)])
    gains = gains_of(law_class(trial, cell.path), trial, cell.path)
    centre, starts = centre_of(cell), starts_of(trial.starts, seed)
    posture = ready(cell, centre, seed)
    if posture is None:
        tried = Tried((), float("nan"), False)
    else:
        tried = _tried(cell, centre, posture, starts, workers, seed, progress)
    evidence = gathered(cell, centre, posture, len(starts), gains, tried)
    verdict = judge_trials(verdicts(cell, evidence), trial.required_share, cell.accept, evidence)
    helps = Advice(verdict.verdict, (), ())
    if verdict.verdict != DELIVERABLE and tried.runs and not tried.stopped:
        try:
            helps = _advice(cell, evidence, starts, workers, seed, with_advice, progress)
        except KeyboardInterrupt:  # what was found of the starts stays
            helps = Advice(UNDECIDED, (), ())
    return TrialResult(
        cell=cell,
        verdict=verdict,
        without_margins=helps.without_margins,
        reasons=reasons(evidence, verdict),
        needs=(),
        remedies=helps.remedies,
        headroom_share=None,
        headroom_text="a trial has none: ask rally",
        notes=_notes(cell, helps),
        evidence=evidence,
    )


@dataclass(frozen=True, eq=False)
class Tried:
    """Runs of the starts that were tried, the wanted flight's time in s, whether the rest was left out."""

    runs: tuple[Run, ...]
    flight_s: float
    stopped: bool


@dataclass(frozen=True)
class Advice:
    """How the law stands with the margins at zero, what would help, and what was tried in vain (in words)."""

    without_margins: str
    remedies: tuple[Remedy, ...]
    in_vain: tuple[str, ...]


def _advice(
    cell: Cell,
    evidence: TrialEvidence,
    starts: list[Start],
    workers: int,
    seed: int,
    with_remedies: bool,
    progress: Progress | None,
) -> Advice:
    """Lost starts tried again, with the margins at zero and with changes.

    A start that is recovered stays so without margins: its motion keeps them.
    """
    assert cell.trial is not None and evidence.ready is not None
    lost = [k for k, one in enumerate(evidence.runs) if not one.recovered]
    words = verdicts(cell, evidence)
    with worker_pool(workers) as pool:
        run = Rounds(pool, progress)
        place = evidence.centre, tuple(evidence.ready.tolist()), seed
        bare = without_margins(cell)
        if bare.margins != cell.margins:
            tasks = [(bare, *place, starts[k], k) for k in lost]
            for k, good in zip(lost, run.over("trial, without margins", recovers, tasks), strict=True):
                words[k] = DELIVERABLE if good else words[k]
        found, in_vain = remedies(cell, evidence, starts, run, seed) if with_remedies else ((), ())
    if run.stopped:
        raise KeyboardInterrupt
    verdict = judge_trials(words, cell.trial.required_share, cell.accept, evidence)
    return Advice(verdict.verdict, found, in_vain)


def _tried(
    cell: Cell,
    centre: Vec3,
    posture: Array,
    starts: list[Start],
    workers: int,
    seed: int,
    progress: Progress | None,
) -> Tried:
    """Every start from the ready posture (n,); an interrupt leaves what is done."""
    given = (cell, centre, tuple(posture.tolist()), seed)
    with worker_pool(min(workers, len(starts)), _begin, *given) as pool:
        _begin(*given)
        flight_s = _kept["trial"].flight_s
        run = Rounds(pool, progress)
        tasks = [(start, k, k < MOTIONS_KEPT) for k, start in enumerate(starts)]
        runs = [one for one in run.over("trial, starts", _play, tasks) if one is not None]
    _kept.clear()
    return Tried(tuple(runs), flight_s, run.stopped)


def gathered(
    cell: Cell, centre: Vec3, posture: Array | None, asked: int, gains: dict[str, float], tried: Tried
) -> TrialEvidence:
    """The evidence of trials."""
    trial, limits = cell.trial, build_limits(cell)
    assert trial is not None
    good, count = sum(one.recovered for one in tried.runs), len(tried.runs)
    low, high = interval(good, count)
    return TrialEvidence(
        runs=tried.runs,
        asked=asked,
        centre=centre,
        apex_m=trial.apex_m,
        flight_s=tried.flight_s,
        ready=posture,
        law=trial.law,
        gains=tuple(sorted(gains.items())),
        recovered_share=good / count if count else 0.0,
        low=low,
        high=high,
        kinds=tuple(LIMITS),
        unknown=unknown_limits(limits),
        not_checked=not_checked(cell, limits),
        stopped=tried.stopped,
        blocked="" if posture is not None else NO_POSTURE,
    )


def verdicts(cell: Cell, evidence: TrialEvidence) -> Texts:
    """A verdict (m,) for each start asked for."""
    blind = bool(unknown_required(evidence.unknown, cell.accept))
    words = []
    for run in evidence.runs:
        if run.outcome == "solver failed" or (run.recovered and blind):
            words.append(UNDECIDED)
        else:
            words.append(DELIVERABLE if run.recovered else NOT_DELIVERABLE)
    words += [UNDECIDED] * (evidence.asked - len(words))
    return np.array(words, dtype=str)


def reasons(evidence: TrialEvidence, verdict: Verdict) -> tuple[Reason, ...]:
    """Why starts were not recovered, those that decide and the most frequent first."""
    if evidence.blocked:
        return (Reason(True, "reach", None, None, None, None, None, None, "", "searched", evidence.blocked),)
    lost = [run for run in evidence.runs if not run.recovered]
    words = [
        (run.outcome if run.outcome != "held" else "not recovered", run.limit, run.joint) for run in lost
    ]
    found = []
    for (outcome, limit, joint), count in Counter(words).most_common():
        of = f" ({limit} of {joint})" if limit and joint else f" ({limit})" if limit else ""
        example = next(run for run, key in zip(lost, words, strict=True) if key == (outcome, limit, joint))
        text = f"{outcome}{of}: {count} start{'s' if count > 1 else ''}, such as: {example.text}"
        found.append(
            Reason(
                decides=verdict.verdict == NOT_DELIVERABLE,
                limit=limit or outcome,
                joint=joint or None,
                phase=None,
                time_s=example.ended_s,
                until_s=None,
                value=float(count),
                bound=float(len(evidence.runs)),
                unit="starts",
                basis="demonstrated",
                text=text,
            )
        )
    return tuple(found)


def _notes(cell: Cell, helps: Advice) -> tuple[str, ...]:
    trial, contact = cell.trial, cell.contact
    assert trial is not None and contact is not None and cell.ball is not None
    found = [
        "a trial starts with the arm at rest at the centre and a ball that leaves the centre's height for the apex",
        "recovered counts no more than the starts that were tried",
    ]
    if cell.ball.drag_coefficient == 0:
        found.append("the ball flies without drag")
    if contact.arm_gives:
        found.append("the arm's effective mass counts at each hit; its joints' own jump is left out")
    else:
        found.append("the paddle does not give at a hit, and the joints do not jump")
    if trial.law_file is not None:
        found.append("the law is a Python file of yours: what it did beside answering is not known")
    if helps.in_vain:
        found.append(f"tried without gain: {'; '.join(helps.in_vain)}")
    return tuple(found)


def _begin(cell: Cell, centre: Vec3, posture: tuple[float, ...], seed: int) -> None:
    _kept["trial"] = Ground.of(cell, centre, np.array(posture), seed)


def _play(start: Start, number: int, keep_motion: bool) -> Run:
    return play(_kept["trial"], start, number, keep_motion)
