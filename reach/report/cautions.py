"""What every report says about the use of its results, in one place."""

from __future__ import annotations

# ISO 10218-1:2011, 5.6.2, reduced speed control at the tool centre point; quoted from memory.
REDUCED_SPEED_M_S = 0.250


def with_speed(peak_m_s: float | None, what: str, more: bool = False) -> tuple[str, ...]:
    """Return the cautions for a result, a sentence or two each.

    Parameters
    ----------
    peak_m_s : largest speed of the strike point that was seen; None where nothing moved
    what : that moved, as the subject of a sentence
    more : whether `what` is in the plural
    """
    return (
        "These results are simulation on the limits that were stated. They are no permission to run an arm.",
        _speed(peak_m_s, what, "" if more else "s"),
        "Keep people out of the cell whenever the arm can move.",
        "Local codes, the maker's manual and a competent person's risk assessment decide what may run.",
    )


def _speed(peak_m_s: float | None, what: str, s: str) -> str:
    rule = "Speeds above 250 mm/s at the tool are outside reduced-speed operation (ISO 10218-1:2011, 5.6.2)"
    if peak_m_s is None:
        return f"{rule}."
    if peak_m_s > REDUCED_SPEED_M_S:
        return f"{rule}: {what} exceed{s} it, with {1000 * peak_m_s:.0f} mm/s at the strike point."
    return (
        f"{rule}: {what} stay{s} within it at the strike point, with {1000 * peak_m_s:.0f} mm/s there; "
        "other points of arm and paddle may be faster."
    )
