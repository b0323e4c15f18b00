"""Figures of an envelope: ranges of apexes, recoverable offsets, times, tolerances, places of the centre."""

from __future__ import annotations

import math
from collections.abc import Callable, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.rallies import ApexEdge, Bounce, Centre, OffsetEdge, RallyEvidence, RallyPoints
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

# Errors that a point bears each alone: field of the points, name, and its unit's kind.
TOLERANCES = (
    ("largest_delay_s", "further delay", "time"),
    ("largest_tilt_rad", "tilt error of the face", "angle"),
    ("largest_contact_offset_m", "contact off the face's middle", "length"),
    ("largest_restitution_error", "restitution error", "number"),
)


@dataclass(frozen=True)
class Range:
    """Apexes held at every bearing, at one offset: the highest of the lowest ones and the lowest of the highest ones.

    Both are None where a bearing holds no apex; `empty` are those edges.
    """

    offset_m: float
    low: ApexEdge | None
    high: ApexEdge | None
    empty: tuple[ApexEdge, ...]

    @property
    def crossed(self) -> bool:
        """Whether each bearing holds some apex, and no apex is held at all of them."""
        if self.low is None or self.high is None or self.low.low_m is None or self.high.high_m is None:
            return False
        return self.low.low_m > self.high.high_m


@dataclass(frozen=True)
class ApexRow:
    """One apex: its points by verdict, the row of least margin, the least offset recovered.

    row : of the points; None where no time is known
    """

    apex_m: float
    flight_s: float
    points: int
    deliverable: int
    row: int | None
    offset: OffsetEdge | None


def verdict_counts(points: RallyPoints) -> dict[str, int]:
    """Return how many points have each verdict."""
    return {word: int((points.verdict == word).sum()) for word in (DELIVERABLE, NOT_DELIVERABLE, UNDECIDED)}


def held(points: RallyPoints) -> NDArray[np.bool_]:
    """Return which points (m,) are deliverable."""
    return np.asarray(points.verdict == DELIVERABLE)


def least(values: Array) -> float:
    """Return the least finite value, nan where there is none."""
    return (
        float(np.min(values[np.isfinite(values)], initial=math.inf))
        if np.isfinite(values).any()
        else math.nan
    )


def most(values: Array) -> float:
    """Return the largest finite size, nan where there is none."""
    return -least(-np.abs(values))


def middle(values: Array) -> float:
    """Return the median of the finite values, nan where there is none."""
    known = values[np.isfinite(values)]
    return float(np.median(known)) if len(known) else math.nan


def lowest_row(values: Array, mask: NDArray[np.bool_]) -> int | None:
    """Return the row of the least finite value among those of a mask, None where there is none."""
    rows = np.flatnonzero(mask & np.isfinite(values))
    return int(rows[np.argmin(values[rows])]) if len(rows) else None


def ranges(edges: Sequence[ApexEdge]) -> list[Range]:
    """Return the apexes held at every bearing, a range an offset."""
    found = []
    for offset in sorted({edge.offset_m for edge in edges}):
        mine = [edge for edge in edges if edge.offset_m == offset]
        empty = tuple(edge for edge in mine if edge.low_m is None or edge.high_m is None)
        low = None if empty else _extreme(mine, lambda edge: -_value(edge.low_m))
        high = None if empty else _extreme(mine, lambda edge: _value(edge.high_m))
        found.append(Range(offset, low, high, empty))
    return found


def smallest_offset(offsets: Sequence[OffsetEdge], apex_m: float | None = None) -> OffsetEdge | None:
    """Return the edge of the least offset recovered over the bearings, at one apex or at all; None without an edge."""
    mine = [edge for edge in offsets if apex_m is None or math.isclose(edge.apex_m, apex_m, rel_tol=1e-9)]
    return min(mine, key=lambda edge: -1.0 if edge.largest_m is None else edge.largest_m, default=None)


def best_offset(offsets: Sequence[OffsetEdge]) -> OffsetEdge | None:
    """Return the edge of the apex that recovers from the largest offset at every bearing; None without an edge."""
    each = [smallest_offset(offsets, apex) for apex in dict.fromkeys(edge.apex_m for edge in offsets)]
    known = [edge for edge in each if edge is not None]
    return max(known, key=lambda edge: -1.0 if edge.largest_m is None else edge.largest_m, default=None)


def apex_rows(evidence: RallyEvidence) -> list[ApexRow]:
    """Return each apex, low to high."""
    points, done = evidence.points, held(evidence.points)
    rows = []
    for apex in np.unique(points.apex_m).tolist():
        mine = points.apex_m == apex
        rows.append(
            ApexRow(
                apex,
                middle(points.flight_s[mine]),
                int(mine.sum()),
                int((mine & done).sum()),
                lowest_row(points.margin_s, mine),
                smallest_offset(evidence.offsets, apex),
            )
        )
    return rows


def borne(points: RallyPoints, field: str) -> tuple[float, float]:
    """Return median and least of an error that deliverable points bear alone; nan where it is not known."""
    values = np.asarray(getattr(points, field))[held(points)]
    return middle(values), least(values)


def stable_by_itself(bounce: Bounce) -> bool:
    """Whether the paddle's acceleration at impact lies in the window in which the bounce needs no feedback.

    Near zero, up to half way to the band in which an error shrinks fastest, it hardly shrinks: that counts as none.
    """
    return bounce.window_m_s2[0] < bounce.impact_m_s2 < bounce.fastest_m_s2[1] / 2


def could_be_stable(bounce: Bounce) -> bool:
    """Whether some cycle within the limits brakes at impact, so that the bounce needs no feedback."""
    return math.isfinite(bounce.least_m_s2) and bounce.least_m_s2 < bounce.window_m_s2[1]


def best_centre(centres: Sequence[Centre]) -> Centre | None:
    """Return the place with the most points deliverable, the first of those; None without a grid."""
    return max(centres, key=lambda centre: centre.deliverable, default=None)


def full_centres(centres: Sequence[Centre]) -> int:
    """Return at how many places every point asked for is deliverable."""
    return sum(centre.deliverable == centre.points > 0 for centre in centres)


def _extreme(edges: Sequence[ApexEdge], key: Callable[[ApexEdge], float]) -> ApexEdge:
    return min(edges, key=key)


def _value(value: float | None) -> float:
    return math.nan if value is None else value
