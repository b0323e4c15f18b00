"""The drawing of apex and offset over the bounces of every trial."""

from __future__ import annotations

from typing import Any

import numpy as np

from reach.cell import Array, Trial
from reach.evidence.trials import Run
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, Rectangle, name_all, svg_of
from reach.report.looks import BAND_STYLE, INK, ORANGE, RUN_STYLES
from reach.report.trial.captions import of_bounces
from reach.result import TrialResult

LINES = 150  # trials drawn, those not recovered first
BANDS = 6.0  # of the band's width, seen above it before a line is cut off
APEXES = 2.0  # of the wanted apex, seen before a line is cut off
ROOM = 1.08
LOST_STYLE: dict[str, Any] = {
    **{
        "marker": "x",
        "color": ORANGE,
        "markersize": 7,
        "markeredgewidth": 1.8,
        "zorder": 4,
        "clip_on": False,
    },
}


def draw_bounces(result: TrialResult) -> Picture | None:
    """Draw apex and offset of each contact; None where no trial has a contact."""
    evidence = result.evidence
    runs = sorted((run for run in evidence.runs if len(run.contacts.t_s)), key=lambda run: run.recovered)[
        :LINES
    ]
    if not runs:
        return None
    trial = result.cell.trial or Trial()
    asked, last = trial.recovered, max(len(run.contacts.t_s) for run in runs)
    figure = Figure(figsize=(WIDTH_IN, 5.6))
    apex, offset = figure.subplots(2, 1, sharex=True)
    wanted = 1000 * evidence.apex_m
    width = 1000 * asked.apex_error_m
    _band(apex, asked.by_bounce, last, wanted - width, 2 * width)
    _band(offset, asked.by_bounce, last, 0.0, 1000 * asked.within_m)
    apex.axhline(wanted, color=INK, linewidth=0.9, linestyle=(0, (2, 2)))
    clipped = [
        _lines(apex, runs, [1000 * run.contacts.apex_m for run in runs], APEXES * wanted),
        _lines(
            offset, runs, [1000 * run.contacts.offset_m for run in runs], _offset_top(runs, asked.within_m)
        ),
    ]
    apex.set_ylabel("apex, mm")
    offset.set(ylabel="offset, mm", xlabel="bounce")
    offset.set_xlim(0.5, last + 0.5)
    name_all(figure, [apex, offset], 4)
    return Picture(of_bounces(result, len(runs), any(clipped)), svg_of(figure))


def _band(axes: Axes, first: int, last: int, low: float, height: float) -> None:
    """Shade what counts as recovered, from its bounce on."""
    width = max(last + 1.0 - first, 0.0)
    axes.add_patch(Rectangle((first - 0.5, low), width, height, **BAND_STYLE, label="counts as recovered"))


def _offset_top(runs: list[Run], within_m: float) -> float:
    """Return where the axis of offsets ends, mm: the starts are seen whole."""
    start = max(float(run.contacts.offset_m[0]) for run in runs)
    return 1000 * max(BANDS * within_m, ROOM * start)


def _lines(axes: Axes, runs: list[Run], values: list[Array], top: float) -> bool:
    """Draw a line a trial, and return whether one of them leaves the frame."""
    told: set[bool] = set()
    highest = 0.0
    for run, line in zip(runs, values, strict=True):
        bounce = np.arange(1, len(line) + 1)
        label = "_" if run.recovered in told else "recovered" if run.recovered else "not recovered"
        told.add(run.recovered)
        axes.plot(bounce, line, **RUN_STYLES[run.recovered], label=label, zorder=2 + (not run.recovered))
        if not run.recovered:
            end = float(np.clip(line[-1], 0.0, top))
            axes.plot(bounce[-1], end, **LOST_STYLE)
        highest = max(highest, float(np.nanmax(line, initial=0.0)))
    axes.set_ylim(0, min(ROOM * highest, top) if highest else top)
    axes.spines["bottom"].set_color(INK)
    return highest > top
