"""Marks and hatches of a survey's figures: what a colour says, a shape or a hatch says too."""

from __future__ import annotations

from typing import Any

import numpy as np

from reach.cell import Array
from reach.report.looks import BLUE, GREEN, GREY, INK, MARK, ORANGE, SKY
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

SPEED_MAP = "viridis"  # even steps of speed are even steps to the eye, also in grey
REQUIRED_STYLE: dict[str, Any] = {"color": INK, "linestyle": (0, (5, 2)), "linewidth": 1.2, "zorder": 2}
DONE_STYLE: dict[str, Any] = {"color": BLUE, "linewidth": 2.0, "label": "demonstrated: done"}
BOUND_STYLE: dict[str, Any] = {
    **{"color": ORANGE, "linewidth": 1.4, "linestyle": (0, (4, 2))},
    "label": "upper bound: not passed in these postures",
}
POINT_STYLES: dict[str, dict[str, Any]] = {
    DELIVERABLE: {**MARK, "marker": "o", "markersize": 4.5, "color": GREEN, "label": "deliverable"},
    UNDECIDED: {
        **{**MARK, "marker": "D", "markersize": 4.5, "color": "white", "markeredgecolor": INK},
        "label": "undecided",
    },
    NOT_DELIVERABLE: {**MARK, "marker": "X", "markersize": 6, "color": ORANGE, "label": "not deliverable"},
}
# Strikes that a view shows in one place, by what they have in common.
STACK_STYLES: dict[str, dict[str, Any]] = {
    "all": {**POINT_STYLES[DELIVERABLE], "label": "all deliverable here"},
    "some": {
        **{**MARK, "marker": "o", "markersize": 4.5, "color": "white", "markeredgecolor": GREEN},
        **{"markeredgewidth": 1.4, "label": "some"},
    },
    "open": {**POINT_STYLES[UNDECIDED], "label": "none, some undecided"},
    "none": {**POINT_STYLES[NOT_DELIVERABLE], "label": "none"},
}
ARM_STYLE: dict[str, Any] = {
    **{"color": INK, "linewidth": 2.6, "marker": "o", "markersize": 6, "markerfacecolor": "white"},
    **{"label": "arm, striking", "zorder": 6, "solid_capstyle": "round", "markevery": slice(0, -1)},
}
REACH_STYLE: dict[str, Any] = {
    "edgecolor": GREY,
    "facecolor": "none",
    "linestyle": (0, (2, 2)),
    "linewidth": 1,
}
BOX_STYLE: dict[str, Any] = {"edgecolor": SKY, "facecolor": "#eef6fb", "linewidth": 1.4, "zorder": 1}
HATCHES = {NOT_DELIVERABLE: "////", UNDECIDED: "..", "unreachable": "xxx"}
FAINT = "#b0b0b0"


def thinned(places: Array, finest: Array) -> Array:
    """Return the places (k, 2) to draw of (m, 2): the first of those that share a square of sides `finest` (2,)."""
    squares = np.floor(places / finest)
    return places[np.sort(np.unique(squares, axis=0, return_index=True)[1])]


def required_speeds(required_m_s: Array) -> list[float]:
    """Return the speeds required: each where they are few, else the least and the largest."""
    speeds = np.unique(required_m_s[np.isfinite(required_m_s)])
    return [float(x) for x in (speeds if len(speeds) <= 3 else speeds[[0, -1]])]
