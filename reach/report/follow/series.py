"""Long series made short enough to draw, with nothing of interest lost."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.record import Use


def keep(values: Array, points: int) -> NDArray[np.int_]:
    """Return at most `points` rows of values (m, k) to draw: the ends, and each column's extremes per bin."""
    count, columns = values.shape
    if count <= points:
        return np.arange(count)
    bins = max(1, (points - 2) // (2 * columns))
    size = -(-count // bins)
    padded = np.concatenate([values, np.repeat(values[-1:], bins * size - count, axis=0)])
    binned = padded.reshape(bins, size, columns)
    starts = size * np.arange(bins)[:, None]
    lowest, highest = starts + np.argmin(binned, axis=1), starts + np.argmax(binned, axis=1)
    chosen = np.concatenate([lowest.ravel(), highest.ravel(), [0, count - 1]])
    return np.unique(np.minimum(chosen, count - 1))


def keep_way(way: Array, finest: float, points: int = 6000) -> NDArray[np.int_]:
    """Return the rows of a way (m, 2) to draw: what is drawn leaves it by `finest` at most.

    From the ends inwards, the row farthest from the line drawn so far is added (Douglas and Peucker, 1973,
    Cartographica 10(2), from memory). Where that takes more than so many points, `finest` is doubled.
    """
    while True:
        chosen = _corners(way, finest, points)
        if chosen is not None:
            return chosen
        finest *= 2


def _corners(way: Array, finest: float, points: int) -> NDArray[np.int_] | None:
    """Return the rows to draw, None where they would be more than `points`."""
    chosen = {0, len(way) - 1}
    open_ends = [(0, len(way) - 1)]
    while open_ends and len(chosen) <= points:
        first, last = open_ends.pop()
        if last - first < 2:
            continue
        away = _distances(way[first + 1 : last], way[first], way[last])
        farthest = int(np.argmax(away))
        if away[farthest] > finest:
            middle = first + 1 + farthest
            chosen.add(middle)
            open_ends += [(first, middle), (middle, last)]
    return None if len(chosen) > points else np.array(sorted(chosen))


def _distances(places: Array, start: Array, end: Array) -> Array:
    """Return the distances (m,) of places (m, 2) from a line that ends at both its ends."""
    line = end - start
    square = float(line @ line)
    along = np.clip((places - start) @ line / square, 0.0, 1.0) if square > 0 else np.zeros(len(places))
    return np.asarray(np.linalg.norm(places - start - along[:, None] * line, axis=1))


def shares(use: Use, values: Array | None = None) -> Array:
    """Return the share of its stated limit that a use's series takes, or `values`; 1 is at the limit.

    For a position, the distance from the middle of its range over half the range; 0 where there is no limit.
    """
    if use.lo is None or use.hi is None:
        raise ValueError(f"{use.limit} of {use.joint} is not stated")
    values = use.series if values is None else values
    if use.limit == "position":
        if not np.isfinite(use.lo + use.hi):
            return np.zeros(len(values))
        half = (use.hi - use.lo) / 2
        return np.asarray(np.abs(values - (use.hi + use.lo) / 2) / half)
    with np.errstate(divide="ignore", invalid="ignore"):
        share = np.where(values >= 0, values / use.hi, values / use.lo)
    return np.where(values == 0, 0.0, share)


def kept_share(use: Use) -> float | None:
    """Return the share of the stated limit that a plan may use; None where nothing is kept back or known."""
    if use.hi is None or use.kept_hi is None or not np.isfinite(use.hi):
        return None
    share = float(shares(use, np.array([use.kept_hi]))[0])
    return share if share < 1 else None


def worst_per_bin(times: Array, values: Array, bins: int) -> tuple[Array, Array]:
    """Return times and the largest of values (m,) in each of at most `bins` runs of rows."""
    if len(values) <= bins:
        return times, values
    size = -(-len(values) // bins)
    count = -(-len(values) // size)
    padded = np.append(values, np.full(count * size - len(values), -np.inf)).reshape(count, size)
    rows = size * np.arange(count) + np.argmax(padded, axis=1)
    return times[rows], values[rows]
