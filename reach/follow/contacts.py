"""The contact instants of a log: marked in it, or guessed from the peaks of the commanded normal speed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array, Follow
from reach.follow.reference import Reference


@dataclass(frozen=True, eq=False)
class Contacts:
    """Contact instants (k,) in the log's time; `marked` in the log or, if not, `guessed` from peaks."""

    t_s: Array
    marked: bool

    @property
    def guessed(self) -> bool:
        """Whether there are contacts that the log does not mark."""
        return not self.marked and len(self.t_s) > 0


def contacts(follow: Follow, reference: Reference | None) -> Contacts:
    """The log's contacts.

    A row of marks in succession is one contact, at its first. Without a strike column a contact is a peak of the
    commanded normal speed above `strike_min_m_s` with at least that prominence, `strike_min_gap_s` from the next.
    """
    log = follow.commands
    if log.strike is not None:
        rising = log.strike & ~np.append(False, log.strike[:-1])
        return Contacts(log.t_s[rising], True)
    if reference is None:
        return Contacts(np.empty(0), False)
    from scipy.signal import find_peaks

    period = float(np.median(np.diff(log.t_s)))
    even = np.arange(log.t_s[0], reference.end_s, period)
    twist, _, axes = reference.at(even)
    speed = np.einsum("ki,ki->k", twist[:, :3], axes[:, :, 2])
    apart = max(round(follow.strike_min_gap_s / period), 1)
    peaks, _ = find_peaks(
        speed, height=follow.strike_min_m_s, prominence=follow.strike_min_m_s, distance=apart
    )
    return Contacts(even[peaks], False)
