"""The ball again: flight under gravity, drag and lift, and impact on a face that moves.

Many flights and many impacts are worked out at once. A ball's spin is its radius times its angular velocity, in m/s.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Any

import numpy as np

from reach.recheck.stored import CELL, BadFolder, Stored

SHELL = 2 / 3  # moment of inertia of a thin hollow sphere over mass times radius squared
STEP_S = 1e-3  # of the integration, at most
TURN_SHARE = 0.01  # drag and lift change the velocity by no more than this share in a step
MAX_STEPS = 20_000  # of a flight
MAX_KNOTS = 20_000_000  # of all flights together: 1 GB
FASTEST_M_S = 1000.0  # of a ball that is followed; beyond, no step is short enough
LONGEST_S = 60.0  # of a flight that is followed
CLOSING = 8  # Newton steps to the top: from a step's start its error squares each time

Array = np.ndarray


def refused(where: str, what: str, stored: Stored) -> BadFolder:
    """The error for a value of cell.json that can't be."""
    return BadFolder(where, what, f"{stored.folder}/{CELL}")


@dataclass(frozen=True, eq=False)
class Air:
    """Acceleration g - k |v| v + l |v|² (w x v) / (|w| |v|) of a ball with angular velocity w; no lift without spin.

    Attributes
    ----------
    drag_per_m : k = rho A Cd / (2 m)
    lift_per_m : l = rho A Cl / (2 m)
    gravity : (3,) m/s², world axes
    """

    drag_per_m: float
    lift_per_m: float
    gravity: Array

    @staticmethod
    def of(stored: Stored) -> Air:
        """The air of a cell.json.

        Raises
        ------
        BadFolder
        """
        mass, radius, rho = (
            stored.between(0.0, 1e9, "ball", key) for key in ("mass_kg", "radius_m", "air_kg_m3")
        )
        if not (mass > 0 and radius > 0):
            raise refused("ball", "has no mass or no radius", stored)
        share = rho * np.pi * radius * radius / (2 * mass)
        gravity = np.array([stored.number("arm", "gravity_m_s2", i) for i in range(3)])
        drag, lift = (
            share * stored.between(0.0, 1e9, "ball", f"{what}_coefficient") for what in ("drag", "lift")
        )
        return Air(drag, lift, gravity)

    @property
    def still(self) -> bool:
        """Whether gravity alone acts."""
        return self.drag_per_m == 0 and self.lift_per_m == 0

    def pull(self, spin: Array) -> Array:
        """Matrices (b, 3, 3) in 1/m for spins (b, 3): times velocity and speed they are what the air does."""
        size = np.linalg.norm(spin, axis=1)
        x, y, z = self.lift_per_m * np.divide(spin.T, size, out=np.zeros_like(spin.T), where=size > 0)
        found = np.zeros((len(spin), 3, 3))
        found[:, 0, 1], found[:, 0, 2], found[:, 1, 2] = -z, y, -x
        return np.asarray(found - found.transpose(0, 2, 1) - self.drag_per_m * np.eye(3))

    def bend(self, velocity: Array, pull: Array) -> Array:
        """Acceleration (b, 3) of balls with velocity (b, 3), by `pull` (b, 3, 3)."""
        speed = np.sqrt(np.einsum("bi,bi->b", velocity, velocity))
        return np.asarray(self.gravity + speed[:, None] * (pull @ velocity[:, :, None])[:, :, 0])


@dataclass(frozen=True, eq=False)
class Flights:
    """b flights, each from its own start for its own time.

    Without air in closed form. Else the classical Runge-Kutta method of order 4 with a fixed step (W. Kutta, Z. Math.
    Phys. 46 (1901) 435, from memory), knots kept, cubic between them. At STEP_S a ping-pong ball's flight of a second
    is off by less than 1e-9 m and 1e-9 m/s: |v| v is not smooth where a ball rises straight to its top, and there
    the error falls with the cube of the step alone.

    Attributes
    ----------
    air : Air
    place, velocity, spin : (b, 3) m, m/s, m/s, at the start
    seconds : (b,)
    knots : (2, steps + 1, b, 3) places and velocities, evenly apart in each flight; None without air
    """

    air: Air
    place: Array
    velocity: Array
    spin: Array
    seconds: Array
    knots: Array | None

    @staticmethod
    def of(air: Air, place: Array, velocity: Array, spin: Array, seconds: Array) -> Flights:
        """Flights from their starts; nan where one lasts less than nothing or too long, or is too fast."""
        whole = (seconds >= 0) & (seconds <= LONGEST_S) & slow(velocity)
        lasts = np.where(whole, seconds, np.nan)
        if air.still:
            return Flights(air, place, velocity, spin, lasts, None)
        most = np.max(lasts, where=whole, initial=0.0)
        steps = int(np.ceil(most / step_of(air, velocity[whole], most))) + 1
        steps = max(1, min(steps, MAX_KNOTS // max(len(place), 1)))
        knots = np.empty((2, steps + 1, len(place), 3))
        knots[:, 0] = place, velocity
        h, pull = (lasts / steps)[:, None], air.pull(spin)
        with np.errstate(over="ignore", invalid="ignore"):
            for k in range(steps):
                knots[:, k + 1] = stepped(air, knots[0, k], knots[1, k], pull, h)
        return Flights(air, place, velocity, spin, lasts, knots)

    def ends(self) -> tuple[Array, Array]:
        """Places and velocities (b, 3) when their time is over."""
        if self.knots is not None:
            return self.knots[0, -1], self.knots[1, -1]
        t, g = self.seconds[:, None], self.air.gravity
        return self.place + self.velocity * t + g * t * t / 2, self.velocity + g * t

    def places(self, flight: Array, after_s: Array) -> Array:
        """Places (k, 3) of flights (k,) some seconds (k,) after their starts, within their time."""
        if self.knots is None:
            t = after_s[:, None]
            return np.asarray(self.place[flight] + self.velocity[flight] * t + self.air.gravity * t * t / 2)
        places, speeds = self.knots
        steps = len(places) - 1
        h = self.seconds[flight] / steps
        ahead = np.divide(after_s, h, out=np.zeros_like(h), where=h > 0)
        k = np.clip(np.nan_to_num(ahead), 0, steps - 1).astype(int)
        u, h = (ahead - k)[:, None], h[:, None]
        begin, gone = places[k, flight], places[k + 1, flight] - places[k, flight]
        bow = speeds[k, flight] * h - gone, gone - speeds[k + 1, flight] * h
        return np.asarray(begin + u * gone + u * (1 - u) * ((1 - u) * bow[0] + u * bow[1]))


def step_of(air: Air, velocity: Array, most_s: float) -> float:
    """Length of a step in s for flights that begin with velocities (b, 3) and last `most_s` at most."""
    fast = float(np.max(np.linalg.norm(velocity, axis=1), initial=0.0))
    rate = (abs(air.drag_per_m) + abs(air.lift_per_m)) * fast
    step = min(STEP_S, TURN_SHARE / rate) if rate > 0 else STEP_S
    return max(step, most_s / MAX_STEPS, 1e-12)


def slow(velocity: Array) -> Array:
    """Which velocities (b, 3) are of balls that can be followed."""
    return np.asarray(np.linalg.norm(velocity, axis=1) <= FASTEST_M_S)


def stepped(air: Air, place: Array, velocity: Array, pull: Array, h: Array) -> tuple[Array, Array]:
    """Places and velocities (b, 3) after one step of h (b, 1) seconds; acceleration hangs on velocity alone."""
    one = air.bend(velocity, pull)
    two = air.bend(velocity + h / 2 * one, pull)
    three = air.bend(velocity + h / 2 * two, pull)
    four = air.bend(velocity + h * three, pull)
    gone = h * (velocity + h / 6 * (one + two + three))
    return place + gone, velocity + h / 6 * (one + 2 * (two + three) + four)


def tops(air: Air, place: Array, velocity: Array, spin: Array) -> Array:
    """Heights (b,) in m of the first tops of flights; the start's of a ball that does not rise, nan where none is."""
    height = place[:, 2].copy()
    followed = slow(velocity)
    height[~followed], rising = np.nan, followed & (velocity[:, 2] > 0)
    down = -float(air.gravity[2])
    if air.still:
        rise = velocity[:, 2] ** 2 / (2 * down) if down > 0 else np.full(len(height), np.nan)
        return np.asarray(height + np.where(rising, rise, 0.0))
    left = np.flatnonzero(rising)
    height[left] = np.nan
    at, speed, pull = place[left], velocity[left], air.pull(spin[left])
    h = step_of(air, speed, 0.0)
    with np.errstate(over="ignore", invalid="ignore"):
        for _ in range(min(MAX_STEPS, int(LONGEST_S / h))):
            if not len(left):
                break
            next_at, next_speed = stepped(air, at, speed, pull, np.full((len(left), 1), h))
            over = ~(next_speed[:, 2] > 0)
            if over.any():
                height[left[over]] = _top(air, at[over], speed[over], pull[over])
                left, next_at, next_speed, pull = (rows[~over] for rows in (left, next_at, next_speed, pull))
            at, speed = next_at, next_speed
    return height


def _top(air: Air, place: Array, velocity: Array, pull: Array) -> Array:
    """Heights (b,) where balls, a step or less before it, stop to rise: Newton's method on one step's length."""
    h = np.zeros((len(place), 1))
    at, speed = place, velocity
    for _ in range(CLOSING):
        h = h - speed[:, 2:] / air.bend(speed, pull)[:, 2:]
        at, speed = stepped(air, place, velocity, pull, h)
    return np.asarray(at[:, 2])


def launch(air: Air, rise_m: float) -> tuple[Array, float] | None:
    """Velocity (3,) m/s of a ball without spin that rises so far and comes back, and how long it takes in s.

    None with drag and gravity that pulls sideways: that flight has no closed form.
    Straight up and down against drag, dv/dt = -g - k v² and then g - k v², by integration: v² = g/k (exp(2 k h) - 1),
    up for atan(v √(k/g))/√(k g), down for arcosh(exp(k h))/√(k g).
    """
    g, k = -float(air.gravity[2]), air.drag_per_m
    if not (g > 0 and rise_m > 0):
        return None
    if k == 0:
        up = float(np.sqrt(2 * rise_m / g))
        return np.array([-air.gravity[0] * up, -air.gravity[1] * up, g * up]), 2 * up
    if air.gravity[:2].any():
        return None
    speed, rate = float(np.sqrt(g / k * np.expm1(2 * k * rise_m))), float(np.sqrt(k * g))
    up, fall = np.arctan(speed * np.sqrt(k / g)) / rate, np.arccosh(np.exp(k * rise_m)) / rate
    return np.array([0.0, 0.0, speed]), float(up + fall)


@dataclass(frozen=True, eq=False)
class Bounce:
    """What ball and face do to each other.

    Attributes
    ----------
    at_m_s, restitution : (r,) a table over the speed of approach, held beyond its ends; one row where it is constant
    friction, tangential : Coulomb's coefficient; tangential restitution
    gives : whether the arm's effective mass counts
    """

    at_m_s: Array
    restitution: Array
    friction: float
    tangential: float
    gives: bool

    @staticmethod
    def of(stored: Stored) -> Bounce:
        """The contact of a cell.json.

        Raises
        ------
        BadFolder
        """
        place = "contact", "restitution_at"
        table: Any = stored.at(*place)
        rows = [[0.0, stored.between(0.0, 1.0, "contact", "restitution")]]
        if isinstance(table, list) and table:
            count = range(len(table))
            rows = [
                [stored.between(0.0, most, *place, k, i) for i, most in enumerate((1e9, 1.0))] for k in count
            ]
        elif table not in ([], None):
            raise refused("contact.restitution_at", "is no table", stored)
        at, values = np.array(rows).T
        if not (np.diff(at) > 0).all():
            raise refused("contact.restitution_at", "has speeds that do not grow", stored)
        friction = stored.between(0.0, 1e9, "contact", "friction")
        tangential = stored.between(-1.0, 1.0, "contact", "tangential_restitution")
        return Bounce(at, values, friction, tangential, stored.at("contact", "arm_gives") is True)

    def newton(self, approach: Array) -> Array:
        """Normal restitution (b,) at speeds of approach (b,) in m/s: straight between the rows."""
        gone = np.clip(approach[:, None] - self.at_m_s[:-1], 0.0, np.diff(self.at_m_s))
        slope = np.diff(self.restitution) / np.diff(self.at_m_s)
        return np.asarray(self.restitution[0] + gone @ slope)

    def after(
        self, velocity: Array, spin: Array, normal: Array, face: Array, mass_ratio: Array
    ) -> tuple[Array, Array]:
        """Velocities and spins (b, 3) of balls after impact; nan where ball and face do not come nearer.

        Along the normal Newton's restitution for two bodies. Across it the ball's lowest point, whose velocity over the
        face is the slip, is turned back by the tangential restitution (R. L. Garwin, Am. J. Phys. 37 (1969) 88),
        with no more impulse than friction gives (R. Cross, Am. J. Phys. 70 (2002) 1093).

        Parameters
        ----------
        velocity, spin : (b, 3) m/s, before
        normal : (b, 3) of the face, toward the ball
        face : (b, 3) m/s, velocity of the face where the ball meets it
        mass_ratio : (b,) ball's mass over the effective mass along the normal
        """
        toward = -np.einsum("bi,bi->b", velocity - face, normal)
        toward = np.where(toward > 0, toward, np.nan)
        along = (1 + self.newton(toward)) * toward / (1 + mass_ratio)
        lowest = velocity - np.cross(spin, normal)  # spin x (-normal), in m/s
        slip = lowest - face
        slip = slip - np.einsum("bi,bi->b", slip, normal)[:, None] * normal
        turned = -(1 + self.tangential) * slip  # its change: one part velocity, 1 / SHELL parts spin
        across = turned / (1 + 1 / SHELL)
        size, most = np.linalg.norm(across, axis=1), self.friction * along
        across = across * np.divide(most, size, out=np.ones_like(size), where=size > most)[:, None]
        return velocity + along[:, None] * normal + across, spin + np.cross(across, normal) / SHELL


@dataclass(frozen=True)
class Outline:
    """The face's outline about the strike point, along the face's x and y.

    Attributes
    ----------
    round : a disc; else a plate
    half_m : half its size along x and y; of a disc its radius twice
    """

    round: bool
    half_m: tuple[float, float]

    @staticmethod
    def of(stored: Stored) -> Outline:
        """The outline of a cell.json's paddle.

        Raises
        ------
        BadFolder
        """
        shape = stored.at("paddle", "shape")
        if shape == "disc":
            radius = stored.number("paddle", "radius_m")
            return Outline(True, (radius, radius))
        if shape == "plate":
            wide, high = (stored.number("paddle", "size_m", i) / 2 for i in (0, 1))
            return Outline(False, (wide, high))
        raise refused("paddle.shape", "is neither disc nor plate", stored)

    def past(self, on_face: Array) -> Array:
        """How far (k,) in m points (k, 2) of the face lie past the edge; negative within."""
        if self.round:
            return np.asarray(np.hypot(on_face[:, 0], on_face[:, 1]) - self.half_m[0])
        return np.asarray((np.abs(on_face) - self.half_m).max(axis=1))
