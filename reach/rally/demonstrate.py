"""A whole exchange as one joint motion, rest to rest, re-checked by `measure`: what "demonstrated" rests on."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.evidence.measure import Measured, measure
from reach.evidence.motion import Motion
from reach.evidence.rallies import Knots
from reach.rally.cycle import Cycles
from reach.rally.exchange import Exchange
from reach.rally.player import WINDOW, Played, Player
from reach.rally.quintic import States, motion_of
from reach.strike.stroke import broken

SAME_S = 1e-9  # knots closer than this are one


@dataclass(frozen=True, eq=False)
class Demonstration:
    """A whole exchange.

    Attributes
    ----------
    knots, motion, measured : how it goes
    limit, joint : what it breaks, "" where it keeps everything
    """

    knots: Knots
    motion: Motion
    measured: Measured
    limit: str
    joint: str


def demonstrate(player: Player, exchange: Exchange, latency_s: float) -> Demonstration | None:
    """The exchange from rest in the ready posture back to rest there; None where there is no legal way.

    What the measure says of it counts, not what the nodes said.
    """
    played = player.play([exchange], latency_s)
    cycles = player.cycles(latency_s)
    if not played.delivered[0]:
        return None
    first, last = played.q[:1], played.q[-1:]
    start_s = float(cycles.start_s(cycles.before(first, played.v[:1]))[0])
    stop_s = float(cycles.stop_s(cycles.after(last, played.v[-1:]))[0])
    if not np.isfinite(start_s + stop_s):
        return None
    knots = _knots(cycles, played, start_s, stop_s)
    setting = player.setting
    motion = motion_of(knots, setting.period_s)
    measured = measure(setting.arm, setting.chain, setting.limits, motion)
    uses = [use for use in measured.uses if broken(use)]
    if uses:
        return Demonstration(knots, motion, measured, uses[0].limit, uses[0].joint or "")
    limit = "" if _strikes_hold(player, exchange, knots, motion) else WINDOW
    return Demonstration(knots, motion, measured, limit, "")


def _knots(cycles: Cycles, played: Played, start_s: float, stop_s: float) -> Knots:
    """Knots of an exchange that is delivered."""
    before, after = cycles.before(played.q, played.v), cycles.after(played.q, played.v)
    rest, half, ways = States.at_rest(cycles.ready[None]), cycles.half, played.ways
    known = ways.turn_s
    middle = cycles.turn(after.take(slice(None, -1)), ways.stop_s, known)
    times, states = [0.0], [rest]
    strike = start_s + half
    strikes = [strike]

    def add(t_s: float, state: States) -> None:
        if t_s > times[-1] + SAME_S:
            times.append(t_s)
            states.append(state)

    for k, flight in enumerate(played.flight_s.tolist()):
        row = slice(k, k + 1)
        add(strike - half, before.take(row))
        add(strike + half, after.take(row))
        due = strike + flight
        if ways.rest[k]:
            add(strike + half + ways.stop_s[k], rest)
            add(due - half - ways.start_s[k], rest)
        elif known[k] > 0:
            add(strike + half + known[k], middle.take(row))
        strike = due
        strikes.append(strike)
    end = slice(len(played.q) - 1, len(played.q))
    add(strike - half, before.take(end))
    add(strike + half, after.take(end))
    add(strike + half + stop_s, rest)
    q, v, a = (np.concatenate([getattr(state, name) for state in states]) for name in "qva")
    return Knots(np.array(times), q, v, a, tuple(strikes))


def _strikes_hold(player: Player, exchange: Exchange, knots: Knots, motion: Motion) -> bool:
    """Whether speed, direction, place and tilt of every strike hold over its window, in the motion itself."""
    accept, half = player.setting.accept, player.setting.accept.strike_window_s / 2
    for strike, at in zip(exchange.strikes, knots.strike_s, strict=True):
        q, v, _ = motion.at(np.array([at - half, at, at + half]))
        position, rotation, twist = player.setting.chain.twists(q, v)
        error = twist[:, :3] - strike.speed_m_s * strike.normal
        along = error @ strike.normal
        aside = np.linalg.norm(error - along[:, None] * strike.normal, axis=1)
        tilt = np.arccos(np.clip(rotation[:, :, 2] @ strike.normal, -1.0, 1.0))
        off = np.linalg.norm(position[1] - player.point(strike.ball, strike.normal))
        kept = (
            (np.abs(along) <= accept.strike_speed_error_share * abs(strike.speed_m_s) + 1e-6).all()
            and (aside <= accept.strike_lateral_m_s).all()
            and (tilt <= accept.strike_tilt_error_rad).all()
            and off <= accept.strike_position_m
        )
        if not kept:
            return False
    return True
