"""Strokes from what a survey stored of them: a swing from its pieces of constant jerk, a straight one from its rows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.evidence.items import Check, same
from reach.recheck import allowed
from reach.recheck.arm.chain import Array
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.trace import Trace, fine
from reach.recheck.stored import BadFolder, Stored, largest

POINTS, MOTIONS = "points.npz", "motions.npz"
SWING, STRAIGHT = "swing", "straight"
MOST_ROWS = 500_000  # control periods of one stroke; a second at 1 kHz has 1000
WHOLE = 1e-9  # of a period: a side that is longer by less ends on its row
FARTHEST = 1e6  # rad or m, per s, per s²: what no joint comes near to


@dataclass(frozen=True, eq=False)
class Pieces:
    """The profiles of all swings: first (m + 1,) piece of each, and of every piece its length in s, its jerk in m/s³
    and whether it lies before the strike."""

    first: np.ndarray
    duration_s: Array
    jerk: Array
    before: np.ndarray

    @staticmethod
    def of(stored: Stored, strikes: int) -> Pieces:
        """Read from points.npz.

        Raises
        ------
        BadFolder
        """
        first = stored.array(POINTS, "profile_first", (strikes + 1,), "i")
        duration = stored.finite(POINTS, "profile_duration_s", (None,))
        count = len(duration)
        jerk = stored.finite(POINTS, "profile_jerk_m_s3", (count,))
        before = stored.array(POINTS, "profile_before", (count,), "b")
        if first[0] != 0 or first[-1] != count or (np.diff(first) < 0).any():
            raise _bad(stored, "profile_first", "does not count the pieces up")
        if (duration < 0).any():
            raise _bad(stored, "profile_duration_s", "is negative")
        return Pieces(first, duration, jerk, before)


def stroke(
    stored: Stored, ground: Ground, pieces: Pieces, row: int, kind: str, q: Array, tangent: Array
) -> tuple[Trace, list[Check]]:
    """The stroke of a strike on the fine grid, and whether it goes from rest to rest.

    Parameters
    ----------
    kind : of stroke; q, tangent : (n,) posture at the strike, and joint velocity per m/s

    Raises
    ------
    BadFolder
        Where what is stored makes no motion.
    """
    if kind == SWING:
        trace, checks = _swing(stored, ground, pieces, row, q, tangent)
    elif kind == STRAIGHT:
        trace, checks = _straight(stored, ground, row)
    else:
        raise _bad(stored, "stroke", f"of strike {row + 1} is none that there is")
    if any(not (np.abs(part) < FARTHEST).all() for part in (trace.q, trace.v, trace.a)):
        raise _bad(stored, "stroke", f"of strike {row + 1} is no motion that an arm can make")
    return trace, checks


def _swing(
    stored: Stored, ground: Ground, pieces: Pieces, row: int, q: Array, tangent: Array
) -> tuple[Trace, list[Check]]:
    """q + tangent · s(t) on the control grid: velocities exact at the rows, positions integrated from the strike."""
    part = slice(pieces.first[row], pieces.first[row + 1])
    jerk, lasts, ahead = pieces.jerk[part], pieces.duration_s[part], pieces.before[part]
    period, struck = ground.period_s, int(ahead.sum())
    starts = np.append(0.0, np.cumsum(lasts))
    before, after = starts[struck], starts[-1] - starts[struck]
    if not len(jerk) or not starts[-1] / period < MOST_ROWS:
        raise _bad(stored, "profile_duration_s", f"of strike {row + 1} makes no stroke of a sensible length")
    states = np.zeros((len(jerk) + 1, 3))
    for k, (j, h) in enumerate(zip(jerk, lasts, strict=True)):
        x, v, a = states[k]
        states[k + 1] = x + h * (v + h * (a / 2 + h * j / 6)), v + h * (a + h * j / 2), a + h * j
    rows = [int(np.ceil(side / period - WHOLE)) for side in (before, after)]
    t = np.clip(before + period * np.arange(-rows[0], rows[1] + 1), 0.0, starts[-1])
    k = np.clip(np.searchsorted(starts, t, side="right") - 1, 0, len(jerk) - 1)
    since = t - starts[k]
    _, v, a = states[k].T
    speed = v + since * (a + since * jerk[k] / 2)
    speed[[0, -1]] = 0.0  # these rows lie outside the pieces, or on their ends
    velocity = speed[:, None] * tangent
    way = np.vstack([np.zeros(len(q)), np.cumsum((velocity[1:] + velocity[:-1]) / 2 * period, axis=0)])
    gain = np.vstack([np.diff(velocity, axis=0) / period, np.zeros(len(q))])
    trace = fine(q + way - way[rows[0]], velocity, gain, period, -rows[0] * period, rows[0])
    rest = states[-1, 1:] * (1.0, period)
    size = max(float(np.abs(states[:, 1]).max()), 1.0)
    checks = [
        Check("rest", largest(rest), allowed.STATE_SHARE * size, "m/s"),
        same("pieces before the strike first", bool(ahead[:struck].all()), True),
    ]
    return trace, checks


def _straight(stored: Stored, ground: Ground, row: int) -> tuple[Trace, list[Check]]:
    """The rows of a straight stroke, and whether they belong together."""
    n, period = len(ground.names), ground.period_s
    q = stored.finite(MOTIONS, f"q_{row}", (None, n))
    v, a = (stored.finite(MOTIONS, f"{name}_{row}", q.shape) for name in ("v", "a"))
    start = float(stored.finite(MOTIONS, f"start_s_{row}", ())[()])
    if not 2 <= len(q) <= MOST_ROWS or not 0 <= -start / period <= len(q) - 1 + WHOLE:
        raise _bad(stored, f"start_s_{row}", "leaves the strike outside the stroke", MOTIONS)
    strike = round(-start / period)
    off = np.abs(np.diff(q, axis=0) - (v[1:] + v[:-1]) / 2 * period).max(axis=0)
    uneven = np.abs(np.diff(v, axis=0) - a[:-1] * period).max(axis=0)
    unrest = np.maximum(np.abs(v[[0, -1]]).max(axis=0), np.abs(a[-1]) * period)
    checks = []
    for name, size, scale, ends in (
        ("rows of position", off, largest(q), ("rad", "m")),
        ("rows of velocity", uneven, largest(v), ("rad/s", "m/s")),
        ("rest", unrest, largest(v), ("rad/s", "m/s")),
    ):
        worst = int(np.argmax(size))
        unit = ends[bool(ground.sliding[worst])]
        checks.append(Check(name, float(size[worst]), allowed.STATE_SHARE * max(scale, 1.0), unit))
    checks.append(Check("strike on a row", abs(strike * period + start), allowed.TIME_S, "s"))
    return fine(q, v, a, period, start, strike), checks


def _bad(stored: Stored, where: str, what: str, file: str = POINTS) -> BadFolder:
    return BadFolder(where, what, f"{stored.folder}/evidence/{file}")
