"""The drawings of an envelope, as SVG."""

from __future__ import annotations

from reach.report.figures import Picture, looks
from reach.report.rally.bounds_figure import draw_times, draw_windows
from reach.report.rally.centres_figure import draw_centres
from reach.report.rally.cycle_figure import draw_cycle
from reach.report.rally.envelope_figure import draw_envelope
from reach.report.rally.offsets_figure import draw_offsets
from reach.result import RallyResult


def pictures(result: RallyResult) -> list[Picture]:
    """Draw everything a result has to show; an empty list without a point."""
    if len(result.evidence.points.verdict) == 0:
        return []
    with looks():
        drawn = [
            draw_envelope(result),
            draw_offsets(result),
            draw_times(result),
            draw_windows(result),
            draw_cycle(result),
            draw_centres(result),
        ]
    return [picture for picture in drawn if picture is not None]
