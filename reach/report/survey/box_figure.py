"""The drawing of the arm and of what it is to strike, seen along two of the world's axes."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Array
from reach.evidence.points import Points
from reach.report.figures import WIDTH_IN, Artist, Axes, Circle, Figure, Picture, Rectangle, svg_of
from reach.report.survey.captions import of_box
from reach.report.survey.marks import ARM_STYLE, BOX_STYLE, REACH_STYLE, STACK_STYLES
from reach.result import SurveyResult
from reach.verdict import DELIVERABLE, UNDECIDED

VIEWS = (("from the side", 0, 2), ("from above", 0, 1))
PLACES = 900  # of strikes that a view draws one by one; more are drawn by squares,
SQUARES = 45  # so many along its longer side
EDGE = 0.06  # of a view's longer side, left free around it
SLIMMEST = 0.5  # of a view's longer side, the shorter one at least
HEIGHTS_IN = (2.6, 5.2)  # of a view, least and most
FRAME_IN = 0.8


def draw_box(result: SurveyResult) -> Picture:
    """Draw arm, reach, box and strikes from the side and from above, both axes of a view to one scale."""
    limits = [_limits(result, [across, up]) for _, across, up in VIEWS]
    shapes = [float(np.ptp(box[0]) / np.ptp(box[1])) for box in limits]
    height = float(np.clip((WIDTH_IN - len(VIEWS) * FRAME_IN) / sum(shapes), *HEIGHTS_IN))
    figure = Figure(figsize=(WIDTH_IN, height + 1.6))
    figure.set_layout_engine("constrained", h_pad=0.1)
    panels = figure.subplots(1, len(VIEWS), width_ratios=shapes)
    named: dict[str, Artist] = {}
    for axes, (title, across, up), box in zip(panels, VIEWS, limits, strict=True):
        _view(axes, result, [across, up], float(np.ptp(box, axis=1).max()))
        axes.set(xlim=box[0], ylim=box[1], title=title)
        axes.set(xlabel=f"{'xyz'[across]}, m", ylabel=f"{'xyz'[up]}, m")
        axes.set_aspect("equal", adjustable="box")
        handles, labels = axes.get_legend_handles_labels()
        named |= dict(zip(labels, handles, strict=True))
    figure.legend(list(named.values()), list(named), loc="outside upper left", ncols=4)
    return Picture(of_box(result, len(result.evidence.outline) > 0), svg_of(figure))


def _view(axes: Axes, result: SurveyResult, plane: list[int], span_m: float) -> None:
    evidence, survey = result.evidence, result.cell.survey
    if survey is not None and survey.box_m is not None:
        low, high = np.array(survey.box_m)[:, plane]
        axes.add_patch(Rectangle(low, *(high - low), **BOX_STYLE, label="box"))
    for word, places in _stacks(evidence.points, plane, span_m / SQUARES).items():
        if len(places):
            axes.plot(*places.T, **STACK_STYLES[word])
    outline = evidence.outline
    if len(outline):
        axes.plot(*outline[:, plane].T, **ARM_STYLE)
        if math.isfinite(evidence.reach_m):
            axes.add_patch(
                Circle(
                    (outline[0, plane[0]], outline[0, plane[1]]),
                    evidence.reach_m,
                    **REACH_STYLE,
                    label="reach",
                )
            )


def _stacks(points: Points, plane: list[int], side_m: float) -> dict[str, Array]:
    """Return the places (k, 2) of each kind of mark, one a place, or a square where strikes are many."""
    places, member = np.unique(np.round(points.position[:, plane], 6), axis=0, return_inverse=True)
    if len(places) > PLACES:
        squares, member = np.unique(
            np.floor(points.position[:, plane] / side_m + 1e-6), axis=0, return_inverse=True
        )
        places = (squares + 0.5) * side_m
    member = member.ravel()
    count = np.bincount(member)
    done = np.bincount(member, points.verdict == DELIVERABLE)
    doubt = np.bincount(member, points.verdict == UNDECIDED)
    none = done == 0
    kinds = {
        "all": done == count,
        "some": ~none & (done < count),
        "open": none & (doubt > 0),
        "none": none & (doubt == 0),
    }
    return {word: places[mask] for word, mask in kinds.items()}


def _limits(result: SurveyResult, plane: list[int]) -> Array:
    """Return the limits (2, 2) of a view: of all that is in it, and neither tiny nor a sliver."""
    evidence, survey = result.evidence, result.cell.survey
    seen = [evidence.points.position[:, plane], evidence.outline.reshape(-1, 3)[:, plane]]
    if survey is not None and survey.box_m is not None:
        seen.append(np.array(survey.box_m)[:, plane])
    if len(evidence.outline) and math.isfinite(evidence.reach_m):
        seen += [evidence.outline[:1, plane] + sign * evidence.reach_m for sign in (-1, 1)]
    places = np.concatenate(seen)
    low, high = places.min(axis=0), places.max(axis=0)
    longest = max(float((high - low).max()), 0.01)
    half = np.maximum(high - low, SLIMMEST * longest) / 2 + EDGE * longest
    middle = (low + high) / 2
    return np.column_stack([middle - half, middle + half])
