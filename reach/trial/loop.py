"""The closed loop: ball, sensor, law and paddle, one control period after the other, as commands for a roll."""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Any

import numpy as np

from reach.arm import Arm, State
from reach.ball import Face, Flight, NoContact, first_contact, struck
from reach.cell import Array, Cell
from reach.evidence.trials import Contacts, Outcome, Trace
from reach.follow.commands import Commands
from reach.strike.impact import effective_mass
from reach.trial.laws import LawFault, Seen, asked
from reach.trial.starts import BallState, Eye

BELOW_M = 1e-6  # into the face's plane: less is rounding of a contact
LOOK_M = 1e-3  # a gap below it is looked into for a contact in the period just gone
PATH_STEPS = 256  # control periods of a flight that are worked out at once
CONTACTS_A_PERIOD = 5  # more, and the ball lies on the paddle
DEAD_SHARE = 0.03  # of the wanted apex: a ball that rises no higher after a contact has died
AWAY_TIMES = 3.0  # the wanted apex: a ball that rises higher has run away
TRACE_EVERY = 4  # control periods
SAMPLES = 4  # a period, in the search for a contact


class GoneBack(Exception):
    """A step was found bad after the ball had gone on; the trial is to be made again, every step checked at once."""


@dataclass(frozen=True, eq=False)
class Loss:
    """How a trial ended: outcome and sentence.

    needed : (2,) m/s, the velocity aside with which the paddle would have come to a missed ball, zero for no miss
    """

    outcome: Outcome
    text: str
    needed: Array = field(default_factory=lambda: np.zeros(2))


class Loop(Commands):
    """One trial's ball and law.

    Parameters
    ----------
    law : of the protocol of `laws.base.Law`
    ball : flight that the ball starts with
    centre : (3,) of the ball at contact ; apex_m : wanted
    bounces : after which the trial has been held
    longest_s : of the trial, whatever happens
    """

    def __init__(
        self,
        cell: Cell,
        arm: Arm,
        law: Any,
        eye: Eye,
        ball: Flight,
        centre: Array,
        apex_m: float,
        bounces: int,
        longest_s: float,
    ):
        assert cell.ball is not None and cell.contact is not None
        face = Face.of(cell.paddle)
        assert face is not None
        self.begin_s, self._dt = 0.0, cell.period_s
        self.steps = int(np.ceil(longest_s / self._dt))
        self._arm, self._law, self._eye, self._face = arm, law, eye, face
        self._contact, self._radius = cell.contact, cell.ball.radius_m
        self._ball_mass = cell.ball.mass_kg if cell.contact.arm_gives else 0.0
        self._air, self._centre, self._apex_m, self._bounces = ball.air, centre, apex_m, bounces
        self._before: tuple[Array, Array] | None = None
        self._left_from: Array | None = None  # strike point at the last contact
        self.loss: Loss | None = None
        self.contacts: list[tuple[float, ...]] = []
        self._trace: list[tuple[float, ...]] = []
        self.last_contact_s = 0.0
        self._fly(ball, 0)

    def target(self, k: int, q: Array, v: Array, state: State | None) -> Array:
        """The law's twist (6,) for period k; what the ball did in the period before comes first."""
        if state is None:
            point, rotation, jacobian = self._arm.jacobian(q)
        else:
            (point, rotation), jacobian = self._arm.placement(), state.jacobian
        paddle = point.tolist()
        normal = rotation[:, 2].tolist()
        if self._left_from is None:
            self._left_from = point.copy()
        ball = self._ball_at(k)
        x, y, z = ball[0] - paddle[0], ball[1] - paddle[1], ball[2] - paddle[2]
        if x * normal[0] + y * normal[1] + z * normal[2] - self._radius < LOOK_M:
            self._look(k, q, v)
            ball = self._ball_at(k)
            if self.loss is None:
                self._watch_edge(np.array(ball), point, rotation)
        if k % TRACE_EVERY == 0:
            self._trace.append((k * self._dt, *ball[:3], *paddle))
        self._before = (q.copy(), v.copy())
        seen_s, sight = self._eye.sees(k * self._dt, ball)
        twist = jacobian.dot(v).tolist()
        seen = Seen(
            k * self._dt,
            sight[:3],
            sight[3:],
            k * self._dt - seen_s,
            tuple(paddle),
            tuple(normal),
            tuple(twist[:3]),
            tuple(twist[3:]),
            len(self.contacts),
        )
        try:
            return np.array(asked(self._law, seen))
        except LawFault as fault:
            self.loss = Loss("law failed", f"the law failed at {k * self._dt:.3f} s: {fault.text}")
            return np.zeros(6)

    def over(self, k: int, q: Array, v: Array) -> bool:
        """Whether the trial has ended."""
        return self.loss is not None

    def back_to(self, k: int) -> None:
        """The ball can't go back."""
        raise GoneBack

    def found(self) -> Contacts:
        """The contacts made."""
        table = np.array(self.contacts).reshape(-1, 20)
        return Contacts(
            t_s=table[:, 0],
            ball=table[:, 1:4],
            face=table[:, 4:6],
            ball_in=table[:, 6:9],
            ball_out=table[:, 9:12],
            spin_out=table[:, 12:15],
            paddle_m_s=table[:, 15],
            tilt_rad=table[:, 16],
            tilt_bearing_rad=table[:, 17],
            apex_m=table[:, 18],
            offset_m=table[:, 19],
        )

    def trace(self) -> Trace:
        """Ball and strike point over time."""
        table = np.array(self._trace).reshape(-1, 7)
        return Trace(table[:, 0], table[:, 1:4], table[:, 4:7])

    def _fly(self, ball: Flight, k: int) -> None:
        """The ball is on a flight from before row k on."""
        self._flight, self._first = ball, k
        self._path: list[BallState] = []

    def _ball_at(self, k: int) -> BallState:
        """The ball's position and velocity at row k."""
        while k - self._first >= len(self._path):
            begin = self._first + len(self._path)
            times = self._dt * np.arange(begin, begin + PATH_STEPS)
            self._path += map(tuple, np.hstack(self._flight.at(times)).tolist())
        return self._path[k - self._first]

    def _look(self, k: int, q: Array, v: Array) -> None:
        """Contacts in the period before row k, each at its instant."""
        if self._before is None:
            return
        q0, v0 = self._before
        begin = end = (k - 1) * self._dt
        end += self._dt
        bend = (v - v0) / self._dt

        def joints(t_s: float) -> Array:
            since = t_s - (k - 1) * self._dt
            return np.asarray(q0 + v0 * since + bend * (since * since / 2))

        def gap(t_s: float) -> float:
            point, rotation = self._arm.pose(joints(t_s))
            x, y, z = self._flight.one(t_s)[:3]
            n = rotation[:, 2]
            return float((x - point[0]) * n[0] + (y - point[1]) * n[1] + (z - point[2]) * n[2] - self._radius)

        made = len(self.contacts)
        begin = max(begin, self.last_contact_s)
        for _ in range(CONTACTS_A_PERIOD):
            at = first_contact(gap, begin, end, self._dt / SAMPLES)
            if at is None or self.loss is not None:
                return
            self._meet(at, joints(at), v0 + bend * (at - (k - 1) * self._dt), k)
            begin = at
        if len(self.contacts) == made + CONTACTS_A_PERIOD:
            self._die(k * self._dt)

    def _meet(self, t_s: float, q: Array, v: Array, k: int) -> None:
        """Ball and face's plane meet at an instant, joints at (q, v); past the edge that is no contact."""
        point, rotation, jacobian = self._arm.jacobian(q)
        state = self._flight.one(t_s)
        ball, velocity = np.array(state[:3]), np.array(state[3:])
        normal, twist = rotation[:, 2], jacobian @ v
        on_face = (ball - self._radius * normal - point) @ rotation[:, :2]
        if self._face.past(*on_face.tolist()) > 0:
            return
        ratio = 0.0
        if self._ball_mass:
            ratio = self._ball_mass / effective_mass(self._arm.inertia(q), normal @ jacobian[:3])
        spin = self._flight.spin_m_s
        try:
            hit = struck(ball, velocity, spin, point, rotation, twist, self._contact, self._radius, ratio)
        except NoContact:
            return
        self._fly(Flight(t_s, ball, hit.ball_out, hit.spin_out, self._air), k)
        self.last_contact_s, self._left_from = t_s, point.copy()
        apex = self._flight.apex()[1] - float(self._centre[2])
        arm = ball - self._radius * normal - point
        along = float((twist[:3] + np.cross(twist[3:], arm)) @ normal)
        tilt = float(np.arctan2(np.hypot(normal[0], normal[1]), normal[2]))
        bearing = float(np.arctan2(normal[1], normal[0]))
        offset = float(np.hypot(*(ball - self._centre)[:2]))
        numbers = (t_s, *ball, *hit.contact_point_face, *velocity, *hit.ball_out, *hit.spin_out)
        self.contacts.append((*map(float, numbers), along, tilt, bearing, apex, offset))
        rise = self._flight.apex()[1] - float(ball[2])
        if rise < DEAD_SHARE * self._apex_m:
            self._die(t_s)
        elif rise > AWAY_TIMES * self._apex_m:
            text = f"the ball rises {rise:.2f} m after bounce {len(self.contacts)}, {self._apex_m:g} m were wanted"
            self.loss = Loss("ran away", text)
        elif len(self.contacts) >= self._bounces:
            self.loss = Loss("held", f"{self._bounces} bounces held")

    def _die(self, t_s: float) -> None:
        text = f"the ball rises less than {1000 * DEAD_SHARE * self._apex_m:.0f} mm at {t_s:.2f} s"
        self.loss = Loss("died on the paddle", text)

    def _watch_edge(self, ball: Array, point: Array, rotation: Array) -> None:
        """The ball (6,) is missed where it comes at the face's edge from aside, or falls below its lowest point.

        A ball is at the edge that reaches below the face's plane within its radius of the outline.
        """
        away = (ball[:3] - point) @ rotation
        if away[2] > self._radius - BELOW_M:
            return
        past = self._face.past(float(away[0]), float(away[1]))
        lowest = point[2] - self._face.half_width_m * (1 - rotation[2, 2] ** 2) ** 0.5
        if past < self._radius or (ball[5] < 0 and ball[2] < lowest):
            self._missed(ball[:3], past)

    def _missed(self, ball: Array, past_m: float) -> None:
        """The ball (3,) is past the edge, or falls below the face without having met it."""
        assert self._left_from is not None
        flight, down = self._flight, self._flight.down_to(float(self._centre[2]))
        place, time_s = ball, self._dt
        if down is not None and down > flight.start_s:  # where it came down through the centre's height
            place, time_s = np.array(flight.one(down)[:3]), down - flight.start_s
        way = (place - self._left_from)[:2]
        far = float(np.linalg.norm(way))
        speed = max(far - self._face.half_width_m, 0.0) / time_s
        by = f", {1000 * past_m:.0f} mm past it" if past_m > 0 else ""
        text = f"the ball after bounce {len(self.contacts)} goes down outside the paddle's edge{by}"
        self.loss = Loss("missed past the edge", text, way / far * speed if far > 0 else np.zeros(2))
