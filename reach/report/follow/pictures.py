"""The report's drawings, as SVG."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Array
from reach.evidence.record import Strike, Track
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, looks, svg_of
from reach.report.follow.captions import of_errors, of_speed
from reach.report.follow.clock import Clock
from reach.report.follow.path_figure import draw_path
from reach.report.follow.series import keep
from reach.report.follow.use_figures import draw_peaks, draw_uses
from reach.report.looks import (
    BLUE,
    COMMANDED_STYLE,
    DELIVERED_STYLE,
    GREEN,
    INK,
    ORANGE,
    STRIKE_STYLES,
    WINDOW_STYLES,
)
from reach.result import FollowResult

POINTS = 2000  # a line, at most
PANEL_POINTS = 400  # a line in one of many panels, at most
CLOSE_UPS = 4
CLOSE_UP_S = 0.08  # drawn before and after the contact
FAR_TIMES = 30.0  # the tolerance: from here errors are drawn on a scale that bends


def pictures(result: FollowResult) -> list[Picture]:
    """Draw everything a result has to show; an empty list without a motion."""
    track = result.evidence.track
    if track is None or len(track.t_s) == 0:
        return []
    with looks():
        return [
            _speed(result, track),
            draw_peaks(result),
            draw_uses(result, track),
            _errors(result, track),
            draw_path(result, track),
        ]


def _speed(result: FollowResult, track: Track) -> Picture:
    """Commanded against delivered normal speed, and close-ups of the worst strikes."""
    strikes = result.evidence.strikes
    # Missed ones first, the worst before the others; shown in order of time.
    ranked = sorted(strikes, key=lambda s: (s.delivered, -abs(1 - (s.delivered_share or 0.0))))[:CLOSE_UPS]
    close = sorted(ranked, key=lambda strike: strike.time_s)
    figure = Figure(figsize=(WIDTH_IN, 6.2 if close else 3.4))
    heights = [1.25, 1.0] if close else [1.0]
    grid = figure.add_gridspec(len(heights), max(len(close), 1), height_ratios=heights)
    clock = Clock.of(track)
    whole = figure.add_subplot(grid[0, :])
    _speed_lines(whole, track, clock)
    _strike_marks(whole, result, strikes, clock)
    whole.set(xlabel=clock.label, ylabel="speed along the normal, m/s", title="whole motion")
    whole.legend(loc="lower left", bbox_to_anchor=(0.15, 1.0), ncols=4, borderaxespad=0.2)
    for place, strike in enumerate(close):
        axes = figure.add_subplot(grid[1, place])
        _close_up(axes, result, track, strike)
        if place == 0:
            axes.set_ylabel("m/s")
    return Picture(of_speed(result), svg_of(figure))


def _speed_lines(axes: Axes, track: Track, clock: Clock) -> None:
    shown = keep(np.column_stack([track.commanded_normal, track.delivered_normal]), POINTS)
    t = track.t_s[shown] - clock.zero_s
    axes.plot(t, track.commanded_normal[shown], **COMMANDED_STYLE)
    axes.plot(t, track.delivered_normal[shown], **DELIVERED_STYLE)


def _strike_marks(axes: Axes, result: FollowResult, strikes: tuple[Strike, ...], clock: Clock) -> None:
    share = result.cell.accept.strike_speed_error_share
    for delivered, style in STRIKE_STYLES.items():
        some = [strike for strike in strikes if strike.delivered is delivered]
        if some:
            t = [strike.time_s - clock.zero_s for strike in some]
            commanded = np.array([strike.commanded_m_s for strike in some])
            band = share * np.abs(commanded)
            axes.errorbar(t, commanded, yerr=band, fmt="none", ecolor=INK, capsize=3, elinewidth=1, zorder=4)
            axes.plot(t, [s.delivered_m_s for s in some], **style)


def _close_up(axes: Axes, result: FollowResult, track: Track, strike: Strike) -> None:
    accept = result.cell.accept
    since = (track.t_s - strike.time_s) * 1000
    rows = np.flatnonzero(np.abs(since) <= 1000 * CLOSE_UP_S)
    rows = rows[keep(np.column_stack([track.commanded_normal, track.delivered_normal])[rows], PANEL_POINTS)]
    half = 1000 * accept.strike_window_s / 2
    band = accept.strike_speed_error_share * abs(strike.commanded_m_s)
    low, high = strike.commanded_m_s - band, strike.commanded_m_s + band
    axes.fill_between([-half, half], low, high, facecolor="#cfe3d4", edgecolor=GREEN, linewidth=1)
    axes.plot(since[rows], track.commanded_normal[rows], **COMMANDED_STYLE)
    axes.plot(since[rows], track.delivered_normal[rows], **DELIVERED_STYLE)
    axes.plot([0], [strike.delivered_m_s], **STRIKE_STYLES[strike.delivered])
    word = "delivered" if strike.delivered else "missed"
    axes.set(title=f"{strike.time_s:.3f} s: {word}", xlabel="ms from contact")
    axes.set_xlim(-1000 * CLOSE_UP_S, 1000 * CLOSE_UP_S)


def _errors(result: FollowResult, track: Track) -> Picture:
    """Velocity, position and tilt error over time with their tolerances."""
    accept = result.cell.accept
    figure = Figure(figsize=(WIDTH_IN, 5.6))
    clock = Clock.of(track)
    tilt_deg = math.degrees(accept.strike_tilt_error_rad)
    columns: tuple[tuple[str, Array, float], ...] = (
        ("velocity error, m/s", track.velocity_error, accept.strike_lateral_m_s),
        ("position error, mm", 1000 * track.position_error, 1000 * accept.strike_position_m),
        ("tilt error, °", np.degrees(track.tilt_error), tilt_deg),
    )
    panels = figure.subplots(3, 1, sharex=True)
    rows = keep(np.column_stack([values for _, values, _ in columns]), POINTS)
    t = track.t_s[rows] - clock.zero_s
    for axes, (label, values, tolerance) in zip(panels, columns, strict=True):
        _shade(axes, result, track, clock)
        axes.plot(t, values[rows], color=BLUE, label="error")
        axes.axhline(tolerance, color=ORANGE, linestyle=(0, (5, 2)), linewidth=1.1, label="tolerance")
        if values.max() > FAR_TIMES * tolerance > 0:
            axes.set_yscale("symlog", linthresh=tolerance)
            decades = np.arange(np.ceil(np.log10(values.max() / tolerance)))
            axes.set_yticks([0.0, *(tolerance * 10.0**decades)])
            axes.minorticks_off()
            axes.yaxis.set_major_formatter(lambda value, _: f"{value:.3g}")
        axes.set_ylim(0, 1.3 * max(tolerance, float(values.max())))
        axes.set_ylabel(label)
    panels[-1].set_xlabel(clock.label)
    figure.legend(*panels[-1].get_legend_handles_labels(), loc="outside upper left", ncols=4)
    return Picture(of_errors(result), svg_of(figure))


def _shade(axes: Axes, result: FollowResult, track: Track, clock: Clock) -> None:
    t = track.t_s - clock.zero_s
    half = max(result.cell.accept.strike_window_s, (t[-1] - t[0]) / 400) / 2
    named: set[bool] = set()
    for strike in result.evidence.strikes:
        middle = strike.time_s - clock.zero_s
        style = WINDOW_STYLES[strike.delivered]
        # A label that begins with an underscore keeps out of the legend: one entry a style.
        label = "_" if strike.delivered in named else style["label"]
        named.add(strike.delivered)
        axes.axvspan(
            middle - half, middle + half, edgecolor="white", linewidth=0, **{**style, "label": label}
        )
    after = np.flatnonzero(~track.during)
    if len(after):
        axes.axvspan(t[after[0]], t[-1], facecolor="#eeeeee", linewidth=0)
