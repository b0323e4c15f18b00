"""Where a log's strikes are, read anew: its marks, or the peaks of the commanded speed where it has none."""

from __future__ import annotations

import math
from itertools import pairwise

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.follow.command import Command, Log
from reach.recheck.stored import Stored, largest, number_in


def contacts(stored: Stored, log: Log, command: Command) -> tuple[Item, np.ndarray]:
    """Whether the instants of verdict.json are all that the log has, and those to be judged (k,) in s.

    Of two peaks that are equally high but for rounding either may be the one that counts.
    """
    told = np.array([number_in(entry, "time_s") for entry in stored.entries("strikes")])
    if log.strike is not None:
        own, other = log.marked_s, "marks"
    else:
        own, other = _peaks(stored, log, command), "peaks"
    counted = same("number", len(own), len(told))
    if len(own) != len(told):
        return Item("strike", other, (counted, Check("instants", math.inf, allowed.TIME_S, "s"))), own
    off = np.abs(own - told)
    if log.strike is None and np.isfinite(told).all():
        level = np.abs(_along(command, own) - _along(command, told)) <= allowed.SPEED_M_S
        off, own = np.where(level, 0.0, off), told
    return Item("strike", other, (counted, Check("instants", largest(off), allowed.TIME_S, "s"))), own


def _peaks(stored: Stored, log: Log, command: Command) -> np.ndarray:
    """Instants (k,) of the peaks at the log's median period: high and prominent enough, the higher of two too near."""
    least = stored.between(0.0, 1e9, "follow", "strike_min_m_s")
    period = float(np.median(np.diff(log.t_s)))
    times = np.arange(log.t_s[0], log.t_s[-1] + period, period)
    speed = _along(command, times)
    apart = max(round(stored.between(0.0, 1e9, "follow", "strike_min_gap_s") / period), 1)
    found = [k for k in _tops(speed) if speed[k] >= least]
    taken = np.zeros(len(speed), dtype=bool)
    kept = []
    for k in sorted(found, key=lambda k: (speed[k], k), reverse=True):
        if not taken[k]:
            taken[max(k - apart + 1, 0) : k + apart] = True
            kept.append(k)
    rows = [k for k in sorted(kept) if _prominence(speed, k) >= least]
    return np.asarray(times[rows])


def _tops(speed: np.ndarray) -> list[int]:
    """Rows higher than both sides, of level stretches the middle one; no top at either end."""
    turns = np.flatnonzero(np.diff(speed) != 0)  # the last row of each level stretch
    return [
        int(before + 1 + after) // 2
        for before, after in pairwise(turns)
        if speed[before] < speed[after] > speed[after + 1]
    ]


def _prominence(speed: np.ndarray, top: int) -> float:
    """How far a peak stands above the higher of the lowest rows between it and a higher one to either side."""
    return float(speed[top] - max(_lowest(speed[top::-1]), _lowest(speed[top:])))


def _lowest(side: np.ndarray) -> float:
    """The lowest of values before the first that is above their first one."""
    size = 64
    while size < len(side) and not (side[:size] > side[0]).any():
        size *= 4
    higher = np.flatnonzero(side[:size] > side[0])
    return float(side[: higher[0] if len(higher) else size].min())


def _along(command: Command, times: np.ndarray) -> np.ndarray:
    twist, _, axes = command.at(times)
    return np.asarray(np.einsum("ki,ki->k", twist[:, :3], axes[:, :, 2]))
