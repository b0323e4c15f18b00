"""What refuses a point of an envelope: out of reach, too fast, or too little time between its strikes."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np

from reach.cell import Array
from reach.evidence.rallies import LegProof, Proof, SpeedProof, TimeProof
from reach.rally.attainable import Due, impossible_between, most_speed
from reach.rally.court import Court, Point
from reach.rally.exchange import Exchange, Strike
from reach.rally.fastest import possible, settled_s
from reach.rally.player import CYCLE, REACH
from reach.rally.quintic import States
from reach.rally.stance import postures
from reach.strike.setting import Setting
from reach.strike.sides import upper
from reach.survey.inverse import DEEP_STARTS, from_library
from reach.survey.selfmotion import improved
from reach.survey.stops import stop_at_bound

PROVED, DEMONSTRATED, SEARCHED = "proved", "demonstrated", "searched"
WIDE = 12  # postures whose freedom is searched before a speed is refused
SINGULAR_M_S = 1e-6  # a bound below it is that of a singular posture, not of a joint's speed
SINGULARITY = "singularity"


class Refusal(NamedTuple):
    """Why a point is not deliverable, in the fields of its row; `proof` where one product decides."""

    basis: str
    limit: str
    joint: str
    reason: str
    proof: Proof | None = None


def refused(court: Court, setting: Setting, point: Point) -> Refusal | None:
    """What refuses a point in all postures compared, whatever [accept] allows; None where nothing does.

    Parameters
    ----------
    setting : with the limits to refuse by
    """
    (exchange,) = court.exchanges([point], 0)
    if exchange is None:
        return None
    seen: set[int] = set()
    for k, strike in enumerate(exchange.strikes):
        if id(strike) in seen:
            continue
        seen.add(id(strike))
        place = court.players[0].point(strike.ball, strike.normal)
        found = _too_far(court, setting, place, strike.normal) or _too_fast(court, setting, place, strike, k)
        if found is not None:
            return found
    return _too_late(court, setting, point)


def unreached(court: Court, place: Array) -> Refusal:
    """A strike at a place (3,) that no posture reaches."""
    gap = float(np.linalg.norm(place - court.kit.reach[0])) - court.kit.reach[1]
    if gap > 0:
        return Refusal(PROVED, REACH, "", f"{gap:.3f} m farther from the first joint than the links reach")
    return Refusal(SEARCHED, REACH, "", f"no posture found from {DEEP_STARTS} starts")


def _too_far(court: Court, setting: Setting, place: Array, normal: Array) -> Refusal | None:
    """Refused where no stance comes there, nor any other posture."""
    for player in court.players:
        if postures(setting, player.stance, place[None], normal[None], player.gain)[1][0]:
            return None
    near = np.linalg.norm(place - court.kit.reach[0]) <= court.kit.reach[1]
    if near and len(from_library(setting, court.kit.starts, place[None], normal[None], deep=True)[0].q):
        return None
    return unreached(court, place)


def _too_fast(court: Court, setting: Setting, place: Array, strike: Strike, number: int) -> Refusal | None:
    """Refused where no posture found has the speed, less what is accepted, by joint velocities alone."""
    normal = strike.normal
    need = strike.speed_m_s * (1 - setting.accept.strike_speed_error_share)
    for player in court.players:
        q, met = postures(setting, player.stance, place[None], normal[None], player.gain)
        if met[0] and most_speed(setting, q[0], normal).speed_m_s >= need:
            return None
    found, _ = from_library(setting, court.kit.starts, place[None], normal[None], deep=True)
    if not len(found.q):
        return None
    moved = improved(setting, found, place[None], normal[None], normal[None], count=WIDE)
    q = np.concatenate([moved.found.q, found.q])
    above = upper(setting, q, np.repeat(normal[None], len(q), axis=0))
    most = [most_speed(setting, one, normal) for one in q]
    i = int(np.argmax([one.speed_m_s for one in most]))
    speed, count = most[i].speed_m_s, int(moved.tried[0])
    if not max(speed, most[i].bound_m_s) < need:
        return None
    text = f"{strike.speed_m_s:.3g} m/s asked, at most {speed:.3g} m/s in {count} postures"
    proof = SpeedProof(number, court.stances[0], q[i], normal, most[i].dual, most[i].bound_m_s, need)
    if speed < SINGULAR_M_S:
        return Refusal(SEARCHED, SINGULARITY, "", text, proof)
    stop = stop_at_bound(setting, above, i, q[i])
    return Refusal(SEARCHED, stop.limit, stop.joint, text, proof)


def _too_late(court: Court, setting: Setting, point: Point) -> Refusal | None:
    """Refused where from no stance every joint gets from strike to strike in the flight."""
    found: tuple[str, float, float] | None = None
    proofs = []
    for k, stance in enumerate(court.stances):
        (exchange,) = court.exchanges([point], k)
        if exchange is None:
            continue
        late = _late(court, setting, stance, exchange)
        if late is None:
            return None
        proofs.append(late[3])
        if found is None or late[1] < found[1]:
            found = late[:3]
    if found is None:
        return None
    joint, time_s, flight_s = found
    times = f"{1000 * time_s:.0f} ms from strike to strike, the flight lasts {1000 * flight_s:.0f} ms"
    text = f"{joint} alone needs {times}"
    return Refusal(SEARCHED, CYCLE, joint, text, TimeProof(tuple(proofs)))


def _late(
    court: Court, setting: Setting, stance: Array, exchange: Exchange
) -> tuple[str, float, float, LegProof] | None:
    """The joint that comes latest from a stance (n,), its time and the flight's in s, and what proves that the leg
    can't be done; None where none need be late."""
    player = court.players[0].elsewhere(setting, stance)
    played = player.play([exchange], 0.0)
    q, v, leg = played.q, played.v, played.leg
    begin, end = States.moving(q[leg], v[leg]), States.moving(q[leg + 1], v[leg + 1])
    met = played.met[leg] & played.met[leg + 1]
    late = ~possible(setting, begin, end, played.flight_s) & met[:, None]
    need = np.where(late, settled_s(setting, begin, end), -np.inf)
    for row in np.argsort(-need.max(axis=1), kind="stable").tolist():
        if not late[row].any():
            break
        strikes = exchange.strikes[row], exchange.strikes[row + 1]
        due = [Due(q[leg[row] + i], one.normal, one.speed_m_s) for i, one in enumerate(strikes)]
        flight = float(played.flight_s[row])
        proof = impossible_between(setting, due[0], due[1], flight, row, stance)
        if proof is not None:
            joint = int(need[row].argmax())
            return setting.arm.names[joint], float(need[row, joint]), flight, proof
    return None
