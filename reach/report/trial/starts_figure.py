"""The drawing of the starts, recovered and lost, and of how the trials ended."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Trial
from reach.evidence.trials import Run
from reach.report.figures import WIDTH_IN, Axes, Circle, Figure, Picture, name_all, svg_of
from reach.report.looks import GREY, INK, ORANGE, START_STYLES
from reach.report.trial.captions import of_starts
from reach.report.trial.numbers import Ending, endings
from reach.result import TrialResult

ARROW = 0.22  # of the half width of the map, for the largest lateral speed
EDGE = 1.18  # of the half width, the frame
LEAST_HALF_MM = 20.0
TICKS = 6
LEAST_ROWS = 4  # of endings, so that a bar stays slim
MANY, SMALL_PT = 60, 4.5  # starts from which on the marks are so small


def draw_starts(result: TrialResult) -> Picture | None:
    """Draw the map of starts and the counts of endings; None without a trial."""
    runs = result.evidence.runs
    if not runs:
        return None
    figure = Figure(figsize=(WIDTH_IN, 4.8))
    figure.set_layout_engine("constrained", w_pad=0.1)
    left, right = figure.subplots(1, 2, width_ratios=[1.1, 1])
    within = 1000 * (result.cell.trial or Trial()).recovered.within_m
    _map(left, runs, within)
    _endings(right, endings(result.evidence))
    name_all(figure, [left, right], 6)
    return Picture(of_starts(result), svg_of(figure))


def _map(axes: Axes, runs: tuple[Run, ...], within: float) -> None:
    at = 1000 * np.array([run.offset for run in runs])
    lateral = np.array([run.lateral for run in runs])
    done = np.array([run.recovered for run in runs], dtype=bool)
    half = max(float(np.abs(at).max()), within, LEAST_HALF_MM)
    axes.add_patch(
        Circle((0, 0), within, facecolor="none", edgecolor=GREY, linestyle=(0, (1.5, 2)), linewidth=1.2)
    )
    axes.plot(0, 0, "+", color=INK, markersize=9, markeredgewidth=1.4, zorder=2)
    for kind, places in _stacks(at, done).items():
        if len(places):
            size = {"markersize": SMALL_PT} if len(runs) > MANY else {}
            axes.plot(*places.T, **{**START_STYLES[kind], **size})
    _arrows(axes, at, lateral, done, ARROW * half)
    frame = half * EDGE + (ARROW * half if lateral.any() else 0.0)
    axes.set(xlim=(-frame, frame), ylim=(-frame, frame), xlabel="x from the centre, mm", ylabel="y, mm")
    axes.set_aspect("equal", adjustable="box")


def _stacks(at: Array, done: np.ndarray) -> dict[str, Array]:
    """Return the places (k, 2) of each kind of mark, one a place."""
    places, member = np.unique(np.round(at, 3), axis=0, return_inverse=True)
    member = member.ravel()
    count, good = np.bincount(member), np.bincount(member, done)
    masks = {"all": good == count, "some": (good > 0) & (good < count), "none": good == 0}
    return {kind: places[mask] for kind, mask in masks.items()}


def _arrows(axes: Axes, at: Array, lateral: Array, done: np.ndarray, longest: float) -> None:
    """Draw the lateral velocities, the largest as long as given."""
    top = float(np.max(np.linalg.norm(lateral, axis=1), initial=0.0))
    for place, speed, good in zip(at, lateral, done, strict=True):
        if top > 0 and speed.any():
            axes.annotate(
                "",
                place + longest * speed / top,
                place,
                arrowprops={
                    **{
                        "arrowstyle": "-|>",
                        "shrinkA": 3,
                        "shrinkB": 0,
                        "linewidth": 1.0,
                        "mutation_scale": 9,
                    },
                    **{"color": INK if good else ORANGE, "linestyle": "-" if good else (0, (2, 1.5))},
                },
                zorder=4,
            )


def _endings(axes: Axes, found: list[Ending]) -> None:
    """Draw how many trials ended in each way, those recovered plain and the others hatched."""
    rows = np.arange(len(found))
    good = np.array([end.recovered for end in found])
    bad = np.array([end.trials for end in found]) - good
    if good.any():
        axes.barh(rows, good, height=0.55, facecolor="#bfe0d3", edgecolor=INK, linewidth=0.8)
    if bad.any():
        axes.barh(
            rows, bad, left=good, height=0.55, facecolor="#f6c7a5", edgecolor=INK, linewidth=0.8, hatch="////"
        )
    for row, end in enumerate(found):
        axes.annotate(
            _count(end),
            (end.trials, row),
            xytext=(5, 0),
            textcoords="offset points",
            va="center",
            fontsize=9,
        )
    most = max(end.trials for end in found)
    axes.set_yticks(rows, [end.outcome for end in found])
    axes.set(
        xlim=(0, 1.45 * most),
        ylim=(max(len(found), LEAST_ROWS) - 0.4, -0.6),
        xlabel="trials (hatched: not recovered)",
    )
    axes.set_xticks(np.unique(np.round(np.linspace(0, most, TICKS))))
    axes.grid(False, axis="y")


def _count(end: Ending) -> str:
    if end.recovered in (0, end.trials):
        return str(end.trials)
    return f"{end.trials}, {end.recovered} recovered"
