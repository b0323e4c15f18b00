"""How values, names and limits are put into words, the same in every report."""

from __future__ import annotations

import math
import unicodedata

import numpy as np

from reach.cell import Joint
from reach.evidence.record import Reason, Remedy, Strike, Use
from reach.result import FollowResult

NOTHING = "–"
WRITTEN_OUT = 1e7  # smaller values are written without an exponent
COARSE = 1.5  # control periods: a log whose samples are farther apart is coarse
# Marks that turn the writing direction of what follows, and two code points that XML forbids.
UNSAFE = frozenset("\u202a\u202b\u202c\u202d\u202e\u2066\u2067\u2068\u2069\ufffe\uffff")


def plain(text: str) -> str:
    r"""Return the text with control characters, lone surrogates and direction marks written as escapes.

    What is left is safe for a terminal and legal in XML, and two different names stay different.
    """
    return "".join(_escaped(c) if c in UNSAFE or unicodedata.category(c) in ("Cc", "Cs") else c for c in text)


def _escaped(character: str) -> str:
    code = ord(character)
    return f"\\x{code:02x}" if code < 0x100 else f"\\u{code:04x}"


def number(value: float | None, digits: int = 4) -> str:
    """Return a value to so many significant digits; a dash for nothing, "none" for an infinite bound."""
    if value is None or math.isnan(value):
        return NOTHING
    if math.isinf(value):
        return "none"
    if 10**digits <= abs(value) < WRITTEN_OUT:
        return f"{value:.0f}"
    return f"{value + 0.0:.{digits}g}"


def fixed(value: float | None, decimals: int) -> str:
    """Return a value with so many decimals; a dash for nothing."""
    if value is None or not math.isfinite(value):
        return NOTHING
    return f"{value:.{decimals}f}"


def percent(share: float | None) -> str:
    """Return a share as per cent without the sign; a dash for nothing."""
    return fixed(None if share is None else 100 * share, 1)


def span(reason: Reason) -> str:
    """Return from when to when something fell short, in s; a dash where that isn't known."""
    first, last = fixed(reason.time_s, 3), fixed(reason.until_s, 3)
    if first == NOTHING or last in (NOTHING, first):
        return first if first != NOTHING else last
    return f"{first} to {last}"


def owner(use: Use) -> str:
    """Return whose limit it is."""
    return "tool" if use.joint is None else plain(use.joint)


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


def force_unit(joint: Joint) -> str:
    """Return the unit of a joint's torque, or force where it slides."""
    return "N" if joint.sliding else "N·m"


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


def remedy_line(remedy: Remedy) -> str:
    """Return a change, what it does, and whether a run has shown it."""
    return f"{remedy.change}: {remedy.effect} ({'verified by a run' if remedy.verified else 'not verified'})"


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


def unknown_limits(result: FollowResult) -> list[tuple[str, str]]:
    """Return the limits nobody stated, each with the joints it is unknown for."""
    grouped: dict[str, list[str]] = {}
    for limit, joint in result.evidence.unknown:
        grouped.setdefault(limit, []).append("tool" if joint is None else plain(joint))
    return [(limit, ", ".join(joints)) for limit, joints in grouped.items()]


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


def all_notes(result: FollowResult) -> tuple[str, ...]:
    """Return the notes on the result, then those on reading the files, each once."""
    read = result.cell.notes
    return tuple(dict.fromkeys([*(note for note in result.notes if note not in read), *read]))


def solver_line(result: FollowResult) -> str:
    """Return how the steps were solved."""
    count = result.solver
    return (
        f"{count.steps} steps by {count.name}: {count.elastic_steps} elastic, {count.fallback_steps} by "
        f"{count.fallback}, {count.failed_steps} that no solver answered"
    )
