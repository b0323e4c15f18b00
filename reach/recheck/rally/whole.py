"""An envelope decided anew from its files: every demonstrated exchange, every proof of a refusal, and the verdict."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.bounds import reach_item
from reach.recheck.arm.chain import Array
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.limits import motion_items
from reach.recheck.arm.trace import fine, quintic
from reach.recheck.ball import Flights, tops
from reach.recheck.demands import check_demands
from reach.recheck.rally.exchange import MOTIONS, Exchange, Exchanges, Knots
from reach.recheck.rally.refusals import (
    FACE_RAD,
    Asked,
    Leg,
    Speed,
    claims,
    mass_ratio,
    speed_item,
    time_item,
)
from reach.recheck.shares import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED, claimed, word_of
from reach.recheck.stored import BadFolder, Stored, largest
from reach.recheck.turns import between

POINTS = "points.npz"
DEMONSTRATED, PROVED, SEARCHED = "demonstrated", "proved", "searched"
REACH, DUTY = "reach", "duty"
EVERY = 10  # points between two lines of progress
BALL_M = 1e-4  # where a ball comes down after as much; 1e-5 m/s make 1e-5 m of an apex at 1 m
WINDOW_M_S = 1e-6  # a paddle that stands still for a strike is accepted with as much
NUMBERS = ("paddle_speed_m_s", "face_tilt_rad", "flight_s")


@dataclass(frozen=True, eq=False)
class Table:
    """The points, m of them, one row each."""

    point: Array
    centre: Array
    q: Array
    numbers: dict[str, Array]
    texts: dict[str, NDArray[np.str_]]
    postures: NDArray[np.int64]

    @staticmethod
    def of(stored: Stored, n: int) -> Table:
        """The table of a folder.

        Raises
        ------
        BadFolder
        """
        centre = stored.finite(POINTS, "centre", (None, 3))
        m = len(centre)
        point = [stored.finite(POINTS, name, (m,)) for name in ("apex_m", "offset_m", "bearing_rad")]
        texts = ("verdict", "basis", "limit")
        return Table(
            np.column_stack(point),
            centre,
            stored.array(POINTS, "q", (m, n)),
            {name: stored.array(POINTS, name, (m,)) for name in NUMBERS},
            {name: stored.array(POINTS, name, (m,), "U") for name in texts},
            stored.array(POINTS, "postures", (m,), "i"),
        )

    def word(self, name: str, row: int) -> str:
        """A text of a row."""
        return str(self.texts[name][row])


def items(stored: Stored, ground: Ground, progress: Callable[[str], None]) -> list[Item]:
    """Every point, one after the other, and the whole.

    Raises
    ------
    BadFolder
        Where what is stored can't be an envelope's.
    """
    check_demands(stored)
    n = len(ground.names)
    table = Table.of(stored, n)
    refused = claims(stored, len(table.point), n)
    moved = _rows(stored, len(table.point))
    words: list[str | None] = []
    with np.errstate(all="ignore"):
        found = [_points_item(stored, table)]
        exchanges = Exchanges(stored, ((apex, offset) for apex, offset, _ in table.point.tolist()))
        for row in range(len(table.point)):
            if row % EVERY == 0:
                progress(f"recheck: point {row + 1} of {len(table.point)}")
            one = _Point(stored, ground, table, row, exchanges.at(*table.point[row].tolist()))
            word, made = one.items(moved, refused.get(row))
            words.append(word)
            found += made
    return [*found, _whole(stored, words)]


def notes(stored: Stored) -> list[str]:
    """What rests on a search and can't be decided anew."""
    verdict = stored.array(POINTS, "verdict", (None,), "U")
    basis, limit = (stored.array(POINTS, name, verdict.shape, "U") for name in ("basis", "limit"))
    searched = (verdict == NOT_DELIVERABLE) & (basis == SEARCHED)
    away = int((searched & (limit == REACH)).sum())
    shown = int(searched.sum()) - away
    told = {
        f"{away} refused because a search found no posture for a strike, which is not decided anew": away,
        f"{shown} refused by speed or by time are proved in the postures stored, their changes to first order; that "
        "no other posture does better rests on a search": shown,
        "edges, largest offsets, other centres and errors are not decided anew": 1,
    }
    return [text for text, count in told.items() if count]


class _Point:
    """One point with what it asks for; `where` names it."""

    def __init__(self, stored: Stored, ground: Ground, table: Table, row: int, exchange: Exchange | None):
        self.stored, self.ground, self.table, self.row = stored, ground, table, row
        self.exchange, self.where = exchange, f"point {row + 1}"
        self.radius = stored.number("ball", "radius_m")

    def items(self, moved: set[int], claim: Speed | list[Leg] | None) -> tuple[str | None, list[Item]]:
        """Verdict of the point, None where it can't be told, and the items."""
        table, row, found = self.table, self.row, []
        word: str | None = UNDECIDED
        asked = self._asked(table.q[row])
        if asked is not None and not np.isnan(table.numbers["flight_s"][row]):
            found.append(self._numbers_item(asked))
        if row in moved:
            knots = Knots.of(self.stored, row, len(self.ground.names))
            found += self._motion(knots, asked)
            unknown = {*self.ground.unknown, DUTY}  # an exchange is no long run: duty never is known
            word = UNDECIDED if unknown & set(self.ground.accept["require"]) else DELIVERABLE
        elif claim is not None:
            proved, item = self._refusal(claim)
            found.append(item)
            word = None if proved is None else NOT_DELIVERABLE if proved else UNDECIDED
        elif table.word("verdict", row) == NOT_DELIVERABLE and table.word("limit", row) == REACH:
            word = NOT_DELIVERABLE
            if table.word("basis", row) == PROVED:
                found.append(self._reach())
        return word, [*found, self._verdict(word, row in moved)]

    def _asked(self, stance: Array) -> Asked | None:
        """What the point asks for from a stance (n,); None where that is not known."""
        ratio = mass_ratio(self.stored, self.ground, stance)
        if self.exchange is None or ratio is None:
            return None
        return Asked(self.exchange, self.table.centre[self.row], self.radius, ratio)

    def _why_not(self) -> str:
        return "the ball's flight was not found" if self.exchange is None else self.ground.why_no_engine

    def _numbers_item(self, asked: Asked) -> Item:
        """What the row says of the strike that returns the ball."""
        main, exchange, given = asked.exchange.main, asked.exchange, self.table.numbers
        tilt = between(exchange.normal[main : main + 1], np.array([[0.0, 0.0, 1.0]]))[0]
        speed, seconds = exchange.speeds(asked.mass_ratio)[main], exchange.flights_s[-1]
        own = {
            "paddle_speed_m_s": (speed, allowed.SPEED_M_S, "m/s"),
            "face_tilt_rad": (tilt, allowed.TURN_RAD, "rad"),
            "flight_s": (seconds, allowed.TIME_S, "s"),
        }
        checks = (
            Check(name, abs(float(value) - float(given[name][self.row])), most, unit)
            for name, (value, most, unit) in own.items()
        )
        return Item("point", self.where, tuple(checks))

    def _motion(self, knots: Knots, asked: Asked | None) -> list[Item]:
        period = self.ground.period_s
        rows = quintic(knots.t_s, knots.q, knots.v, knots.a, period)
        found = motion_items(self.ground, self.where, fine(*rows, period), duty=False)
        if asked is None:
            return [*found, Item("strikes", self.where, (), self._why_not())]
        if len(knots.strike_s) != len(asked.exchange.normal):
            counted = same("count", len(asked.exchange.normal), len(knots.strike_s))
            return [*found, Item("strikes", self.where, (counted,))]
        checks = (
            *_strike_checks(self.ground, knots, asked, self.table.point[self.row, 0]),
            *_window_checks(self.ground, knots.strike_s, rows, asked),
            Check("rest at both ends", knots.moving(), 0.0, "per s or s²"),
            Check("ready posture", knots.away(self.table.q[self.row]), allowed.JOINT, "rad or m"),
        )
        return [*found, Item("strikes", self.where, checks)]

    def _refusal(self, claim: Speed | list[Leg]) -> tuple[bool | None, Item]:
        """Whether a refusal is proved, None where that can't be told, and its item."""
        if isinstance(claim, Speed):
            asked = self._asked(claim.stance)
            if asked is None:
                return None, Item("speed bound", self.where, (), self._why_not())
            item, proved = speed_item(self.ground, self.where, asked, claim)
            return proved, item
        each = [self._asked(leg.stance) for leg in claim]
        known = [one for one in each if one is not None]
        if len(known) < len(each):
            return None, Item("time bound", self.where, (), self._why_not())
        stances = int(self.table.postures[self.row])
        item, proved = time_item(self.ground, self.where, known, claim, stances)
        return proved, item

    def _reach(self) -> Item:
        """The strike point that lies farthest from the first joint, which needs no stance."""
        centre, radius = self.table.centre[self.row], self.radius
        if self.exchange is None:
            return reach_item(self.ground, self.where, centre - [0.0, 0.0, radius])
        places = Asked(self.exchange, centre, radius, 0.0).places()
        first, _ = self.ground.chain.first()
        return reach_item(self.ground, self.where, places[np.argmax(np.linalg.norm(places - first, axis=1))])

    def _verdict(self, word: str | None, moved: bool) -> Item:
        if word is None:
            return Item("verdict", self.where, (), self._why_not())
        basis = self.table.word("basis", self.row)
        fits = {DELIVERABLE: (DEMONSTRATED,), NOT_DELIVERABLE: (PROVED, SEARCHED)}
        bases = fits.get(word, (DEMONSTRATED,) if moved else (SEARCHED, DEMONSTRATED, ""))
        checks = (
            same("verdict", word, self.table.word("verdict", self.row)),
            same("basis", basis if basis in bases else " or ".join(bases), basis),
        )
        return Item("verdict", self.where, checks)


def _numbers(stored: Stored, *keys: str) -> list[float]:
    """A list of finite numbers of cell.json."""
    found = stored.at(*keys)
    if not isinstance(found, list):
        raise stored.refused(keys, "is no list")
    return [stored.number(*keys, i) for i in range(len(found))]


def _rows(stored: Stored, points: int) -> set[int]:
    """Rows that have a motion."""
    if MOTIONS not in stored.arrays:
        return set()
    rows = [int(row) for row in stored.array(MOTIONS, "rows", (None,), "i")]
    if len(set(rows)) < len(rows) or not all(0 <= row < points for row in rows):
        raise BadFolder("rows", "does not name each motion once", f"{stored.folder}/evidence/{MOTIONS}")
    return set(rows)


def _strike_checks(ground: Ground, knots: Knots, asked: Asked, apex_m: float) -> list[Check]:
    """What the quintics do at their strikes, and what that makes of the ball until the next one."""
    exchange = asked.exchange
    seen = ground.chain.seen(*knots.at(knots.strike_s))
    normal, speeds = seen.axes[:, :, 2], exchange.speeds(asked.mass_ratio)[:, None]
    ball = seen.place + asked.radius_m * normal - asked.centre
    ratio, still = np.full(len(normal), asked.mass_ratio), np.zeros((len(normal), 3))
    after, _ = exchange.bounce.after(exchange.ball_in, still, normal, seen.linear, ratio)
    gone = np.diff(knots.strike_s)
    lands, _ = Flights.of(exchange.air, exchange.place[:-1], after[:-1], still[:-1], gone).ends()
    aims = exchange.place[1:].copy()
    aims[0] = 0.0  # the first strike is a steady one: what takes the ball aside comes between
    off = {
        "strike point": (seen.place - asked.places(), allowed.PLACE_M, "m"),
        "face": (between(normal, exchange.normal), FACE_RAD, "rad"),
        "offset and bearing": (ball - exchange.place, allowed.PLACE_M, "m"),
        "speed": (seen.linear - speeds * exchange.normal, allowed.STRIKE_M_S, "m/s"),
        "turning": (np.cross(seen.angular, exchange.normal), allowed.STRIKE_RAD_S, "rad/s"),
        "flight": (gone - exchange.flights_s, allowed.TIME_S, "s"),
        "ball, place": (lands - aims, BALL_M, "m"),
        "ball, apex": (tops(exchange.air, exchange.place, after, still) - apex_m, BALL_M, "m"),
    }
    return [Check(name, largest(values), most, unit) for name, (values, most, unit) in off.items()]


def _window_checks(
    ground: Ground, strike_s: Array, rows: tuple[Array, Array, Array], asked: Asked
) -> list[Check]:
    """How far speed, direction, tilt and place pass what is accepted, in the motion on the control grid."""
    accept, exchange, period = ground.accept, asked.exchange, ground.period_s
    half = float(accept["strike_window_s"]) / 2
    times = (strike_s[:, None] + [-half, 0.0, half]).ravel()
    k = np.clip(np.floor(times / period).astype(int), 0, len(rows[0]) - 1)
    ahead = (times - k * period)[:, None]
    q, v, a = (values[k] for values in rows)
    seen = ground.chain.seen(q + ahead * (v + ahead * a / 2), v + ahead * a)
    normal, speed = (np.repeat(x, 3, axis=0) for x in (exchange.normal, exchange.speeds(asked.mass_ratio)))
    error = seen.linear - speed[:, None] * normal
    along = np.einsum("ki,ki->k", error, normal)
    aside = np.linalg.norm(error - along[:, None] * normal, axis=1)
    off = np.linalg.norm(seen.place[1::3] - asked.places(), axis=1)
    share, lateral, tilt, place = (
        float(accept[f"strike_{key}"])
        for key in ("speed_error_share", "lateral_m_s", "tilt_error_rad", "position_m")
    )
    leaning = between(seen.axes[:, :, 2], normal)
    claimed = {
        "speed": (np.abs(along), share * np.abs(speed), WINDOW_M_S, "m/s"),
        "aside": (aside, lateral, allowed.SPEED_M_S, "m/s"),
        "tilt": (leaning, tilt, FACE_RAD, "rad"),
        "place": (off, place, allowed.PLACE_M, "m"),
    }
    return [
        Check(f"strike window, {name}", largest(np.maximum(size - most, 0.0)), rounding, unit)
        for name, (size, most, rounding, unit) in claimed.items()
    ]


def _points_item(stored: Stored, table: Table) -> Item:
    """Whether the points are those asked for: each apex with each offset and bearing, one bearing for none."""
    apexes, offsets, bearings = (
        _numbers(stored, "rally", name) for name in ("apexes_m", "offsets_m", "bearings_rad")
    )
    lateral = stored.number("rally", "lateral_m_s")
    own = [
        (apex, offset, bearing)
        for apex in apexes
        for offset in offsets
        for bearing in (bearings if offset > 0 or lateral else bearings[:1])
    ]
    if len(own) != len(table.point):
        return Item("as asked", "points", (same("points", len(own), len(table.point)),))
    centre = _numbers(stored, "rally", "centre_m")
    checks = (
        Check("apex, offset, bearing", largest(table.point - np.array(own).reshape(-1, 3)), 0.0, "m or rad"),
        Check("centre", largest(table.centre - centre) if len(centre) == 3 else np.nan, 0.0, "m"),
    )
    return Item("as asked", "points", checks)


def _whole(stored: Stored, words: list[str | None]) -> Item:
    """The verdict by the share of points, and the counts that the verdict's file gives."""
    if None in words:
        return Item("verdict", "", (), "the verdict of a point could not be told")
    total, done, lost = len(words), words.count(DELIVERABLE), words.count(NOT_DELIVERABLE)
    word = word_of(total, done, lost, stored.between(0.0, 1.0, "rally", "required_share"))
    figures = {
        "points": total,
        "deliverable": done,
        "not_deliverable": lost,
        "undecided": total - done - lost,
    }
    return Item("verdict", "", tuple(claimed(stored, word, figures)))
