"""Re-runs for searches: many changed cells at once, on this process or on workers, the answer the same."""

from __future__ import annotations

import math
from collections.abc import Callable, Iterator, Sequence
from concurrent.futures import BrokenExecutor, Executor
from contextlib import contextmanager
from dataclasses import dataclass
from functools import partial

from reach.cell import Cell
from reach.errors import WorkerLost
from reach.follow.bench import run
from reach.workers import LOST, worker_pool

BATCH = 2  # values tried at once, one a worker on a two-core machine
HOLD = (1.02, 1.05, 1.1)  # multiples of a value that must pass as well


@dataclass(frozen=True)
class Outcome:
    """What a search needs of one run: whether it passed, how many strikes it delivered, and each use's peak.

    A quick run ends at its first miss, so `delivered` counts only up to there.
    """

    passed: bool
    delivered: int


def outcome(cell: Cell, quick: bool = True) -> Outcome:
    """Run a changed cell and keep what a search needs."""
    done = run(cell, quick)
    return Outcome(done.passed, sum(s.delivered for s in done.evidence.strikes))


class Runner:
    """Runs changed cells, counts them, and lets a caller show how far it is.

    Parameters
    ----------
    pool : where to run, None for this process
    progress : called with one line of what is being tried
    """

    def __init__(self, pool: Executor | None = None, progress: Callable[[str], None] | None = None):
        self._pool = pool
        self._progress = progress
        self.runs = 0

    def say(self, text: str) -> None:
        """Pass a line on to whoever watches."""
        if self._progress:
            self._progress(text)

    def outcomes(self, cells: Sequence[Cell], quick: bool = True) -> list[Outcome]:
        """Outcomes in the order of the cells."""
        self.runs += len(cells)
        if self._pool is None or len(cells) < 2:
            return [outcome(cell, quick) for cell in cells]
        try:
            return list(self._pool.map(partial(outcome, quick=quick), cells))
        except BrokenExecutor as error:
            raise WorkerLost(LOST) from error

    def passes(self, cells: Sequence[Cell]) -> list[bool]:
        """Whether each of some changed cells passes."""
        return [found.passed for found in self.outcomes(cells)]


@contextmanager
def runner(workers: int, progress: Callable[[str], None] | None = None) -> Iterator[Runner]:
    """A Runner with its workers."""
    with worker_pool(workers) as pool:
        yield Runner(pool, progress)


def least_passing(
    passes: Callable[[Sequence[float]], list[bool]],
    scan: Sequence[float],
    resolution: float,
    below: float | None = None,
) -> float | None:
    """The least value that passes, to a relative resolution; None where none of the scan does.

    A greedy step need not be monotone in a limit or a speed, so the scan goes up value by value to the first
    that passes, and the gap below it is then divided. Every value returned was run and passed.

    Parameters
    ----------
    passes : tells for several values at once whether each passes
    scan : rising values, all > 0
    below : a value under all of them that is known to fail
    """
    low, high = below, None
    for k in range(0, len(scan), BATCH):
        tried = scan[k : k + BATCH]
        verdicts = passes(tried)
        if True in verdicts:
            first = k + verdicts.index(True)
            low, high = (scan[first - 1] if first else below), scan[first]
            break
    if high is None or low is None:
        return high
    while high / low - 1 > resolution:
        ratio = math.log(high / low) / (BATCH + 1)
        tried = [low * math.exp(ratio * (k + 1)) for k in range(BATCH)]
        for value, ok in zip(tried, passes(tried), strict=True):
            if ok:
                high = value
                break
            low = value
    return high


def least_that_holds(
    passes: Callable[[Sequence[float]], list[bool]],
    scan: Sequence[float],
    resolution: float,
    below: float | None = None,
) -> tuple[float | None, float | None]:
    """The least value that passes and goes on passing a little further up, and the largest above it that failed.

    The value is rounded up to its resolution before it is run, so that what is printed is what passed. HOLD gives how
    far further up it must hold; where it does not, the search goes on above the failure, which is returned too: a
    counter-example to the thought that more is always better. Parameters as in `least_passing`.
    """
    failed: float | None = None
    values = list(scan)
    while True:
        found = least_passing(passes, values, resolution, below)
        if found is None:
            return None, failed
        digits = max(0, 1 - math.floor(math.log10(resolution * found)))
        rounded = math.ceil(found * 10**digits - 1e-9) / 10**digits
        tried = [rounded, *(rounded * further for further in HOLD)]
        verdicts = passes(tried)
        if all(verdicts):
            return rounded, failed
        failed = max(value for value, ok in zip(tried, verdicts, strict=True) if not ok)
        if failed >= scan[-1]:
            return None, failed
        values = [
            failed,
            *(failed * (1 + resolution) ** k for k in (1, 3, 7)),
            *(v for v in scan if v > failed * 1.1),
        ]
