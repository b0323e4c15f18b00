"""The report's drawings, as SVG. The only module that imports the drawing library."""

from __future__ import annotations

import io
import math
import warnings
from typing import Any, NamedTuple

import matplotlib as mpl
import numpy as np
from matplotlib.axes import Axes
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.figure import Figure

from reach.cell import Array
from reach.evidence.record import Strike, Track, Use
from reach.report.captions import Caption, of_errors, of_path, of_peaks, of_speed, of_uses
from reach.report.columns import shorten
from reach.report.looks import (
    BLUE,
    COMMANDED_STYLE,
    DELIVERED_STYLE,
    GREEN,
    GREY,
    INK,
    KIND_STYLES,
    ORANGE,
    OTHER_STYLE,
    PALE,
    START_STYLE,
    STRIKE_STYLES,
    STYLE,
    WINDOW_STYLES,
)
from reach.report.series import keep, kept_share, shares, worst_per_bin
from reach.report.wording import owner
from reach.result import FollowResult
from reach.verdict import ROUNDING

WIDTH_IN = 9.8  # 940 px at 96 px an inch: the page's width
POINTS = 2000  # a line, at most
PANEL_POINTS = 400  # a line in one of many panels, at most
CLOSE_UPS = 4
CLOSE_UP_S = 0.08  # drawn before and after the contact
MOST_SHARE = 2.0  # of a limit, the top of a panel
FAR_SHARE = 10 * MOST_SHARE  # shares are drawn as this at most, infinite ones too
FAR_TIMES = 30.0  # the tolerance: from here errors are drawn on a scale that bends
FAR_ZERO_S = 1e5  # logs that start later than this are drawn from zero
NAME_COLUMNS = 34
MEANS = ("duty",)  # kinds that are one number for the whole motion: no line over time


class Picture(NamedTuple):
    """A drawing and its caption."""

    caption: Caption
    svg: bytes


def pictures(result: FollowResult) -> list[Picture]:
    """Draw everything a result has to show; an empty list without a motion."""
    track = result.evidence.track
    if track is None or len(track.t_s) == 0:
        return []
    with mpl.rc_context(STYLE), warnings.catch_warnings():
        # The measuring font lacks some scripts; the reader's fonts, which draw the text, need not.
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from")
        return [
            _speed(result, track),
            _peaks(result),
            _uses(result, track),
            _errors(result, track),
            _path(result, track),
        ]


def _svg(figure: Figure) -> bytes:
    out = io.BytesIO()
    FigureCanvasSVG(figure)
    figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    return out.getvalue()


class _Clock(NamedTuple):
    """Instants as drawn: those of the log, or since its start where the log's zero is far away."""

    zero_s: float
    label: str

    @classmethod
    def of(cls, track: Track) -> _Clock:
        start = float(track.t_s[0])
        return cls(0.0, "time, s") if abs(start) < FAR_ZERO_S else cls(start, f"time after {start:.3f} s, s")


def _speed(result: FollowResult, track: Track) -> Picture:
    """Commanded against delivered normal speed, and close-ups of the worst strikes."""
    strikes = result.evidence.strikes
    # Missed ones first, the worst before the others; shown in order of time.
    ranked = sorted(strikes, key=lambda s: (s.delivered, -abs(1 - (s.delivered_share or 0.0))))[:CLOSE_UPS]
    close = sorted(ranked, key=lambda strike: strike.time_s)
    figure = Figure(figsize=(WIDTH_IN, 6.2 if close else 3.4))
    heights = [1.25, 1.0] if close else [1.0]
    grid = figure.add_gridspec(len(heights), max(len(close), 1), height_ratios=heights)
    clock = _Clock.of(track)
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
    return Picture(of_speed(result), _svg(figure))


def _speed_lines(axes: Axes, track: Track, clock: _Clock) -> None:
    shown = keep(np.column_stack([track.commanded_normal, track.delivered_normal]), POINTS)
    t = track.t_s[shown] - clock.zero_s
    axes.plot(t, track.commanded_normal[shown], **COMMANDED_STYLE)
    axes.plot(t, track.delivered_normal[shown], **DELIVERED_STYLE)


def _strike_marks(axes: Axes, result: FollowResult, strikes: tuple[Strike, ...], clock: _Clock) -> None:
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


def _peaks(result: FollowResult) -> Picture:
    """Peak use of every limit of every joint, as numbers on a shaded table."""
    uses = result.evidence.uses
    kinds = list(dict.fromkeys(use.limit for use in uses))
    owners = list(dict.fromkeys(use.joint for use in uses))
    figure = Figure(figsize=(WIDTH_IN, 0.9 + 0.46 * len(owners)))
    axes = figure.add_subplot()
    for use in uses:
        _peak_cell(axes, use, kinds.index(use.limit), owners.index(use.joint))
    axes.set(xlim=(-0.5, len(kinds) - 0.5), ylim=(len(owners) - 0.5, -0.5))
    names = ["tool" if joint is None else shorten(_name(uses, joint), NAME_COLUMNS) for joint in owners]
    axes.set_xticks(range(len(kinds)), kinds)
    axes.set_yticks(range(len(owners)), names)
    axes.tick_params(length=0, labeltop=True, labelbottom=False)
    axes.grid(False)
    axes.spines[:].set_visible(False)
    return Picture(of_peaks(result), _svg(figure))


def _name(uses: tuple[Use, ...], joint: str) -> str:
    return next(owner(use) for use in uses if use.joint == joint)


def _breaks(share: float | None) -> bool:
    return share is not None and share > 1 + ROUNDING


def _peak_cell(axes: Axes, use: Use, x: int, y: int) -> None:
    share = use.utilisation
    box: dict[str, Any] = {"facecolor": "white", "edgecolor": "#c8c8c8", "linewidth": 0.8}
    text, colour, weight = "", INK, "normal"
    if share is None or use.hi is None:
        text, colour = ("unknown" if use.hi is None else "–"), GREY
        box["hatch"] = "////"
        box["edgecolor"] = PALE
    elif not math.isfinite(use.hi) and not math.isfinite(use.lo or 0.0):
        text, colour = "no limit", GREY
    else:
        demand = float(shares(use, np.array([use.demand_peak]))[0])
        text = f"{100 * share:.0f}" + (f" ({_short(demand)})" if math.isfinite(demand) else "")
        depth = min(share, 1.0)
        box["facecolor"] = tuple(1 - depth**1.5 * (1 - np.array([0.0, 0.447, 0.698])) * 0.9)
        colour = "white" if depth > 0.75 else INK
    if _breaks(share):
        box.update(facecolor="#fbe3d2", edgecolor=ORANGE, linewidth=2.4, zorder=3)
        text, colour, weight = f"! {text}", "#8a2f00", "bold"
    axes.add_patch(mpl.patches.Rectangle((x - 0.48, y - 0.44), 0.96, 0.88, **box))
    axes.text(x, y, text, ha="center", va="center", color=colour, weight=weight, fontsize=9, zorder=4)


def _short(share: float) -> str:
    return f"{100 * share:.0f}" if share < 100 else f"{100 * share:.1e}"


def _uses(result: FollowResult, track: Track) -> Picture:
    """Use of each stated limit over time, a panel a joint."""
    drawn = [
        use
        for use in result.evidence.uses
        if use.limit not in MEANS and use.known and len(use.series) == len(track.t_s)
    ]
    owners = list(dict.fromkeys(use.joint for use in drawn))
    rows = max(1, -(-len(owners) // 2))
    figure = Figure(figsize=(WIDTH_IN, 0.7 + 1.75 * rows))
    clock = _Clock.of(track)
    panels = figure.subplots(rows, 2, squeeze=False, sharex=True).ravel()
    entries: dict[str, Any] = {}
    for axes, joint in zip(panels, owners, strict=False):
        mine = [use for use in drawn if use.joint == joint]
        for use in mine:
            entries.setdefault(use.limit, _use_line(axes, use, track.t_s - clock.zero_s))
        axes.set_title("tool" if joint is None else shorten(owner(mine[0]), NAME_COLUMNS))
        axes.set_ylim(0, min(MOST_SHARE, max(1.12, 1.05 * max(use.utilisation or 0.0 for use in mine))))
        axes.axhline(1, color=INK, linewidth=1.2)
        axes.yaxis.set_major_formatter(lambda share, _: f"{100 * share:.0f} %")
    for axes in panels[len(owners) :]:
        axes.set_visible(False)
    for axes in panels[max(len(owners) - 2, 0) : len(owners)]:
        axes.set_xlabel(clock.label)
        axes.tick_params(labelbottom=True)
    if entries:
        figure.legend(entries.values(), entries.keys(), loc="outside upper left", ncols=len(entries))
    return Picture(of_uses(MOST_SHARE), _svg(figure))


def _use_line(axes: Axes, use: Use, t: Array) -> Any:
    colour, dash = KIND_STYLES.get(use.limit, OTHER_STYLE)
    times, values = worst_per_bin(t, np.minimum(shares(use), FAR_SHARE), PANEL_POINTS)
    (line,) = axes.plot(times, values, color=colour, linestyle=dash, label=use.limit)
    kept = kept_share(use)
    if kept is not None:
        axes.axhline(kept, color=colour, linestyle="--", linewidth=0.9, alpha=0.7, xmin=0.94)
    over = values > 1 + ROUNDING
    top = np.maximum(values, 1)
    axes.fill_between(times, 1, top, where=over.tolist(), facecolor=colour, alpha=0.35, linewidth=0)
    if over.any():
        peak = int(np.argmax(values))
        height = min(float(values[peak]), 0.97 * MOST_SHARE)
        axes.plot(times[peak], height, "X", color=colour, markersize=7, markeredgecolor=INK, zorder=4)
    return line


def _errors(result: FollowResult, track: Track) -> Picture:
    """Velocity, position and tilt error over time with their tolerances."""
    accept = result.cell.accept
    figure = Figure(figsize=(WIDTH_IN, 5.6))
    clock = _Clock.of(track)
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
    return Picture(of_errors(result), _svg(figure))


def _shade(axes: Axes, result: FollowResult, track: Track, clock: _Clock) -> None:
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


def _path(result: FollowResult, track: Track) -> Picture:
    """The strike point's way from the side and from above."""
    figure = Figure(figsize=(WIDTH_IN, 4.6))
    strikes = result.evidence.strikes
    place_of = {strike: int(np.argmin(np.abs(track.t_s - strike.time_s))) for strike in strikes}
    for place, (title, across, up) in enumerate((("from the side", 0, 2), ("from above", 0, 1)), start=1):
        axes = figure.add_subplot(1, 2, place)
        wanted, done = track.wanted_position, track.position
        for way, style in ((done, DELIVERED_STYLE), (wanted, COMMANDED_STYLE)):
            rows = keep(way[:, [across, up]], POINTS)
            axes.plot(way[rows, across], way[rows, up], **style)
        for delivered, style in STRIKE_STYLES.items():
            at = [row for strike, row in place_of.items() if strike.delivered is delivered]
            if at:
                axes.plot(done[at, across], done[at, up], **style)
        axes.plot(done[:1, across], done[:1, up], **START_STYLE)
        axes.set(title=title, xlabel=f"{'xyz'[across]}, m", ylabel=f"{'xyz'[up]}, m")
        axes.set_aspect("equal", adjustable="datalim")
        axes.locator_params(nbins=6)
    figure.legend(*figure.axes[0].get_legend_handles_labels(), loc="outside upper left", ncols=5)
    return Picture(of_path(track), _svg(figure))
