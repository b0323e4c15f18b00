"""The drawings of a survey, as SVG."""

from __future__ import annotations

from reach.report.figures import Picture, looks
from reach.report.survey.box_figure import draw_box
from reach.report.survey.slices_figure import draw_slices
from reach.report.survey.speed_figures import draw_bounds, draw_share
from reach.result import SurveyResult


def pictures(result: SurveyResult) -> list[Picture]:
    """Draw everything a result has to show; an empty list without a strike."""
    if len(result.evidence.points.verdict) == 0:
        return []
    with looks():
        drawn = [draw_slices(result), draw_share(result), draw_bounds(result), draw_box(result)]
    return [picture for picture in drawn if picture is not None]
