"""One demonstrated exchange drawn from the side: the arm's joints, the face and the ball over time."""

from __future__ import annotations

import numpy as np

from reach.ball import Flight
from reach.cell import Array
from reach.evidence.rallies import Knots, RallyPoints, Shown
from reach.rally.court import Court, Point
from reach.rally.exchange import Exchange
from reach.rally.quintic import motion_of
from reach.verdict import DELIVERABLE

FRAMES = 61


def shown(court: Court, points: RallyPoints) -> Shown | None:
    """The demonstrated exchange with the largest offset, at the middle of the apexes that have it; None without any."""
    rows = np.array(sorted(points.motions), dtype=np.int64)
    rows = rows[points.verdict[rows] == DELIVERABLE] if len(rows) else rows
    if not len(rows):
        return None
    far = rows[points.offset_m[rows] == points.offset_m[rows].max()]
    row = int(far[np.argsort(points.apex_m[far], kind="stable")][len(far) // 2])
    stance = int(np.abs(court.stances - points.q[row]).max(axis=1).argmin())
    point = Point(float(points.apex_m[row]), float(points.offset_m[row]), float(points.bearing_rad[row]))
    (exchange,) = court.exchanges([point], stance)
    assert exchange is not None
    return _drawn(court, point, exchange, points.motions[row])


def _drawn(court: Court, point: Point, exchange: Exchange, knots: Knots) -> Shown:
    times = np.linspace(knots.strike_s[0], knots.strike_s[-1], FRAMES)
    motion = motion_of(knots, court.kit.setting.period_s)
    q, _, _ = motion.at(times)
    position, rotation, origins, _ = court.kit.setting.chain.placements(q)
    outline = np.concatenate([origins.transpose(1, 0, 2), position[:, None]], axis=1)
    ball = _ball(court, exchange, knots.strike_s, times)
    return Shown(*point, times, outline, rotation[:, :, 2], ball, knots.strike_s)


def _ball(court: Court, exchange: Exchange, strike_s: tuple[float, ...], times: Array) -> Array:
    ball = np.zeros((len(times), 3))
    air = court.ballistics[0].air
    for k, strike in enumerate(exchange.strikes[:-1]):
        during = (times >= strike_s[k]) & (times <= strike_s[k + 1])
        flight = Flight(strike_s[k], strike.ball, strike.ball_out, np.zeros(3), air)
        ball[during] = flight.at(times[during])[0]
    return np.asarray(ball + court.centre)
