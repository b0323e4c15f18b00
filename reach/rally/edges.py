"""Edges of an envelope, by scan and bisection: lowest and highest apex, largest offset, and what bounds each.

From the main stance or any other, by the nodes; what bounds an edge is told of the main one. An envelope need not be in
one piece: the edges are those of the piece that holds most of the apexes scanned, and of offsets those of the piece at
the centre.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.rallies import ApexEdge, OffsetEdge
from reach.rally.court import Court, Point
from reach.rally.player import CYCLE
from reach.rally.points import tightest

APEXES_M = np.geomspace(0.01, 4.0, 25)  # scanned
OFFSETS_M = np.array([0.0, 0.01, 0.02, 0.035, 0.05, 0.075, 0.1, 0.15, 0.2, 0.3, 0.45, 0.7, 1.0])  # scanned
HALVINGS = 7  # of a gap of the scan: an apex to 0.2 %, an offset to 1 %


def apex_edges(court: Court, stance: int, lines: Sequence[tuple[float, float]]) -> tuple[ApexEdge, ...]:
    """The lowest and highest apex of lines (offset in m, bearing in rad)."""
    trial = _Trial(court, stance, lambda line, apex: Point(apex, *lines[line]))
    count, scan = len(lines), APEXES_M
    good = trial.grid(count, scan)
    found = []
    pieces = [_longest(row) for row in good]
    rows = [k for k, piece in enumerate(pieces) if piece is not None]
    low = trial.between(rows, [_step(scan, pieces[k], -1) for k in rows])
    high = trial.between(rows, [_step(scan, pieces[k], 1) for k in rows])
    for k, (offset, bearing) in enumerate(lines):
        if k not in rows:
            best = float(scan[len(scan) // 2])
            limit, joint = trial.limit(k, best)
            found.append(ApexEdge(offset, bearing, None, limit, joint, False, None, limit, joint, False))
            continue
        ends = [low[rows.index(k)], high[rows.index(k)]]
        names = [("", "") if outside is None else trial.limit(k, outside) for _, outside in ends]
        found.append(
            ApexEdge(
                offset,
                bearing,
                ends[0][0],
                *names[0],
                ends[0][1] is None,
                ends[1][0],
                *names[1],
                ends[1][1] is None,
            )
        )
    return tuple(found)


def offset_edges(court: Court, stance: int, lines: Sequence[tuple[float, float]]) -> tuple[OffsetEdge, ...]:
    """The largest offset of lines (apex in m, bearing in rad)."""
    trial = _Trial(court, stance, lambda line, offset: Point(lines[line][0], offset, lines[line][1]))
    count, scan = len(lines), OFFSETS_M
    good = trial.grid(count, scan)
    last = np.where(good.all(axis=1), len(scan), good.argmin(axis=1)) - 1
    rows = [k for k in range(count) if last[k] >= 0]
    ends = trial.between(rows, [_step(scan, (int(last[k]), int(last[k])), 1) for k in rows])
    found = []
    for k, (apex, bearing) in enumerate(lines):
        if k not in rows:
            found.append(OffsetEdge(apex, bearing, None, *trial.limit(k, 0.0), False))
            continue
        inside, outside = ends[rows.index(k)]
        name = ("", "") if outside is None else trial.limit(k, outside)
        found.append(OffsetEdge(apex, bearing, inside, *name, outside is None))
    return tuple(found)


def _longest(good: NDArray[np.bool_]) -> tuple[int, int] | None:
    """First and last index of the longest run of true values."""
    best, begin = None, None
    for k, value in enumerate([*good.tolist(), False]):
        if value and begin is None:
            begin = k
        elif not value and begin is not None:
            if best is None or k - begin > best[1] - best[0] + 1:
                best = (begin, k - 1)
            begin = None
    return best


def _step(scan: Array, piece: tuple[int, int] | None, side: int) -> tuple[float, float | None]:
    """The last value inside a piece on one side, and the first outside; None where the scan ends."""
    assert piece is not None
    at = piece[0] if side < 0 else piece[1]
    beyond = at + side
    return float(scan[at]), float(scan[beyond]) if 0 <= beyond < len(scan) else None


class _Trial:
    """Plays points along lines; `point` makes one from a line's index and a value."""

    def __init__(self, court: Court, stance: int, point: Callable[[int, float], Point]):
        self._court, self._stance, self._point = court, stance, point

    def good(self, rows: Sequence[int], values: Sequence[float]) -> NDArray[np.bool_]:
        points = [self._point(row, value) for row, value in zip(rows, values, strict=True)]
        return self._court.anyhow(points, self._stance)

    def grid(self, count: int, scan: Array) -> NDArray[np.bool_]:
        """Whether each line (count) delivers at each value of a scan."""
        rows = np.repeat(np.arange(count), len(scan)).tolist()
        return self.good(rows, np.tile(scan, count).tolist()).reshape(count, len(scan))

    def between(
        self, rows: Sequence[int], ends: Sequence[tuple[float, float | None]]
    ) -> list[tuple[float, float | None]]:
        """The last value that delivers and the first that does not, closed in on from both."""
        ends = list(ends)
        for _ in range(HALVINGS):
            going = [k for k, (_, outside) in enumerate(ends) if outside is not None]
            middles = [(inside + (outside or 0.0)) / 2 for inside, outside in (ends[k] for k in going)]
            for k, middle, good in zip(
                going, middles, self.good([rows[k] for k in going], middles), strict=True
            ):
                inside, outside = ends[k]
                ends[k] = (middle, outside) if good else (inside, middle)
        return ends

    def limit(self, row: int, value: float) -> tuple[str, str]:
        """What bounds a line at a value that does not deliver."""
        court = self._court
        (exchange,) = court.exchanges([self._point(row, value)], self._stance)
        if exchange is None:
            return CYCLE, ""
        player = court.players[self._stance]
        return tightest(player, player.play([exchange], court.kit.rally.latency_s), 0)
