"""What every report says about the use of its results, in one place."""

from __future__ import annotations

import numpy as np

from reach.result import FollowResult

# ISO 10218-1:2011, 5.6.2, reduced speed control at the tool centre point; quoted from memory.
REDUCED_SPEED_M_S = 0.250


def cautions(result: FollowResult) -> tuple[str, ...]:
    """Return the cautions for a result, a sentence or two each."""
    return (
        "These results are simulation on the limits that were stated. They are no permission to run an arm.",
        _speed(peak_tool_speed(result)),
        "Keep people out of the cell whenever the arm can move.",
        "Local codes, the maker's manual and a competent person's risk assessment decide what may run.",
    )


def peak_tool_speed(result: FollowResult) -> float | None:
    """Return the largest speed of the strike point over the motion's rows in m/s; None without a motion."""
    track = result.evidence.track
    if track is None or len(track.twist) == 0:
        return None
    return float(np.linalg.norm(track.twist[:, :3], axis=1).max())


def _speed(peak_m_s: float | None) -> str:
    rule = "Speeds above 250 mm/s at the tool are outside reduced-speed operation (ISO 10218-1:2011, 5.6.2)"
    if peak_m_s is None:
        return f"{rule}."
    if peak_m_s > REDUCED_SPEED_M_S:
        return f"{rule}: this motion exceeds it, with {1000 * peak_m_s:.0f} mm/s at the strike point."
    return (
        f"{rule}: this motion stays within it at the strike point, with {1000 * peak_m_s:.0f} mm/s there; "
        "other points of arm and paddle may be faster."
    )
