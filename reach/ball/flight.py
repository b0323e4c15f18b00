"""Flight of the ball under gravity, drag and lift, and the launch that reaches a wanted apex and a wanted place."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields
from functools import cache, cached_property

import numpy as np
from numpy.typing import ArrayLike

from reach.ball.hodograph import arc
from reach.ball.path import LONGEST_S, ROUNDING_M, NoFlight, Path, State
from reach.cell import Array, Ball, Vec3

EARLY_S = 1e-9  # an instant before the start by less is rounding
CLOSE_M = 1e-9  # how near a launch must come to its apex and to its landing place
CLOSE_SHARE = 1e-10  # of the horizontal velocity at the apex: where the search for a launch stops


@dataclass(frozen=True)
class Air:
    """What acts on a flying ball: gravity, drag k |v| v and lift.

    The acceleration is g - k |v| v + l |v|² (w x v)/(|w| |v|), with w the ball's angular velocity; without spin there
    is no lift. The lift coefficient is constant: it knows the axis of the spin and not its rate. Measured
    coefficients go up and down with the rate of spin and almost vanish near Reynolds number 9e4 (T. Miyazaki et al.,
    "Lift crisis of a spinning table tennis ball", Eur. J. Phys. 38 (2017) 024001), so a flight with lift holds only
    near the spin and the speed that its coefficient was measured at.

    Attributes
    ----------
    drag_per_m : k = rho A Cd/(2 m)
    lift_per_m : l = rho A Cl/(2 m)
    gravity_m_s2 : world axes
    """

    drag_per_m: float
    lift_per_m: float
    gravity_m_s2: Vec3

    @classmethod
    def of(cls, ball: Ball, gravity_m_s2: Vec3) -> Air:
        """The air that a ball flies through."""
        share = ball.air_kg_m3 * math.pi * ball.radius_m**2 / (2 * ball.mass_kg)
        return cls(share * ball.drag_coefficient, share * ball.lift_coefficient, gravity_m_s2)

    @property
    def still(self) -> bool:
        """True without drag and lift."""
        return self.drag_per_m == 0 and self.lift_per_m == 0

    def still_for(self, spin_m_s: ArrayLike) -> bool:
        """True where gravity alone acts on a ball of this spin."""
        return self.drag_per_m == 0 and not any(self.lifting(spin_m_s))

    @property
    def down_m_s2(self) -> float:
        """Gravity along -z; NoFlight where it does not pull down."""
        down = -self.gravity_m_s2[2]
        if not down > 0:
            raise NoFlight(f"gravity does not pull down: {-down:g} m/s² along z, so no ball comes back")
        return down

    def lifting(self, spin_m_s: ArrayLike) -> Vec3:
        """The vector c of the lift |v| (c x v): the axis of the spin times lift_per_m, in 1/m."""
        if self.lift_per_m == 0:
            return 0.0, 0.0, 0.0
        x, y, z = np.asarray(spin_m_s, dtype=float).tolist()
        size = math.sqrt(x * x + y * y + z * z)
        share = self.lift_per_m / size if size > 0 else 0.0
        return share * x, share * y, share * z


@dataclass(frozen=True, eq=False)
class Flight:
    """A ball in flight from an instant on; its spin stays as it is.

    Attributes
    ----------
    start_s : when the flight begins
    position, velocity : (3,) m, (3,) m/s, of the ball's centre then
    spin_m_s : (3,) radius times angular velocity
    air : Air
    """

    start_s: float
    position: Array
    velocity: Array
    spin_m_s: Array
    air: Air

    def at(self, t_s: ArrayLike) -> tuple[Array, Array]:
        """Positions and velocities at given instants.

        Parameters
        ----------
        t_s : (k,) s, none before the start

        Returns
        -------
        position, velocity : (k, 3) m, (k, 3) m/s
        """
        times = np.asarray(t_s, dtype=float)
        if self._path is not None:
            states = np.array([self.one(t) for t in times.tolist()]).reshape(len(times), 6)
            return states[:, :3], states[:, 3:]
        self._after(float(times.min(initial=self.start_s)))
        after = (times - self.start_s)[:, None]
        gravity = np.array(self.air.gravity_m_s2)
        return self.position + after * (self.velocity + after * gravity / 2), self.velocity + after * gravity

    def one(self, t_s: float) -> State:
        """The same at one instant: x, y, z in m, then their rates in m/s."""
        after = self._after(t_s)
        if self._path is not None:
            return self._path.at(after)
        x, y, z, vx, vy, vz = self._start
        gx, gy, gz = self.air.gravity_m_s2
        half = after / 2
        return (
            x + after * (vx + half * gx),
            y + after * (vy + half * gy),
            z + after * (vz + half * gz),
            vx + after * gx,
            vy + after * gy,
            vz + after * gz,
        )

    def apex(self) -> tuple[float, float]:
        """Instant in s and height in m of the first top; the start of a ball that does not rise."""
        down = self.air.down_m_s2
        _, _, z, _, _, vz = self._start
        if vz <= 0:
            return self.start_s, z
        if self._path is None:
            return self.start_s + vz / down, z + vz * vz / (2 * down)
        after = self._path.top()
        return self.start_s + after, self._path.at(after)[2]

    def down_to(self, z: float) -> float | None:
        """First instant in s at which the ball comes down through a height; None where it does not in LONGEST_S."""
        down = self.air.down_m_s2
        if self._path is not None:
            after = self._path.down_to(z)
            return None if after is None else self.start_s + after
        _, _, z0, _, _, vz = self._start
        above = z0 - z
        if above < 0 and vz <= 0:
            return None
        root = vz * vz + 2 * down * above
        if root < -2 * down * ROUNDING_M:
            return None
        fall = math.sqrt(max(0.0, root))
        after = (vz + fall) / down if vz > 0 else 2 * above / (fall - vz) if above > 0 else 0.0
        return self.start_s + after if after <= LONGEST_S else None

    def __getstate__(self) -> dict[str, object]:
        """The fields alone, for another process; what was integrated is made anew there."""
        return {field.name: getattr(self, field.name) for field in fields(self)}

    def _after(self, t_s: float) -> float:
        after = t_s - self.start_s
        if after < -EARLY_S:
            raise NoFlight(f"the flight begins at {self.start_s:g} s, so there is no ball at {t_s:g} s")
        return after

    @cached_property
    def _start(self) -> State:
        x, y, z = np.asarray(self.position, dtype=float).tolist()
        vx, vy, vz = np.asarray(self.velocity, dtype=float).tolist()
        return x, y, z, vx, vy, vz

    @cached_property
    def _path(self) -> Path | None:
        if self.air.still_for(self.spin_m_s):
            return None
        lift = self.air.lifting(self.spin_m_s)
        return Path(self._start, self.air.drag_per_m, lift, self.air.gravity_m_s2)


@dataclass(frozen=True, eq=False)
class Launch:
    """A flight by its ends: velocity (3,) m/s at the start, seconds of flight, velocity (3,) m/s where it lands."""

    velocity: Array
    flight_s: float
    landing_velocity: Array


def launch(
    air: Air, start: ArrayLike, land: ArrayLike, apex_z: float, spin_m_s: ArrayLike = (0.0, 0.0, 0.0)
) -> Launch:
    """The velocity with which a ball rises from one place to an apex and comes down at another.

    With drag alone and gravity straight down the flight lies in a plane and is had from its hodograph, `arc`.
    Otherwise it is followed from its apex both ways, forward to the landing height and back to the
    height of the start. That leaves two unknowns, the horizontal velocity at the apex, for the way that the
    ball makes along x and y; they are solved for by Powell's hybrid method from the answer without lift.

    Parameters
    ----------
    start, land : (3,) m, of the ball's centre
    apex_z : m, at or above both
    spin_m_s : (3,) radius times angular velocity

    Raises
    ------
    NoFlight
        The apex lies below an end, the flight would take no time, or no launch is found.
    """
    down = air.down_m_s2
    (x0, y0, z0), (x1, y1, z1) = (np.asarray(place, dtype=float).tolist() for place in (start, land))
    rise, drop = apex_z - z0, apex_z - z1
    if rise < 0 or drop < 0:
        raise NoFlight(f"the apex at {apex_z:g} m lies below an end of the flight, {z0:g} m or {z1:g} m")
    up, fall_s = math.sqrt(2 * rise / down), math.sqrt(2 * drop / down)
    flight_s = up + fall_s
    if flight_s == 0:
        raise NoFlight("start, apex and landing are at one height, so there is no time to fly")
    gx, gy, _ = air.gravity_m_s2
    vx = (x1 - x0) / flight_s - gx * flight_s / 2
    vy = (y1 - y0) / flight_s - gy * flight_s / 2
    if air.still or air.still_for(spin_m_s):
        velocity = np.array((vx, vy, down * up))
        landing = np.array((vx + gx * flight_s, vy + gy * flight_s, -down * fall_s))
        return Launch(velocity, flight_s, landing)
    guess = np.array((vx + gx * up, vy + gy * up))
    if air.drag_per_m > 0 and gx == gy == 0:
        way = math.hypot(x1 - x0, y1 - y0)
        found = arc(air.drag_per_m, down, rise, drop, way)
        if found is not None:
            along = np.array(((x1 - x0) / way, (y1 - y0) / way, 0.0)) if way > 0 else np.zeros(3)
            if not any(air.lifting(spin_m_s)):
                (vx, vz), (wx, wz) = found.start_m_s, found.landing_m_s
                return Launch(vx * along + (0, 0, vz), found.flight_s, wx * along + (0, 0, wz))
            guess = found.apex_m_s * along[:2]
    ends = np.array((x0, y0, z0)), np.array((x1, y1, z1))
    spin = np.asarray(spin_m_s, dtype=float)
    return _launch(air, ends, apex_z, spin, guess, flight_s)


def _launch(
    air: Air, ends: tuple[Array, Array], apex_z: float, spin: Array, guess: Array, flight_s: float
) -> Launch:
    """The launch with drag or lift; `guess` (2,) m/s is the horizontal velocity at the apex without air."""
    from scipy.optimize import root

    start, land = ends

    @cache
    def legs(vx: float, vy: float) -> tuple[Array, float]:
        """States where the flight begins and ends (2, 6), x and y from the apex, and the seconds between."""
        k, c = air.drag_per_m, air.lifting(spin)
        before = Path((0.0, 0.0, apex_z, -vx, -vy, 0.0), -k, (-c[0], -c[1], -c[2]), air.gravity_m_s2)
        after = Path((0.0, 0.0, apex_z, vx, vy, 0.0), k, c, air.gravity_m_s2)
        up, down = before.down_to(float(start[2])), after.down_to(float(land[2]))
        if up is None or down is None:
            raise NoFlight(f"the ball does not come down from {apex_z:g} m")
        return np.array((before.at(up), after.at(down))), up + down

    def missed(across: Array) -> Array:
        (begun, ended), _ = legs(*across.tolist())
        return np.asarray(ended[:2] - begun[:2] - (land - start)[:2])

    slope = flight_s * np.eye(2)
    found = root(missed, guess, jac=lambda _: slope, method="hybr", options={"xtol": CLOSE_SHARE})
    (begun, ended), seconds = legs(*found.x.tolist())
    made = Launch(0.0 - begun[3:], seconds, ended[3:])
    flight = Flight(0.0, start, made.velocity, spin, air)
    top, end = flight.apex()[1], np.array(flight.one(seconds)[:3])
    miss = max(abs(top - apex_z), float(np.linalg.norm(end - land)))
    if not miss <= CLOSE_M:
        raise NoFlight(f"no launch was found that rises to {apex_z:g} m and lands there: off by {miss:g} m")
    return made


def fall(air: Air, apex_z: float, land: ArrayLike) -> Array:
    """Velocity (3,) m/s at which a ball without spin that falls from rest at a height comes straight down onto a place.

    Closed form with quadratic drag: v² = (g/k)(1 - exp(-2 k h)).

    Raises
    ------
    NoFlight
        The height is below the place, or gravity pulls sideways.
    """
    down = air.down_m_s2
    if any(air.gravity_m_s2[:2]):
        raise NoFlight("gravity pulls sideways, so a ball that starts from rest does not fall straight down")
    height = apex_z - float(np.asarray(land, dtype=float)[2])
    if height < 0:
        raise NoFlight(f"the apex at {apex_z:g} m lies below the landing place by {-height:g} m")
    k = air.drag_per_m
    square = 2 * down * height if k == 0 else -down / k * math.expm1(-2 * k * height)
    return np.array((0.0, 0.0, -math.sqrt(square)))
