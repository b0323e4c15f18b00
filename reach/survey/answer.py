"""The whole answer of a survey: the sweep, its verdict, reasons, needs, and what would help."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace

import numpy as np

from reach.cell import Array, Cell
from reach.evidence.points import Points, SurveyEvidence, Texts
from reach.evidence.record import Reason
from reach.limits import LIMITS
from reach.limits.build import not_checked, unknown_limits
from reach.posture import reach_bound
from reach.result import SurveyResult
from reach.strike.setting import Setting
from reach.strike.stroke import DUTY
from reach.survey.family import folds
from reach.survey.grid import strikes
from reach.survey.judged import PROVED, SEARCHED
from reach.survey.needs import needs
from reach.survey.remedies import Advice, advice
from reach.survey.rounds import Progress
from reach.survey.sweep import STOPPED, Sweep, sweep
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, Verdict, judge_survey, unknown_required

NOT_ASKED = "not looked for"
UNKNOWN = "not looked for while a limit that must be known is unknown"


def answer(
    cell: Cell, workers: int = 1, with_advice: bool = True, progress: Progress | None = None, seed: int = 0
) -> SurveyResult:
    """Survey a cell.

    Parameters
    ----------
    workers : processes
    with_advice : also look for remedies and headroom
    progress : called with a line of what is being done
    seed : of the random postures
    """
    survey = cell.survey
    assert survey is not None, "the cell has no survey"
    grid = strikes(survey)
    done = sweep(cell, grid, workers, seed, progress)
    evidence = gathered(cell, done)
    verdict = judge_survey(evidence, survey.required_share, cell.accept)
    blind = bool(unknown_required(evidence.unknown, cell.accept))
    helps = Advice((), (), None, UNKNOWN if blind else NOT_ASKED)
    if with_advice and not done.stopped and not blind:
        try:
            helps = advice(cell, grid, evidence, workers, seed, progress)
        except KeyboardInterrupt:  # what was found of the strikes stays
            helps = Advice((), (), None, "not looked for: the run was stopped")
    return SurveyResult(
        cell=cell,
        verdict=verdict,
        without_margins=_without_margins(cell, evidence, done.judged.bare),
        reasons=reasons(evidence.points, verdict),
        needs=needs(cell, evidence, done.judged.peaks),
        remedies=helps.remedies,
        headroom_share=helps.headroom_share,
        headroom_text=helps.headroom_text,
        notes=_notes(cell, evidence, helps),
        evidence=evidence,
    )


def gathered(cell: Cell, done: Sweep) -> SurveyEvidence:
    """The evidence of a sweep."""
    assert cell.survey is not None
    setting = Setting.of(cell)
    points = done.judged.points
    faces = len(cell.survey.normals)
    return SurveyEvidence(
        points=points,
        shape=None if cell.survey.box_m is None else (*cell.survey.counts, faces),
        families=folds(setting.chain, setting.arm.names).families,
        kinds=tuple(kind for kind in LIMITS if kind != DUTY),
        unknown=tuple(pair for pair in unknown_limits(setting.limits) if pair[0] != DUTY),
        not_checked=tuple(dict.fromkeys((DUTY, *not_checked(cell, setting.limits)))),
        outline=_outline(setting, points),
        reach_m=reach_bound(setting.arm)[1],
        stopped=done.stopped,
    )


def _outline(setting: Setting, points: Points) -> Array:
    """Joint origins from the base to the strike point (k, 3) in the posture of the strike nearest to the middle."""
    shown = np.flatnonzero(np.isfinite(points.q).all(axis=1))
    q = np.zeros(setting.arm.n)
    if len(shown):
        middle = points.position[shown].mean(axis=0)
        q = points.q[shown[np.argmin(np.linalg.norm(points.position[shown] - middle, axis=1))]]
    position, _, origins, _ = setting.chain.placements(q[None])
    base = np.array(setting.arm.spec.base.xyz_m)
    return np.vstack([base, origins[:, 0], position])


def reasons(points: Points, verdict: Verdict) -> tuple[Reason, ...]:
    """What stops the strikes that are not deliverable, the most frequent first; nothing decides against a verdict of
    deliverable, and only what is open decides one of undecided."""
    lacking = points.verdict != DELIVERABLE
    keys = np.stack([points.limit, points.joint, points.phase], axis=1)
    counts = Counter(tuple(key) for key in keys[lacking].tolist() if key[0])
    found = []
    for (limit, joint, phase), count in sorted(counts.items(), key=lambda item: (-item[1], item[0])):
        rows = (keys == [limit, joint, phase]).all(axis=1) & lacking
        lost = int((points.verdict[rows] == NOT_DELIVERABLE).sum())
        decisive = lost if verdict.verdict == NOT_DELIVERABLE else count - lost
        found.append(
            Reason(
                decides=verdict.verdict != DELIVERABLE and decisive > 0,
                limit=limit,
                joint=joint or None,
                phase=phase or None,
                time_s=None,
                until_s=None,
                value=_median(points.demonstrated_m_s[rows]),
                bound=_median(points.required_m_s[rows]),
                unit="m/s",
                basis=_basis(points.basis[rows]),
                text=_reason_text(limit, joint, phase, lost, count - lost),
            )
        )
    return tuple(sorted(found, key=lambda reason: not reason.decides))


def _reason_text(limit: str, joint: str, phase: str, lost: int, left: int) -> str:
    of, when = f" of {joint}" if joint else "", f", {phase}" if phase else ""
    parts = [f"{lost} not deliverable"] * (lost > 0) + [f"{left} undecided"] * (left > 0)
    return f"{limit}{of}{when}: {lost + left} strike{'s' if lost + left > 1 else ''} ({', '.join(parts)})"


def _basis(words: Texts) -> str:
    """The weaker basis of several."""
    return PROVED if (words == PROVED).all() else SEARCHED


def _median(values: Array) -> float | None:
    known = values[np.isfinite(values)]
    return float(np.median(known)) if len(known) else None


def _without_margins(cell: Cell, evidence: SurveyEvidence, bare: Texts) -> str:
    assert cell.survey is not None
    points = replace(evidence.points, verdict=bare)
    return judge_survey(replace(evidence, points=points), cell.survey.required_share, cell.accept).verdict


def _notes(cell: Cell, evidence: SurveyEvidence, helps: Advice) -> tuple[str, ...]:
    survey = cell.survey
    assert survey is not None
    found = ["duty is left out: one stroke is no cycle"]
    if survey.run_up_m is None:
        found.append("no run-up is given: the stroke may use all the travel of the joints")
    if survey.rotation == "free":
        found.append("the paddle may turn at the strike: a ball that comes early or late meets a tilted face")
    if cell.ball is None or cell.contact is None:
        found.append("no ball and contact are given: what a hit does to the arm is left out")
    elif survey.ball_in_m_s is None:
        found.append(
            "the ball's speed is not given: hits are those of a ball that is kept up, as fast out as in"
        )
    if evidence.stopped:
        left = sum(reason == STOPPED for reason in evidence.points.reason)
        found.append(f"{left} strikes were not looked at; the figures count them as speed 0")
    if helps.in_vain:
        found.append(f"tried without gain: {'; '.join(helps.in_vain)}")
    return tuple(found)
