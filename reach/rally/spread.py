"""How much may be off: the share of cases within the stated spreads, and the largest error of each kind alone.

An error stands at the main strike, unknown to the arm until the ball leaves; the ball is then returned from wherever it
comes down.
"""

from __future__ import annotations

from collections.abc import Callable, Sequence
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.ball import Face, NoContact, NoFlight
from reach.cell import Array
from reach.rally.court import Court, Point
from reach.rally.exchange import Disturbance, Exchange, about_vertical

QUANTILE = 1.959964  # of the normal distribution, two-sided 95 %
HALVINGS = 7
AROUND = ((1.0, 0.0), (0.0, 1.0), (-1.0, 0.0), (0.0, -1.0))  # outward along the bearing, then around


class Kind(NamedTuple):
    """A kind of error: the most that is looked for, what makes one of a size and a way, and the ways it may go.

    Ways turn with a point's bearing where the error has a direction.
    """

    most: float
    make: Callable[[float, float, float], Disturbance]
    ways: tuple[tuple[float, float], ...] = AROUND
    turns: bool = True


KINDS = (
    Kind(0.3, lambda size, x, y: Disturbance(tilt_rad=(size * x, size * y))),  # rad
    Kind(0.5, lambda size, x, y: Disturbance(place_m=(size * x, size * y))),  # m
    Kind(0.5, lambda size, x, _: Disturbance(restitution=size * x), AROUND[::2], turns=False),
)


class Errors(NamedTuple):
    """Largest errors with which points (m,) still pass: s, rad, m, 1."""

    delay_s: Array
    tilt_rad: Array
    contact_offset_m: Array
    restitution: Array


def has_spread(court: Court) -> bool:
    """Whether any spread is stated."""
    rally, contact = court.kit.rally, court.kit.cell.contact
    assert contact is not None
    return max(rally.contact_offset_spread_m, rally.velocity_spread_m_s, contact.restitution_spread) > 0


def feasible(court: Court, point: Point, stance: int, rng: np.random.Generator) -> tuple[float, float, float]:
    """Share of the cases within the spreads that a point still passes, and its interval (95 %).

    Normal spreads with the stated standard deviations; the same draws for the same generator.
    """
    rally, contact = court.kit.rally, court.kit.cell.contact
    assert contact is not None
    draws = rng.normal(size=(rally.cases, 5))
    wrong = [
        Disturbance(
            restitution=contact.restitution_spread * e,
            place_m=(rally.contact_offset_spread_m * x, rally.contact_offset_spread_m * y),
            velocity_m_s=(rally.velocity_spread_m_s * vx, rally.velocity_spread_m_s * vy),
        )
        for e, x, y, vx, vy in draws.tolist()
    ]
    good = passes(court, [(point, one) for one in wrong], stance)
    return float(good.mean()), *interval(int(good.sum()), len(good))


def interval(successes: int, count: int) -> tuple[float, float]:
    """Interval (95 %) of a share (E. B. Wilson, J. Am. Stat. Assoc. 22 (1927) 209)."""
    if count == 0:
        return 0.0, 1.0
    share, square = successes / count, QUANTILE**2
    middle = (share + square / (2 * count)) / (1 + square / count)
    half = QUANTILE * np.sqrt(share * (1 - share) / count + square / (4 * count**2)) / (1 + square / count)
    return max(0.0, float(middle - half)), min(1.0, float(middle + half))


def passes(court: Court, wrong: Sequence[tuple[Point, Disturbance]], stance: int) -> NDArray[np.bool_]:
    """Which disturbed points (k,) pass: ball on the face, and returned from where it comes down."""
    made: list[Exchange | None] = []
    for point, one in wrong:
        try:
            made.append(court.ballistics[stance].disturbed(*point, one) if on_face(court, one) else None)
        except (NoFlight, NoContact):
            made.append(None)
    return court.delivered(made, stance, court.kit.rally.latency_s)[0]


def on_face(court: Court, wrong: Disturbance) -> bool:
    """Whether the ball still meets the face, the accepted error of place kept back."""
    face = Face.of(court.kit.cell.paddle)
    room = court.kit.cell.accept.strike_position_m
    x, y = wrong.place_m
    size = float(np.hypot(x, y))
    if face is None or size == 0.0:
        return True
    return face.half_width_m >= size + room


def largest_errors(court: Court, points: Sequence[Point], stances: NDArray[np.int64]) -> Errors:
    """The largest error of each kind alone with which points still pass, whichever way it goes; by bisection.

    An error of restitution may go either way, a tilt or an offset any of four ways.
    """
    delays = [_delay(court, point, int(stance)) for point, stance in zip(points, stances, strict=True)]
    return Errors(np.array(delays), *(_largest(court, points, stances, kind) for kind in KINDS))


def _largest(court: Court, points: Sequence[Point], stances: NDArray[np.int64], kind: Kind) -> Array:
    """The largest error (m,) of one kind, of all points at once."""
    low, high = np.zeros(len(points)), np.full(len(points), kind.most)
    held = _hold(court, points, stances, kind, high)
    low[held] = kind.most
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        held = _hold(court, points, stances, kind, middle)
        low, high = np.where(held, middle, low), np.where(held, high, middle)
    return low


def _hold(
    court: Court, points: Sequence[Point], stances: NDArray[np.int64], kind: Kind, size: Array
) -> NDArray[np.bool_]:
    """Which points (m,) pass an error of their size (m,) every way it may go."""
    good = np.zeros(len(points), dtype=bool)
    for stance in np.unique(stances).tolist():
        rows = np.flatnonzero(stances == stance)
        wrong = [
            (
                points[int(k)],
                kind.make(float(size[k]), *(_turned(points[int(k)], way) if kind.turns else way)),
            )
            for k in rows
            for way in kind.ways
        ]
        good[rows] = passes(court, wrong, stance).reshape(len(rows), len(kind.ways)).all(axis=1)
    return good


def _turned(point: Point, way: tuple[float, float]) -> tuple[float, float]:
    x, y = (about_vertical(point.bearing_rad)[:2, :2] @ np.array(way)).tolist()
    return x, y


def _delay(court: Court, point: Point, stance: int) -> float:
    """The largest further delay in s with which a point still passes."""
    (exchange,) = court.exchanges([point], stance)
    if exchange is None:
        return 0.0
    player, stated = court.players[stance], court.kit.rally.latency_s
    played = player.play([exchange], stated)
    known = player.cycles(stated)
    begin, end = player.ends(known, played.q, played.v, played.leg)
    stop_s = known.stop_s(begin)

    def holds(more: float) -> bool:
        ways = player.cycles(stated + more).ways(begin, end, played.flight_s, stop_s)
        return bool(ways.legal.all())

    low, high = 0.0, float(min(exchange.flights_s)) - stated
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        low, high = (middle, high) if holds(middle) else (low, middle)
    return low
