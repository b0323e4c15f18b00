"""The drawing of slices through a survey's box, coloured by demonstrated speed."""

from __future__ import annotations

import math
from typing import Any, NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.report.figures import (
    WIDTH_IN,
    Axes,
    Figure,
    Normalize,
    Path,
    PathPatch,
    Picture,
    Rectangle,
    ScalarMappable,
    SubFigure,
    colormaps,
    svg_of,
)
from reach.report.looks import INK
from reach.report.survey.captions import of_slices
from reach.report.survey.marks import FAINT, HATCHES, SPEED_MAP, required_speeds
from reach.report.survey.numbers import demonstrated
from reach.report.survey.slices import Slices, runs, slices_of
from reach.report.survey.wording import face_text
from reach.result import SurveyResult
from reach.verdict import NOT_DELIVERABLE, UNDECIDED

CELLS = 2000  # drawn one by one; more are one image a panel
WORDS = 700  # cells with their speed in them, all panels together
WORD_IN = (0.3, 0.15)  # of a cell, that a speed fits into in small type
WORD_SIZES = (7.0, 9.0)  # points, in the smallest cells and at most
BLOCKS_IN = (8.5, 5.0, 4.5, 4.5)  # height of a face's panels that is aimed at, for so many faces
PANEL_IN = (0.55, 4.2)  # height of a panel, least and most
FRAME_IN = (0.62, 0.62)  # of a panel's width and height, taken by its axes and title
BRIGHT = 0.6  # of the map, from where what is written on it is dark
HEAD_IN = 1.05

Colour = tuple[float, ...]


class Scale(NamedTuple):
    """The colours of speeds from zero to `top`, in m/s."""

    top: float

    @property
    def look(self) -> dict[str, Any]:
        """What a coloured drawing takes."""
        return {"cmap": colormaps[SPEED_MAP], "norm": Normalize(0.0, self.top)}

    def colour(self, speed_m_s: float) -> Colour:
        """Return the colour of a speed."""
        return tuple(colormaps[SPEED_MAP](min(speed_m_s / self.top, 1.0)))

    def bright(self, speed_m_s: Array) -> NDArray[np.bool_]:
        """Return for speeds of any shape whether what is written on their colours must be dark."""
        return np.asarray(np.nan_to_num(speed_m_s) > BRIGHT * self.top)


def draw_slices(result: SurveyResult) -> Picture | None:
    """Draw slices through the box, a block a face; None where there is nothing to slice."""
    cut = slices_of(result)
    if cut is None:
        return None
    columns, size = _layout(cut)
    rows = -(-len(cut.places_m) // columns)
    block = rows * (size[1] + FRAME_IN[1]) + 0.35
    figure = Figure(figsize=(WIDTH_IN, HEAD_IN + block * len(cut.faces)))
    heights = [HEAD_IN, *([block] * len(cut.faces))]
    parts = np.ravel(np.asarray(figure.subfigures(len(heights), 1, height_ratios=heights)))
    points = result.evidence.points
    required = required_speeds(points.required_m_s)
    top = max([float(demonstrated(points).max()), *required, 1e-3])
    scale = Scale(top)
    _head(parts[0], scale, required)
    assert result.cell.survey is not None
    for place, (part, face) in enumerate(zip(parts[1:], cut.faces, strict=True)):
        part.suptitle(
            f"face normal {face_text(result.cell.survey.normals[face])}", fontsize=10, weight="bold"
        )
        panels = part.subplots(rows, columns, squeeze=False).ravel()
        for axes, k in zip(panels, range(len(cut.places_m)), strict=False):
            _panel(axes, cut, (place, k), scale, size)
        for axes in panels[len(cut.places_m) :]:
            axes.set_visible(False)
    return Picture(of_slices(cut, cut.cells > CELLS), svg_of(figure))


def _layout(cut: Slices) -> tuple[int, tuple[float, float]]:
    """Return how many panels stand side by side, and the size of each in inches."""
    tall = float(np.ptp(cut.edges[1]) / np.ptp(cut.edges[0]))
    count = len(cut.places_m)
    for rows in range(count, 0, -1):
        columns = -(-count // rows)
        width = WIDTH_IN / columns - FRAME_IN[0]
        height = float(np.clip(width * tall, *PANEL_IN))
        if rows * (height + FRAME_IN[1]) <= BLOCKS_IN[len(cut.faces) - 1]:
            break
    return columns, (min(width, height / tall), height)


def _head(part: SubFigure, scale: Scale, required: list[float]) -> None:
    """Draw the colour bar with the required speed on it, and what the hatches say."""
    bar, signs = part.subplots(1, 2, width_ratios=[1, 1.1])
    part.colorbar(ScalarMappable(**scale.look), cax=bar, orientation="horizontal")
    bar.grid(False)
    for speed in required:
        bar.axvline(speed, color="white", linewidth=3.5)
        bar.axvline(speed, color=INK, linewidth=1.5)
    told = " and ".join(f"{speed:.3g}" for speed in required)
    bar.set_title(f"demonstrated speed, m/s (line: required {told})")
    signs.set_axis_off()
    dark, bright = scale.colour(0.3 * scale.top), scale.colour(0.85 * scale.top)
    signs.legend(
        handles=[
            Rectangle((0, 0), 1, 1, facecolor=bright, label="plain: deliverable"),
            _sign("not deliverable", NOT_DELIVERABLE, dark, "white"),
            _sign("undecided", UNDECIDED, dark, "white"),
            _sign("unreachable", "unreachable", "white", FAINT),
        ],
        loc="center left",
        ncols=2,
        handlelength=3,
        handleheight=1.6,
    )


def _sign(label: str, hatch: str, face: object, line: str) -> Rectangle:
    return Rectangle((0, 0), 1, 1, facecolor=face, edgecolor=line, hatch=HATCHES[hatch], lw=0, label=label)


def _panel(axes: Axes, cut: Slices, which: tuple[int, int], scale: Scale, size: tuple[float, float]) -> None:
    """Draw one slice of one face."""
    speed = cut.speed[which]
    across, up = cut.edges
    if cut.cells <= CELLS:
        axes.pcolormesh(across, up, speed, edgecolors="face", linewidth=0.3, zorder=1, **scale.look)
    else:
        axes.imshow(
            speed,
            origin="lower",
            extent=(across[0], across[-1], up[0], up[-1]),
            interpolation="nearest",
            aspect="equal",
            zorder=1,
            **scale.look,
        )
    bright = scale.bright(speed)
    for word in (NOT_DELIVERABLE, UNDECIDED):
        marked = cut.hatched[word][which]
        _hatch(axes, marked & ~bright, cut, HATCHES[word], "white")
        _hatch(axes, marked & bright, cut, HATCHES[word], INK)
    _hatch(axes, cut.hatched["unreachable"][which], cut, HATCHES["unreachable"], FAINT)
    if (
        cut.cells <= WORDS
        and size[0] / speed.shape[1] >= WORD_IN[0]
        and size[1] / speed.shape[0] >= WORD_IN[1]
    ):
        _words(axes, cut, speed, scale, size[0] / speed.shape[1])
    axes.set(xlim=(across[0], across[-1]), ylim=(up[0], up[-1]))
    axes.set_aspect("equal")
    axes.grid(False)
    axes.spines[:].set_visible(True)
    axes.set_title(f"{'xyz'[cut.through]} = {cut.places_m[which[1]]:.3f} m", fontsize=9)
    axes.set_xlabel(f"{'xyz'[cut.across]}, m")
    axes.set_ylabel(f"{'xyz'[cut.up]}, m")
    axes.locator_params(axis="x", nbins=max(1, int(size[0] / 0.6)))
    axes.locator_params(axis="y", nbins=max(2, int(size[1] / 0.4)))


def _hatch(axes: Axes, marked: NDArray[np.bool_], cut: Slices, hatch: str, colour: str) -> None:
    rectangles = runs(marked, cut.edges)
    if rectangles:
        outline = Path.make_compound_path(*(Path(corners, closed=True) for corners in rectangles))
        axes.add_patch(
            PathPatch(outline, facecolor="none", edgecolor=colour, linewidth=0, hatch=hatch, zorder=2)
        )


def _words(axes: Axes, cut: Slices, speed: Array, scale: Scale, cell_in: float) -> None:
    """Write the speed into each cell, on a patch of its own colour, which keeps hatches off."""
    points = min(WORD_SIZES[0] * cell_in / WORD_IN[0], WORD_SIZES[1])
    middles = [(edges[1:] + edges[:-1]) / 2 for edges in cut.edges]
    for row, up in enumerate(middles[1]):
        for column, across in enumerate(middles[0]):
            value = float(speed[row, column])
            if math.isnan(value):
                continue
            colour = INK if scale.bright(speed[row, column]) else "white"
            patch = {"facecolor": scale.colour(value), "edgecolor": "none", "pad": 0.8}
            axes.text(
                *(across, up, f"{value:.2f}"),
                color=colour,
                bbox=patch,
                ha="center",
                va="center",
                fontsize=points,
            )
