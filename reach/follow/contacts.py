"""The contact instants of a log: marked in it, or guessed from the peaks of the commanded normal speed."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array, Follow
from reach.follow.reference import Reference

ALONG_SHARE = 0.7  # of a strike's speed that must go along the face normal for the strike to look meant


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


def aslant(found: Contacts, reference: Reference) -> str | None:
    """A note where commanded strikes go across the face or away from it; None where all go along its normal.

    A wrong mount or a wrong frame is the likeliest cause.
    """
    twist, _, axes = reference.at(found.t_s)
    along = np.einsum("ki,ki->k", twist[:, :3], axes[:, :, 2])
    speed = np.linalg.norm(twist[:, :3], axis=1)
    odd = np.flatnonzero(along < ALONG_SHARE * speed)
    if len(odd) == 0:
        return None
    worst = odd[np.argmin(along[odd])]
    return (
        f"{len(odd)} of {len(speed)} strikes are commanded across the face or away from it "
        f"(at {found.t_s[worst]:.3f} s {along[worst]:.3f} of {speed[worst]:.3f} m/s along its normal): "
        "check the paddle's mount and the frame of the twists"
    )
