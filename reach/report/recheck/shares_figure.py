"""The drawing of the worst difference of each comparison, as a share of what is allowed."""

from __future__ import annotations

import math
from collections.abc import Sequence
from typing import Any

from reach.evidence.items import Check
from reach.report.columns import shorten
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, svg_of
from reach.report.looks import BROKEN, BROKEN_PALE, GREEN, INK, MARK, ORANGE
from reach.report.recheck.captions import of_shares
from reach.report.recheck.numbers import Found, first_of, per_check
from reach.report.recheck.wording import allowance, is_words, size
from reach.report.wording import plain
from reach.result import RecheckResult

ROWS = 30
NAME_COLUMNS, VALUE_COLUMNS = 38, 30
LEAST, MOST = -16, 16  # decades of a share that are drawn, at most
STEPS = 7  # labelled decades, about
EDGE_ROOM = 0.7  # of the way from one label to the next, between a decade's and an edge's

AGREE_STYLE: dict[str, Any] = {**MARK, "marker": "o", "color": GREEN, "label": "agrees"}
EXACT_STYLE: dict[str, Any] = {
    **{**MARK, "marker": "o", "color": "white", "markeredgecolor": GREEN, "markeredgewidth": 1.6},
    "label": "equal",
}
DIFFER_STYLE: dict[str, Any] = {**MARK, "marker": "X", "markersize": 9, "color": ORANGE, "label": "differs"}
ALLOWED_STYLE: dict[str, Any] = {"color": INK, "linewidth": 1.4, "label": "allowed"}
ORDER = ("equal", "agrees", "allowed", "differs")


def draw_shares(result: RecheckResult) -> Picture | None:
    """Draw the worst of each comparison; None where nothing was compared."""
    every = per_check(result.items)
    found = first_of(every, ROWS)
    if not found:
        return None
    figure = Figure(figsize=(WIDTH_IN, 1.3 + 0.3 * len(found)))
    axes = figure.add_subplot()
    low, high = _decades([one.check for one in found])
    _marks(axes, found, low, high)
    _scale(axes, low, high)
    axes.set_yticks(range(len(found)), [_name(one) for one in found])
    axes.set(ylim=(len(found) - 0.4, -0.6), xlabel="difference as a share of what is allowed")
    axes.grid(False, axis="y")
    _legend(figure, axes)
    return Picture(of_shares(found, len(every) - len(found)), svg_of(figure))


def _legend(figure: Figure, axes: Axes) -> None:
    """Name the marks above the drawing, in one order whatever is drawn first."""
    named = dict(zip(*reversed(axes.get_legend_handles_labels()), strict=True))
    order = [label for label in ORDER if label in named]
    figure.legend([named[label] for label in order], order, loc="outside upper left", ncols=len(order))


def _decades(checks: Sequence[Check]) -> tuple[int, int]:
    """Return the whole decades that hold every share which is a number above 0, one at least either side of 1."""
    logs = [math.log10(check.share) for check in checks if 0 < check.share < math.inf]
    low = min((math.floor(x) for x in logs), default=-1)
    high = max((math.ceil(x) for x in logs), default=1)
    return min(max(low, LEAST), -1), max(min(high, MOST), 1)


def _marks(axes: Axes, found: Sequence[Found], low: int, high: int) -> None:
    """Draw a mark a comparison, and its difference in figures beside it."""
    named: set[str] = set()
    for row, one in enumerate(found):
        check = one.check
        style = _style(check)
        label = "_" if style["label"] in named else style["label"]
        named.add(style["label"])
        axes.plot([_place(check, low, high)], [row], **{**style, "label": label, "clip_on": False})
        axes.annotate(
            shorten(_value(check), VALUE_COLUMNS),
            (1.0, row),
            xycoords=("axes fraction", "data"),
            xytext=(14, 0),
            textcoords="offset points",
            va="center",
            fontsize=9,
            color=INK if check.agrees else BROKEN,
            weight="normal" if check.agrees else "bold",
        )


def _style(check: Check) -> dict[str, Any]:
    if not check.agrees:
        return DIFFER_STYLE
    return EXACT_STYLE if check.difference == 0 else AGREE_STYLE


def _place(check: Check, low: int, high: int) -> float:
    """Return where a share stands, in decades: at an edge where it is none."""
    share = check.share
    if not check.agrees and not math.isfinite(share):
        return high + 1
    if not share > 0:
        return low - 1
    return min(max(math.log10(share), low), high)


def _scale(axes: Axes, low: int, high: int) -> None:
    """Draw the line of what is allowed, and name the decades and both edges."""
    step = max(1, math.ceil((high - low) / STEPS))
    room = EDGE_ROOM * step  # the edges have names of their own
    decades = [
        decade
        for decade in range(low, high + 1)
        if decade == 0 or (decade % step == 0 and low - 1 + room <= decade <= high + 1 - room)
    ]
    places = [low - 1, *decades, high + 1]
    axes.set_xticks(places, ["0", *(f"{10.0**decade:g}" for decade in decades), "no share"])
    axes.set_xlim(low - 1.2, high + 1.2)
    axes.axvspan(0, high + 1.2, facecolor=BROKEN_PALE, alpha=0.6, linewidth=0, zorder=0)
    axes.axvline(0, **ALLOWED_STYLE)


def _name(found: Found) -> str:
    kind, name = plain(found.item.kind), plain(found.check.name)
    return shorten(kind if kind == name else f"{kind}: {name}", NAME_COLUMNS)


def _value(check: Check) -> str:
    if is_words(check):
        return size(check)
    return " ".join((size(check), "of", allowance(check), plain(check.unit))).rstrip()
