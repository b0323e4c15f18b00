"""Rows of a survey while they are being filled, and put together to its Points."""

from __future__ import annotations

from typing import Any

import numpy as np

from reach.cell import Array
from reach.evidence.motion import Motion
from reach.evidence.points import Points, Profiles
from reach.strike.profile import Profile
from reach.survey.grid import Strikes
from reach.verdict import DELIVERABLE, UNDECIDED

TEXTS = ("verdict", "basis", "limit", "joint", "phase", "family", "stroke")
VALUES = (
    "demonstrated_m_s",
    "bound_still_m_s",
    "bound_free_m_s",
    "effective_mass_kg",
    "to_limit_share",
    "approach_m_s",
)
JOINT_ROWS = ("q", "velocity_jump", "joint_impulse", "tangent", "q_still", "q_free")
WIDTHS = {"ball_impulse": 2, "dual_still": 6, "dual_free": 6}
COUNTS = ("postures", "starts")


class Rows:
    """Rows of m strikes of an arm of n joints, empty at first: undecided, nothing found.

    Columns have the names of Points; `bare` is the verdict with the margins at zero.
    """

    def __init__(self, strikes: Strikes, n: int, families: int, reason: str = ""):
        m = len(strikes)
        self.strikes = strikes
        self.texts = {name: np.full(m, "", dtype=object) for name in TEXTS}
        self.texts["verdict"][:] = UNDECIDED
        self.reason = np.full(m, reason, dtype=object)
        self.values = {name: np.full(m, np.nan) for name in VALUES}
        self.values |= {name: np.full((m, n), np.nan) for name in JOINT_ROWS}
        self.values |= {name: np.full((m, width), np.nan) for name, width in WIDTHS.items()}
        self.values["family_demonstrated_m_s"] = np.full((m, families), np.nan)
        self.counts = {name: np.zeros(m, dtype=np.int64) for name in COUNTS}
        self.bare = np.full(m, UNDECIDED, dtype=object)
        self.peaks: dict[int, Array] = {}  # of unknown limits, at the required speed
        self.profiles: dict[int, Profile] = {}
        self.motions: dict[int, Motion] = {}

    def __len__(self) -> int:
        return len(self.strikes)

    def set(self, row: int, **fields: Any) -> None:
        """Write some fields of one row."""
        for name, value in fields.items():
            if name == "reason":
                self.reason[row] = value
            else:
                self._column(name)[row] = value

    def get(self, row: int, name: str) -> Any:
        """One field of one row."""
        return self._column(name)[row]

    def _column(self, name: str) -> Any:
        for columns in (self.texts, self.values, self.counts):
            if name in columns:
                return columns[name]
        raise KeyError(name)

    def put(self, rows: list[int], other: Rows) -> None:
        """Replace some rows by those of another."""
        for mine, theirs in (
            (self.texts, other.texts),
            (self.values, other.values),
            (self.counts, other.counts),
        ):
            for name, column in theirs.items():
                mine[name][rows] = column
        self.reason[rows], self.bare[rows] = other.reason, other.bare
        for kept, given in (
            (self.profiles, other.profiles),
            (self.motions, other.motions),
            (self.peaks, other.peaks),
        ):
            _replace(kept, given, rows)


def _replace(kept: dict[int, Any], given: dict[int, Any], rows: list[int]) -> None:
    for k, row in enumerate(rows):
        kept.pop(row, None)
        if k in given:
            kept[row] = given[k]


def points_of(parts: list[Rows]) -> Points:
    """The Points of rows in order."""
    profiles: list[Profile | None] = []
    motions: dict[int, Motion] = {}
    first = 0
    for part in parts:
        profiles += [part.profiles.get(k) for k in range(len(part))]
        motions |= {first + k: motion for k, motion in part.motions.items()}
        first += len(part)
    texts: dict[str, Any] = {
        name: np.array(np.concatenate([part.texts[name] for part in parts]), dtype=str) for name in TEXTS
    }
    numbers: dict[str, Any] = {
        name: np.concatenate([getattr(part, kind)[name] for part in parts])
        for kind in ("values", "counts")
        for name in getattr(parts[0], kind)
    }
    return Points(
        position=np.concatenate([part.strikes.position for part in parts]),
        normal=np.concatenate([part.strikes.normal for part in parts]),
        direction=np.concatenate([part.strikes.direction for part in parts]),
        required_m_s=np.concatenate([part.strikes.required_m_s for part in parts]),
        reason=tuple(str(text) for part in parts for text in part.reason),
        margin_free=np.concatenate([part.bare == DELIVERABLE for part in parts]).astype(bool),
        profiles=_pieces(profiles),
        motions=motions,
        **texts,
        **numbers,
    )


def _pieces(profiles: list[Profile | None]) -> Profiles:
    durations: list[Array] = []
    jerks: list[Array] = []
    before: list[Array] = []
    counts = np.zeros(len(profiles) + 1, dtype=np.int64)
    for k, profile in enumerate(profiles):
        if profile is None:
            continue
        first, last = profile.before, profile.after
        counts[k + 1] = len(first.jerk) + len(last.jerk)
        durations += [first.duration_s, last.duration_s[::-1]]
        jerks += [first.jerk, last.jerk[::-1]]
        before += [np.ones(len(first.jerk), dtype=bool), np.zeros(len(last.jerk), dtype=bool)]
    none = [np.zeros(0)]
    return Profiles(
        np.cumsum(counts),
        np.concatenate(durations or none),
        np.concatenate(jerks or none),
        np.concatenate(before or [np.zeros(0, dtype=bool)]),
    )
