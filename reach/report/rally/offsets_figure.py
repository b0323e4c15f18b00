"""The drawing of the offsets from which the ball is recovered, by bearing and by apex."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from reach.evidence.rallies import OffsetEdge
from reach.report.columns import shorten
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, svg_of
from reach.report.looks import INK, OPEN_STYLE, SERIES_STYLES
from reach.report.rally.captions import of_offsets
from reach.report.rally.envelope_figure import some
from reach.report.rally.numbers import smallest_offset
from reach.report.wording import degrees, limit_of, millimetres
from reach.result import RallyResult

NAMED = 10  # apexes whose bound is written out
NAME_COLUMNS = 30
TICKS = 3  # circles of offset
LONGEST_GAP_RAD = math.radians(181)  # between bearings that a line still joins


def draw_offsets(result: RallyResult) -> Picture | None:
    """Draw the largest offset over the bearings, a line an apex, and the least of each apex; None without an edge."""
    edges = result.evidence.offsets
    if not edges:
        return None
    apexes = sorted({edge.apex_m for edge in edges})
    shown = some(apexes, len(SERIES_STYLES))
    top = 1000 * max(max((edge.largest_m or 0.0) for edge in edges), 1e-3)
    figure = Figure(figsize=(WIDTH_IN, 4.6))
    around: Any = figure.add_subplot(1, 2, 1, projection="polar")
    for apex, style in zip(shown, SERIES_STYLES, strict=False):
        mine = sorted((e for e in edges if e.apex_m == apex), key=lambda e: e.bearing_rad)
        _around(around, mine, {**style, "label": f"apex {millimetres(apex)} mm"})
    around.set_ylim(0, 1.08 * top)
    ticks = _round_steps(top)
    around.set_yticks(ticks, [f"{tick:g}" for tick in ticks])
    around.set_rlabel_position(22.5)
    around.set_title("largest offset by bearing, mm")
    least = [edge for apex in apexes if (edge := smallest_offset(edges, apex)) is not None]
    _least(figure.add_subplot(1, 2, 2), least)
    figure.legend(loc="outside upper left", ncols=6)
    return Picture(of_offsets(result, len(shown), len(apexes)), svg_of(figure))


def _round_steps(top: float) -> list[float]:
    """Return radii of circles up to a largest value, in steps of 1, 2 or 5."""
    raw = top / TICKS
    unit = 10 ** math.floor(math.log10(raw))
    step = next(unit * k for k in (1, 2, 5, 10) if unit * k >= raw)
    return [step * k for k in range(1, int(top / step) + 1)] or [top]


def _around(axes: Axes, edges: list[OffsetEdge], style: dict[str, Any]) -> None:
    """Draw one apex: a closed line through the bearings where they go all the way round."""
    angle = np.array([edge.bearing_rad for edge in edges])
    radius = np.array([1000 * (edge.largest_m or 0.0) for edge in edges])
    gaps = np.diff(np.append(angle, angle[0] + 2 * np.pi))
    whole = len(edges) > 2 and gaps.max() < LONGEST_GAP_RAD
    line = (np.append(angle, angle[0]), np.append(radius, radius[0])) if whole else (angle, radius)
    axes.plot(*line, **style, markersize=4.5, linewidth=1.6, clip_on=False)
    unbounded = np.array([edge.open for edge in edges], dtype=bool)
    if unbounded.any():
        axes.plot(angle[unbounded], radius[unbounded], **{**OPEN_STYLE, "label": "_"})


def _least(axes: Axes, edges: list[OffsetEdge]) -> None:
    """Draw the least offset of each apex as a bar with what bounds it."""
    values = [1000 * (edge.largest_m or 0.0) for edge in edges]
    rows = np.arange(len(edges))
    axes.barh(rows, values, height=0.5, facecolor="#c9d6e2", edgecolor=INK, linewidth=0.8)
    named = some([float(row) for row in rows], NAMED)
    top = max(*values, 1.0)
    for row in map(int, named):
        axes.annotate(
            _told(edges[row]),
            (values[row] if values[row] < 0.4 * top else 0.0, row),
            xytext=(5, 0),
            textcoords="offset points",
            va="center",
            fontsize=8.5,
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.3, "alpha": 0.75},
        )
    axes.set_yticks(named, [millimetres(edges[int(row)].apex_m) for row in named])
    axes.set(xlim=(0, 1.05 * top), ylim=(-0.6, len(edges) - 0.4))
    axes.set(xlabel="least over the bearings, mm", ylabel="apex, mm")
    axes.grid(False, axis="y")


def _told(edge: OffsetEdge) -> str:
    if edge.open:
        return "looked no further"
    size = "none" if edge.largest_m is None else f"{millimetres(edge.largest_m)}"
    return (
        f"{size} at {degrees(edge.bearing_rad)}°: {shorten(limit_of(edge.limit, edge.joint), NAME_COLUMNS)}"
    )
