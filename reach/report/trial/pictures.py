"""The drawings of trials, as SVG."""

from __future__ import annotations

from reach.report.figures import Picture, looks
from reach.report.trial.bounces_figure import draw_bounces
from reach.report.trial.heights_figure import draw_heights
from reach.report.trial.starts_figure import draw_starts
from reach.report.trial.uses_figure import draw_uses
from reach.result import TrialResult


def pictures(result: TrialResult) -> list[Picture]:
    """Draw everything a result has to show; an empty list without a trial."""
    with looks():
        drawn = [draw_starts(result), draw_bounces(result), draw_heights(result), draw_uses(result)]
    return [picture for picture in drawn if picture is not None]
