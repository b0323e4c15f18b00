"""Exchanges played by an arm from a stance: postures, joint velocities, and ways from strike to strike."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from itertools import pairwise

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Cell
from reach.rally.cycle import Cycles, Ways
from reach.rally.exchange import Exchange
from reach.rally.gauge import Gauge
from reach.rally.quintic import States
from reach.rally.stance import STILL_RAD_S, gains, postures, velocities
from reach.strike.setting import Setting

REACH, WINDOW, CYCLE = "reach", "strike window", "cycle time"


@dataclass(frozen=True, eq=False)
class Played:
    """Exchanges as played: s strikes, l legs, e exchanges.

    Attributes
    ----------
    first : (e + 1,) index of each exchange's first strike; exchange k has strikes first[k] to first[k + 1] − 1
    q, v : (s, n) ; met, held : (s,) whether a posture was found, and whether the strike window holds
    leg : (l,) index of each leg's first strike; owner : (l,) its exchange; flight_s : (l,)
    ways : Ways of the legs
    """

    first: NDArray[np.int64]
    q: Array
    v: Array
    met: NDArray[np.bool_]
    held: NDArray[np.bool_]
    leg: NDArray[np.int64]
    owner: NDArray[np.int64]
    flight_s: Array
    ways: Ways

    @property
    def delivered(self) -> NDArray[np.bool_]:
        """Which exchanges (e,) keep every limit, by the nodes."""
        good = np.ones(len(self.first) - 1, dtype=bool)
        strikes = np.repeat(np.arange(len(good)), np.diff(self.first))
        good[strikes[~(self.met & self.held)]] = False
        good[self.owner[~self.ways.legal]] = False
        return good


class Player:
    """Plays exchanges around one centre from one stance.

    Parameters
    ----------
    centre : (3,) of the ball at contact, m
    stance : (n,) posture of a level face at the centre, also the ready posture

    Attributes
    ----------
    gain : (n,) acceleration that each joint could have by itself there
    """

    def __init__(self, cell: Cell, setting: Setting, gauge: Gauge, centre: Array, stance: Array):
        assert cell.ball is not None
        self._cell = cell
        self.setting, self.gauge, self.centre, self.stance = setting, gauge, centre, stance
        self._radius, self._window = cell.ball.radius_m, cell.accept.strike_window_s
        self.gain = gains(setting, stance)

    def elsewhere(self, setting: Setting, stance: Array) -> Player:
        """The same by other limits, from another stance (n,)."""
        gauge = self.gauge if setting is self.setting else Gauge(setting)
        return Player(self._cell, setting, gauge, self.centre, stance)

    def cycles(self, latency_s: float) -> Cycles:
        """The ways between strikes at a latency."""
        return Cycles(self.gauge, self.stance, self._window, latency_s)

    def point(self, ball: Array, normal: Array) -> Array:
        """Strike points (…, 3) for balls (…, 3) from the centre and normals (…, 3)."""
        return np.asarray(self.centre + ball - self._radius * normal)

    def play(self, exchanges: Sequence[Exchange], latency_s: float) -> Played:
        """Play exchanges."""
        strikes = [strike for one in exchanges for strike in one.strikes]
        counts = [len(one.strikes) for one in exchanges]
        first = np.concatenate([[0], np.cumsum(counts)]).astype(np.int64)
        normal = np.array([strike.normal for strike in strikes]).reshape(-1, 3)
        ball = np.array([strike.ball for strike in strikes]).reshape(-1, 3)
        speed = np.array([strike.speed_m_s for strike in strikes])
        q, met = postures(self.setting, self.stance, self.point(ball, normal), normal, self.gain)
        v = velocities(self.setting, q, normal, speed, self.gain)
        held = self._held(q, v, normal, speed)
        leg = np.concatenate([np.arange(a, b - 1) for a, b in pairwise(first.tolist())])
        owner = np.repeat(np.arange(len(exchanges)), [count - 1 for count in counts])
        flight = np.array([time for one in exchanges for time in one.flights_s])
        cycles = self.cycles(latency_s)
        begin, end = self.ends(cycles, q, v, leg)
        return Played(first, q, v, met, held, leg, owner, flight, cycles.ways(begin, end, flight))

    def ends(self, cycles: Cycles, q: Array, v: Array, leg: NDArray[np.int64]) -> tuple[States, States]:
        """States where legs begin and end, of strikes (s, n) and legs from strike leg to the next."""
        return cycles.after(q[leg], v[leg]), cycles.before(q[leg + 1], v[leg + 1])

    def _held(self, q: Array, v: Array, normal: Array, speed: Array) -> NDArray[np.bool_]:
        """Whether speed, direction and tilt hold at both ends of the strike windows, and the paddle does not turn."""
        accept, half = self.setting.accept, self._window / 2
        good = np.ones(len(q), dtype=bool)
        for side in (-half, half):
            _, rotation, twist = self.setting.chain.twists(q + side * v, v)
            error = twist[:, :3] - speed[:, None] * normal
            along = np.einsum("mi,mi->m", error, normal)
            aside = np.linalg.norm(error - along[:, None] * normal, axis=1)
            turned = np.einsum("mi,mi->m", rotation[:, :, 2], normal)
            turning = np.linalg.norm(np.cross(twist[:, 3:], rotation[:, :, 2]), axis=1)
            good &= np.abs(along) <= accept.strike_speed_error_share * np.abs(speed) + 1e-9
            good &= turning <= STILL_RAD_S
            good &= (aside <= accept.strike_lateral_m_s) & (
                np.arccos(np.clip(turned, -1.0, 1.0)) <= accept.strike_tilt_error_rad
            )
        return good
