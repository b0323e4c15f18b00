"""The drawing of ball and paddle over time, in one trial that is recovered and one that is lost."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.evidence.trials import Run
from reach.report.figures import WIDTH_IN, Axes, Figure, Picture, name_all, svg_of
from reach.report.looks import BALL_STYLE, CONTACT_STYLE, INK, PADDLE_STYLE
from reach.report.trial.captions import of_heights
from reach.report.trial.numbers import first_lost, typical
from reach.report.wording import plain
from reach.result import TrialResult

SAMPLES = 3000  # of a line: more are not to be told apart at the page's width
ROOM = 0.08  # of the axis, free below and above
TOP = 2.5  # of the wanted apex: a ball that flies higher leaves the frame


def draw_heights(result: TrialResult) -> Picture | None:
    """Draw a typical recovered trial and the first lost one; None where neither has a trace."""
    runs = result.evidence.runs
    chosen = [typical(runs), first_lost(runs)]
    shown = [k if k is not None and len(runs[k].trace.t_s) else None for k in chosen]
    drawn = [k for k in shown if k is not None]
    if not drawn:
        return None
    figure = Figure(figsize=(WIDTH_IN, 0.5 + 2.6 * len(drawn)))
    panels = figure.subplots(len(drawn), 1, squeeze=False).ravel()
    for axes, place in zip(panels, drawn, strict=True):
        _panel(axes, result, runs[place])
        axes.set_title(f"start {place + 1}: {plain(runs[place].outcome)}")
    panels[-1].set_xlabel("time, s")
    name_all(figure, panels, 4)
    return Picture(of_heights(shown[0], shown[1]), svg_of(figure))


def _panel(axes: Axes, result: TrialResult, run: Run) -> None:
    evidence, trace = result.evidence, run.trace
    zero = evidence.centre[2]
    step = max(1, len(trace.t_s) // SAMPLES)
    t = trace.t_s[::step]
    ball, paddle = (1000 * (line[::step, 2] - zero) for line in (trace.ball, trace.paddle))
    axes.axhline(1000 * evidence.apex_m, color=INK, linewidth=0.9, linestyle=(0, (2, 2)), label="wanted apex")
    axes.plot(t, ball, **BALL_STYLE)
    axes.plot(t, paddle, **PADDLE_STYLE)
    axes.plot(run.contacts.t_s, 1000 * (run.contacts.ball[:, 2] - zero), **CONTACT_STYLE)
    axes.set_xlim(float(t[0]), max(float(t[-1]), float(t[0]) + 1e-6))
    axes.set_ylim(*_limits(np.concatenate([ball, paddle]), 1000 * evidence.apex_m))
    axes.set_ylabel("above centre, mm")


def _limits(heights: Array, apex: float) -> tuple[float, float]:
    """Return the axis of heights: of all that is seen, but not far beyond the wanted apex either way."""
    seen = heights[np.isfinite(heights)]
    low = max(float(np.min(seen, initial=0.0)), -TOP * apex)
    high = min(float(np.max(seen, initial=apex)), TOP * apex)
    edge = ROOM * max(high - low, 1.0)
    return low - edge, high + edge
