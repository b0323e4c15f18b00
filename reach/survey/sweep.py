"""All strikes of a survey, in chunks, on this process or on workers: the answer the same for any number of them.

Two rounds: postures for every strike by itself, then each strike once more from what its neighbours found, with both
sides of its speed. Chunks are the same whoever works on them.
"""

from __future__ import annotations

from collections.abc import Iterator, Sequence
from contextlib import contextmanager
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Cell
from reach.survey.grid import Strikes
from reach.survey.inverse import TILT_WEIGHT_M, Found
from reach.survey.look import Looker, Searched
from reach.survey.rounds import Progress, Rounds
from reach.survey.rows import Judged, joined
from reach.survey.selfmotion import leaders
from reach.verdict import DELIVERABLE
from reach.workers import worker_pool

CHUNK = 64  # strikes
HANDED_ON = 2  # postures of a strike that its neighbours start from
NEIGHBOURS = 6
ALIKE = 1.05  # times the nearest one's distance: neighbours that far count too
STOPPED = "not looked at: the run was stopped"

_kept: dict[str, Looker] = {}  # the Looker of this process, by the name of what it is for


@dataclass(frozen=True, eq=False)
class Sweep:
    """What became of m strikes; those left when it was stopped are undecided and say so."""

    judged: Judged
    stopped: bool


def sweep(
    cell: Cell, strikes: Strikes, workers: int = 1, seed: int = 0, progress: Progress | None = None
) -> Sweep:
    """Look at strikes of a cell; an interrupt leaves what is done.

    Raises
    ------
    WorkerLost
        When a worker process died.
    """
    chunks = _chunks(len(strikes))
    with worker_pool(min(workers, len(chunks)), _begin, cell, seed) as pool:
        if pool is None:
            _begin(cell, seed)
        run = Rounds(pool, progress)
        done = _both_rounds(run, strikes, chunks)
    _kept.clear()
    parts = [part for part in done if part is not None]
    if len(parts) < len(done):
        looker = Looker(cell, seed, full=False)
        parts = [
            looker.left(strikes.take(chunk), STOPPED) if part is None else part
            for part, chunk in zip(done, chunks, strict=True)
        ]
    return Sweep(joined(parts), run.stopped)


def _both_rounds(run: Rounds, strikes: Strikes, chunks: list[slice]) -> list[Judged | None]:
    """Postures for every strike, then what becomes of it; None for chunks that were not looked at."""
    first = run.over("survey, postures", _search, [(strikes.take(chunk),) for chunk in chunks])
    found = [part for part in first if part is not None]
    if run.stopped:
        return [None] * len(chunks)
    handed = _handed_on(strikes, found, chunks)
    tasks = [(strikes.take(chunk), *pair) for chunk, *pair in zip(chunks, found, handed, strict=True)]
    return run.over("survey, strikes", _judge, tasks)


class Retrial:
    """Runs strikes of changed cells again, for searches that only ask which ones are deliverable."""

    def __init__(self, rounds: Rounds, seed: int):
        self._rounds, self._seed = rounds, seed

    def delivered(self, name: str, tasks: Sequence[tuple[Cell, Strikes]]) -> list[NDArray[np.bool_]]:
        """For each cell and its strikes (m,) which ones are deliverable; an interrupt goes on to the caller."""
        parts = [(k, chunk) for k, (_, strikes) in enumerate(tasks) for chunk in _chunks(len(strikes))]
        again = [(f"{name} {k}", tasks[k][0], tasks[k][1].take(chunk), self._seed) for k, chunk in parts]
        answers = self._rounds.over(name, _again, again)
        if self._rounds.stopped:
            raise KeyboardInterrupt
        found: list[list[NDArray[np.bool_]]] = [[np.zeros(0, dtype=bool)] for _ in tasks]
        for (k, _), won in zip(parts, answers, strict=True):
            assert won is not None
            found[k].append(won)
        return [np.concatenate(pieces) for pieces in found]


@contextmanager
def retrials(workers: int, seed: int, progress: Progress | None) -> Iterator[Retrial]:
    """A Retrial with its workers."""
    with worker_pool(workers) as pool:
        yield Retrial(Rounds(pool, progress), seed)
    _kept.clear()


def _chunks(count: int) -> list[slice]:
    return [slice(k, min(k + CHUNK, count)) for k in range(0, count, CHUNK)]


def _begin(cell: Cell, seed: int) -> None:
    _kept["survey"] = Looker(cell, seed)


def _search(strikes: Strikes) -> Searched:
    return _kept["survey"].search(strikes)


def _judge(strikes: Strikes, searched: Searched, neighbours: Found) -> Judged:
    return _kept["survey"].judge(strikes, searched, neighbours)


def _again(name: str, cell: Cell, strikes: Strikes, seed: int) -> NDArray[np.bool_]:
    if name not in _kept:
        _kept.clear()
        _kept[name] = Looker(cell, seed, full=False)
    looker = _kept[name]
    done = looker.judge(strikes, looker.search(strikes), Found.none(looker.setting.arm.n))
    return np.asarray(done.points.verdict == DELIVERABLE, dtype=bool)


def _handed_on(strikes: Strikes, parts: list[Searched], chunks: list[slice]) -> list[Found]:
    """For each chunk the best postures of its strikes' neighbours, owned by the strike that shall start from them."""
    from scipy.spatial import KDTree

    q, owner = _best_postures(parts, chunks)
    first = np.searchsorted(owner, np.arange(len(strikes) + 1))
    place = np.hstack([strikes.position, TILT_WEIGHT_M * strikes.normal])
    distance, index = KDTree(place).query(place, k=NEIGHBOURS + 1)
    handed = []
    for chunk in chunks:
        starts = [Found.none(q.shape[1])]
        for row in range(chunk.start, chunk.stop):
            for other in _near(row, distance[row], index[row]):
                given = q[first[other] : first[other + 1]]
                starts.append(Found(given, np.full(len(given), row - chunk.start)))
        handed.append(Found.joined(starts))
    return handed


def _near(row: int, distance: Array, index: NDArray[np.int64]) -> list[int]:
    """The neighbours of a strike: the others about as near as the nearest, which are the same in any order."""
    real = np.isfinite(distance) & (index != row)
    if not real.any():
        return []
    nearest = distance[real].min()
    return sorted(index[real & (distance <= ALIKE * nearest)].tolist())


def _best_postures(parts: list[Searched], chunks: list[slice]) -> tuple[Array, NDArray[np.int64]]:
    """The postures handed on, and which strike each belongs to, rising."""
    best = []
    for part, chunk in zip(parts, chunks, strict=True):
        pick = leaders(part.found, HANDED_ON)
        best.append(Found(part.found.q[pick], part.found.owner[pick] + chunk.start))
    together = Found.joined(best)
    return together.q, together.owner
