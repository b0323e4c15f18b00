"""The drawing of how much of each limit the worst trial used."""

from __future__ import annotations

import numpy as np

from reach.evidence.record import Use
from reach.report.columns import shorten
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, svg_of
from reach.report.looks import BROKEN, BROKEN_PALE, INK
from reach.report.trial.captions import of_uses
from reach.report.trial.numbers import known, worst_run
from reach.report.wording import limit_of, number
from reach.result import TrialResult
from reach.verdict import ROUNDING

BARS = 14
NAME_COLUMNS = 34
TOP = 200.0  # % of a limit, drawn at most


def draw_uses(result: TrialResult) -> Picture | None:
    """Draw the largest uses of the trial that used most of a limit; None where no use is known."""
    runs = result.evidence.runs
    place = worst_run(runs)
    if place is None:
        return None
    uses = known(runs[place])
    figure = Figure(figsize=(WIDTH_IN, 1.0 + 0.34 * min(len(uses), BARS)))
    _bars(figure.add_subplot(), uses[:BARS])
    return Picture(of_uses(place, runs[place], max(len(uses) - BARS, 0)), svg_of(figure))


def _bars(axes: Axes, uses: list[Use]) -> None:
    share = [100 * (use.utilisation or 0.0) for use in uses]
    end = min(max(*share, 100.0), TOP)
    for row, value in enumerate(share):
        broken = value > 100 * (1 + ROUNDING)
        axes.barh(row, min(value, 100.0), height=0.6, facecolor="#c9d6e2", edgecolor=INK, linewidth=0.7)
        if broken:
            axes.barh(
                *(row, min(value, TOP) - 100),
                left=100,
                height=0.6,
                facecolor=BROKEN_PALE,
                edgecolor=BROKEN,
                hatch="////",
                linewidth=0.7,
            )
        axes.annotate(
            f"! {number(value, 3)} %" if broken else f"{number(value, 3)} %",
            (min(max(value, 100.0), TOP), row),
            xytext=(5, 0),
            textcoords="offset points",
            va="center",
            fontsize=9,
            color=BROKEN if broken else INK,
            weight="bold" if broken else "normal",
            bbox={"facecolor": "white", "edgecolor": "none", "pad": 0.3},
            zorder=5,
        )
    axes.axvline(100, color=INK, linewidth=1.1)
    axes.set_yticks(
        np.arange(len(uses)), [shorten(limit_of(u.limit, u.joint or "tool"), NAME_COLUMNS) for u in uses]
    )
    axes.set(xlim=(0, 1.12 * end), ylim=(len(uses) - 0.4, -0.6), xlabel="% of the stated limit")
    axes.grid(False, axis="y")
