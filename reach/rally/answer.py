"""The whole answer of a rally: the envelope, its verdict, reasons, needs, and what would help."""

from __future__ import annotations

from collections import Counter
from dataclasses import replace

import numpy as np

from reach.cell import Array, Cell
from reach.evidence.points import Texts
from reach.evidence.rallies import RallyEvidence, RallyPoints
from reach.evidence.record import Reason
from reach.limits import LIMITS
from reach.limits.build import build_limits, not_checked, unknown_limits
from reach.rally.advice import advice
from reach.rally.envelope import Envelope, envelope
from reach.rally.needs import needs
from reach.rally.player import CYCLE
from reach.result import RallyResult
from reach.strike.stroke import DUTY
from reach.survey.remedies import Advice
from reach.survey.rounds import Progress
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, Verdict, judge_rally, unknown_required

NOT_ASKED = "not looked for"
UNKNOWN = "not looked for while a limit that must be known is unknown"


def answer(
    cell: Cell, workers: int = 1, with_advice: bool = True, progress: Progress | None = None, seed: int = 0
) -> RallyResult:
    """Size a cell's envelope.

    Parameters
    ----------
    workers : processes
    with_advice : also look for remedies and headroom
    progress : called with a line of what is being done
    seed : of the random postures and of the spreads' cases
    """
    rally = cell.rally
    assert rally is not None, "the cell has no rally"
    done = envelope(cell, workers, seed, progress)
    evidence = gathered(cell, done)
    verdict = judge_rally(evidence, rally.required_share, cell.accept)
    blind = bool(unknown_required(evidence.unknown, cell.accept))
    helps = Advice((), (), None, UNKNOWN if blind else NOT_ASKED)
    if with_advice and not done.stopped and not blind:
        try:
            helps = advice(cell, evidence, workers, seed, progress)
        except KeyboardInterrupt:  # what was found of the points stays
            helps = Advice((), (), None, "not looked for: the run was stopped")
    bare = replace(evidence, points=replace(evidence.points, verdict=done.points.bare))
    without = judge_rally(bare, rally.required_share, cell.accept)
    return RallyResult(
        cell=cell,
        verdict=verdict,
        without_margins=without.verdict,
        reasons=reasons(evidence.points, rally.latency_s, verdict),
        needs=needs(cell, evidence),
        remedies=helps.remedies,
        headroom_share=helps.headroom_share,
        headroom_text=helps.headroom_text,
        notes=_notes(cell, evidence, helps),
        evidence=evidence,
    )


def gathered(cell: Cell, done: Envelope) -> RallyEvidence:
    """The evidence of an envelope."""
    assert cell.ball is not None
    limits = build_limits(cell)
    mass, jump, impulse = done.impulse
    return RallyEvidence(
        points=done.points,
        edges=done.edges,
        offsets=done.offsets,
        centres=done.centres,
        bounces=done.bounces,
        shown=done.shown,
        effective_mass_kg=mass,
        velocity_jump=jump,
        joint_impulse=impulse,
        drag=cell.ball.drag_coefficient > 0,
        lift=cell.ball.lift_coefficient > 0,
        nominal_only=done.nominal_only,
        kinds=tuple(name for name in LIMITS if name != DUTY),
        unknown=tuple(pair for pair in unknown_limits(limits) if pair[0] != DUTY),
        not_checked=(DUTY, *(name for name in not_checked(cell, limits) if name != DUTY)),
        stopped=done.stopped,
    )


def reasons(points: RallyPoints, latency_s: float, verdict: Verdict) -> tuple[Reason, ...]:
    """What keeps points from being deliverable, those that decide and the most frequent first."""
    lacking = (points.verdict != DELIVERABLE) & (points.limit != "")
    pairs = Counter(
        (str(limit), str(joint))
        for limit, joint in zip(points.limit[lacking], points.joint[lacking], strict=True)
    )
    found = []
    for (limit, joint), count in sorted(pairs.items(), key=lambda item: (-item[1], item[0])):
        rows = (points.limit == limit) & (points.joint == joint) & lacking
        lost = int((points.verdict[rows] == NOT_DELIVERABLE).sum())
        decisive = lost if verdict.verdict == NOT_DELIVERABLE else count - lost
        of = f" of {joint}" if joint else ""
        parts = [f"{lost} not deliverable"] * (lost > 0) + [f"{count - lost} undecided"] * (count > lost)
        by_time = limit == CYCLE
        value = points.time_bound_s if by_time else points.cycle_s
        found.append(
            Reason(
                decides=verdict.verdict != DELIVERABLE and decisive > 0,
                limit=limit,
                joint=joint or None,
                phase=None,
                time_s=None,
                until_s=None,
                value=_median(value[rows]),
                bound=_median((points.flight_s - latency_s)[rows]),
                unit="s",
                basis=_basis(points.basis[rows]),
                text=f"{limit}{of}: {count} point{'s' if count > 1 else ''} ({', '.join(parts)})",
            )
        )
    return tuple(sorted(found, key=lambda reason: not reason.decides))


def _basis(words: Texts) -> str:
    """The basis of all, or the weaker one."""
    return str(words[0]) if (words == words[0]).all() and words[0] else "searched"


def _median(values: Array) -> float | None:
    known = values[np.isfinite(values)]
    return float(np.median(known)) if len(known) else None


def _notes(cell: Cell, evidence: RallyEvidence, helps: Advice) -> tuple[str, ...]:
    rally, contact = cell.rally, cell.contact
    assert rally is not None and contact is not None
    found = [
        "a point holds the way out to the ball, its return, and the strike that stops it at the centre; each lasts as "
        "long as the ball flies",
        "strikes are planned for a ball without spin",
        "edges, offsets and the grid of centres rest on legs measured at 49 instants; the points themselves on whole "
        "motions measured four times a control period",
    ]
    if evidence.nominal_only:
        found.append("nominal only: no spread of restitution, contact or velocity is stated")
    if not evidence.drag:
        found.append("the ball flies without drag")
    if contact.arm_gives:
        found.append("the arm's effective mass counts: the paddle gives a little at each hit")
    if evidence.stopped:
        found.append("the run was stopped: points not looked at are undecided, edges are left out")
    if helps.in_vain:
        found.append(f"tried without gain: {'; '.join(helps.in_vain)}")
    return tuple(found)
