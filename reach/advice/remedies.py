"""What would help: first what a user can change, only then a limit; each re-run before it is claimed."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from reach.advice.needs import ALONE
from reach.advice.search import Outcome, Runner, least_that_holds
from reach.arm import Arm
from reach.cell import Cell
from reach.evidence.record import Need, Remedy
from reach.follow.bench import Run, first_pose
from reach.posture import SAME_POSTURE_RAD, postures
from reach.variants import lighter, raised_base, slower, started_at, with_position_range
from reach.verdict import DELIVERABLE

SLOWER_SCAN = (1.1, 1.25, 1.5, 1.75, 2.0, 2.5, 3.0, 4.0, 6.0, 10.0)
LIGHTER_SCAN = (1.1, 1.25, 1.5, 2.0, 3.0, 5.0, 10.0)
BASE_STEPS_M = (0.05, -0.05, 0.10, -0.10, 0.20, -0.20)
WIDER_RAD = (0.05, 0.1, 0.2, 0.4)
RESOLUTION = 0.02
POSTURE_STARTS = 20
POSTURES_TRIED = 8


def remedies(
    cell: Cell,
    base: Run,
    needs: Sequence[Need],
    deciding: Sequence[tuple[str, str | None]],
    runs: Runner,
    seed: int,
) -> tuple[Remedy, ...]:
    """Changes that make a log deliverable, or more of its strikes, in the order in which a user can make them."""
    if base.passed:
        return ()
    posture = _start_posture(cell, base, runs, seed)
    enough = posture is not None and posture.effect == DELIVERABLE
    found: list[Remedy | None] = [
        posture,
        _slower(cell, base, runs),
        _lighter(cell, runs),
        None if enough else _base_height(cell, base, runs),
        *(_wider(cell, joint, runs) for limit, joint in deciding if limit == "position" and joint),
        *(_limit(need) for need in needs),
    ]
    return tuple(remedy for remedy in found if remedy is not None)


def _start_posture(cell: Cell, base: Run, runs: Runner, seed: int) -> Remedy | None:
    """Another posture for the same paddle pose."""
    runs.say("remedy: another start posture")
    arm, start = Arm(cell.arm, cell.paddle), np.array(cell.arm.start)
    answer = postures(arm, *first_pose(cell, arm, start), near=start, seed=seed, starts=POSTURE_STARTS)
    moved = [q for q in answer.q if np.abs(q - start).max() > SAME_POSTURE_RAD]
    others = [tuple(float(x) for x in q) for q in moved[:POSTURES_TRIED]]
    outcomes = runs.outcomes([started_at(cell, q) for q in others], quick=False)
    best = _best(outcomes, base)
    if best is None:
        return None
    values = ", ".join(f"{name} = {x:.3f}" for name, x in zip(arm.names, others[best], strict=True))
    return Remedy(f"start from another posture: {values}", _effect(outcomes[best], base), True)


def _slower(cell: Cell, base: Run, runs: Runner) -> Remedy | None:
    """The same path, stretched in time by the least factor that passes."""
    runs.say("remedy: slower")
    factor, failed = least_that_holds(
        lambda fs: runs.passes([slower(cell, f) for f in fs]), SLOWER_SCAN, RESOLUTION, below=1.0
    )
    if factor is None:
        return None
    speeds = [abs(s.commanded_m_s) for s in base.evidence.strikes]
    change = f"slower: the same path in {factor:g} times the time"
    effect = "deliverable"
    if speeds:
        effect += f", its fastest strike at {max(speeds) / factor:.2f} instead of {max(speeds):.2f} m/s"
        effect += "; a ball's flight does not slow with it, so the law must plan the slower strikes"
    if failed is not None:
        effect += f"; not every slower pace is: at {failed:.3g} it failed again"
    return Remedy(change, effect, True)


def _lighter(cell: Cell, runs: Runner) -> Remedy | None:
    """The heaviest paddle of the same shape that passes."""
    runs.say("remedy: a lighter paddle")

    def passes(factors: Sequence[float]) -> list[bool]:
        return runs.passes([lighter(cell, 1 / f) for f in factors])

    if not any(passes(LIGHTER_SCAN[-2:])):
        return None
    factor, _ = least_that_holds(passes, LIGHTER_SCAN, RESOLUTION, below=1.0)
    if factor is None:
        return None
    now = cell.paddle.mass_kg + sum(part.mass_kg for part in cell.paddle.parts)
    change = f"a lighter paddle with all that hangs on it: {now / factor:.3f} kg instead of {now:.3f} kg"
    return Remedy(change, "deliverable", True)


def _base_height(cell: Cell, base: Run, runs: Runner) -> Remedy | None:
    """The base higher or lower, the paddle started at the same place in the cell."""
    runs.say("remedy: base height")
    start = np.array(cell.arm.start)
    position, rotation = first_pose(cell, Arm(cell.arm, cell.paddle), start)
    cells, steps = [], []
    for step in BASE_STEPS_M:
        moved = raised_base(cell, step)
        answer = postures(Arm(moved.arm, moved.paddle), position, rotation, near=start, starts=1)
        if len(answer.q):
            cells.append(started_at(moved, tuple(float(x) for x in answer.q[0])))
            steps.append(step)
    outcomes = runs.outcomes(cells, quick=False)
    best = _best(outcomes, base)
    if best is None:
        return None
    word = "raise" if steps[best] > 0 else "lower"
    start_values = ", ".join(f"{x:.3f}" for x in cells[best].arm.start or ())
    change = f"{word} the base by {abs(steps[best]):.2f} m, start posture then {start_values}"
    return Remedy(change, _effect(outcomes[best], base), True)


def _wider(cell: Cell, joint: str, runs: Runner) -> Remedy | None:
    """More travel for a joint that its position limit stops."""
    runs.say(f"remedy: more travel of {joint}")
    passes = runs.passes([with_position_range(cell, joint, wider) for wider in WIDER_RAD])
    if True not in passes:
        return None
    wider = WIDER_RAD[passes.index(True)]
    return Remedy(f"{wider:.2f} more travel of {joint} at both ends", "deliverable", True)


def _limit(need: Need) -> Remedy | None:
    """A limit raised, where that alone was re-run and passed."""
    if need.sufficient is None or ALONE not in need.text:
        return None
    change = f"{need.limit} of {need.sufficient:.4g} {need.unit} at {need.joint or 'the tool'}"
    return Remedy(change, "deliverable", True)


def _best(outcomes: Sequence[Outcome], base: Run) -> int | None:
    """Index of the outcome that passes, else of the one with most strikes if more than now."""
    if not outcomes:
        return None
    best = max(range(len(outcomes)), key=lambda i: (outcomes[i].passed, outcomes[i].delivered, -i))
    hit = sum(s.delivered for s in base.evidence.strikes)
    return best if outcomes[best].passed or outcomes[best].delivered > hit else None


def _effect(outcome: Outcome, base: Run) -> str:
    total = len(base.evidence.strikes)
    hit = sum(s.delivered for s in base.evidence.strikes)
    if outcome.passed:
        return DELIVERABLE
    return f"{outcome.delivered} of {total} strikes instead of {hit}; still not deliverable"
