"""The time axis of the figures."""

from __future__ import annotations

from typing import NamedTuple

from reach.evidence.record import Track

FAR_ZERO_S = 1e5  # logs that start later than this are drawn from zero


class Clock(NamedTuple):
    """Instants as drawn: those of the log, or since its start where the log's zero is far away."""

    zero_s: float
    label: str

    @classmethod
    def of(cls, track: Track) -> Clock:
        """Return the clock for a track of one row at least."""
        start = float(track.t_s[0])
        return cls(0.0, "time, s") if abs(start) < FAR_ZERO_S else cls(start, f"time after {start:.3f} s, s")
