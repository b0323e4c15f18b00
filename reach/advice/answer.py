"""The whole answer on a log: one run, its reasons, what is missing, what would help."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np

from reach.advice.demand import Demand, demanded_motion
from reach.advice.headroom import headroom
from reach.advice.needs import needs
from reach.advice.reading import better_reading, reading_in_words
from reach.advice.reasons import deciding, reasons
from reach.advice.remedies import remedies
from reach.advice.search import runner
from reach.arm import Arm
from reach.cell import Cell
from reach.evidence.measure import measure
from reach.evidence.record import Evidence, Need, Remedy, SolverCount, Use
from reach.follow.bench import Run, run
from reach.follow.contacts import aslant
from reach.follow.rolled import Roll
from reach.kinematics import Chain
from reach.limits.build import build_limits
from reach.result import FollowResult
from reach.variants import without_margins, without_pose_gain
from reach.verdict import judge

REPLAYED = (
    "the log is replayed: it already holds its controller's answers to the arm that it ran on, "
    "and no controller reacts here"
)


def answer(
    cell: Cell,
    workers: int = 1,
    advice: bool = True,
    progress: Callable[[str], None] | None = None,
    seed: int = 0,
) -> FollowResult:
    """Follow a cell's log and say whether the arm delivers it, why not, and what would help.

    Parameters
    ----------
    cell : Cell with `follow`
    workers : processes for the re-runs
    advice : False leaves out the searches (headroom, needs, remedies), which take most of the time
    progress : called with a line of what is being done
    seed : of inverse kinematics' random starts

    Raises
    ------
    InputError
        When start = "auto" meets a log without poses.
    SolverFailure
        When a named solver is not installed.
    """
    follow = cell.follow
    assert follow is not None, "the cell has no log to follow"
    if progress:
        progress("following the log")
    base = run(cell, seed=seed)
    cell = base.cell
    demand = _demand(base)
    found, strikes = reasons(base, demand)
    evidence = replace(base.evidence, strikes=strikes, uses=_with_demand(base.evidence, demand))
    verdict = judge(evidence, cell.accept)
    notes = [*cell.notes, REPLAYED, *_roll_notes(base.roll)]
    if better := better_reading(cell):
        notes.insert(0, better)
    if base.reference is not None and (odd := aslant(base.contacts, base.reference)):
        notes.insert(0, odd)
    plain = None
    if follow.pose_gain_per_s > 0 and base.roll is not None:
        plain = run(without_pose_gain(cell)).verdict.verdict
        if plain != verdict.verdict:
            notes.insert(0, f"the verdict rests on the pose feedback: replayed as sent it is {plain}")
    bare = verdict.verdict if base.passed or base.roll is None else run(without_margins(cell)).verdict.verdict
    share, headroom_text = None, "not searched"
    wanted: tuple[Need, ...] = ()
    helps: tuple[Remedy, ...] = ()
    if advice and cell.arm.start is not None:
        with runner(workers, progress) as runs:
            share, headroom_text = headroom(cell, runs, base.passed)
            wanted = needs(cell, base, deciding(found), share, runs)
            helps = remedies(cell, base, wanted, deciding(found), runs, seed)
    return FollowResult(
        cell=cell,
        reading=reading_in_words(follow),
        evidence=evidence,
        verdict=verdict,
        without_margins=bare,
        without_pose_gain=plain,
        reasons=found,
        needs=wanted,
        remedies=helps,
        headroom_share=share,
        headroom_text=headroom_text,
        solver=_solver(cell, base.roll),
        notes=tuple(notes),
    )


def _demand(base: Run) -> Demand | None:
    """The demanded motion, measured like the delivered one; None where there is no start posture."""
    cell = base.cell
    if base.reference is None or cell.arm.start is None:
        return None
    arm = Arm(cell.arm, cell.paddle)
    motion = demanded_motion(cell, arm, base.reference, np.array(cell.arm.start))
    return Demand(motion, measure(arm, Chain.of(arm), build_limits(cell), motion))


def _with_demand(evidence: Evidence, demand: Demand | None) -> tuple[Use, ...]:
    if demand is None:
        return evidence.uses
    peaks = {(use.limit, use.joint): use.peak for use in demand.measured.uses}
    return tuple(replace(use, demand_peak=peaks[(use.limit, use.joint)]) for use in evidence.uses)


def _roll_notes(rolled: Roll | None) -> list[str]:
    """What gave way on the way, a line each limit."""
    if rolled is None:
        return []
    found = []
    for limit in dict.fromkeys(item.limit for item in rolled.gave_way):
        steps = sorted({item.step for item in rolled.gave_way if item.limit == limit})
        most = max(item.amount for item in rolled.gave_way if item.limit == limit)
        at = rolled.sent.start_s + steps[0] * rolled.sent.period_s
        found.append(
            f"{limit} could not be kept inside its margin in {len(steps)} steps, first at {at:.3f} s (by up to "
            f"{most:.2g} of velocity change a period); the measured motion says whether the stated limit held"
        )
    return found


def _solver(cell: Cell, rolled: Roll | None) -> SolverCount:
    spec = cell.solver
    if rolled is None:
        return SolverCount(spec.name, spec.fallback, 0, 0, 0, 0)
    return SolverCount(
        spec.name,
        spec.fallback,
        len(rolled.shortfall),
        rolled.elastic_steps,
        rolled.failed_steps,
        rolled.fallback_steps,
    )
