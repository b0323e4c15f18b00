"""What stands under each figure, and what is read out to who can't see it."""

from __future__ import annotations

import numpy as np

from reach.evidence.record import Track
from reach.report.caption import Caption
from reach.result import FollowResult
from reach.verdict import broken_limits


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
        "Peak use of each limit in per cent of the stated value, darker is more; in brackets what exact "
        "tracking would have asked for, with an orange wedge at the left where that is more than the limit. "
        "A thick frame with an exclamation mark is a limit that the delivered motion breaks."
    )
    alt = f"{len(broken_limits(result.evidence))} limits broken; the table of limits has the numbers."
    return Caption("Use of each limit, delivered (and asked for)", text, alt)


def of_uses(lanes: int) -> Caption:
    """Caption of the use of limits over time, for so many of each joint's limits."""
    text = (
        f"The {lanes} limits that each joint uses most, the most used at the top, as shares of the stated limit: the "
        "largest in each short run of time, with the peak at the right. The solid line above is the limit, the "
        "dashed one what the plan leaves of it after its margin. Dark parts above the limit, with a cross at "
        "the worst and an exclamation mark at the peak, are breaks. Limits that are unknown, or one number for "
        "the whole motion, have no line."
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
        "The way of the strike point along the world's axes; within a view both scales are equal, each view has "
        "its own. The commanded way, wide and light, is the command integrated; the open square is the start."
    )
    span = np.ptp(track.position, axis=0)
    alt = f"It spans {span[0]:.3f} m in x, {span[1]:.3f} m in y and {span[2]:.3f} m in z."
    return Caption("The strike point's path", text, alt)
