"""The drawings of time and speed against their bounds, and of the acceleration at impact."""

from __future__ import annotations

import math
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.rallies import Bounce, RallyPoints
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, Rectangle, name_all, svg_of
from reach.report.looks import BLUE, GREY, INK, SKY, VERDICT_STYLES
from reach.report.rally.captions import of_times, of_windows
from reach.report.wording import millimetres, milliseconds
from reach.result import RallyResult
from reach.verdict import DELIVERABLE

ROOM = 1.06  # of an axis beyond its largest value
BAR = 0.36  # half height of a row
BOUNCES = 12  # apexes drawn
WINDOW: dict[str, Any] = {"facecolor": "#dcebf5", "edgecolor": SKY, "linewidth": 0.8}
FASTEST: dict[str, Any] = {"facecolor": SKY, "edgecolor": BLUE, "hatch": "////", "linewidth": 0.0}
SHOWN: dict[str, Any] = {
    **{"fmt": "o", "color": INK, "markersize": 6, "capsize": 5, "elinewidth": 1, "zorder": 5},
}
DASH: dict[str, Any] = {"linestyle": "", "marker": "_", "markersize": 11, "color": GREY, "zorder": 3}


def draw_times(result: RallyResult) -> Picture | None:
    """Draw cycle time over flight time, and paddle speed over apex, each with its bound; None where all is unknown."""
    points = result.evidence.points
    timed = np.isfinite(points.flight_s) & np.isfinite(points.cycle_s)
    fast = np.isfinite(points.paddle_speed_m_s)
    if not timed.any() and not fast.any():
        return None
    figure = Figure(figsize=(WIDTH_IN, 4.6))
    time, speed = figure.subplots(1, 2)
    latency = 0.0 if result.cell.rally is None else result.cell.rally.latency_s
    _times(time, points, timed, latency)
    _speeds(speed, points, fast)
    name_all(figure, [time, speed], 6)
    return Picture(of_times(result, int((~timed).sum())), svg_of(figure))


def _times(axes: Axes, points: RallyPoints, rows: NDArray[np.bool_], latency_s: float) -> None:
    flight, cycle = 1000 * points.flight_s, 1000 * points.cycle_s
    bounded = (
        np.isfinite(points.time_bound_s) & np.isfinite(points.flight_s) & (points.verdict != DELIVERABLE)
    )
    if bounded.any():
        axes.plot(flight[bounded], 1000 * points.time_bound_s[bounded], **DASH, label="bound on the time")
    _marks(axes, points, rows, flight, cycle)
    top = ROOM * float(np.max(np.concatenate([flight[rows | bounded], cycle[rows]]), initial=1.0))
    axes.plot([0, top], [0, top], color=GREY, linewidth=1, label="cycle = flight", zorder=2)
    if latency_s:
        ends = np.array([1000 * latency_s, max(top, 1000 * latency_s)])
        axes.plot(
            *(ends, ends - 1000 * latency_s),
            color=INK,
            linestyle=(0, (5, 2)),
            label=f"flight less {milliseconds(latency_s)} ms latency",
            zorder=2,
        )
    axes.set(xlim=(0, top), ylim=(0, top), xlabel="flight, ms", ylabel="fastest cycle found, ms")


def _speeds(axes: Axes, points: RallyPoints, rows: NDArray[np.bool_]) -> None:
    """Draw the paddle speed needed over the apex, as a share of its bound where any is known."""
    bounded = rows & np.isfinite(points.speed_bound_m_s) & (points.speed_bound_m_s > 0)
    if bounded.any():
        share = np.full(len(rows), np.nan)
        share[bounded] = 100 * points.paddle_speed_m_s[bounded] / points.speed_bound_m_s[bounded]
        axes.axhline(100, color=INK, linewidth=1)
        _marks(axes, points, bounded, 1000 * points.apex_m, share)
        axes.set_ylabel("paddle speed needed, % of its bound")
    else:
        _marks(axes, points, rows, 1000 * points.apex_m, points.paddle_speed_m_s)
        axes.set_ylabel("paddle speed needed, m/s")
    axes.set_xlabel("apex, mm")
    axes.set_xlim(0, ROOM * max(axes.get_xlim()[1], 1e-3))
    axes.set_ylim(0, ROOM * max(axes.get_ylim()[1], 1e-3))


def _marks(axes: Axes, points: RallyPoints, rows: NDArray[np.bool_], x: Array, y: Array) -> None:
    for verdict, style in VERDICT_STYLES.items():
        mine = rows & (points.verdict == verdict)
        if mine.any():
            axes.plot(x[mine], y[mine], **style)


def draw_windows(result: RallyResult) -> Picture | None:
    """Draw the acceleration at impact of each steady bounce in the window of stability; None without a bounce."""
    bounces = [b for b in result.evidence.bounces if all(map(math.isfinite, b.window_m_s2))][:BOUNCES]
    if not bounces:
        return None
    figure = Figure(figsize=(WIDTH_IN, 1.3 + 0.46 * len(bounces)))
    axes = figure.add_subplot()
    for row, bounce in enumerate(bounces):
        _window(axes, bounce, row)
    axes.axvline(0, color=INK, linewidth=1)
    axes.set_yticks(range(len(bounces)), [millimetres(bounce.apex_m) for bounce in bounces])
    values = [x for b in bounces for x in _reached(b) if math.isfinite(x)]
    low, high = min(values), max([*values, 0.0])
    edge = 0.08 * max(high - low, 1.0)
    axes.set(xlim=(low - edge, high + edge), ylim=(len(bounces) - 0.4, -0.6))
    axes.set(xlabel="paddle acceleration at impact, m/s²", ylabel="apex, mm")
    axes.grid(False, axis="y")
    name_all(figure, [axes], 6)
    return Picture(of_windows(result), svg_of(figure))


def _reached(bounce: Bounce) -> tuple[float, ...]:
    """Every acceleration that a row shows, nan among them."""
    spread = bounce.tolerated_m_s2 if math.isfinite(bounce.tolerated_m_s2) else 0.0
    ends = (bounce.impact_m_s2 - spread, bounce.impact_m_s2 + spread)
    return (*bounce.window_m_s2, bounce.least_m_s2, *ends)


def _window(axes: Axes, bounce: Bounce, row: int) -> None:
    low, high = bounce.window_m_s2
    corner, height = (low, row - BAR), 2 * BAR
    axes.add_patch(Rectangle(corner, high - low, height, **WINDOW, label="stable by itself"))
    if all(map(math.isfinite, bounce.fastest_m_s2)):
        start, end = bounce.fastest_m_s2
        axes.add_patch(Rectangle((start, row - BAR), end - start, height, **FASTEST, label="settles fastest"))
    if not math.isfinite(bounce.impact_m_s2):
        axes.text(high, row, "   cycle not held", va="center", fontsize=8.5, color=INK)
        return
    if math.isfinite(bounce.least_m_s2):
        ends = [bounce.least_m_s2, bounce.impact_m_s2]
        axes.plot(ends, [row, row], color=INK, linewidth=2.4, zorder=4, label="within the limits")
    spread = _reached(bounce)[-1] - bounce.impact_m_s2
    axes.errorbar([bounce.impact_m_s2], [row], xerr=[spread], **SHOWN, label="demonstrated, ± tolerated")
