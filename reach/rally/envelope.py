"""The whole envelope, in parts, on this process or on workers: the answer the same for any number of them."""

from __future__ import annotations

from collections.abc import Callable, Sequence
from dataclasses import dataclass, fields, replace
from typing import TypeVar

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Cell, Vec3
from reach.evidence.rallies import ApexEdge, Bounce, Centre, OffsetEdge, RallyPoints, Shown
from reach.rally.centres import grid, weighed
from reach.rally.court import Court, Kit, Point, points_of
from reach.rally.edges import apex_edges, offset_edges
from reach.rally.points import Rows, Scored, judged, score
from reach.rally.shown import shown
from reach.rally.spread import Errors, feasible, has_spread, largest_errors
from reach.rally.steady import bounces, impulse
from reach.survey.rounds import Progress, Rounds
from reach.verdict import DELIVERABLE
from reach.workers import worker_pool

CHUNK = 8  # points, lines or centres a task
TURNS = 24  # bearings, evenly around, at which the largest offset is looked for beside the cell's own
STOPPED = "not looked at: the run was stopped"

T = TypeVar("T")

_kept: dict[str, Kit] = {}  # the Kit of this process


@dataclass(frozen=True, eq=False)
class Envelope:
    """What was found; parts that a stopped run left out are empty.

    Attributes
    ----------
    points, edges, offsets, centres, bounces, shown : as in RallyEvidence
    impulse : effective mass, velocity jump and joint impulse of the hardest steady hit
    nominal_only, stopped : bool
    """

    points: RallyPoints
    edges: tuple[ApexEdge, ...]
    offsets: tuple[OffsetEdge, ...]
    centres: tuple[Centre, ...]
    bounces: tuple[Bounce, ...]
    shown: Shown | None
    impulse: tuple[float, Array, Array]
    nominal_only: bool
    stopped: bool


def envelope(
    cell: Cell, workers: int = 1, seed: int = 0, progress: Progress | None = None, whole: bool = True
) -> Envelope:
    """Look at every point of a cell's rally, and at the edges around them.

    Parameters
    ----------
    whole : also the grid of centres and how much may be off

    Raises
    ------
    WorkerLost
        When a worker process died.
    """
    with worker_pool(workers, _begin, cell, seed) as pool:
        _begin(cell, seed)
        run = Rounds(pool, progress)
        found = _looked(_kept["rally"], run, seed, whole)
    _kept.clear()
    return found


def best_stance(court: Court, points: Sequence[Point]) -> int:
    """The stance from which an arm should play points."""
    return score(court, points).best


def _looked(kit: Kit, run: Rounds, seed: int, whole: bool) -> Envelope:
    rally, points = kit.rally, points_of(kit.rally)
    court, chunks = kit.court(rally.centre_m), _chunks(len(points_of(kit.rally)))
    n = kit.setting.arm.n
    lost: tuple[float, Array, Array] = (np.nan, np.full(n, np.nan), np.full(n, np.nan))
    main = 0
    if len(court.stances):
        parts = run.over("rally, stances", _score, [(points[chunk],) for chunk in chunks])
        scored = [part for part in parts if part is not None]
        main = Scored.joined(scored).best if scored else 0
    parts_judged = (
        [None] * len(chunks)
        if run.stopped
        else run.over("rally, points", _judge, [(points[chunk], main) for chunk in chunks])
    )
    table = joined(
        [
            _left(court, points[chunk]) if part is None else part
            for part, chunk in zip(parts_judged, chunks, strict=True)
        ]
    )
    if run.stopped or not len(court.stances):
        return Envelope(table, (), (), (), (), None, lost, True, run.stopped)
    lines = [(offset, bearing) for apex, offset, bearing in points if apex == points[0].apex_m]
    edges = _flat(run.over("rally, apexes", _apexes, [(main, lines[c]) for c in _chunks(len(lines))]))
    rounds = [(apex, bearing) for apex in rally.apexes_m for bearing in _bearings(rally.bearings_rad)]
    offsets = _flat(run.over("rally, offsets", _offsets, [(main, rounds[c]) for c in _chunks(len(rounds))]))
    steady: tuple[Bounce, ...] = _unless_stopped(
        run, lambda: bounces(court, main, rally.apexes_m, offsets), ()
    )
    places: list[Centre] = []
    if whole and not run.stopped:
        table = _with_errors(court, run, table, points, seed)
    if whole and not run.stopped:
        places = [
            place for place in run.over("rally, centres", _centre, [(c,) for c in grid(rally)]) if place
        ]
    return Envelope(
        table,
        tuple(edges),
        tuple(offsets),
        tuple(places),
        steady,
        _unless_stopped(run, lambda: shown(court, table), None),
        _unless_stopped(run, lambda: impulse(court, main, steady) if steady else lost, lost),
        not has_spread(court),
        run.stopped,
    )


def _unless_stopped(run: Rounds, work: Callable[[], T], instead: T) -> T:
    """What some work gives, or an empty answer once the run is stopped; an interrupt in it stops the run."""
    if run.stopped:
        return instead
    try:
        return work()
    except KeyboardInterrupt:
        run.stopped = True
        return instead


def _with_errors(
    court: Court, run: Rounds, table: RallyPoints, points: Sequence[Point], seed: int
) -> RallyPoints:
    """The points with how much may be off at those deliverable."""
    rows = np.flatnonzero(table.verdict == DELIVERABLE)
    stance = np.array([_stance_of(court, q) for q in table.q[rows]], dtype=np.int64)
    tasks = [([points[int(i)] for i in rows[c]], stance[c], rows[c], seed) for c in _chunks(len(rows))]
    changed = {
        name: getattr(table, name).copy()
        for name in (
            "feasible_share",
            "feasible_low",
            "feasible_high",
            "largest_delay_s",
            "largest_tilt_rad",
            "largest_contact_offset_m",
            "largest_restitution_error",
        )
    }
    answers = run.over("rally, what may be off", _off, tasks)
    for chunk, answer in zip(_chunks(len(rows)), answers, strict=True):
        if answer is not None:
            for column, values in zip(changed.values(), [*answer[0].T, *answer[1]], strict=True):
                column[rows[chunk]] = values
    return replace(table, **changed)


def _stance_of(court: Court, q: Array) -> int:
    return int(np.abs(court.stances - q).max(axis=1).argmin())


def _bearings(own: tuple[float, ...]) -> list[float]:
    """Bearings around, the cell's own among them, each once, in [0, 2 pi)."""
    around = [*own, *(2 * np.pi * np.arange(TURNS) / TURNS).tolist()]
    rounded = {round(float(np.mod(bearing, 2 * np.pi)), 9): bearing for bearing in reversed(around)}
    return [float(np.mod(rounded[key], 2 * np.pi)) for key in sorted(rounded) if key < 6.283185307]


def _left(court: Court, points: Sequence[Point]) -> RallyPoints:
    rows = Rows(court, points)
    rows.reason = [STOPPED] * len(points)
    return rows.points()


def joined(parts: Sequence[RallyPoints]) -> RallyPoints:
    """Points of several chunks as one, in order."""
    starts = np.cumsum([0, *(len(part.verdict) for part in parts)]).tolist()
    columns = {
        item.name: np.concatenate([getattr(part, item.name) for part in parts])
        for item in fields(RallyPoints)
        if item.name not in ("reason", "motions")
    }
    return RallyPoints(
        reason=tuple(text for part in parts for text in part.reason),
        motions={
            first + k: knots
            for first, part in zip(starts, parts, strict=False)
            for k, knots in part.motions.items()
        },
        **columns,
    )


def _chunks(count: int) -> list[slice]:
    return [slice(k, min(k + CHUNK, count)) for k in range(0, count, CHUNK)]


def _flat(parts: Sequence[tuple[T, ...] | None]) -> list[T]:
    return [one for part in parts if part is not None for one in part]


def _begin(cell: Cell, seed: int) -> None:
    _kept["rally"] = Kit(cell, seed)


def _own_court() -> Court:
    kit = _kept["rally"]
    return kit.court(kit.rally.centre_m)


def _score(points: Sequence[Point]) -> Scored:
    return score(_own_court(), points)


def _judge(points: Sequence[Point], main: int) -> RallyPoints:
    return judged(_own_court(), points, main)


def _apexes(stance: int, lines: Sequence[tuple[float, float]]) -> tuple[ApexEdge, ...]:
    return apex_edges(_own_court(), stance, lines)


def _offsets(stance: int, lines: Sequence[tuple[float, float]]) -> tuple[OffsetEdge, ...]:
    return offset_edges(_own_court(), stance, lines)


def _centre(centre: Vec3) -> Centre:
    return weighed(_kept["rally"], centre)


def _off(
    points: Sequence[Point], stances: NDArray[np.int64], rows: NDArray[np.int64], seed: int
) -> tuple[Array, Errors]:
    """Shares with their intervals (m, 3), nan without spreads, and the largest errors."""
    court = _own_court()
    shares = np.full((len(points), 3), np.nan)
    if has_spread(court):
        for k, (point, stance, row) in enumerate(zip(points, stances.tolist(), rows.tolist(), strict=True)):
            rng = np.random.default_rng([seed, row])
            shares[k] = feasible(court, point, stance, rng)
    return shares, largest_errors(court, points, stances)
