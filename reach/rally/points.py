"""Points of an envelope judged: demonstrated, refused by a bound, or left open, with what bounds each."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, fields
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.rallies import Knots, RallyPoints
from reach.rally.court import Court, Point
from reach.rally.demonstrate import demonstrate
from reach.rally.exchange import Exchange
from reach.rally.fastest import possible, settled_s, shortest_s
from reach.rally.player import CYCLE, REACH, WINDOW, Played, Player
from reach.rally.quintic import States
from reach.strike.sides import upper
from reach.survey.inverse import DEEP_STARTS, from_library
from reach.survey.selfmotion import improved
from reach.survey.stops import stop_at_bound
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

PROVED, DEMONSTRATED, SEARCHED = "proved", "demonstrated", "searched"
NO_FLIGHT = "the ball has no flight from there over that apex"
TEXTS = ("verdict", "basis", "limit", "joint")
APART = ("reason", "motions")  # fields of RallyPoints that are no columns of numbers
WIDE = 12  # postures whose freedom is searched before a speed is refused


@dataclass(frozen=True, eq=False)
class Scored:
    """How stances do at points: delivered (k, m) and the largest share (k, m) of a limit, by the nodes."""

    delivered: NDArray[np.bool_]
    worst: Array

    @property
    def best(self) -> int:
        """The stance that delivers most points, of equals the one with most room."""
        room = -np.log(np.clip(self.worst, 1e-3, 1e3)).sum(axis=1)
        return int(np.lexsort((-room, -self.delivered.sum(axis=1)))[0])

    @staticmethod
    def joined(parts: Sequence[Scored]) -> Scored:
        """Chunks of points as one."""
        return Scored(
            np.concatenate([part.delivered for part in parts], axis=1),
            np.concatenate([part.worst for part in parts], axis=1),
        )


def score(court: Court, points: Sequence[Point]) -> Scored:
    """Play points from every stance of a court."""
    latency = court.kit.rally.latency_s
    pairs = [court.delivered(court.exchanges(points, k), k, latency) for k in range(len(court.stances))]
    empty = (len(court.stances), len(points))
    return Scored(
        np.array([good for good, _ in pairs], dtype=bool).reshape(empty),
        np.array([worst for _, worst in pairs]).reshape(empty),
    )


class Rows:
    """Rows of m points while they are being filled; columns have the names of RallyPoints."""

    def __init__(self, court: Court, points: Sequence[Point]):
        m, n = len(points), court.kit.setting.arm.n
        given = np.array(points).reshape(m, 3)
        at: dict[str, Any] = {name: given[:, k] for k, name in enumerate(Point._fields)}
        at |= {name: np.full(m, "", dtype=object) for name in TEXTS}
        at |= {
            item.name: np.full(m, np.nan) for item in fields(RallyPoints) if item.name not in (*at, *APART)
        }
        at |= {"centre": np.repeat(court.centre[None], m, axis=0), "q": np.full((m, n), np.nan)}
        at |= {"postures": np.full(m, len(court.stances)), "margin_free": np.zeros(m, dtype=bool)}
        at["verdict"][:] = UNDECIDED
        self.at = at
        self.reason = [""] * m
        self.motions: dict[int, Knots] = {}

    def set(self, row: int, reason: str = "", **values: Any) -> None:
        """Write some fields of one row."""
        for name, value in values.items():
            self.at[name][row] = value
        if reason:
            self.reason[row] = reason

    def points(self) -> RallyPoints:
        """The rows once they are filled."""
        columns = {name: np.array(x, dtype=str) if name in TEXTS else x for name, x in self.at.items()}
        return RallyPoints(reason=tuple(self.reason), motions=self.motions, **columns)


def judged(court: Court, points: Sequence[Point], main: int) -> RallyPoints:
    """Judge points at a court, played from the stance `main`, and where that does not deliver from the others."""
    rows = Rows(court, points)
    if not len(court.stances):
        for k in range(len(points)):
            _unreached(court, rows, k, court.point)
        return rows.points()
    scored = score(court, points)
    stance = np.where(scored.delivered.any(axis=0), scored.delivered.argmax(axis=0), main)
    stance[scored.delivered[main]] = main
    for k in np.unique(stance).tolist():
        at = np.flatnonzero(stance == k)
        _from_stance(court, [points[int(i)] for i in at], rows, at, k)
    _without_margins(court, points, rows, stance)
    return rows.points()


def _from_stance(
    court: Court, points: Sequence[Point], rows: Rows, at: NDArray[np.int64], stance: int
) -> None:
    """Judge points that are played from one stance; `at` are their rows."""
    player, latency = court.players[stance], court.kit.rally.latency_s
    made = court.exchanges(points, stance)
    flying = [k for k, one in enumerate(made) if one is not None]
    for k in set(range(len(made))) - set(flying):
        rows.set(int(at[k]), reason=NO_FLIGHT)
    exchanges = [one for one in made if one is not None]
    if not exchanges:
        return
    played = player.play(exchanges, latency)
    _timed(player, played, latency, rows, at[flying])
    bound = _speed_bounds(court, played, exchanges)
    for j, (k, exchange) in enumerate(zip(flying, exchanges, strict=True)):
        row, main = int(at[k]), exchange.strikes[exchange.main]
        tilt = float(np.arctan2(np.hypot(*main.normal[:2]), main.normal[2]))
        rows.set(row, paddle_speed_m_s=main.speed_m_s, face_tilt_rad=tilt, flight_s=exchange.flights_s[-1])
        rows.set(row, q=player.stance, speed_bound_m_s=bound[played.first[j] + exchange.main])
        limit, joint = tightest(player, played, j)
        rows.set(row, limit=limit, joint=joint)
        if played.delivered[j]:
            _shown(court, player, exchange, rows, row)
        else:
            _refused(court, points[k], exchange, played, j, bound, rows, row)


def _timed(player: Player, played: Played, latency_s: float, rows: Rows, at: NDArray[np.int64]) -> None:
    """The shortest cycles found, what is left of the flights, and the bounds on the other side."""
    cycles = player.cycles(latency_s)
    found, _ = cycles.shortest(*player.ends(cycles, played.q, played.v, played.leg))
    left = played.flight_s - latency_s
    found = np.where(played.ways.legal, np.minimum(found, left), found)
    least = settled_s(player.setting, *_impacts(played)).max(axis=1)
    unmet = ~(played.met[played.leg] & played.met[played.leg + 1])
    found[unmet], least[unmet] = np.nan, np.nan
    for j, row in enumerate(at.tolist()):
        mine = played.owner == j
        time = float(found[mine].max())
        if np.isfinite(time):
            rows.set(row, cycle_s=time, margin_s=float((left - found)[mine].min()))
        rows.set(row, time_bound_s=float(least[mine].max()))


def _impacts(played: Played) -> tuple[States, States]:
    """States (l, n) at the impacts where legs begin and end."""
    q, v, leg = played.q, played.v, played.leg
    return States.moving(q[leg], v[leg]), States.moving(q[leg + 1], v[leg + 1])


def _speed_bounds(court: Court, played: Played, exchanges: Sequence[Exchange]) -> Array:
    """Upper bounds (s,) on the paddle's speed at strikes in the postures played."""
    normal = np.array([strike.normal for one in exchanges for strike in one.strikes])
    return upper(court.kit.setting, played.q, normal).own(True)


def tightest(player: Player, played: Played, exchange: int) -> tuple[str, str]:
    """The limit and joint of which an exchange's legs use most; a strike that can't be made comes first."""
    strikes = slice(played.first[exchange], played.first[exchange + 1])
    if not played.met[strikes].all():
        return REACH, ""
    if not played.held[strikes].all():
        return WINDOW, ""
    uses = played.ways.uses[played.owner == exchange].max(axis=0)
    return player.gauge.columns[int(uses.argmax())] if np.isfinite(uses.max()) else (CYCLE, "")


def _shown(court: Court, player: Player, exchange: Exchange, rows: Rows, row: int) -> None:
    """Demonstrate a point that the nodes let pass."""
    shown = demonstrate(player, exchange, court.kit.rally.latency_s)
    if shown is None:
        rows.set(row, reason="no legal way from rest into the first strike, or from the last one to rest")
    elif shown.limit:
        of = f" of {shown.joint}" if shown.joint else ""
        rows.set(row, limit=shown.limit, joint=shown.joint)
        rows.set(row, reason=f"the motion found passes the {shown.limit}{of} when measured as a whole")
    else:
        rows.motions[row] = shown.knots
        if court.kit.unknown:
            rows.set(row, basis=DEMONSTRATED, reason=f"{', '.join(court.kit.unknown)} unknown")
        else:
            rows.set(row, verdict=DELIVERABLE, basis=DEMONSTRATED)


def _refused(
    court: Court,
    point: Point,
    exchange: Exchange,
    played: Played,
    j: int,
    bound: Array,
    rows: Rows,
    row: int,
) -> None:
    """Say of a point that is not delivered what refuses it, or what it fell short of."""
    strikes = range(int(played.first[j]), int(played.first[j + 1]))
    for strike, s in zip(exchange.strikes, strikes, strict=True):
        place = court.players[0].point(strike.ball, strike.normal)
        if not played.met[s] and not _reached(court, place, strike.normal):
            _unreached(court, rows, row, place)
            return
        if played.met[s] and strike.speed_m_s > bound[s]:
            best = _best_bound(court, place, strike.normal, strike.speed_m_s)
            if best is not None:
                limit, joint, speed, count = best
                text = f"{strike.speed_m_s:.3g} m/s asked, at most {speed:.3g} m/s in {count} postures"
                rows.set(row, verdict=NOT_DELIVERABLE, basis=SEARCHED, limit=limit, joint=joint, reason=text)
                rows.set(row, speed_bound_m_s=speed, postures=count)
                return
    joint, time_s, budget_s = _too_late(court, point)
    if joint:
        text = f"{joint} alone needs {1000 * time_s:.0f} ms from strike to strike, {1000 * budget_s:.0f} ms there are"
        rows.set(row, verdict=NOT_DELIVERABLE, basis=SEARCHED, limit=CYCLE, joint=joint, reason=text)
        return
    limit, of = rows.at["limit"][row], rows.at["joint"][row]
    of = f" of {of}" if of else ""
    rows.set(row, basis=SEARCHED, reason=f"no legal way found in time; the {limit}{of} is passed most")


def _too_late(court: Court, point: Point) -> tuple[str, float, float]:
    """The joint that no stance gets from strike to strike in time, the time that it needs and that there is, in s.

    "" where a stance may: within the flight less the latency, and in exactly the flight.
    """
    found = ("", np.inf, 0.0)
    latency, setting = court.kit.rally.latency_s, court.kit.setting
    for k, player in enumerate(court.players):
        (exchange,) = court.exchanges([point], k)
        if exchange is None:
            continue
        played = player.play([exchange], latency)
        begin, end = _impacts(played)
        least, flight = shortest_s(setting, begin, end), played.flight_s
        late = (least > (flight - latency)[:, None]) | ~possible(setting, begin, end, flight)
        late &= (played.met[played.leg] & played.met[played.leg + 1])[:, None]
        if not late.any():
            return "", 0.0, 0.0
        need = np.where(late, settled_s(setting, begin, end), -np.inf)
        leg, joint = np.unravel_index(int(need.argmax()), need.shape)
        if need[leg, joint] < found[1]:
            found = (setting.arm.names[joint], float(need[leg, joint]), float(flight[leg] - latency))
    return found


def _best_bound(
    court: Court, place: Array, normal: Array, speed_m_s: float
) -> tuple[str, str, float, int] | None:
    """Limit, joint, upper bound in m/s and count of the postures found for a strike; None where one may do."""
    kit = court.kit
    found, _ = from_library(kit.setting, kit.library, place[None], normal[None], deep=True)
    moved = improved(kit.setting, found, place[None], normal[None], normal[None], count=WIDE)
    q = np.concatenate([moved.found.q, found.q])
    if not len(q):
        return None
    above = upper(kit.setting, q, np.repeat(normal[None], len(q), axis=0))
    i = int(above.own(True).argmax())
    if above.own(True)[i] >= speed_m_s:
        return None
    stop = stop_at_bound(kit.setting, above, i, q[i])
    return stop.limit, stop.joint, float(above.own(True)[i]), int(moved.tried[0])


def _reached(court: Court, place: Array, normal: Array) -> bool:
    kit = court.kit
    if np.linalg.norm(place - kit.reach[0]) > kit.reach[1]:
        return False
    found, _ = from_library(kit.setting, kit.library, place[None], normal[None], deep=True)
    return bool(len(found.q))


def _unreached(court: Court, rows: Rows, row: int, place: Array) -> None:
    """A point whose strike at a place (3,) no posture reaches."""
    gap = float(np.linalg.norm(place - court.kit.reach[0])) - court.kit.reach[1]
    if gap > 0:
        basis, text = PROVED, f"{gap:.3f} m farther from the first joint than the links reach"
    else:
        basis, text = SEARCHED, f"no posture found from {DEEP_STARTS} starts"
    rows.set(row, verdict=NOT_DELIVERABLE, basis=basis, limit=REACH, joint="", reason=text)


def _without_margins(court: Court, points: Sequence[Point], rows: Rows, stance: NDArray[np.int64]) -> None:
    """Which points are deliverable with the margins at zero: those with them stay so."""
    free = rows.at["verdict"] == DELIVERABLE
    kit = court.kit
    left = np.flatnonzero(~free) if kit.bare is not kit.gauge and not kit.unknown else np.zeros(0, dtype=int)
    for k in np.unique(stance[left]).tolist():
        at = left[stance[left] == k]
        made = court.exchanges([points[int(i)] for i in at], k)
        flying = [j for j, one in enumerate(made) if one is not None]
        if flying:
            player = Player(kit.cell, kit.bare.setting, kit.bare, court.centre, court.stances[k])
            played = player.play([one for one in made if one is not None], kit.rally.latency_s)
            free[at[flying]] = played.delivered
    rows.at["margin_free"][:] = free
