"""The drawing of apexes against offsets, a panel a bearing, with the edges around them."""

from __future__ import annotations

import math
from collections.abc import Sequence
from dataclasses import dataclass
from typing import Any

import numpy as np

from reach.evidence.rallies import ApexEdge, OffsetEdge, RallyEvidence
from reach.report.columns import shorten, wrap
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, name_all, svg_of
from reach.report.looks import (
    HIGH_EDGE_STYLE,
    LOW_EDGE_STYLE,
    OPEN_STYLE,
    SIDE_EDGE_STYLE,
    VERDICT_STYLES,
)
from reach.report.rally.captions import of_envelope
from reach.report.wording import NOTHING, degrees, limit_of
from reach.result import RallyResult

PANELS = 8  # bearings at most
ACROSS = 4  # panels in a row
NAME_COLUMNS = 34  # of a line above a panel, with so many across
TITLE_PAD_PT = 9  # above a panel, for triangles at its rim
ROOM = 0.06  # of the axes' height, free above and below
EDGE = 0.06  # of the axes' width, free left and right


def some(values: Sequence[float], count: int) -> list[float]:
    """Return so many of some sorted values, spread evenly with both ends."""
    if len(values) <= count:
        return list(values)
    return [values[k] for k in np.unique(np.round(np.linspace(0, len(values) - 1, count)).astype(int))]


@dataclass(frozen=True)
class Frame:
    """Limits of the axes, mm: the same in every panel; what was looked at beyond is drawn at the rim."""

    right: float
    low: float
    high: float


def draw_envelope(result: RallyResult) -> Picture:
    """Draw the points and edges at each bearing: offset to the right, apex up."""
    evidence = result.evidence
    bearings = sorted({round(b, 9) for b in evidence.points.bearing_rad.tolist()})
    shown = some(bearings[:-1] if len(bearings) > PANELS and _turns(bearings) else bearings, PANELS)
    columns = min(ACROSS, len(shown))
    rows = -(-len(shown) // columns)
    figure = Figure(figsize=(WIDTH_IN, 0.9 + 3.7 * rows))
    panels = figure.subplots(rows, columns, squeeze=False, sharex=True, sharey=True).ravel()
    frame = _frame(evidence)
    for axes, bearing in zip(panels, shown, strict=False):
        edges, sides = _mine(evidence.edges, bearing), _sides(evidence.offsets, bearing)
        _panel(axes, evidence, bearing, frame)
        axes.set_title(_title(bearing, edges, sides, columns), fontsize=8.5, pad=TITLE_PAD_PT)
        axes.set(xlim=(-EDGE * frame.right, frame.right * (1 + EDGE)), ylim=(frame.low, frame.high))
    for axes in panels[len(shown) :]:
        axes.set_visible(False)
    for axes in panels[max(len(shown) - columns, 0) : len(shown)]:
        axes.set_xlabel("offset, mm")
        axes.tick_params(labelbottom=True)
    for axes in panels[::columns]:
        axes.set_ylabel("apex, mm")
    name_all(figure, panels[: len(shown)], 4)
    return Picture(of_envelope(result, len(shown), len(bearings)), svg_of(figure))


def _turns(bearings: list[float]) -> bool:
    """Whether bearings end where they begin, a turn later."""
    return math.isclose(bearings[-1] - bearings[0], 2 * math.pi, rel_tol=1e-6)


def _frame(evidence: RallyEvidence) -> Frame:
    points = evidence.points
    across = [*points.offset_m, *(e.largest_m or 0.0 for e in evidence.offsets if not e.open)]
    ends = [end for e in evidence.edges for end in ((e.low_m, e.low_open), (e.high_m, e.high_open))]
    up = [*points.apex_m, *(value for value, unbounded in ends if value is not None and not unbounded)]
    low, high = 1000 * float(np.min(up)), 1000 * float(np.max(up))
    span = max(high - low, 0.2 * high, 1.0)
    right = 1000 * float(np.max(across))
    return Frame(right if right > 0 else 10.0, low - ROOM * span, high + ROOM * span)


def _panel(axes: Axes, evidence: RallyEvidence, bearing: float, frame: Frame) -> None:
    points = evidence.points
    here = np.isclose(points.bearing_rad, bearing, atol=1e-8)
    if not (here & (points.offset_m == 0)).any():
        here |= points.offset_m == 0  # the centre has no bearing
    for verdict, style in VERDICT_STYLES.items():
        mine = here & (points.verdict == verdict)
        if mine.any():
            axes.plot(1000 * points.offset_m[mine], 1000 * points.apex_m[mine], **style, clip_on=False)
    edges, sides = _mine(evidence.edges, bearing), _sides(evidence.offsets, bearing)
    _apex_line(axes, edges, frame, low=True)
    _apex_line(axes, edges, frame, low=False)
    _offset_line(axes, sides, frame)


def _mine(edges: Sequence[ApexEdge], bearing: float) -> list[ApexEdge]:
    """Return the edges of a bearing, with that of the centre, which has none."""
    mine = [edge for edge in edges if _near(edge.bearing_rad, bearing)]
    if not any(edge.offset_m == 0 for edge in mine):
        mine += [edge for edge in edges if edge.offset_m == 0][:1]
    return sorted(mine, key=lambda edge: edge.offset_m)


def _sides(offsets: Sequence[OffsetEdge], bearing: float) -> list[OffsetEdge]:
    return sorted(
        (edge for edge in offsets if _near(edge.bearing_rad, bearing)), key=lambda edge: edge.apex_m
    )


def _near(one: float, other: float) -> bool:
    return abs(one - other) < 1e-8


def _apex_line(axes: Axes, edges: list[ApexEdge], frame: Frame, low: bool) -> None:
    """Draw the lowest or highest apex over the offsets."""
    ends = [(e.low_m, e.low_open) if low else (e.high_m, e.high_open) for e in edges]
    found = [
        (1000 * edge.offset_m, float(np.clip(1000 * value, frame.low, frame.high)), unbounded)
        for edge, (value, unbounded) in zip(edges, ends, strict=True)
        if value is not None
    ]
    _line(axes, found, {**(LOW_EDGE_STYLE if low else HIGH_EDGE_STYLE), "marker": "_"})


def _title(bearing: float, edges: list[ApexEdge], sides: list[OffsetEdge], columns: int) -> str:
    """The bearing, and below it what bounds each edge."""
    room = NAME_COLUMNS * ACROSS // columns
    highest = [(e.high_limit, e.high_joint, e.high_open) for e in edges if e.high_m is not None]
    lowest = [(e.low_limit, e.low_joint, e.low_open) for e in edges if e.low_m is not None]
    offset = [(e.limit, e.joint, e.open) for e in sides]
    lines = [
        f"{word}: {_bounds(found) or NOTHING}"
        for word, found in (("highest", highest), ("lowest", lowest), ("offset", offset))
    ]
    told = [f"bearing {degrees(bearing)}°"]
    for line in lines:
        first, *more = wrap(line, rest="  ", columns=room)
        told += (
            [first, shorten(" ".join([*more[:1], "…"]) if len(more) > 1 else more[0], room)]
            if more
            else [first]
        )
    return "\n".join(told)


def _bounds(found: list[tuple[str, str, bool]]) -> str:
    """What bounds an edge along its way, each once; that it was looked no further where nothing does."""
    names = [limit_of(limit, joint) for limit, joint, unbounded in found if not unbounded]
    return ", ".join(dict.fromkeys(names)) or ("not met" if found else "")


def _offset_line(axes: Axes, edges: list[OffsetEdge], frame: Frame) -> None:
    """Draw the largest offset over the apexes."""
    found = [
        (min(1000 * edge.largest_m, frame.right * (1 + EDGE)), 1000 * edge.apex_m, edge.open)
        for edge in edges
        if edge.largest_m is not None
    ]
    _line(axes, found, {**SIDE_EDGE_STYLE, "marker": "|"})


def _line(axes: Axes, found: list[tuple[float, float, bool]], style: dict[str, Any]) -> None:
    """Draw an edge through places, with a triangle where it was looked no further."""
    if found:
        axes.plot([x for x, *_ in found], [y for _, y, _ in found], **style, zorder=4, markersize=9)
    beyond = [(x, y) for x, y, unbounded in found if unbounded]
    if beyond:
        axes.plot(*np.array(beyond).T, **OPEN_STYLE, clip_on=False)
