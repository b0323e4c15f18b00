"""The drawings of how much of each limit a motion uses: its peaks, and over time."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from reach.cell import Array
from reach.evidence.record import Track, Use
from reach.report.columns import shorten
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, Polygon, Rectangle, svg_of
from reach.report.follow.captions import of_peaks, of_uses
from reach.report.follow.clock import Clock
from reach.report.follow.series import kept_share, shares, worst_per_bin
from reach.report.looks import (
    BROKEN,
    BROKEN_PALE,
    GREY,
    INK,
    KIND_COLOURS,
    ORANGE,
    OTHER_COLOUR,
    PALE,
)
from reach.report.wording import owner
from reach.result import FollowResult
from reach.verdict import ROUNDING

NAME_COLUMNS = 34
MEANS = ("duty",)  # kinds that are one number for the whole motion: no line over time
LANES = 3  # limits of a joint drawn over time
LANE = 1.3  # of the limit, from the floor of a lane to that of the next
TOP = 1.2  # of the limit: larger shares are drawn as this
BINS = 220  # of time in a lane


def draw_peaks(result: FollowResult) -> Picture:
    """Draw peak use of every limit of every joint, as numbers on a shaded table."""
    uses = result.evidence.uses
    kinds = list(dict.fromkeys(use.limit for use in uses))
    owners = list(dict.fromkeys(use.joint for use in uses))
    figure = Figure(figsize=(WIDTH_IN, 1.2 + 0.46 * len(owners)))
    axes = figure.add_subplot()
    for use in uses:
        _peak_cell(axes, use, kinds.index(use.limit), owners.index(use.joint))
    axes.set(xlim=(-0.5, len(kinds) - 0.5), ylim=(len(owners) - 0.5, -0.5))
    axes.set_xticks(range(len(kinds)), kinds)
    axes.set_yticks(range(len(owners)), [_name(joint) for joint in owners])
    axes.tick_params(length=0, labeltop=True, labelbottom=False)
    axes.grid(False)
    axes.spines[:].set_visible(False)
    signs = (
        Rectangle((0, 0), 1, 1, facecolor=_shade(0.8), edgecolor="#c8c8c8", label="use, 80 %"),
        axes.plot([], [], ls="", marker=">", ms=8, color=ORANGE, label="asked for more than the limit")[0],
        Rectangle((0, 0), 1, 1, facecolor=BROKEN_PALE, edgecolor=ORANGE, lw=2.4, label="! limit broken"),
    )
    figure.legend(handles=signs, loc="outside upper left", ncols=len(signs))
    return Picture(of_peaks(result), svg_of(figure))


def _name(joint: str | None) -> str:
    return shorten(owner(joint), NAME_COLUMNS)


def _breaks(share: float | None) -> bool:
    return share is not None and share > 1 + ROUNDING


def _shade(share: float) -> tuple[float, ...]:
    return tuple(1 - min(share, 1.0) ** 1.5 * (1 - np.array([0.0, 0.447, 0.698])) * 0.9)


def _peak_cell(axes: Axes, use: Use, x: int, y: int) -> None:
    share, demand = use.utilisation, math.nan
    box: dict[str, Any] = {"facecolor": "white", "edgecolor": "#c8c8c8", "linewidth": 0.8}
    text, colour, weight = "", INK, "normal"
    if share is None or use.hi is None:
        text, colour = ("unknown" if use.hi is None else "–"), GREY
        box.update(hatch="////", edgecolor=PALE)
    elif not math.isfinite(use.hi) and not math.isfinite(use.lo or 0.0):
        text, colour = "no limit", GREY
    else:
        demand = float(shares(use, np.array([use.demand_peak]))[0])
        text = f"{100 * share:.0f}" + (f" ({_short(demand)})" if math.isfinite(demand) else "")
        box["facecolor"] = _shade(share)
        colour = "white" if share > 0.75 else INK
    if _breaks(share):
        box.update(facecolor=BROKEN_PALE, edgecolor=ORANGE, linewidth=2.4, zorder=3)
        text, colour, weight = f"! {text}", BROKEN, "bold"
    axes.add_patch(Rectangle((x - 0.48, y - 0.44), 0.96, 0.88, **box))
    if demand > 1 + ROUNDING:
        flag = [(x - 0.48, y - 0.44), (x - 0.48, y + 0.44), (x - 0.36, y)]
        axes.add_patch(Polygon(flag, facecolor=ORANGE, edgecolor="white", linewidth=0.8, zorder=4))
    axes.text(x, y, text, ha="center", va="center", color=colour, weight=weight, fontsize=9, zorder=5)


def _short(share: float) -> str:
    return f"{100 * share:.0f}" if share < 100 else f"{100 * share:.1e}"


def draw_uses(result: FollowResult, track: Track) -> Picture:
    """Draw the use of each joint's most used limits over time: a panel a joint, a lane a limit."""
    drawn = [use for use in result.evidence.uses if _has_line(use, track)]
    owners = list(dict.fromkeys(use.joint for use in drawn))
    rows = max(1, -(-len(owners) // 2))
    figure = Figure(figsize=(WIDTH_IN, 0.5 + 1.9 * rows))
    clock = Clock.of(track)
    t = track.t_s - clock.zero_s
    panels = figure.subplots(rows, 2, squeeze=False, sharex=True).ravel()
    for axes, joint in zip(panels, owners, strict=False):
        mine = sorted((use for use in drawn if use.joint == joint), key=lambda use: -(use.utilisation or 0.0))
        _panel(axes, mine[:LANES], t)
        axes.set_title(_name(joint), weight="bold")
    for axes in panels[len(owners) :]:
        axes.set_visible(False)
    for axes in panels[max(len(owners) - 2, 0) : len(owners)]:
        axes.set_xlabel(clock.label)
        axes.tick_params(labelbottom=True)
    return Picture(of_uses(LANES), svg_of(figure))


def _has_line(use: Use, track: Track) -> bool:
    known = use.utilisation is not None and not math.isnan(use.utilisation)
    return known and use.limit not in MEANS and len(use.series) == len(track.t_s)


def _panel(axes: Axes, uses: list[Use], t: Array) -> None:
    """Draw a lane each use, the first at the top, named at the left and with its peak at the right."""
    floors = [LANE * (LANES - 1 - place) for place in range(len(uses))]
    for use, floor in zip(uses, floors, strict=True):
        _lane(axes, use, t, floor)
    axes.set_yticks(floors, [use.limit for use in uses], va="bottom")
    axes.tick_params(axis="y", length=0)
    for label, use in zip(axes.get_yticklabels(), uses, strict=True):
        label.set_color(_colour(use))
    beside = axes.get_yaxis_transform()
    axes.text(1.01, floors[0] + 1, "limit", transform=beside, va="center", color=GREY, fontsize=8)
    axes.set(xlim=(t[0], max(t[-1], t[0] + 1e-9)), ylim=(0, LANE * LANES))
    axes.grid(False, axis="y")
    axes.spines["left"].set_visible(False)


def _lane(axes: Axes, use: Use, t: Array, floor: float) -> None:
    """Draw the largest share in each bin of time from a floor up, the limit, and what the margin leaves of it."""
    colour, share = _colour(use), use.utilisation or 0.0
    times, worst = worst_per_bin(t, np.maximum(shares(use), 0.0), BINS)
    values, over = np.minimum(worst, 1), np.clip(worst, 1, TOP)
    axes.fill_between(times, floor, floor + values, facecolor=colour, alpha=0.35, linewidth=0)
    axes.plot(times, floor + values, color=colour, linewidth=0.8)
    axes.hlines(floor, t[0], t[-1], color="#c8c8c8", linewidth=0.7)
    axes.hlines(floor + 1, t[0], t[-1], color=INK, linewidth=0.9)
    kept = kept_share(use)
    if kept is not None:
        axes.hlines(floor + kept, t[0], t[-1], color=INK, linewidth=0.7, linestyle=(0, (4, 3)))
    text, weight, shade = f"{100 * share:.0f} %", "normal", INK
    if _breaks(share):
        text, weight, shade = f"! {text}", "bold", BROKEN
        broken = (worst > 1).tolist()
        axes.fill_between(times, floor + 1, floor + over, where=broken, color=BROKEN, interpolate=True)
        place = (times[np.argmax(worst)], floor + over.max())
        axes.plot(*place, "X", color=BROKEN, markersize=7, markeredgecolor="white", zorder=4, clip_on=False)
    transform = axes.get_yaxis_transform()
    axes.text(
        1.01, floor + 0.45, text, transform=transform, va="center", color=shade, weight=weight, fontsize=9
    )


def _colour(use: Use) -> str:
    return KIND_COLOURS.get(use.limit, OTHER_COLOUR)
