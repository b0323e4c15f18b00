"""Rows of a survey while they are being filled, and put together to its Points."""

from __future__ import annotations

from dataclasses import dataclass, fields
from typing import Any, TypeVar

import numpy as np

from reach.cell import Array
from reach.evidence.motion import Motion
from reach.evidence.points import Points, Profiles, Texts
from reach.strike.profile import Profile
from reach.survey.grid import Strikes
from reach.verdict import DELIVERABLE, UNDECIDED

T = TypeVar("T")

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


@dataclass(frozen=True, eq=False)
class Judged:
    """Strikes that are done.

    Attributes
    ----------
    points : Points of m strikes
    bare : (m,) verdicts with the margins at zero
    peaks : by row, what a strike asks of each limit that nobody stated
    """

    points: Points
    bare: Texts
    peaks: dict[int, Array]

    def __len__(self) -> int:
        return len(self.points.verdict)


def judged(rows: Rows) -> Judged:
    """Rows once they are filled."""
    strikes = rows.strikes
    columns: dict[str, Any] = {**rows.values, **rows.counts}
    columns |= {name: np.array(column, dtype=str) for name, column in rows.texts.items()}
    points = Points(
        position=strikes.position,
        normal=strikes.normal,
        direction=strikes.direction,
        required_m_s=strikes.required_m_s,
        reason=tuple(map(str, rows.reason)),
        margin_free=np.asarray(rows.bare == DELIVERABLE, dtype=bool),
        profiles=_pieces([rows.profiles.get(k) for k in range(len(rows))]),
        motions=rows.motions,
        **columns,
    )
    return Judged(points, np.array(rows.bare, dtype=str), rows.peaks)


def joined(parts: list[Judged]) -> Judged:
    """Strikes of several chunks as one, in order."""
    starts = np.cumsum([0, *map(len, parts)]).tolist()
    points = [part.points for part in parts]
    columns: dict[str, Any] = {
        field.name: np.concatenate([getattr(part, field.name) for part in points])
        for field in fields(Points)
        if field.name not in ("reason", "profiles", "motions")
    }
    columns["reason"] = tuple(text for part in points for text in part.reason)
    columns["motions"] = _shifted([part.motions for part in points], starts)
    profiles = [part.profiles for part in points]
    counts = np.concatenate([[0], *(np.diff(part.first) for part in profiles)])
    columns["profiles"] = Profiles(
        np.cumsum(counts),
        np.concatenate([part.duration_s for part in profiles]),
        np.concatenate([part.jerk_m_s3 for part in profiles]),
        np.concatenate([part.before for part in profiles]),
    )
    peaks = _shifted([part.peaks for part in parts], starts)
    return Judged(Points(**columns), np.concatenate([part.bare for part in parts]), peaks)


def _shifted(parts: list[dict[int, T]], starts: list[int]) -> dict[int, T]:
    """What chunks hold by row, by row of the whole."""
    return {first + k: one for first, part in zip(starts, parts, strict=False) for k, one in part.items()}


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
