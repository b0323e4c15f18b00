"""What stands under each figure, and what is read out to who can't see it."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from reach.evidence.record import Track
from reach.result import FollowResult
from reach.verdict import broken_limits


class Caption(NamedTuple):
    """A figure's title, what it shows, and the gist in words for who can't see it."""

    title: str
    text: str
    alt: str


def of_speed(result: FollowResult) -> Caption:
    """Caption of commanded against delivered speed."""
    strikes = result.evidence.strikes
    text = (
        "Speed of the strike point along the commanded face normal. A filled circle is a strike delivered, a "
        "cross one missed, each at the speed that counted; the bar at it is the speed that would be accepted."
    )
    if strikes:
        text += (
            " Below, the strikes that miss most or come closest to it: the box is the window around the "
            "contact by the speed accepted."
        )
    hit = sum(strike.delivered for strike in strikes)
    return Caption("Commanded and delivered speed", text, f"{hit} of {len(strikes)} strikes delivered.")


def of_peaks(result: FollowResult) -> Caption:
    """Caption of the table of peaks."""
    text = (
        "Peak use of each limit in per cent of the stated value, and in brackets what exact tracking would "
        "have asked for. Darker is more; a thick frame with an exclamation mark is a broken limit."
    )
    alt = f"{len(broken_limits(result.evidence))} limits broken; the table of limits has the numbers."
    return Caption("Use of each limit", text, alt)


def of_uses(most_share: float) -> Caption:
    """Caption of the use of limits over time, in panels that end at a share of the limit."""
    text = (
        "Share of each stated limit over time. The dark line is the limit; short dashes at the right edge, "
        "in the colour of their line, are what the plan leaves of it after its margin; filled parts are "
        "breaks, with a cross at the worst. Limits that are unknown, or one number for the whole motion, "
        f"have no line. A panel ends at {100 * most_share:.0f} % at most."
    )
    alt = "The table of limits has the peaks and their instants."
    return Caption("Use of the limits over time", text, alt)


def of_errors(result: FollowResult) -> Caption:
    """Caption of the tracking errors."""
    where = "throughout" if result.cell.accept.at == "throughout" else "there"
    text = (
        "Tracking errors of the strike point; the dashed line is the tolerance, for velocity that across the "
        "normal. Upright bars are the windows around the strikes, hatched where missed, and widened where "
        f"they would be too thin to see; the tolerances hold {where}. Grey is the time after the command's "
        "end."
    )
    return Caption("Tracking errors", text, "The section on the motion has the peaks.")


def of_path(track: Track) -> Caption:
    """Caption of the strike point's path."""
    text = (
        "The way of the strike point in world axes, both scales equal. The commanded way is the command "
        "integrated; the open square is the start."
    )
    span = np.ptp(track.position, axis=0)
    alt = f"It spans {span[0]:.3f} m in x, {span[1]:.3f} m in y and {span[2]:.3f} m in z."
    return Caption("The strike point's path", text, alt)
