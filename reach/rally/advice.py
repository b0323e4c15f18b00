"""What would help an envelope: one change at a time, its points played again; and by how much all limits may shrink."""

from __future__ import annotations

import math
from collections import Counter
from collections.abc import Sequence
from dataclasses import replace

import numpy as np

from reach.cell import Cell
from reach.evidence.rallies import Centre, RallyEvidence
from reach.evidence.record import Remedy
from reach.rally.court import Kit, points_of
from reach.rally.points import score
from reach.survey.remedies import GROWN, RAISED, SHRUNK, Advice
from reach.survey.rounds import Progress, Rounds
from reach.variants import FIELDS, lighter, one_limit_scaled, raised_base, scaled_limits
from reach.verdict import DELIVERABLE
from reach.workers import worker_pool

LIMITS_TRIED = 3
BASE_STEPS_M = (0.1, -0.1)
PADDLE_SHARE = 0.7  # of the paddle's mass
SAMPLE = 60  # points that the headroom is looked for on


def advice(cell: Cell, evidence: RallyEvidence, workers: int, seed: int, progress: Progress | None) -> Advice:
    """Remedies and headroom of an envelope; every one played again at the nodes."""
    rally = cell.rally
    assert rally is not None
    done = int((evidence.points.verdict == DELIVERABLE).sum())
    total = len(evidence.points.verdict)
    needed = math.ceil(rally.required_share * total - 1e-9)
    with worker_pool(workers) as pool:
        run = Rounds(pool, progress)
        remedies, in_vain = _remedies(cell, evidence, done, total, run, seed)
        share, text = _headroom(cell, done >= needed, run, seed)
    if run.stopped:
        raise KeyboardInterrupt
    return Advice(remedies, in_vain, share, text)


def _remedies(
    cell: Cell, evidence: RallyEvidence, done: int, total: int, run: Rounds, seed: int
) -> tuple[tuple[Remedy, ...], tuple[str, ...]]:
    """Changes by how many points they gain, and those that gain none."""
    if done == total:
        return (), ()
    changes = _changes(cell, evidence)
    tasks = [(cell, 1.0, seed), *((changed, 1.0, seed) for _, changed in changes)]
    before, *counts = run.over("rally, remedies", _count, tasks)
    done = max(done, before or 0)  # both by the nodes
    found, in_vain = [], []
    for (words, _), count in sorted(
        zip(changes, counts, strict=True), key=lambda pair: -(pair[1] if pair[1] is not None else -1)
    ):
        if count is None:
            continue
        if count > done:
            found.append(Remedy(words, f"{count} of {total} points deliverable instead of {done}", True))
        else:
            in_vain.append(words)
    return tuple(found), tuple(in_vain)


def _changes(cell: Cell, evidence: RallyEvidence) -> list[tuple[str, Cell]]:
    """Changed cells with the words for them: what a user can change first."""
    rally = cell.rally
    assert rally is not None
    found = []
    if rally.latency_s > 0:
        half = rally.latency_s / 2
        found.append(
            (
                f"see the ball in {1000 * half:.0f} ms instead of {1000 * rally.latency_s:.0f} ms",
                replace(cell, rally=replace(rally, latency_s=half)),
            )
        )
    more = rally.recover_within_bounces + 1
    found.append(
        (f"recover within {more} bounces", replace(cell, rally=replace(rally, recover_within_bounces=more)))
    )
    best = _best_centre(evidence.centres)
    if best is not None:
        x, y, z = best.position
        found.append(
            (
                f"move the centre to ({x:.3g}, {y:.3g}, {z:.3g}) m",
                replace(cell, rally=replace(rally, centre_m=best.position)),
            )
        )
    for by in BASE_STEPS_M:
        word = "raise" if by > 0 else "lower"
        found.append((f"{word} the base by {abs(by):g} m", raised_base(cell, by)))
    found.append((f"a paddle of {100 * PADDLE_SHARE:.0f} % of the mass", lighter(cell, PADDLE_SHARE)))
    lost = evidence.points.verdict != DELIVERABLE
    pairs = Counter(
        (str(limit), str(joint))
        for limit, joint in zip(evidence.points.limit[lost], evidence.points.joint[lost], strict=True)
        if limit in FIELDS or limit == "tool speed"
    )
    for (limit, joint), _ in sorted(pairs.most_common(LIMITS_TRIED)):
        of = f" of {joint}" if joint else ""
        changed = one_limit_scaled(cell, limit, joint or None, RAISED)
        found.append((f"{100 * (RAISED - 1):.0f} % more {limit}{of}", changed))
    return found


def _best_centre(centres: Sequence[Centre]) -> Centre | None:
    """The centre of the grid that holds most points, the first of equals."""
    return max(centres, key=lambda one: one.deliverable, default=None)


def _headroom(cell: Cell, holds: bool, run: Rounds, seed: int) -> tuple[float | None, str]:
    """How much all limits but position could shrink together, or must grow."""
    rally = cell.rally
    assert rally is not None
    total = len(points_of(rally))
    needed = math.ceil(rally.required_share * min(total, SAMPLE) - 1e-9)
    factors = SHRUNK if holds else GROWN
    counts = run.over("rally, headroom", _count, [(cell, factor, seed, SAMPLE) for factor in factors])
    fine = [count is not None and count >= needed for count in counts]
    of = "" if total <= SAMPLE else f", by {SAMPLE} of the {total} points"
    if holds:
        least = 1.0
        for factor, good in zip(factors, fine, strict=True):
            if not good:
                break
            least = factor
        share = 1 - least
        return share, f"all limits but position could shrink together by {100 * share:.0f} %{of}"
    for factor, good in zip(factors, fine, strict=True):
        if good:
            return 1 - factor, f"all limits but position must grow together by {100 * (factor - 1):.0f} %{of}"
    return None, f"no growth of the limits up to {factors[-1]:g} times is enough{of}"


def _count(cell: Cell, factor: float, seed: int, most: int | None = None) -> int:
    """How many of the points a changed cell delivers from its best stance or any other, by the nodes."""
    kit = Kit(scaled_limits(cell, factor) if factor != 1.0 else cell, seed)
    points = points_of(kit.rally)
    if most is not None and len(points) > most:
        points = [points[int(k)] for k in np.linspace(0, len(points) - 1, most).round()]
    court = kit.court(kit.rally.centre_m)
    if not len(court.stances):
        return 0
    return int(score(court, points).delivered.any(axis=0).sum())
