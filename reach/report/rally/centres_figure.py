"""The drawing of where the centre may stand, seen from above, a panel a height."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Array, Vec3
from reach.evidence.rallies import Centre
from reach.report.figures import WIDTH_IN, Axes, Figure, Normalize, Picture, ScalarMappable, colormaps, svg_of
from reach.report.looks import INK, SHARE_MAP
from reach.report.rally.captions import of_centres
from reach.report.rally.envelope_figure import some
from reach.result import RallyResult

PANELS = 6  # heights
ACROSS = 3
NUMBERED = 27  # places across a row of panels that still take a number each
DARK = 0.55  # share below which a number stands in white
HEIGHTS_IN = (1.4, 4.6)  # of a panel, least and most
CROSS_PT = 12  # by which a number stands above the cross
LEAST_CELL_M = 0.02  # where all places lie in one line


def draw_centres(result: RallyResult) -> Picture | None:
    """Draw the share of points deliverable at each place of the centre; None without a grid."""
    centres = result.evidence.centres
    if not centres:
        return None
    places = np.round([centre.position for centre in centres], 6)
    heights = sorted(set(places[:, 2].tolist()))
    shown = some(heights, PANELS)
    side = _spacing(places)
    columns = min(ACROSS, len(shown))
    rows = -(-len(shown) // columns)
    spans = np.ptp(places[:, :2], axis=0) + side
    across = (WIDTH_IN - 2.6) / columns
    height = float(np.clip(across * spans[1] / spans[0], *HEIGHTS_IN))
    figure = Figure(figsize=(WIDTH_IN, 0.3 + rows * (height + 0.7)))
    panels = figure.subplots(rows, columns, squeeze=False, sharex=True, sharey=True).ravel()
    own = None if result.cell.rally is None else result.cell.rally.centre_m
    for axes, level in zip(panels, shown, strict=False):
        mine = [c for c, place in zip(centres, places, strict=True) if place[2] == level]
        _image(axes, mine, side)
        if round(spans[0] / side) * columns <= NUMBERED:
            _numbers(axes, mine, own, side)
        if own is not None and abs(own[2] - level) <= side / 2:
            axes.plot(own[0], own[1], "+", color="white", markersize=15, markeredgewidth=4.5, clip_on=False)
            axes.plot(own[0], own[1], "+", color=INK, markersize=13, markeredgewidth=1.8, clip_on=False)
        axes.set_title(f"z = {level:.3f} m")
        _frame(axes, places, side)
    for axes in panels[len(shown) :]:
        axes.set_visible(False)
    for axes in panels[max(len(shown) - columns, 0) : len(shown)]:
        axes.set_xlabel("x, m")
        axes.tick_params(labelbottom=True)
    for axes in panels[::columns]:
        axes.set_ylabel("y, m")
    bar = figure.colorbar(
        ScalarMappable(Normalize(0, 100), SHARE_MAP), ax=panels[: len(shown)].tolist(), shrink=0.8, pad=0.02
    )
    bar.set_label("% of the points")
    return Picture(of_centres(result, len(shown), len(heights)), svg_of(figure))


def _spacing(places: Array) -> float:
    """Return the least step between places along x or y, m."""
    steps = [np.diff(np.unique(places[:, k])) for k in (0, 1)]
    known = np.concatenate(steps)
    return float(known.min()) if len(known) else LEAST_CELL_M


def _frame(axes: Axes, places: Array, side: float) -> None:
    low, high = places[:, :2].min(axis=0) - side / 2, places[:, :2].max(axis=0) + side / 2
    axes.set(xlim=(low[0], high[0]), ylim=(low[1], high[1]))
    axes.set_aspect("equal", adjustable="box")
    axes.grid(False)


def _image(axes: Axes, centres: list[Centre], side: float) -> None:
    """Draw the places at one height as an image."""
    at = np.array([centre.position[:2] for centre in centres])
    share = np.array(
        [centre.deliverable / centre.points if centre.points else math.nan for centre in centres]
    )
    low = at.min(axis=0)
    cell = np.round((at - low) / side).astype(int)
    image = np.full((cell[:, 1].max() + 1, cell[:, 0].max() + 1), np.nan)
    image[cell[:, 1], cell[:, 0]] = 100 * share
    ends = low + side * (np.array(image.shape[::-1]) - 0.5)
    axes.imshow(
        image,
        origin="lower",
        extent=(low[0] - side / 2, ends[0], low[1] - side / 2, ends[1]),
        cmap=colormaps[SHARE_MAP],
        norm=Normalize(0, 100),
        interpolation="nearest",
        aspect="equal",
    )


def _numbers(axes: Axes, centres: list[Centre], own: Vec3 | None, side: float) -> None:
    """Write how many points each place holds, above the cross where it stands."""
    for centre in centres:
        share = centre.deliverable / centre.points if centre.points else 0.0
        crossed = (
            own is not None and max(abs(a - b) for a, b in zip(centre.position, own, strict=True)) < side / 2
        )
        axes.annotate(
            f"{centre.deliverable}",
            centre.position[:2],
            xytext=(0, CROSS_PT if crossed else 0),
            textcoords="offset points",
            ha="center",
            va="center",
            fontsize=9,
            color=INK if share > DARK else "white",
        )
