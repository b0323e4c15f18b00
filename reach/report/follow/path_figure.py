"""The drawing of the strike point's way, seen along the world's axes."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.evidence.record import Track
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, svg_of
from reach.report.follow.captions import of_path
from reach.report.follow.series import keep_way
from reach.report.looks import START_STYLE, STRIKE_STYLES, WAY_COMMANDED_STYLE, WAY_DELIVERED_STYLE
from reach.result import FollowResult

VIEWS = (("from the side", 0, 2), ("from the front", 1, 2), ("from above", 0, 1))
FINEST_M = 0.0002  # a drawn way leaves the real one by this at most,
FINEST_SHARE = 1 / 2000  # and by this share of the view
SMALLEST_M = 0.01  # a view shows this much at least
SLIMMEST = 0.4  # of a view's longer side, the shorter one at least
EDGE = 0.06  # of a view's longer side, left free around the way
FRAME_IN = 0.85  # of a view's width, taken by its axis
HEIGHTS_IN = (2.4, 4.6)  # of a view, least and most


def draw_path(result: FollowResult, track: Track) -> Picture:
    """Draw the strike point's way from three sides, both axes of a view to one scale."""
    boxes = [_box(track, across, up) for _, across, up in VIEWS]
    shapes = [float(np.ptp(box[0]) / np.ptp(box[1])) for box in boxes]
    height = float(np.clip((WIDTH_IN - len(VIEWS) * FRAME_IN) / sum(shapes), *HEIGHTS_IN))
    figure = Figure(figsize=(WIDTH_IN, height + 1.2))
    figure.set_layout_engine("constrained", h_pad=0.1)
    panels = figure.subplots(1, len(VIEWS), width_ratios=shapes)
    for axes, (title, across, up), box in zip(panels, VIEWS, boxes, strict=True):
        _view(axes, result, track, [across, up], float(np.ptp(box, axis=1).max()))
        axes.set(
            xlim=box[0], ylim=box[1], title=title, xlabel=f"{'xyz'[across]}, m", ylabel=f"{'xyz'[up]}, m"
        )
        axes.set_aspect("equal", adjustable="box")
    figure.legend(*panels[0].get_legend_handles_labels(), loc="outside upper left", ncols=5)
    return Picture(of_path(track), svg_of(figure))


def _box(track: Track, across: int, up: int) -> Array:
    """Return the limits (2, 2) of a view: of what is in it, and neither tiny nor a sliver."""
    ways = np.concatenate([track.position, track.wanted_position])[:, [across, up]]
    low, high = ways.min(axis=0), ways.max(axis=0)
    longest = max(float((high - low).max()), SMALLEST_M)
    half = np.maximum(high - low, SLIMMEST * longest) / 2 + EDGE * longest
    middle = (low + high) / 2
    return np.column_stack([middle - half, middle + half])


def _view(axes: Axes, result: FollowResult, track: Track, plane: list[int], span_m: float) -> None:
    """Draw both ways, the strikes and the start, seen in a plane of two world axes."""
    finest = min(FINEST_M, FINEST_SHARE * span_m)
    for way, style in ((track.wanted_position, WAY_COMMANDED_STYLE), (track.position, WAY_DELIVERED_STYLE)):
        seen = way[:, plane]
        axes.plot(*seen[keep_way(seen, finest)].T, **style)
    done = track.position[:, plane]
    for delivered, style in STRIKE_STYLES.items():
        times = [strike.time_s for strike in result.evidence.strikes if strike.delivered is delivered]
        if times:
            rows = [int(np.argmin(np.abs(track.t_s - time))) for time in times]
            axes.plot(*done[rows].T, **style)
    axes.plot(*done[:1].T, **START_STYLE)
    axes.locator_params(axis="x", nbins=4)
    axes.locator_params(axis="y", nbins=7)
