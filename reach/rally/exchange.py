"""Strikes from ballistics: what a ball's flights ask of the paddle, one strike after the other.

Places are from the centre, the ball's at contact; a strike point lies one ball radius below the ball along the face's
normal. The ball is taken to have no spin when it comes down.
"""

from __future__ import annotations

from dataclasses import dataclass, replace
from functools import cache

import numpy as np

from reach.ball import Air, Flight, NoContact, NoFlight, fall, impact, launch, strike_for
from reach.cell import Array, Cell, Contact

AT_CENTRE_M = 1e-9  # an offset below it is none
STEADY = 2  # strikes of an exchange that nothing disturbs


@dataclass(frozen=True, eq=False)
class Strike:
    """One strike: ball (3,) from the centre, unit normal (3,), paddle speed along it, ball_in and ball_out (3,)."""

    ball: Array
    normal: Array
    speed_m_s: float
    ball_in: Array
    ball_out: Array

    def turned(self, turn: Array) -> Strike:
        """The strike turned about the vertical through the centre by a rotation (3, 3)."""
        vectors = (turn @ x for x in (self.ball, self.normal, self.ball_in, self.ball_out))
        ball, normal, ball_in, ball_out = vectors
        return Strike(ball, normal, self.speed_m_s, ball_in, ball_out)


@dataclass(frozen=True, eq=False)
class Exchange:
    """Strikes in their order, and the flights (one fewer) between them in s.

    The ball leaves the first strike at the centre and comes down somewhere; strike `main` is the one there, or at the
    centre where nothing was disturbed. The last strike is at the centre.
    """

    strikes: tuple[Strike, ...]
    flights_s: tuple[float, ...]
    main: int = 1


@dataclass(frozen=True)
class Disturbance:
    """What goes wrong at the main strike, unknown to whoever plans it.

    restitution : added to the contact's
    tilt_rad : (x, y) added to the face normal's horizontal parts
    place_m : (x, y) of the ball from where it is thought to be
    velocity_m_s : (x, y) of the ball from what it is thought to be
    """

    restitution: float = 0.0
    tilt_rad: tuple[float, float] = (0.0, 0.0)
    place_m: tuple[float, float] = (0.0, 0.0)
    velocity_m_s: tuple[float, float] = (0.0, 0.0)


class Ballistics:
    """Makes exchanges for one cell.

    Parameters
    ----------
    cell : with ball and contact
    bounces : strikes within which a ball is to be back at the centre
    lateral_m_s : outward along the bearing, of a ball that comes down off the centre
    mass_ratio : of the ball to the arm's effective mass, 0 where the paddle does not give
    """

    def __init__(self, cell: Cell, bounces: int, mass_ratio: float = 0.0, lateral_m_s: float = 0.0):
        assert cell.ball is not None and cell.contact is not None
        self.air = Air.of(cell.ball, cell.arm.gravity_m_s2)
        self.contact, self.bounces, self.mass_ratio = cell.contact, bounces, mass_ratio
        self.lateral = np.array([lateral_m_s, 0.0, 0.0])
        self._along_x = cache(self._returned)

    def exchange(self, apex_m: float, offset_m: float, bearing_rad: float) -> Exchange:
        """A ball that leaves the centre for an apex, comes down off the centre, and is returned to it.

        Raises
        ------
        NoFlight, NoContact
            Where no flight or no strike does that.
        """
        plain = self._along_x(apex_m, offset_m)
        if len(plain.strikes) == STEADY:
            return plain
        turn = about_vertical(bearing_rad)
        return replace(plain, strikes=tuple(strike.turned(turn) for strike in plain.strikes))

    def steady(self, apex_m: float) -> Exchange:
        """A ball kept up at the centre: two strikes alike."""
        centre = np.zeros(3)
        strike, flight_s = self.strike(centre, centre, fall(self.air, apex_m, centre), apex_m)
        return Exchange((strike,) * STEADY, (flight_s,))

    def disturbed(
        self, apex_m: float, offset_m: float, bearing_rad: float, wrong: Disturbance
    ) -> Exchange | None:
        """The same with a disturbance at the main strike, and the ball returned from wherever it then comes down.

        None where it never comes down through the centre's height again, or meets no face.
        """
        planned = self.exchange(apex_m, offset_m, bearing_rad)
        strike = planned.strikes[planned.main]
        normal = strike.normal + np.array([*wrong.tilt_rad, 0.0])
        normal = normal / np.linalg.norm(normal)
        start = strike.ball + np.array([*wrong.place_m, 0.0])
        coming = strike.ball_in + np.array([*wrong.velocity_m_s, 0.0])
        contact = with_restitution(self.contact, wrong.restitution)
        try:
            leaving, _ = impact(
                coming, normal, strike.speed_m_s * strike.normal, contact, mass_ratio=self.mass_ratio
            )
            flight = Flight(0.0, start, leaving, np.zeros(3), self.air)
            down_s = flight.down_to(0.0) if leaving[2] > 0 else None
            if down_s is None:
                return None
            (place,), (velocity,) = flight.at(np.array([down_s]))
            place[2] = 0.0
            strikes, flights = self._return(place, velocity, apex_m)
        except (NoContact, NoFlight):
            return None
        before = planned.strikes[: planned.main + 1]
        return Exchange(
            (*before, *strikes), (*planned.flights_s[: planned.main], down_s, *flights), len(before)
        )

    def _returned(self, apex_m: float, offset_m: float) -> Exchange:
        """The undisturbed exchange with the offset along +x."""
        steady = self.steady(apex_m)
        if offset_m <= AT_CENTRE_M and not self.lateral.any():
            return steady
        place = np.array([offset_m, 0.0, 0.0])
        strikes, flights = self._return(place, fall(self.air, apex_m, place) + self.lateral, apex_m)
        return Exchange((steady.strikes[0], *strikes), (*steady.flights_s, *flights))

    def _return(self, place: Array, coming: Array, apex_m: float) -> tuple[list[Strike], list[float]]:
        """Strikes from a place (3,) back to the centre, the one that stops the ball there, and the steady one after."""
        strikes, flights = [], []
        for left in range(self.bounces - 1, -1, -1):
            target = place * left / (left + 1)
            strike, flight_s, coming = self._sent(place, target, coming, apex_m)
            strikes.append(strike)
            flights.append(flight_s)
            place = target
        strike, flight_s, coming = self._sent(place, place, coming, apex_m)
        steady, _, _ = self._sent(place, place, coming, apex_m)
        return [*strikes, strike, steady], [*flights, flight_s]

    def strike(self, place: Array, target: Array, coming: Array, apex_m: float) -> tuple[Strike, float]:
        """The strike that sends a ball coming in at a place (3,) to a target (3,) over an apex, and the flight's s."""
        strike, flight_s, _ = self._sent(place, target, coming, apex_m)
        return strike, flight_s

    def _sent(self, place: Array, target: Array, coming: Array, apex_m: float) -> tuple[Strike, float, Array]:
        sent = launch(self.air, place, target, apex_m)
        normal, speed = strike_for(coming, sent.velocity, self.contact, self.mass_ratio)
        return Strike(place, normal, speed, coming, sent.velocity), sent.flight_s, sent.landing_velocity


def about_vertical(bearing_rad: float) -> Array:
    """Rotation (3, 3) about world z."""
    cosine, sine = np.cos(bearing_rad), np.sin(bearing_rad)
    return np.array([[cosine, -sine, 0.0], [sine, cosine, 0.0], [0.0, 0.0, 1.0]])


def with_restitution(contact: Contact, added: float) -> Contact:
    """The contact with its restitution off by so much, kept within 0 and 1."""
    if added == 0.0:
        return contact
    moved = tuple((speed, float(np.clip(e + added, 0.0, 1.0))) for speed, e in contact.restitution_at)
    return replace(
        contact, restitution=float(np.clip(contact.restitution + added, 0.0, 1.0)), restitution_at=moved
    )
