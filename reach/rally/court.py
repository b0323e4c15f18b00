"""A cell made ready for rallies, and one centre with the stances that strike there."""

from __future__ import annotations

from collections.abc import Sequence
from functools import cached_property
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.ball import NoContact, NoFlight
from reach.cell import Array, Cell, Rally, Vec3
from reach.limits.build import unknown_limits
from reach.posture import reach_bound
from reach.rally.exchange import Ballistics, Exchange
from reach.rally.gauge import Gauge
from reach.rally.player import Played, Player
from reach.rally.stance import stances
from reach.strike.impact import effective_mass
from reach.strike.setting import Setting
from reach.strike.stroke import DUTY
from reach.survey.family import folds
from reach.survey.inverse import Library
from reach.variants import without_margins


class Point(NamedTuple):
    """One point of an envelope: apex and offset in m, bearing in rad."""

    apex_m: float
    offset_m: float
    bearing_rad: float


def points_of(rally: Rally) -> list[Point]:
    """Every apex with every offset and bearing; a ball straight down onto the centre has one bearing."""
    return [
        Point(apex, offset, bearing)
        for apex in rally.apexes_m
        for offset in rally.offsets_m
        for bearing in (rally.bearings_rad if offset > 0 or rally.lateral_m_s else rally.bearings_rad[:1])
    ]


class Kit:
    """A cell with a rally made ready, once a process.

    Attributes
    ----------
    setting, gauge : with the cell's margins; bare : Gauge with none, the same where the cell has none
    starts : random postures that inverse kinematics starts from
    unknown : limits that a deliverable point needs and nobody stated, or that are not looked at here (duty)
    """

    def __init__(self, cell: Cell, seed: int):
        assert cell.rally is not None and cell.ball is not None and cell.contact is not None
        self.cell, self.rally = cell, cell.rally
        self.setting = Setting.made(cell)
        self.gauge = Gauge(self.setting)
        bare = without_margins(cell)
        self.bare = self.gauge if bare.margins == cell.margins else Gauge(Setting.made(bare))
        self.folds = folds(self.setting.chain, self.setting.arm.names)
        self.starts = Library(self.setting, seed)
        self.near = None if cell.arm.start is None else np.array(cell.arm.start)
        self.reach = reach_bound(self.setting.arm)
        lacking = {limit for limit, _ in unknown_limits(self.setting.limits)} | {DUTY}
        self.unknown = [limit for limit in cell.accept.require if limit in lacking]
        self._courts: dict[Vec3, Court] = {}

    def court(self, centre: Vec3) -> Court:
        """The court around a centre; the last one is kept."""
        if centre not in self._courts:
            self._courts = {centre: Court(self, centre)}
        return self._courts[centre]


class Court:
    """One centre.

    Attributes
    ----------
    centre (3,) : of the ball at contact; point (3,) : the strike point of a level face there
    stances : (k, n), most promising first
    players, ballistics : one for each stance
    """

    def __init__(self, kit: Kit, centre: Vec3):
        assert kit.cell.ball is not None
        self.kit, self.centre = kit, np.array(centre)
        self.point = self.centre - np.array([0.0, 0.0, kit.cell.ball.radius_m])
        self.stances = stances(kit.setting, kit.folds, kit.starts, self.point, kit.near)
        self.players = [
            Player(kit.cell, kit.setting, kit.gauge, self.centre, stance) for stance in self.stances
        ]

    @cached_property
    def ballistics(self) -> list[Ballistics]:
        """How the ball flies and meets the face, for each stance; all the same where the paddle does not give."""
        cell, bounces = self.kit.cell, self.kit.rally.recover_within_bounces
        assert cell.ball is not None and cell.contact is not None
        lateral = self.kit.rally.lateral_m_s
        if not cell.contact.arm_gives:
            return [Ballistics(cell, bounces, 0.0, lateral)] * len(self.stances)
        ratios = [cell.ball.mass_kg / self.mass_kg(q) for q in self.stances]
        return [Ballistics(cell, bounces, ratio, lateral) for ratio in ratios]

    def mass_kg(self, stance: Array) -> float:
        """The arm's effective mass along the vertical in a stance (n,), joints free to give."""
        arm = self.kit.setting.arm
        return effective_mass(arm.inertia(stance), arm.jacobian(stance)[2][2])

    def exchanges(self, points: Sequence[Point], stance: int) -> list[Exchange | None]:
        """The points' exchanges; None where the ball has no such flight."""
        found: list[Exchange | None] = []
        for point in points:
            try:
                found.append(self.ballistics[stance].exchange(*point))
            except (NoFlight, NoContact):
                found.append(None)
        return found

    def anyhow(self, points: Sequence[Point], main: int) -> NDArray[np.bool_]:
        """Which points (m,) a stance delivers, the main one or else any other, by the nodes."""
        good = np.zeros(len(points), dtype=bool)
        for stance in (main, *(k for k in range(len(self.stances)) if k != main)):
            left = np.flatnonzero(~good)
            if len(left):
                made = self.exchanges([points[int(k)] for k in left], stance)
                good[left] = self.delivered(made, stance, self.kit.rally.latency_s)[0]
        return good

    def delivered(
        self, exchanges: Sequence[Exchange | None], stance: int, latency_s: float
    ) -> tuple[NDArray[np.bool_], Array]:
        """Which exchanges (e,) a stance delivers, and the largest share (e,) of a limit in each."""
        at = [k for k, one in enumerate(exchanges) if one is not None]
        good, worst = np.zeros(len(exchanges), dtype=bool), np.full(len(exchanges), np.inf)
        if at:
            played = self.players[stance].play([one for one in exchanges if one is not None], latency_s)
            good[at], worst[at] = played.delivered, worst_shares(played)
        return good, worst


def worst_shares(played: Played) -> Array:
    """The largest share (e,) of a limit over each exchange's legs."""
    worst = np.zeros(len(played.first) - 1)
    np.maximum.at(worst, played.owner, played.ways.uses.max(axis=1))
    return worst
