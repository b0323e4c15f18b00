"""How values, names and limits are put into words, the same in every report."""

from __future__ import annotations

import math
import unicodedata
from collections.abc import Iterable

from reach.cell import Joint
from reach.evidence.record import Reason, Remedy
from reach.result import Result

NOTHING = "–"
WRITTEN_OUT = 1e7  # smaller values are written without an exponent
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


def millimetres(value_m: float | None) -> str:
    """Return a length in mm; a dash for nothing."""
    return number(None if value_m is None else 1000 * value_m, 3)


def milliseconds(value_s: float | None) -> str:
    """Return a time in ms; a dash for nothing."""
    return number(None if value_s is None else 1000 * value_s, 3)


def degrees(value_rad: float | None) -> str:
    """Return an angle in degrees; a dash for nothing."""
    return number(None if value_rad is None else round(math.degrees(value_rad), 9), 3)


def between(low: float, high: float, digits: int = 3) -> str:
    """Return a range, or one value where both ends read alike."""
    least, most = number(low, digits), number(high, digits)
    return least if least == most else f"{least} to {most}"


def limit_of(limit: str, joint: str | None) -> str:
    """Return a limit with whose it is; a dash for nothing."""
    if not limit:
        return NOTHING
    return f"{plain(limit)} of {plain(joint)}" if joint else plain(limit)


def plural(count: int, noun: str) -> str:
    """Return a count with its noun."""
    return f"{count} {noun}" if count == 1 else f"{count} {noun}s"


def force_unit(joint: Joint) -> str:
    """Return the unit of a joint's torque, or force where it slides."""
    return "N" if joint.sliding else "N·m"


def remedy_line(remedy: Remedy) -> str:
    """Return a change, what it does, and whether a run has shown it."""
    return f"{remedy.change}: {remedy.effect} ({'verified by a run' if remedy.verified else 'not verified'})"


def owner(joint: str | None) -> str:
    """Return whose limit it is."""
    return "tool" if joint is None else plain(joint)


def unknown_limits(unknown: Iterable[tuple[str, str | None]]) -> list[tuple[str, str]]:
    """Return the limits nobody stated, each with the joints it is unknown for."""
    grouped: dict[str, list[str]] = {}
    for limit, joint in unknown:
        grouped.setdefault(limit, []).append(owner(joint))
    return [(limit, ", ".join(joints)) for limit, joints in grouped.items()]


def all_notes(result: Result) -> tuple[str, ...]:
    """Return the notes on the result, then those on reading the files, each once."""
    read = result.cell.notes
    return tuple(dict.fromkeys([*(note for note in result.notes if note not in read), *read]))
