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
LARGEST = {"tilt": 0.3, "contact offset": 0.5, "restitution": 0.5}  # rad, m, 1: looked for up to there
WAYS = tuple(
    (np.cos(angle), np.sin(angle)) for angle in np.arange(4) * np.pi / 2
)  # outward along the bearing, then around


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
    good = passes(court, point, stance, wrong)
    return float(good.mean()), *interval(int(good.sum()), len(good))


def interval(successes: int, count: int) -> tuple[float, float]:
    """Interval (95 %) of a share (E. B. Wilson, J. Am. Stat. Assoc. 22 (1927) 209)."""
    if count == 0:
        return 0.0, 1.0
    share, square = successes / count, QUANTILE**2
    middle = (share + square / (2 * count)) / (1 + square / count)
    half = QUANTILE * np.sqrt(share * (1 - share) / count + square / (4 * count**2)) / (1 + square / count)
    return max(0.0, float(middle - half)), min(1.0, float(middle + half))


def passes(court: Court, point: Point, stance: int, wrong: Sequence[Disturbance]) -> NDArray[np.bool_]:
    """Which disturbances (k,) a point passes: ball on the face, and returned from where it comes down."""
    made: list[Exchange | None] = []
    for one in wrong:
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
    kinds: dict[str, Callable[[float, tuple[float, float]], list[Disturbance]]] = {
        "tilt": lambda size, way: [Disturbance(tilt_rad=(size * way[0], size * way[1]))],
        "contact offset": lambda size, way: [Disturbance(place_m=(size * way[0], size * way[1]))],
        "restitution": lambda size, way: [Disturbance(restitution=size * (1 if sum(way) > 0 else -1))],
    }
    columns = [np.array([_delay(court, p, int(s)) for p, s in zip(points, stances, strict=True)])]
    for name, make in kinds.items():
        most = [
            _largest(court, point, int(stance), make, LARGEST[name])
            for point, stance in zip(points, stances, strict=True)
        ]
        columns.append(np.array(most))
    return Errors(*columns)


def _largest(
    court: Court,
    point: Point,
    stance: int,
    make: Callable[[float, tuple[float, float]], list[Disturbance]],
    most: float,
) -> float:
    turn = about_vertical(point.bearing_rad)[:2, :2]
    ways = [tuple((turn @ np.array(way)).tolist()) for way in WAYS]

    def holds(size: float) -> bool:
        return bool(passes(court, point, stance, [one for way in ways for one in make(size, way)]).all())

    return _bisected(holds, most)


def _delay(court: Court, point: Point, stance: int) -> float:
    made = court.exchanges([point], stance)
    stated = court.kit.rally.latency_s
    (exchange,) = made
    if exchange is None:
        return 0.0
    most = min(exchange.flights_s) - stated
    return _bisected(lambda more: bool(court.delivered(made, stance, stated + more)[0].all()), most)


def _bisected(holds: Callable[[float], bool], most: float) -> float:
    """The largest value up to `most` that holds, 0 always being taken to."""
    if holds(most):
        return most
    low, high = 0.0, most
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        low, high = (middle, high) if holds(middle) else (low, middle)
    return low
