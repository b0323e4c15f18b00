"""Colours, dashes and marks of the figures.

The colours stay apart in the common kinds of colour blindness, and whatever a colour says, a shape, a dash or
a number says too.
"""

from __future__ import annotations

from typing import Any

from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

BLUE, ORANGE, GREEN, PURPLE = "#0072b2", "#d55e00", "#009e73", "#aa4499"
SKY, YELLOW, INK, GREY, PALE = "#56b4e9", "#b8860b", "#222222", "#7a7a7a", "#e9edf1"

KIND_COLOURS = {
    "position": GREY,
    "velocity": BLUE,
    "acceleration": GREEN,
    "jerk": PURPLE,
    "torque": ORANGE,
    "torque rate": YELLOW,
    "tool speed": INK,
}
OTHER_COLOUR = SKY  # of a kind that has none of its own
BROKEN, BROKEN_PALE = "#8a2f00", "#fbe3d2"

COMMANDED_STYLE: dict[str, Any] = {"color": INK, "linestyle": (0, (4, 2)), "label": "commanded", "zorder": 3}
DELIVERED_STYLE: dict[str, Any] = {"color": BLUE, "linewidth": 1.6, "label": "delivered"}
# In the drawing of the way the command lies below, wide and light.
WAY_COMMANDED_STYLE: dict[str, Any] = {"color": "#b4b4b4", "linewidth": 4.5, "label": "commanded"}
WAY_DELIVERED_STYLE: dict[str, Any] = {"color": BLUE, "linewidth": 1.1, "label": "delivered"}
MARK: dict[str, Any] = {"linestyle": "", "markersize": 7, "zorder": 5}
STRIKE_STYLES: dict[bool, dict[str, Any]] = {  # by whether it was delivered
    True: {**MARK, "marker": "o", "color": GREEN, "label": "strike delivered"},
    False: {**MARK, "marker": "X", "color": ORANGE, "label": "strike missed"},
}
START_STYLE = {**MARK, "marker": "s", "color": "white", "markeredgecolor": INK, "label": "start"}
WINDOW_STYLES: dict[bool, dict[str, Any]] = {
    True: {"facecolor": "#bfe0d3", "label": "strike delivered"},
    False: {"facecolor": "#f6c7a5", "hatch": "////", "label": "strike missed"},
}

VERDICT_STYLES: dict[str, dict[str, Any]] = {
    DELIVERABLE: {**MARK, "marker": "o", "markersize": 5.5, "color": GREEN, "label": "deliverable"},
    UNDECIDED: {
        **{**MARK, "marker": "D", "markersize": 5.5, "color": "white", "markeredgecolor": INK},
        "label": "undecided",
    },
    NOT_DELIVERABLE: {**MARK, "marker": "X", "markersize": 7, "color": ORANGE, "label": "not deliverable"},
}
# Edges found by bisection around the points of an envelope.
LOW_EDGE_STYLE: dict[str, Any] = {"color": BLUE, "linewidth": 1.6, "label": "lowest apex"}
HIGH_EDGE_STYLE: dict[str, Any] = {
    **{"color": ORANGE, "linewidth": 1.6, "linestyle": (0, (5, 2))},
    "label": "highest apex",
}
SIDE_EDGE_STYLE: dict[str, Any] = {
    **{"color": PURPLE, "linewidth": 1.6, "linestyle": (0, (1, 1.4))},
    "label": "largest offset",
}
OPEN_STYLE: dict[str, Any] = {
    **{**MARK, "marker": "^", "markersize": 7, "color": "white", "markeredgecolor": INK},
    "label": "looked no further",
}
# Lines that stand side by side: no two of the same dash, from dark to light.
SERIES_STYLES: tuple[dict[str, Any], ...] = (
    {"color": INK, "linestyle": "-", "marker": "o"},
    {"color": BLUE, "linestyle": (0, (6, 2)), "marker": "s"},
    {"color": ORANGE, "linestyle": (0, (3, 1.5)), "marker": "^"},
    {"color": GREEN, "linestyle": (0, (6, 1.5, 1, 1.5)), "marker": "D"},
    {"color": PURPLE, "linestyle": (0, (1, 1.3)), "marker": "v"},
    {"color": SKY, "linestyle": (0, (8, 2, 1, 2, 1, 2)), "marker": "P"},
)
BALL_STYLE: dict[str, Any] = {"color": ORANGE, "linewidth": 1.4, "linestyle": (0, (4, 1.5)), "label": "ball"}
PADDLE_STYLE: dict[str, Any] = {"color": BLUE, "linewidth": 1.4, "label": "strike point"}
CONTACT_STYLE: dict[str, Any] = {**MARK, "marker": "o", "markersize": 4.5, "color": INK, "label": "contact"}
ARM_SHADES = "Greys"  # of postures from the first, light, to the last, dark
SHARE_MAP = "cividis"  # dark to light in grey as well
BAND_STYLE: dict[str, Any] = {"facecolor": "#dcebe5", "linewidth": 0, "zorder": 0}
RUN_STYLES: dict[bool, dict[str, Any]] = {  # of a trial, by whether the ball was recovered
    True: {"color": BLUE, "linewidth": 0.9, "linestyle": "-"},
    False: {"color": ORANGE, "linewidth": 1.1, "linestyle": (0, (3, 1.5))},
}
START_STYLES: dict[str, dict[str, Any]] = {  # of the starts at one place, by what they have in common
    "all": {**MARK, "marker": "o", "color": GREEN, "label": "recovered"},
    "some": {
        **{**MARK, "marker": "o", "color": "white", "markeredgecolor": GREEN, "markeredgewidth": 1.6},
        "label": "some of those here recovered",
    },
    "none": {**MARK, "marker": "X", "color": ORANGE, "label": "lost"},
}

STYLE: Any = {
    "svg.fonttype": "none",  # the reader's own fonts: any script can be shown
    "svg.hashsalt": "strikecheck",
    "text.parse_math": False,  # a name is never mathematics
    "font.family": "sans-serif",
    "font.sans-serif": ["DejaVu Sans"],
    "font.size": 9.5,
    "axes.titlesize": 10,
    "axes.labelsize": 9.5,
    "legend.fontsize": 9,
    "xtick.labelsize": 9,
    "ytick.labelsize": 9,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.edgecolor": GREY,
    "axes.formatter.useoffset": False,
    "axes.titlelocation": "left",
    "axes.grid": True,
    "grid.color": "#e3e3e3",
    "grid.linewidth": 0.6,
    "lines.linewidth": 1.2,
    "legend.frameon": False,
    "figure.constrained_layout.use": True,
}
