"""How strikes, uses of limits and steps of a followed log are put into words."""

from __future__ import annotations

import math

import numpy as np

from reach.evidence.record import Strike, Use
from reach.report.wording import fixed, number, percent, plain
from reach.result import FollowResult

COARSE = 1.5  # control periods: a log whose samples are farther apart is coarse


def stated(use: Use) -> str:
    """Return the stated side of the limit that the peak is measured against."""
    if use.hi is None or use.lo is None:
        return "unknown"
    middle = (use.lo + use.hi) / 2 if use.limit == "position" and math.isfinite(use.lo + use.hi) else 0.0
    return number(use.hi if use.peak >= middle else use.lo)


def both_sides(lo: float | None, hi: float | None) -> str:
    """Return a limit with both its sides, short where they are equal in size."""
    if lo is None or hi is None:
        return "unknown"
    if math.isinf(lo) and math.isinf(hi):
        return "none"
    return f"± {number(hi)}" if lo == -hi else f"{number(lo)} … {number(hi)}"


def outcome(strike: Strike) -> str:
    """Return "ok", or what failed and the limit that stopped it."""
    if strike.delivered:
        return "ok"
    text = "; ".join(plain(fault) for fault in strike.faults)
    if strike.limit:
        text += f" ({strike.limit}{f' of {plain(strike.joint)}' if strike.joint else ''})"
    return f"missed: {text}"


def strike_cells(strike: Strike) -> tuple[str, ...]:
    """Return a strike's row of the strikes table: speeds in m/s, tilt in degrees, distances in mm, and how it ended."""
    shift = strike.next_contact_shift_m
    return (
        fixed(strike.time_s, 3),
        fixed(strike.commanded_m_s, 3),
        fixed(strike.delivered_m_s, 3),
        percent(strike.delivered_share),
        fixed(strike.lateral_m_s, 3),
        fixed(strike.tilt_error_deg, 2),
        fixed(1000 * strike.position_error_m, 2),
        fixed(None if shift is None else 1000 * shift, 1),
        outcome(strike),
    )


def tilt_meaning(result: FollowResult) -> str | None:
    """Return what a tilt error of one degree does at the next contact; None where no apex is known."""
    shifts = [
        1000 * strike.shift_per_degree_m
        for strike in result.evidence.strikes
        if strike.shift_per_degree_m is not None
    ]
    if not shifts:
        return None
    least, most = f"{min(shifts):.0f}", f"{max(shifts):.0f}"
    span = most if least == most else f"{least} to {most}"
    return f"A tilt error of 1° moves the next contact by {span} mm."


def demand_note(result: FollowResult) -> str:
    """Return what to think of the values asked for by a log coarser than the control; empty for a finer one."""
    follow, period_s = result.cell.follow, result.cell.period_s
    if follow is None or len(follow.commands.t_s) < 2:
        return ""
    sample_s = float(np.median(np.diff(follow.commands.t_s)))
    if sample_s <= COARSE * period_s:
        return ""
    jumps, tell = (
        ("acceleration", "jerk and torque rate")
        if follow.interpolation == "linear"
        else ("velocity", "acceleration, jerk, torque and torque rate")
    )
    return (
        f'"Asked for" counts the step at each sample of the log: one every {number(1000 * sample_s, 3)} ms, where '
        f"the controller has {number(1000 * period_s, 3)} ms. The commanded {jumps} jumps there, so the {tell} "
        "asked for tell of the log's spacing more than of the stroke."
    )


def solver_line(result: FollowResult) -> str:
    """Return how the steps were solved."""
    count = result.solver
    return (
        f"{count.steps} steps by {count.name}: {count.elastic_steps} elastic, {count.fallback_steps} by "
        f"{count.fallback}, {count.failed_steps} that no solver answered"
    )
