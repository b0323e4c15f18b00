"""The whole answer of a survey: the sweep, its verdict, reasons, needs, and what would help."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace

import numpy as np

from reach.cell import Array, Cell
from reach.evidence.points import Points, SurveyEvidence
from reach.evidence.record import Need, Reason
from reach.limits import LIMITS
from reach.limits.build import not_checked, unknown_limits
from reach.posture import reach_bound
from reach.result import SurveyResult
from reach.strike.setting import Setting
from reach.strike.stroke import DUTY
from reach.survey.family import folds
from reach.survey.grid import strikes
from reach.survey.remedies import Advice, advice
from reach.survey.rounds import Progress
from reach.survey.rows import Rows, points_of
from reach.survey.sweep import Sweep, sweep
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, judge_survey

NOT_ASKED = "not looked for"
QUANTILE = 0.9  # of the strikes, told beside the most that one asks


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
    helps = Advice((), None, NOT_ASKED)
    if with_advice and not done.stopped:
        helps = advice(cell, grid, evidence, workers, seed, progress)
    return SurveyResult(
        cell=cell,
        verdict=verdict,
        without_margins=_without_margins(cell, evidence, done.parts),
        reasons=reasons(evidence.points),
        needs=needs(evidence, done.parts),
        remedies=helps.remedies,
        headroom_share=helps.headroom_share,
        headroom_text=helps.headroom_text,
        notes=_notes(cell),
        evidence=evidence,
    )


def gathered(cell: Cell, done: Sweep) -> SurveyEvidence:
    """The evidence of a sweep."""
    assert cell.survey is not None
    setting = Setting.of(cell)
    points = points_of(done.parts)
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


def reasons(points: Points) -> tuple[Reason, ...]:
    """What stops the strikes that are not deliverable, the most frequent first; those decide."""
    found = []
    open_ones = points.verdict != DELIVERABLE
    keys = list(zip(points.limit, points.joint, points.phase, points.basis, strict=True))
    counts = Counter(key for key, lacking in zip(keys, open_ones, strict=True) if lacking and key[0])
    for (limit, joint, phase, basis), count in sorted(counts.items(), key=lambda item: (-item[1], item[0])):
        rows = np.array([key == (limit, joint, phase, basis) for key in keys]) & open_ones
        lost = int((points.verdict[rows] == NOT_DELIVERABLE).sum())
        with np.errstate(invalid="ignore"):
            value = _median(points.demonstrated_m_s[rows])
        of = f" of {joint}" if joint else ""
        when = f", {phase}" if phase else ""
        split = f"{lost} not deliverable, {count - lost} undecided" if lost < count else "not deliverable"
        text = f"{limit}{of}{when}: {count} strikes ({split})"
        required = _median(points.required_m_s[rows])
        found.append(
            Reason(
                decides=lost > 0,
                limit=str(limit),
                joint=str(joint) or None,
                phase=str(phase) or None,
                time_s=None,
                until_s=None,
                value=value,
                bound=required,
                unit="m/s",
                basis=str(basis),
                text=text,
            )
        )
    return tuple(sorted(found, key=lambda reason: not reason.decides))


def _median(values: Array) -> float | None:
    known = values[np.isfinite(values)]
    return float(np.median(known)) if len(known) else None


def needs(evidence: SurveyEvidence, parts: list[Rows]) -> tuple[Need, ...]:
    """What the limits that nobody stated would have to be, from the motions at the required speed."""
    peaks = []
    for part in parts:
        done = part.values["demonstrated_m_s"] >= part.strikes.required_m_s
        peaks += [peak for row, peak in sorted(part.peaks.items()) if done[row]]
    if not peaks:
        return ()
    table = np.array(peaks)
    found = []
    for column, (limit, joint) in enumerate(evidence.unknown):
        kind = LIMITS[limit]
        most, share = float(table[:, column].max()), float(np.quantile(table[:, column], QUANTILE))
        unit = kind.units[0]
        some = f"{100 * QUANTILE:.0f} % of the {len(table)} strikes that other limits allow"
        text = f"{share:.4g} {unit} is enough for {some}"
        found.append(Need(joint, limit, None, most, unit, text))
    return tuple(found)


def _without_margins(cell: Cell, evidence: SurveyEvidence, parts: list[Rows]) -> str:
    assert cell.survey is not None
    bare = np.concatenate([part.bare for part in parts]).astype(str)
    points = replace(evidence.points, verdict=bare)
    return judge_survey(replace(evidence, points=points), cell.survey.required_share, cell.accept).verdict


def _notes(cell: Cell) -> tuple[str, ...]:
    survey = cell.survey
    assert survey is not None
    found = []
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
    return tuple(found)
