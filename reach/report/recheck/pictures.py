"""The drawing of a second opinion, as SVG."""

from __future__ import annotations

from reach.report.figures import Picture, looks
from reach.report.recheck.shares_figure import draw_shares
from reach.result import RecheckResult


def pictures(result: RecheckResult) -> list[Picture]:
    """Draw everything a result has to show; an empty list where nothing was compared."""
    with looks():
        drawn = draw_shares(result)
    return [] if drawn is None else [drawn]
