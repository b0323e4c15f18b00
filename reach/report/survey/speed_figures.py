"""The drawings of demonstrated speeds and upper bounds, strike by strike and as shares."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, svg_of
from reach.report.looks import GREY, INK
from reach.report.survey.captions import of_bounds, of_share
from reach.report.survey.marks import (
    BOUND_STYLE,
    DONE_STYLE,
    POINT_STYLES,
    REQUIRED_STYLE,
    required_speeds,
    thinned,
)
from reach.report.survey.numbers import (
    bound_in_force,
    demonstrated,
    speed_of_share,
    unreachable,
    way_of_striking,
)
from reach.result import SurveyResult

MARKS = 70  # that a side of the scatter holds apart, at most
STEPS = 400  # of a curve of shares
MARKED_SHARES = (0.95, 0.9, 0.5)
ROOM = 1.06  # of the axis beyond the largest value


def draw_bounds(result: SurveyResult) -> Picture | None:
    """Draw each strike's demonstrated speed over its upper bound, marked by verdict; None where none is in reach."""
    points = result.evidence.points
    done, bound = demonstrated(points), bound_in_force(points, result.cell.survey)
    away, known = unreachable(points), np.isfinite(bound)
    if away.all():
        return None
    required = required_speeds(points.required_m_s)
    side, kind = _top(done, bound, required), way_of_striking(result.cell.survey)
    figure = Figure(figsize=(WIDTH_IN, 5.4))
    axes, aside = figure.subplots(1, 2, width_ratios=[1.6, 1])
    aside.set_axis_off()
    axes.plot([0, side], [0, side], color=GREY, linewidth=1, label="demonstrated = upper bound", zorder=2)
    for verdict, style in POINT_STYLES.items():
        mine = (points.verdict == verdict) & known & ~away
        if mine.any():
            places = thinned(np.column_stack([bound, done])[mine], np.full(2, side / MARKS))
            axes.plot(*places.T, **style)
    for place, speed in enumerate(required):
        axes.axhline(speed, **REQUIRED_STYLE, label="_" if place else "required")
        axes.axvline(speed, **REQUIRED_STYLE)
    axes.set(xlim=(0, side), ylim=(0, side), xlabel=f"upper bound ({kind}), m/s", ylabel="demonstrated, m/s")
    axes.set_aspect("equal")
    aside.legend(*axes.get_legend_handles_labels(), loc="upper left", handlelength=2.4)
    return Picture(of_bounds(result, int((~known & ~away).sum()), int(away.sum())), svg_of(figure))


def draw_share(result: SurveyResult) -> Picture:
    """Draw the share of strikes that reach each speed, demonstrated and by the upper bound."""
    points = result.evidence.points
    done, bound = demonstrated(points), bound_in_force(points, result.cell.survey)
    required = required_speeds(points.required_m_s)
    top = _top(done, bound, required)
    figure = Figure(figsize=(WIDTH_IN, 4.2))
    axes = figure.add_subplot()
    at = _steps(np.concatenate([done, bound]), top)
    low, high = _curve(done, at), _curve(bound, at)
    axes.fill_between(at, low, high, facecolor="#eeeeee", linewidth=0, label="not settled")
    axes.plot(at, low, **DONE_STYLE)
    axes.plot(at, high, **BOUND_STYLE)
    for place, speed in enumerate(required):
        axes.axvline(speed, **REQUIRED_STYLE, label="_" if place else "required")
    _quantiles(axes, done, top)
    axes.set(
        xlim=(0, top), ylim=(0, 104), xlabel="paddle speed along the normal, m/s", ylabel="% of the strikes"
    )
    axes.set_yticks([0, 25, 50, 75, 90, 100])
    figure.legend(loc="outside upper left", ncols=5)
    return Picture(of_share(result), svg_of(figure))


def _top(done: Array, bound: Array, required: list[float]) -> float:
    """Return where the speed axes end, m/s."""
    speeds = [*done, *bound[np.isfinite(bound)], *required]
    return ROOM * max([float(np.max(speeds, initial=0.0)), 1e-3])


def _steps(speeds: Array, top: float) -> Array:
    """Return the speeds to draw a curve of shares at: either side of each step where they are few."""
    known = np.unique(speeds[np.isfinite(speeds)])
    if len(known) > STEPS:
        return np.linspace(0, top, STEPS)
    return np.unique(np.concatenate([[0.0, top], known, np.nextafter(known, np.inf)]))


def _curve(speeds: Array, at: Array) -> Array:
    """Return the share in % of strikes that reach each speed or more."""
    below = np.searchsorted(np.sort(speeds), at, side="left")
    return np.asarray(100 * (1 - below / len(speeds)))


def _quantiles(axes: Axes, done: Array, top: float) -> None:
    """Mark the speeds that so great a share of the strikes has demonstrated."""
    for share in MARKED_SHARES:
        speed = speed_of_share(done, share)
        axes.plot([speed], [100 * share], "o", color=INK, markersize=5, zorder=5, clip_on=False)
        axes.annotate(
            f"{100 * share:.0f} %: {speed:.2f} m/s",
            (speed, 100 * share),
            xytext=(-7, -9) if speed > 0.2 * top else (9, 0),
            textcoords="offset points",
            ha="right" if speed > 0.2 * top else "left",
            va="center",
            fontsize=9,
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.6},
            zorder=6,
        )
