"""Strikes looked at, a chunk at a time: postures, both sides of the speed, the motion that shows it, what stops it."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Cell
from reach.posture import reach_bound
from reach.strike.setting import Setting
from reach.strike.sides import AT_BOUND, searched, upper
from reach.survey.family import folds
from reach.survey.grid import Strikes
from reach.survey.inverse import Found, Library, from_library, from_postures, merged
from reach.survey.judged import Scribe
from reach.survey.rows import Judged, Rows, judged
from reach.survey.selfmotion import LEADERS, best_first, improved, own_bound
from reach.survey.stops import loosened, stop_at_bound, stop_of
from reach.survey.weigh import Effort, Shown, Weighed, show, weigh
from reach.variants import without_margins
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE

DEEP_LEADERS = 40  # postures of a strike that are moved before it is judged


NUMERICAL = (ArithmeticError, ValueError, np.linalg.LinAlgError)
FAILED = "failed numerically: {}"


@dataclass(frozen=True, eq=False)
class Searched:
    """Postures of a chunk's m strikes, the starts (m,) and postures compared (m,) that it took, and by strike why a
    search failed."""

    found: Found
    starts: NDArray[np.int64]
    postures: NDArray[np.int64]
    failed: dict[int, str]


class Looker:
    """Looks at strikes of one cell; made once a process.

    Parameters
    ----------
    cell : with a survey
    seed : of the random postures
    full : also optimise, say what stops each strike, and how it stands without margins
    """

    def __init__(self, cell: Cell, seed: int, full: bool = True):
        assert cell.survey is not None
        self.setting = Setting.of(cell)
        self.folds = folds(self.setting.chain, self.setting.arm.names)
        exact = Effort.FULL if cell.survey.exact else Effort.DECIDE
        self._effort = exact if full else Effort.QUICK
        self._library = Library(self.setting, seed)
        self._origin, self._length = reach_bound(self.setting.arm)
        bare = without_margins(cell)
        self._bare = Setting.of(bare) if full and bare.margins != cell.margins else None
        self._loose = loosened(cell) if full else {}
        self._scribe = Scribe(cell, self.setting, self.folds, self._origin, self._length)

    def search(self, strikes: Strikes) -> Searched:
        """Postures of strikes: inverse kinematics from seeded starts, moved along the freedom that is left.

        A strike that fails numerically has none, and the reason.
        """
        try:
            return self._searched(strikes)
        except NUMERICAL as error:
            if len(strikes) == 1:
                none = np.zeros(1, dtype=np.int64)
                return Searched(Found.none(self.setting.arm.n), none, none, {0: str(error)})
        ones = [self.search(strikes.take(slice(k, k + 1))) for k in range(len(strikes))]
        return Searched(
            Found.joined([Found(one.found.q, one.found.owner + k) for k, one in enumerate(ones)]),
            np.concatenate([one.starts for one in ones]),
            np.concatenate([one.postures for one in ones]),
            {k: one.failed[0] for k, one in enumerate(ones) if one.failed},
        )

    def _searched(self, strikes: Strikes) -> Searched:
        m = len(strikes)
        starts, postures = np.zeros(m, dtype=np.int64), np.zeros(m, dtype=np.int64)
        near = np.flatnonzero(np.linalg.norm(strikes.position - self._origin, axis=1) <= self._length)
        if not len(near):
            return Searched(Found.none(self.setting.arm.n), starts, postures, {})
        part = strikes.take(near)
        found, starts[near] = from_library(self.setting, self._library, part.position, part.normal)
        found, postures[near] = self._moved(part, found, LEADERS)
        return Searched(Found(found.q, near[found.owner]), starts, postures, {})

    def judge(self, strikes: Strikes, searched: Searched, neighbours: Found) -> Judged:
        """What becomes of strikes from their postures and from their neighbours'."""
        return judged(self._judged(strikes, searched, neighbours))

    def left(self, strikes: Strikes, reason: str) -> Judged:
        """Strikes that were not looked at."""
        return judged(self._empty(strikes, reason))

    def _judged(self, strikes: Strikes, searched: Searched, neighbours: Found) -> Rows:
        """A posture that fails numerically leaves its own row undecided, with the reason."""
        try:
            return self._looked_at(strikes, searched, neighbours)
        except NUMERICAL as error:
            if len(strikes) == 1:
                return self._empty(strikes, FAILED.format(error))
        rows = self._empty(strikes)
        for k in range(len(strikes)):
            failed = {0: searched.failed[k]} if k in searched.failed else {}
            at = slice(k, k + 1)
            one = Searched(searched.found.of([k]), searched.starts[at], searched.postures[at], failed)
            rows.put([k], self._judged(strikes.take(slice(k, k + 1)), one, neighbours.of([k])))
        return rows

    def _empty(self, strikes: Strikes, reason: str = "") -> Rows:
        return Rows(strikes, self.setting.arm.n, len(self.folds.families), reason)

    def _looked_at(self, strikes: Strikes, searched: Searched, neighbours: Found) -> Rows:
        rows = self._empty(strikes)
        found, rows.counts["starts"][:], rows.counts["postures"][:] = self._deeper(
            strikes, searched, neighbours
        )
        self._filled(rows, found)
        for k, error in searched.failed.items():
            rows.put([k], self._empty(strikes.take(slice(k, k + 1)), FAILED.format(error)))
        return rows

    def _deeper(
        self, strikes: Strikes, searched: Searched, neighbours: Found
    ) -> tuple[Found, NDArray[np.int64], NDArray[np.int64]]:
        """All postures of strikes that are reached: those found, those from the neighbours', and those of many more
        starts, the best moved along the freedom left; and how many starts (m,) and postures (m,) that took."""
        starts, postures = searched.starts.copy(), searched.postures.copy()
        more = from_postures(self.setting, neighbours, strikes.position, strikes.normal)
        both = merged([searched.found, more])
        reached = np.unique(both.owner)
        if not len(reached):
            return both, starts, postures
        part = strikes.take(reached)
        deep, extra = from_library(self.setting, self._library, part.position, part.normal, deep=True)
        wide, tried = self._moved(part, merged([both.of(reached), deep]), DEEP_LEADERS)
        starts[reached] += extra
        postures[reached] += tried
        return Found(wide.q, reached[wide.owner]), starts, postures

    def _moved(self, strikes: Strikes, found: Found, count: int) -> tuple[Found, NDArray[np.int64]]:
        """Postures, best first, after moving the best of each strike; and how many (m,) were compared."""
        found = best_first(found, self._own(strikes, found))
        moved = improved(self.setting, found, strikes.position, strikes.normal, strikes.direction, count)
        both = merged([moved.found, found])
        return best_first(both, self._own(strikes, both)), moved.tried

    def _own(self, strikes: Strikes, found: Found, setting: Setting | None = None) -> Array:
        return own_bound(setting or self.setting, found.q, strikes.direction[found.owner])

    def _filled(self, rows: Rows, found: Found) -> None:
        """Write what the postures show into the rows."""
        self._scribe.unreached(rows, found.owner)
        rows.bare[:] = rows.texts["verdict"]
        if not len(found.q):
            return
        weighed = weigh(self.setting, self.folds, rows.strikes, found)
        self._scribe.bounds(rows, weighed)
        shown = show(self.setting, rows.strikes, weighed, self._effort)
        for k, one in shown.items():
            self._scribe.motion(rows, k, one)
        loose = self._loosened(rows.strikes, weighed, shown)
        for k, one in shown.items():
            if one.best is None:
                stop = self._scribe.stopped_at(weighed, one.index)
            elif k in loose:
                stop = stop_of(self.setting, one.best, float(weighed.below.speed[one.index]), loose[k])
            else:
                i = int(weighed.pick[one.index])
                stop = stop_at_bound(self.setting, weighed.above, i, weighed.found.q[i])
            self._scribe.verdict(rows, k, stop)
        self._without_margins(rows, found)

    def _loosened(
        self, strikes: Strikes, weighed: Weighed, shown: dict[int, Shown]
    ) -> dict[int, dict[str, float]]:
        """For strikes whose motion stays below its posture's bound: quick speed with each limit loosened."""
        own = weighed.above.own(self.setting.still)[weighed.pick]
        short = [
            (k, one.index)
            for k, one in shown.items()
            if one.best is not None and one.best.speed < AT_BOUND * own[one.index]
        ]
        if not short or not self._loose:
            return {k: {} for k, _ in short}
        at, index = (np.array(column) for column in zip(*short, strict=True))
        q, tangent = weighed.found.q[weighed.pick[index]], weighed.below.tangent[None, index]
        normal, direction = strikes.normal[at], strikes.direction[at]
        speeds = {}
        for kind, setting in self._loose.items():
            above = upper(setting, q, direction)
            # From the swing that there is: a looser limit does not lose it.
            _, speeds[kind] = searched(setting, q, normal, direction, above, tangent)
        return {
            k: {kind: float(found[j]) for kind, found in speeds.items()} for j, (k, _) in enumerate(short)
        }

    def _without_margins(self, rows: Rows, found: Found) -> None:
        """How the strikes stand with the margins at zero: those delivered with them stay so."""
        rows.bare[:] = rows.texts["verdict"]
        lost = np.flatnonzero(rows.texts["verdict"] != DELIVERABLE)
        part = found.of(lost)
        if self._bare is None or not len(part.q):
            return
        strikes = rows.strikes.take(lost)
        top = np.full(len(lost), -np.inf)
        np.maximum.at(top, part.owner, self._own(strikes, part, self._bare))
        need = strikes.required_m_s / np.einsum("mi,mi->m", strikes.direction, strikes.normal)
        may = np.flatnonzero(np.minimum(top, self._bare.tool_cap_m_s) >= need)
        rows.bare[lost[np.isfinite(top)]] = NOT_DELIVERABLE
        if len(may):
            some = strikes.take(may)
            for j, one in show(
                self._bare, some, weigh(self._bare, self.folds, some, part.of(may)), self._effort
            ).items():
                rows.bare[lost[may[j]]] = self._scribe.word(some, j, one)
