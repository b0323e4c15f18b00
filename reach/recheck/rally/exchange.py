"""What a point asks of the paddle, the ball's flights and the strikes between them, and a motion by its knots.

Places are from the envelope's centre, in m, and those of the ball's own centre. Spin is left out, as it was where the
strikes were planned.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Iterable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from reach.recheck.ball import Air, Array, Bounce, Flights, launch, tops
from reach.recheck.stored import CELL, BadFolder, Stored, largest

AT_CENTRE_M = 1e-9  # an offset below it is none
ROUNDS = 12  # of Newton's method for a launch; five do
NUDGE = 1e-5  # of an unknown, for its slope
CLOSE = 1e-10  # m: a launch that misses by less has been found
HALVINGS = 100  # of an interval, until nothing is between its ends
MOST_BOUNCES = 1000
MOST_M = 1e4  # of an apex or an offset
MOTIONS = "motions.npz"
LONGEST_S, MOST_ROWS = 600.0, 500_000  # of a motion; exchanges last seconds


@dataclass(frozen=True, eq=False)
class Exchange:
    """Strikes in order, s of them: steady, where the ball comes down, as many back as allowed, stopped, and steady.

    Attributes
    ----------
    place : (s, 3) of the ball
    ball_in, ball_out : (s, 3) m/s
    normal : (s, 3) of the face
    flights_s : (s − 1,)
    air, bounce : what the ball flies through, and what ball and face do to each other
    """

    place: Array
    ball_in: Array
    ball_out: Array
    normal: Array
    flights_s: Array
    air: Air
    bounce: Bounce

    @property
    def main(self) -> int:
        """The strike that returns the ball."""
        return 1

    def speeds(self, mass_ratio: float) -> Array:
        """Speed (s,) of the paddle along the normals, in m/s, for a ratio of the ball's mass to the arm's."""
        push = np.einsum("si,si->s", self.ball_out - self.ball_in, self.normal) * (1 + mass_ratio)
        before = np.einsum("si,si->s", self.ball_in, self.normal)
        return np.asarray(before + np.array([approach(self.bounce, float(one)) for one in push]))

    def turned(self, bearing_rad: float) -> Exchange:
        """The same about the vertical by an angle."""
        cosine, sine = math.cos(bearing_rad), math.sin(bearing_rad)
        turn = np.array([[cosine, -sine, 0.0], [sine, cosine, 0.0], [0.0, 0.0, 1.0]]).T
        place, ball_in, ball_out, normal = (
            vectors @ turn for vectors in (self.place, self.ball_in, self.ball_out, self.normal)
        )
        return Exchange(place, ball_in, ball_out, normal, self.flights_s, self.air, self.bounce)


class Launch(NamedTuple):
    """A flight back to its height: velocity (3,) m/s at its start, seconds, velocity (3,) m/s at its end."""

    velocity: Array
    seconds: float
    landing: Array


class Exchanges:
    """The exchanges of points, with the offset along x until they are turned.

    Parameters
    ----------
    points : (apex, offset) in m

    Raises
    ------
    BadFolder
    """

    def __init__(self, stored: Stored, points: Iterable[tuple[float, float]]):
        self.air, self.bounce = Air.of(stored), Bounce.of(stored)
        self.lateral = np.array([stored.number("rally", "lateral_m_s"), 0.0, 0.0])
        self.bounces = int(stored.number("rally", "recover_within_bounces"))
        if not 1 <= self.bounces <= MOST_BOUNCES:
            raise BadFolder(
                "rally.recover_within_bounces", "is no number of bounces", f"{stored.folder}/{CELL}"
            )
        asked = sorted(set(points))
        if not all(0 < apex <= MOST_M and 0 <= offset <= MOST_M for apex, offset in asked):
            raise BadFolder(
                "rally.apexes_m", "or an offset is no height or distance", f"{stored.folder}/{CELL}"
            )
        flies = self.air.gravity[2] < 0 and not self.air.gravity[:2].any()
        ways = {(apex, way) for apex, offset in asked for way in (0.0, self._step(offset))}
        self._launches = launches(self.air, sorted(ways)) if flies else {}
        self._made = {point: self._along_x(*point) for point in asked} if flies else {}

    def at(self, apex_m: float, offset_m: float, bearing_rad: float) -> Exchange | None:
        """A point's exchange; None where the ball has no such flight."""
        made = self._made.get((apex_m, offset_m))
        return None if made is None else made.turned(bearing_rad)

    def _step(self, offset_m: float) -> float:
        return offset_m / self.bounces

    def _along_x(self, apex_m: float, offset_m: float) -> Exchange | None:
        """One exchange: of the way back each bounce makes an equal part."""
        up = self._launches.get((apex_m, 0.0))
        back = self._launches.get((apex_m, self._step(offset_m)))
        if up is None or back is None:
            return None
        out, rise_s, fallen = up
        homeward = np.array([-1.0, 1.0, 1.0])
        steady = (np.zeros(3), fallen, out)
        if offset_m <= AT_CENTRE_M and not self.lateral.any():
            return self._exchange([steady, steady], [rise_s])
        strikes, coming = [steady], fallen + self.lateral
        for left in range(self.bounces, 0, -1):
            place = np.array([offset_m * left / self.bounces, 0.0, 0.0])
            strikes.append((place, coming, homeward * back.velocity))
            coming = homeward * back.landing
        strikes += [(np.zeros(3), coming, out), steady]
        return self._exchange(strikes, [rise_s, *[back.seconds] * self.bounces, rise_s])

    def _exchange(self, strikes: list[tuple[Array, Array, Array]], flights_s: list[float]) -> Exchange | None:
        place, ball_in, ball_out = (np.array(column) for column in zip(*strikes, strict=True))
        normals = [face(self.bounce, before, after) for before, after in zip(ball_in, ball_out, strict=True)]
        known = [one for one in normals if one is not None]
        if len(known) < len(normals):
            return None
        return Exchange(place, ball_in, ball_out, np.array(known), np.array(flights_s), self.air, self.bounce)


def launches(air: Air, ways: list[tuple[float, float]]) -> dict[tuple[float, float], Launch]:
    """The flights over apexes to places aside along x, those that are found.

    Without drag in closed form. With drag the forward speed, the upward speed and the time are solved for by Newton's
    method on integrated flights, all at once.

    Parameters
    ----------
    ways : (apex, distance) in m, gravity straight down
    """
    guesses = np.zeros((len(ways), 3))
    for k, (apex, way) in enumerate(ways):
        made = launch(air, apex)
        if made is not None:
            guesses[k] = way / made[1], made[0][2], made[1]
    lifts, aims = np.array([apex for apex, _ in ways]), np.array([way for _, way in ways])
    both = np.array([*np.eye(3), *-np.eye(3), np.zeros(3)])[:, None]  # to each side in each unknown, and none
    for _ in range(ROUNDS):
        steps = NUDGE * np.maximum(np.abs(guesses), NUDGE)
        missed = _missed(air, guesses + steps * both, lifts, aims)
        slopes = ((missed[:3] - missed[3:6]) / (2 * steps.T[:, :, None])).transpose(1, 2, 0)
        lost = np.abs(missed[6]).max(axis=1)
        sound = np.isfinite(slopes).all(axis=(1, 2)) & (np.abs(np.linalg.det(slopes)) > 0) & (lost > CLOSE)
        if not sound.any():
            break
        guesses[sound] -= np.linalg.solve(slopes[sound], missed[6][sound][:, :, None])[:, :, 0]
    _, landed = _flown(air, guesses)
    return {
        key: Launch(np.array([one[0], 0.0, one[1]]), float(one[2]), end)
        for key, one, end, off in zip(ways, guesses, landed, lost, strict=True)
        if off <= CLOSE
    }


def _missed(air: Air, guesses: Array, lifts: Array, aims: Array) -> Array:
    """What flights (k, b, 3) of forward and upward speed and seconds miss: the apex, the distance, the height."""
    flat = guesses.reshape(-1, 3)
    velocity = np.column_stack([flat[:, 0], np.zeros(len(flat)), flat[:, 1]])
    places, _ = _flown(air, flat)
    high = tops(air, np.zeros_like(velocity), velocity, np.zeros_like(velocity))
    ends = np.column_stack([high, places[:, 0], places[:, 2]]).reshape(guesses.shape)
    return np.asarray(ends - np.column_stack([lifts, aims, np.zeros(len(lifts))]))


def _flown(air: Air, guesses: Array) -> tuple[Array, Array]:
    velocity = np.column_stack([guesses[:, 0], np.zeros(len(guesses)), guesses[:, 1]])
    still = np.zeros_like(velocity)
    return Flights.of(air, still, velocity, still, guesses[:, 2]).ends()


def approach(bounce: Bounce, push_m_s: float) -> float:
    """The greatest speed a at which ball and face meet with (1 + e(a)) a = push, in m/s; by halving.

    With a table of restitution the left side has a piece between each two rows, and beyond them grows by itself.
    """
    if len(bounce.at_m_s) == 1:
        return push_m_s / (1 + float(bounce.restitution[0]))

    def over(speed: float) -> float:
        return (1 + float(bounce.newton(np.array([speed]))[0])) * speed - push_m_s

    rows = [float(speed) for speed in bounce.at_m_s]
    low = max((speed for speed in rows if over(speed) <= 0), default=0.0)
    above = [speed for speed in rows if speed > low]
    high = above[0] if above else max(low, push_m_s)
    return _halved(over, low, high)


def face(bounce: Bounce, ball_in: Array, ball_out: Array) -> Array | None:
    """Normal (3,) of the face that makes one velocity of a ball into another; None where they are equal.

    Without friction it stands along the change. Friction pushes the ball against its slip, so the normal leans from
    the change to the side to which the ball goes along it, by at most the angle of friction; by halving.
    """
    change = ball_out - ball_in
    size = float(np.linalg.norm(change))
    if not size > 1e-9:  # m/s: nothing strikes this ball
        return None
    along = change / size
    aside = ball_in - (ball_in @ along) * along
    across = float(np.linalg.norm(aside))
    if bounce.friction <= 0 or across <= 1e-12 * float(np.linalg.norm(ball_in)):
        return np.asarray(along)
    aside = aside / across

    def over(lean_rad: float) -> float:
        """Sideways change asked for less the one that friction gives."""
        normal = math.cos(lean_rad) * along + math.sin(lean_rad) * aside
        speed = float(ball_in @ normal) + approach(bounce, float(change @ normal))
        zero = np.zeros((1, 3))
        after, _ = bounce.after(ball_in[None], zero, normal[None], speed * normal[None], np.zeros(1))
        given = after[0] - ball_in
        return float(change @ normal) * math.tan(lean_rad) - float(
            np.linalg.norm(given - (given @ normal) * normal)
        )

    lean = _halved(over, 0.0, math.atan(bounce.friction))
    return np.asarray(math.cos(lean) * along + math.sin(lean) * aside)


def _halved(over: Callable[[float], float], low: float, high: float) -> float:
    """Where a function that is not above 0 at `low` and not below 0 at `high` changes its sign."""
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        if middle in (low, high):
            break
        low, high = (middle, high) if over(middle) <= 0 else (low, middle)
    return (low + high) / 2


@dataclass(frozen=True, eq=False)
class Knots:
    """A motion by knots: t_s (k,), q, v, a (k, n); strike_s (s,) the instants of its strikes."""

    t_s: Array
    q: Array
    v: Array
    a: Array
    strike_s: Array

    @staticmethod
    def of(stored: Stored, row: int, n: int) -> Knots:
        """The knots of a row.

        Raises
        ------
        BadFolder
        """
        t_s = stored.finite(MOTIONS, f"t_s_{row}", (None,))
        q, v, a = (stored.finite(MOTIONS, f"{name}_{row}", (len(t_s), n)) for name in "qva")
        strikes = stored.finite(MOTIONS, f"strike_s_{row}", (None,))
        rises = len(t_s) > 1 and t_s[0] == 0 and (np.diff(t_s) > 0).all()
        inside = len(strikes) > 0 and (np.diff(strikes) > 0).all() and 0 <= strikes[0]
        period = stored.number("period_s")
        if not (rises and inside and strikes[-1] <= t_s[-1] <= min(LONGEST_S, MOST_ROWS * period)):
            place = f"{stored.folder}/evidence/{MOTIONS}"
            raise BadFolder(f"t_s_{row}", "or strike_s are no instants of a motion", place)
        return Knots(t_s, q, v, a, strikes)

    def moving(self) -> float:
        """Largest velocity or acceleration at both ends."""
        return largest([self.v[[0, -1]], self.a[[0, -1]]])

    def away(self, posture: Array) -> float:
        """Largest distance of a joint at both ends from a posture (n,)."""
        return largest(self.q[[0, -1]] - posture)

    def at(self, times: Array) -> tuple[Array, Array]:
        """Position and velocity (k, n) at times (k,): each quintic from the six equations of its ends."""
        q, v = np.empty((len(times), self.q.shape[1])), np.empty((len(times), self.q.shape[1]))
        for i, time in enumerate(times):
            k = int(np.clip(np.searchsorted(self.t_s, time, side="right") - 1, 0, len(self.t_s) - 2))
            h = self.t_s[k + 1] - self.t_s[k]
            rows = np.array([_powers(x, order) for x in (0.0, 1.0) for order in range(3)])
            ends = [
                part[j] * h**order for j in (k, k + 1) for order, part in enumerate((self.q, self.v, self.a))
            ]
            whole = np.linalg.solve(rows, np.array(ends))
            x = (time - self.t_s[k]) / h
            q[i], v[i] = _powers(x, 0) @ whole, _powers(x, 1) @ whole / h
        return q, v


def _powers(x: float, order: int) -> Array:
    """The powers 0 to 5 of a number, differentiated so often."""
    return np.array([math.perm(p, order) * x ** (p - order) if p >= order else 0.0 for p in range(6)])
