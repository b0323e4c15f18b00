"""A law that plans the next strike from where the ball will come down, and a smooth path to it."""

from __future__ import annotations

from dataclasses import dataclass
from math import sqrt
from typing import ClassVar, Literal

import numpy as np

from reach.ball import Air, Flight, NoContact, NoFlight, launch, strike_for
from reach.cell import Array
from reach.trial.laws.base import Law, Seen, Setup, Triple, Twist, ball_at

HOLD_S = 0.005  # before contact the paddle keeps velocity and normal: half of the default strike window
FROZEN_S = 0.015  # before contact the plan stays as it is: a smooth path needs some time
LATE_S = 0.020  # after the time of contact without one, the ball is taken for missed
RETRY_S = 0.020  # between looks for a ball that can be struck
AGAIN_S = 0.020  # between two plans of one flight: a path begun anew at every period never gets smooth
MOVED_M = (
    0.001  # aside, a fifth of what a strike may be off: a prediction that moved more is planned for anew
)
MOVED_S = 0.002  # in time: less than half of HOLD_S
MOVED_RAD = 0.00873  # in direction, half a degree: half of what a strike may be off
SHORTEST_S = 0.05  # of a stroke, whatever the gain says
LEAST_UP = 0.01  # square of the normal's part along z, on a path that overshoots
STEEPEST = 0.5  # sine of the tilt, 30 degrees; beyond, a strike is not one that keeps a ball up
FARTHEST_M = 1.0  # aside of the centre: beyond, no arm is sent after the ball

SAME_S = 1e-7  # sights taken no farther apart are one

AXES = range(5)  # x, y, z of the strike point, then x and y of the normal
Numbers = list[float]


@dataclass(frozen=True, eq=False)
class Path:
    """A polynomial of fifth order on each axis, then constant velocity.

    Attributes
    ----------
    start_s, length_s : when it begins, and how long until velocity is constant
    rows : (5, 6) coefficients by rising power of the time since start_s
    end, velocity : (5,) where it is at the end, and how fast
    """

    start_s: float
    length_s: float
    rows: list[tuple[float, float, float, float, float, float]]
    end: Numbers
    velocity: Numbers

    def at(self, t_s: float) -> tuple[Numbers, Numbers]:
        """Position and velocity of the five axes."""
        s = t_s - self.start_s
        if s >= self.length_s:
            s -= self.length_s
            return [p + s * v for p, v in zip(self.end, self.velocity, strict=True)], self.velocity
        rows = self.rows
        return (
            [a + s * (b + s * (c + s * (d + s * (e + s * f)))) for a, b, c, d, e, f in rows],
            [b + s * (2 * c + s * (3 * d + s * (4 * e + s * 5 * f))) for _, b, c, d, e, f in rows],
        )

    def acceleration(self, t_s: float) -> Numbers:
        """Acceleration of the five axes."""
        s = t_s - self.start_s
        if s >= self.length_s:
            return [0.0] * len(self.rows)
        return [2 * c + s * (6 * d + s * (12 * e + s * 20 * f)) for _, _, c, d, e, f in self.rows]


def path(
    start_s: float, length_s: float, state: tuple[Numbers, Numbers, Numbers], end: Numbers, velocity: Numbers
) -> Path:
    """The path from a state (position, velocity, acceleration) to a place with a velocity and no acceleration."""
    rows, T = [], length_s
    for p, v, a, goal, speed in zip(*state, end, velocity, strict=True):
        d = goal - p - v * T - a * T * T / 2
        dv, da = (speed - v - a * T) * T, -a * T * T
        rows.append(
            (
                p,
                v,
                a / 2,
                (10 * d - 4 * dv + da / 2) / T**3,
                (-15 * d + 7 * dv - da) / T**4,
                (6 * d - 3 * dv + da / 2) / T**5,
            )
        )
    return Path(start_s, length_s, rows, end, velocity)


@dataclass(frozen=True, eq=False)
class Plan:
    """What the paddle is about to do: strike, or come to rest at the centre.

    `due_s` is when it is looked at anew at the latest. Of a strike: the ball's centre at contact (`place`), when that
    is, the ball's velocity right after (`ball_out`), and the speeds that tell how far a changed sight moves the
    contact.
    """

    kind: Literal["strike", "rest"]
    path: Path
    due_s: float
    contact_s: float = 0.0
    place: Triple = (0.0, 0.0, 0.0)
    ball_out: Triple = (0.0, 0.0, 0.0)
    down_m_s: float = 1.0
    change_m_s: float = 1.0


class Planning(Law):
    """Predicts where and when the ball's centre comes down through the centre's height, and strikes it there.

    The wanted flight after the strike starts at that place, has the wanted apex and lands at the centre. Ball in and
    ball out fix the face normal and the paddle's speed along it, so the strike point is the ball's radius behind the
    ball's centre at contact. The way there is one polynomial of fifth order on each axis (three of the strike point,
    two of the normal), from the reference's own position, velocity and acceleration. It ends HOLD_S before contact;
    from then on velocity and normal are constant, so that a contact that is early or late meets the same strike. The
    plan is made anew at every contact, and in flight when the predicted contact moved by more than MOVED_M, MOVED_S or
    MOVED_RAD, but not in the last FROZEN_S and not within AGAIN_S of the plan before.

    A flight longer than twice `stroke_s` is split: the paddle first comes to rest at the centre, waits, and strikes
    from there. From a strike at u to the next at u, a time T later at the same place, one polynomial has a peak
    acceleration of 5.8 u/T and dips by 0.15 u T; stopping and starting again within T/2 each has 7.9 u/T and less of a
    dip. So the direct way is the gentler one, and only its dip, which grows with T, is a reason against it.

    A ball that never comes down through the centre's height, or too far off, leaves the paddle at rest at the
    centre. After a contact that the sensor has not shown yet, the ball is where the strike was to send it. The ball
    is taken to have no spin. What is believed of its flight is the mean of all sights since the last contact, each
    brought to the same instant: a flight is fixed by its start, so noise falls with the root of their number.

    Gains
    -----
    return_share : of the offset that one strike takes away; 1 returns to the centre in one bounce
    follow_per_s : how fast an error of strike point and normal goes away, beside the reference's own velocity
    stroke_s : longest time for a stroke from rest

    Planning a strike so is common practice, no source; the polynomial is that of any textbook on robots (common
    practice).
    """

    gains: ClassVar[dict[str, float]] = {"return_share": 1.0, "follow_per_s": 20.0, "stroke_s": 0.5}

    def __init__(self, setup: Setup):
        self.setup = setup
        self.period, self.gravity = setup.period_s, setup.gravity_m_s2
        self.air = Air.of(setup.ball, (0.0, 0.0, -setup.gravity_m_s2))
        self.drag = self.air.drag_per_m
        self.share, self.follow = setup.gains["return_share"], setup.gains["follow_per_s"]
        self.stroke_s = max(SHORTEST_S, setup.gains["stroke_s"])
        x, y, z = setup.centre_m
        self.rest = [x, y, z - setup.ball.radius_m, 0.0, 0.0]
        self.plan: Plan | None = None
        self.ball: Twist | None = None  # where the ball is to be by what was known when the plan was made
        self.contacts, self.struck_s = 0, -1.0
        self.solved: tuple[int, Array, Array, float] | None = (
            None  # contacts, place, ball out and flight's time
        )
        self.mean: Twist | None = None  # of the sights since the last contact, as of now
        self.sights, self.taken_s = 0, -1.0  # how many, and when the last one was taken

    def twist(self, seen: Seen) -> Twist:
        """Velocity of the reference at the period's end, and a gain on what is left to it then."""
        plan = self._watched(seen)
        (x, y, z, mx, my), (vx, vy, vz, mx_s, my_s) = plan.path.at(seen.t_s + self.period)
        px, py, pz = seen.paddle_m
        ux, uy, uz = seen.paddle_m_s
        nx, ny, nz = seen.paddle_normal
        follow, period = self.follow, self.period
        mz = sqrt(max(LEAST_UP, 1.0 - mx * mx - my * my))
        mz_s = -(mx * mx_s + my * my_s) / mz
        qx, qy, qz = (
            mx - period * mx_s,
            my - period * my_s,
            mz - period * mz_s,
        )  # as of now, as the paddle is seen
        return (
            vx + follow * (x - px - period * ux),
            vy + follow * (y - py - period * uy),
            vz + follow * (z - pz - period * uz),
            my * mz_s - mz * my_s + follow * (ny * qz - nz * qy),
            mz * mx_s - mx * mz_s + follow * (nz * qx - nx * qz),
            mx * my_s - my * mx_s + follow * (nx * qy - ny * qx),
        )

    def _watched(self, seen: Seen) -> Plan:
        """The plan for this period, made anew where there is a reason."""
        t, plan = seen.t_s, self.plan
        struck = seen.contacts != self.contacts
        if struck:
            self.contacts, self.struck_s = seen.contacts, t
            self.ball = (*plan.place, *plan.ball_out) if plan and plan.kind == "strike" else None
            self.mean, self.sights = None, 0
        elif self.ball is not None:
            self.ball = self._onward(self.ball)
        ball = self._believed(seen) or self.ball
        if plan is None or struck or t >= plan.due_s or self._moved(plan, ball, t):
            plan = self.plan = self._planned(seen, ball)
            self.ball = ball
        return plan

    def _believed(self, seen: Seen) -> Twist | None:
        """The ball now, by all sights since the last contact; None before the first one."""
        if self.mean is not None:
            self.mean = self._onward(self.mean)
        taken_s = seen.t_s - seen.ball_age_s
        if taken_s < self.struck_s or taken_s - self.taken_s < SAME_S:
            return self.mean
        self.taken_s = taken_s
        self.sights += 1
        sight = ball_at(seen, 0.0, self.gravity, self.drag)
        if self.mean is None:
            self.mean = sight
        else:
            x, y, z, vx, vy, vz = self.mean
            a, b, c, d, e, f = sight
            w = 1.0 / self.sights
            self.mean = (
                x + w * (a - x),
                y + w * (b - y),
                z + w * (c - z),
                vx + w * (d - vx),
                vy + w * (e - vy),
                vz + w * (f - vz),
            )
        return self.mean

    def _onward(self, ball: Twist) -> Twist:
        """The ball one period on; midpoint rule."""
        x, y, z, vx, vy, vz = ball
        dt, g, k = self.period, self.gravity, self.drag
        if k == 0.0:
            return x + vx * dt, y + vy * dt, z + (vz - g * dt / 2) * dt, vx, vy, vz - g * dt
        drag = k * sqrt(vx * vx + vy * vy + vz * vz) * dt / 2
        hx, hy, hz = vx - drag * vx, vy - drag * vy, vz - drag * vz - g * dt / 2
        drag = k * sqrt(hx * hx + hy * hy + hz * hz) * dt
        step = g * dt
        return (x + hx * dt, y + hy * dt, z + hz * dt, vx - drag * hx, vy - drag * hy, vz - drag * hz - step)

    def _moved(self, plan: Plan, ball: Twist | None, t: float) -> bool:
        """Whether the contact that was planned for has moved with what is now seen."""
        left = plan.contact_s - t
        if left < FROZEN_S or t - plan.path.start_s < AGAIN_S:
            return False
        if plan.kind != "strike" or ball is None or self.ball is None:
            return False
        x, y, z, vx, vy, vz = ball
        x0, y0, z0, vx0, vy0, vz0 = self.ball
        ax, ay = vx - vx0, vy - vy0
        dx, dy, dz = x - x0 + ax * left, y - y0 + ay * left, z - z0 + (vz - vz0) * left
        turned = MOVED_RAD * plan.change_m_s
        return (
            dx * dx + dy * dy > MOVED_M * MOVED_M
            or abs(dz) > MOVED_S * plan.down_m_s
            or ax * ax + ay * ay > turned * turned
        )

    def _planned(self, seen: Seen, ball: Twist | None) -> Plan:
        """A plan from the reference's state now."""
        t = seen.t_s
        came = None if ball is None else self._coming(t, ball)
        if came is None or came[0] - t < FROZEN_S:
            return self._resting(seen, t + RETRY_S)
        contact_s, place, ball_in = came
        run_s = contact_s - t - HOLD_S
        if run_s > 2 * self.stroke_s:
            return self._resting(seen, contact_s - HOLD_S - self.stroke_s)
        x, y, z = self.setup.centre_m
        land = [p + self.share * (c - p) for p, c in zip(place, (x, y, z), strict=True)]
        try:
            out = launch(self.air, place, land, z + self.setup.apex_m).velocity
            normal, speed = strike_for(ball_in, out, self.setup.contact)
        except (NoFlight, NoContact):
            return self._resting(seen, t + RETRY_S)
        nx, ny = (float(n) for n in normal[:2])
        if normal[2] <= 0 or nx * nx + ny * ny > STEEPEST * STEEPEST:
            return self._resting(seen, t + RETRY_S)
        meet = (place - self.setup.ball.radius_m * normal - HOLD_S * speed * normal).tolist()
        along = path(t, run_s, self._state(seen), [*meet, nx, ny], [*(speed * normal).tolist(), 0.0, 0.0])
        change = float(sum((out - ball_in) ** 2)) ** 0.5
        late = contact_s + LATE_S
        down, late = -float(ball_in[2]), contact_s + LATE_S
        return Plan("strike", along, late, contact_s, _triple(place), _triple(out), down, change)

    def _coming(self, t: float, ball: Twist) -> tuple[float, Array, Array] | None:
        """When and where the ball's centre comes down through the centre's height, and how fast; None: not so."""
        x, y, z = self.setup.centre_m
        position, moving = _halves(ball)
        start = Flight(t, position, moving, np.zeros(3), self.air)
        contact_s = start.down_to(z)
        if contact_s is None:
            return None
        place, velocity = _halves(start.one(contact_s))
        far = abs(place[0] - x) > FARTHEST_M or abs(place[1] - y) > FARTHEST_M
        return None if far or velocity[2] >= 0 else (contact_s, place, velocity)

    def _resting(self, seen: Seen, due_s: float) -> Plan:
        """Come to rest at the centre; a paddle already on its way there goes on."""
        if self.plan is not None and self.plan.kind == "rest":
            return Plan("rest", self.plan.path, due_s)
        along = path(seen.t_s, self.stroke_s, self._state(seen), self.rest, [0.0] * len(AXES))
        return Plan("rest", along, due_s)

    def _state(self, seen: Seen) -> tuple[Numbers, Numbers, Numbers]:
        """Position, velocity and acceleration of the reference; at first that of the paddle."""
        if self.plan is not None:
            along = self.plan.path
            return (*along.at(seen.t_s), along.acceleration(seen.t_s))
        (nx, ny, nz), (wx, wy, wz) = seen.paddle_normal, seen.paddle_rad_s
        turning = [wy * nz - wz * ny, wz * nx - wx * nz]
        return [*seen.paddle_m, nx, ny], [*seen.paddle_m_s, *turning], [0.0] * len(AXES)


def _halves(state: Twist) -> tuple[Array, Array]:
    """Position (3,) m and velocity (3,) m/s as arrays."""
    return np.array(state[:3]), np.array(state[3:])


def _triple(vector: Array) -> Triple:
    """The three numbers of a vector."""
    x, y, z = vector.tolist()
    return x, y, z
