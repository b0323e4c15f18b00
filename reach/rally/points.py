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
from reach.rally.fastest import settled_s
from reach.rally.player import CYCLE, REACH, WINDOW, Played, Player
from reach.rally.quintic import States
from reach.rally.refused import DEMONSTRATED, SEARCHED, refused, unreached
from reach.strike.sides import upper
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

NO_FLIGHT = "the ball has no flight from there over that apex"
TEXTS = ("verdict", "basis", "limit", "joint", "bare")
APART = ("reason", "motions")  # fields of RallyPoints that are no columns of numbers


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
        at |= {"postures": np.full(m, len(court.stances)), "proof": np.full(m, None)}
        at["verdict"][:] = at["bare"][:] = UNDECIDED
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
            rows.set(k, verdict=NOT_DELIVERABLE, **unreached(court, court.point)._asdict())
        return rows.points()
    scored = score(court, points)
    stance = np.where(scored.delivered.any(axis=0), scored.delivered.argmax(axis=0), main)
    stance[scored.delivered[main]] = main
    for k in np.unique(stance).tolist():
        at = np.flatnonzero(stance == k)
        _from_stance(court, [points[int(i)] for i in at], rows, at, k)
    _tried_again(court, points, rows, scored, stance)
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
    normal = np.array([strike.normal for one in exchanges for strike in one.strikes])
    bound = upper(court.kit.setting, played.q, normal).free
    for j, (k, exchange) in enumerate(zip(flying, exchanges, strict=True)):
        row, main = int(at[k]), exchange.strikes[exchange.main]
        tilt = float(np.arctan2(np.hypot(*main.normal[:2]), main.normal[2]))
        rows.set(row, paddle_speed_m_s=main.speed_m_s, face_tilt_rad=tilt, flight_s=exchange.flights_s[-1])
        rows.set(row, q=player.stance, speed_bound_m_s=bound[played.first[j] + exchange.main])
        limit, joint = tightest(player, played, j)
        rows.set(row, limit=limit, joint=joint)
        if played.delivered[j]:
            _shown(court, player, exchange, rows, row)
            continue
        refusal = refused(court, court.kit.setting, points[k])
        if refusal is None:
            _left_open(rows, row)
        else:
            rows.set(row, verdict=NOT_DELIVERABLE, **refusal._asdict())


def _tried_again(
    court: Court, points: Sequence[Point], rows: Rows, scored: Scored, stance: NDArray[np.int64]
) -> None:
    """Points whose motion fails when it is measured as a whole, from the other stances that the nodes let pass."""
    failed = (rows.at["verdict"] == UNDECIDED) & scored.delivered[stance, np.arange(len(points))]
    for row in np.flatnonzero(failed & (rows.at["basis"] != DEMONSTRATED)).tolist():
        for k in np.flatnonzero(scored.delivered[:, row]).tolist():
            if k != stance[row] and rows.at["verdict"][row] == UNDECIDED:
                _from_stance(court, [points[row]], rows, np.array([row]), k)


def _timed(player: Player, played: Played, latency_s: float, rows: Rows, at: NDArray[np.int64]) -> None:
    """The shortest cycles found, what is left of the flights, and the bounds on the other side.

    A legal way is a cycle of the flight's length; one that waits for the sight leaves at least nothing.
    """
    cycles = player.cycles(latency_s)
    found, _ = cycles.shortest(*player.ends(cycles, played.q, played.v, played.leg))
    legal, flight = played.ways.legal, played.flight_s
    found = np.where(legal, np.minimum(found, flight), found)
    left = flight - latency_s - found
    left = np.where(legal, np.maximum(left, 0.0), left)
    least = settled_s(player.setting, *impacts(played)).max(axis=1)
    unmet = ~(played.met[played.leg] & played.met[played.leg + 1])
    found[unmet], least[unmet] = np.nan, np.nan
    for j, row in enumerate(at.tolist()):
        mine = played.owner == j
        time = float(found[mine].max())
        if np.isfinite(time):
            rows.set(row, cycle_s=time, margin_s=float(left[mine].min()))
        rows.set(row, time_bound_s=float(least[mine].max()))


def impacts(played: Played) -> tuple[States, States]:
    """States (l, n) at the impacts where legs begin and end."""
    q, v, leg = played.q, played.v, played.leg
    return States.moving(q[leg], v[leg]), States.moving(q[leg + 1], v[leg + 1])


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
            text = f"demonstrated by what is known; {', '.join(court.kit.unknown)} must be known too"
            rows.set(row, basis=DEMONSTRATED, limit=court.kit.unknown[0], joint="", reason=text)
        else:
            rows.set(row, verdict=DELIVERABLE, basis=DEMONSTRATED)


def _left_open(rows: Rows, row: int) -> None:
    """A point that nothing refuses: what its best way fell short of."""
    limit, joint = rows.at["limit"][row], rows.at["joint"][row]
    if limit == REACH:
        text = "a strike of it is not reached from the stances compared, but by other postures"
    elif limit == CYCLE:
        text = "no legal way found: there is hardly any time between the strikes"
    else:
        of = f" of {joint}" if joint else ""
        text = f"no legal way found in time; the {limit}{of} is passed most"
    rows.set(row, basis=SEARCHED, reason=text)


def _without_margins(court: Court, points: Sequence[Point], rows: Rows, stance: NDArray[np.int64]) -> None:
    """The verdicts with the margins at zero: points deliverable with them stay so, by the nodes; refusals are looked
    for anew."""
    bare, kit = rows.at["bare"], court.kit
    bare[:] = rows.at["verdict"]
    left = np.flatnonzero(bare != DELIVERABLE) if kit.bare is not kit.gauge else np.zeros(0, dtype=int)
    for k in np.unique(stance[left]).tolist():
        at = left[stance[left] == k]
        made = court.exchanges([points[int(i)] for i in at], k)
        flying = [j for j, one in enumerate(made) if one is not None]
        if flying:
            player = Player(kit.cell, kit.bare.setting, kit.bare, court.centre, court.stances[k])
            played = player.play([one for one in made if one is not None], kit.rally.latency_s)
            bare[at[flying]] = np.where(
                played.delivered & (not kit.unknown),
                DELIVERABLE,
                np.where(played.delivered, UNDECIDED, bare[at[flying]]),
            )
    for k in np.flatnonzero(bare == NOT_DELIVERABLE).tolist():
        if refused(court, kit.bare.setting, points[k]) is None:
            bare[k] = UNDECIDED
