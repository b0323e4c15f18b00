"""A ball on a paddle that does what a law says: the twist at the end of every control period is the one asked for.

Small and apart from the program's own simulation: no arm, plain floats, acceleration constant within a period. Only the
impact is the program's own, which has tests of its own.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from math import cos, pi, sin, sqrt

from reach.ball import Air, NoContact, impact
from reach.cell import Ball, Contact, Trial
from reach.trial.laws import Seen, Setup, asked, gains_of, law_class, made

GRAVITY = 9.81  # of the check values; the program's own is 9.80665
CENTRE = (0.5, 0.1, 0.9)
PERIOD_S = 0.001
LOST_M = 0.3  # a ball this far below the centre has missed the paddle
TABLE_TENNIS = Ball(mass_kg=0.0027, radius_m=0.02, drag_coefficient=0.45)
NO_AIR = Ball(mass_kg=0.0027, radius_m=0.02)

Vector = tuple[float, float, float]


def plus(a: Vector, b: Vector, share: float = 1.0) -> Vector:
    """a + share b."""
    return a[0] + share * b[0], a[1] + share * b[1], a[2] + share * b[2]


def dot(a: Vector, b: Vector) -> float:
    """Scalar product."""
    return a[0] * b[0] + a[1] * b[1] + a[2] * b[2]


def cross(a: Vector, b: Vector) -> Vector:
    """Vector product."""
    return a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]


def turned(v: Vector, by: Vector) -> Vector:
    """A vector turned by a rotation vector in rad (Rodrigues)."""
    angle = sqrt(dot(by, by))
    if angle < 1e-12:
        return plus(v, cross(by, v))
    axis = plus((0.0, 0.0, 0.0), by, 1 / angle)
    aside = cross(axis, v)
    first = plus(plus((0.0, 0.0, 0.0), v, cos(angle)), aside, sin(angle))
    return plus(first, axis, dot(axis, v) * (1 - cos(angle)))


@dataclass(frozen=True)
class Bounce:
    """One contact, and the apex of the flight that led to it, above the centre's height."""

    t_s: float
    ball_m: Vector
    ball_in: Vector
    ball_out: Vector
    normal: Vector
    paddle_m_s: Vector
    apex_m: float

    @property
    def off_m(self) -> float:
        """How far aside of the centre."""
        return sqrt((self.ball_m[0] - CENTRE[0]) ** 2 + (self.ball_m[1] - CENTRE[1]) ** 2)


@dataclass(frozen=True)
class Moving:
    """The paddle during a period: strike point, normal and twist at its start, and the change of the twist a second."""

    at: Vector
    normal: Vector
    speed: Vector
    turning: Vector
    gain: Vector
    turning_gain: Vector

    def after(self, s: float) -> Moving:
        """The same a time later, exact for constant acceleration (and an axis that stays)."""
        return Moving(
            plus(plus(self.at, self.speed, s), self.gain, s * s / 2),
            turned(self.normal, plus(plus((0.0, 0.0, 0.0), self.turning, s), self.turning_gain, s * s / 2)),
            plus(self.speed, self.gain, s),
            plus(self.turning, self.turning_gain, s),
            self.gain,
            self.turning_gain,
        )


@dataclass(frozen=True)
class Flying:
    """The ball during a period, its spin, and its acceleration."""

    at: Vector
    speed: Vector
    spin: Vector
    gain: Vector

    def after(self, s: float) -> Flying:
        """The same a time later, exact for constant acceleration."""
        return Flying(
            plus(plus(self.at, self.speed, s), self.gain, s * s / 2),
            plus(self.speed, self.gain, s),
            self.spin,
            self.gain,
        )


def flying(at: Vector, speed: Vector, spin: Vector, drag_per_m: float) -> Flying:
    """A ball with the acceleration half a period from now."""
    middle = speed
    for _ in range(2 if drag_per_m else 1):
        drag = drag_per_m * sqrt(dot(middle, middle))
        gain = (-drag * middle[0], -drag * middle[1], -drag * middle[2] - GRAVITY)
        middle = plus(speed, gain, PERIOD_S / 2)
    return Flying(at, speed, spin, gain)


def setup_for(
    trial: Trial, contact: Contact, ball: Ball = NO_AIR, gains: dict[str, float] | None = None
) -> Setup:
    """What a law is set up with here."""
    complete = gains_of(law_class(trial), trial, "cell") | (gains or {})
    return Setup(PERIOD_S, GRAVITY, CENTRE, trial.apex_m, ball, contact, complete)


def rally(
    trial: Trial,
    contact: Contact,
    start_m: Vector,
    start_m_s: Vector,
    bounces: int,
    ball: Ball = NO_AIR,
    late: int = 0,
    watch: Callable[[Seen, tuple[float, ...]], None] | None = None,
) -> list[Bounce]:
    """Contacts of a ball that starts at a place with a velocity; fewer than asked for where the ball is lost.

    Parameters
    ----------
    late : control periods by which the sight of the ball is old
    watch : is told every sight and the twist that was asked for
    """
    setup = setup_for(trial, contact, ball)
    law = made(law_class(trial), setup)
    drag = Air.of(ball, (0.0, 0.0, -GRAVITY)).drag_per_m
    still: Vector = (0.0, 0.0, 0.0)
    paddle = Moving(plus(CENTRE, (0.0, 0.0, -ball.radius_m)), (0.0, 0.0, 1.0), still, still, still, still)
    now = flying(start_m, start_m_s, still, drag)
    found: list[Bounce] = []
    past, top, step = [now] * (late + 1), start_m[2], 0
    while len(found) < bounces and now.at[2] > CENTRE[2] - LOST_M:
        past = [*past[1:], now]
        sight = Seen(
            step * PERIOD_S, past[0].at, past[0].speed, min(late, step) * PERIOD_S,
            paddle.at, paddle.normal, paddle.speed, paddle.turning, len(found),
        )  # fmt: skip
        twist = asked(law, sight)
        if watch is not None:
            watch(sight, twist)
        change = [(b - a) / PERIOD_S for a, b in zip((*paddle.speed, *paddle.turning), twist, strict=True)]
        paddle = Moving(
            paddle.at, paddle.normal, paddle.speed, paddle.turning, tuple(change[:3]), tuple(change[3:])
        )
        now = flying(now.at, now.speed, now.spin, drag)
        hit = meets(now, paddle, ball.radius_m)
        left = PERIOD_S
        if hit is not None:
            there, face = now.after(hit), paddle.after(hit)
            try:
                out, spin = impact(there.speed, face.normal, face.speed, contact, there.spin)
            except NoContact:
                out, spin = there.speed, there.spin
            out = tuple(out.tolist())
            apex = top - CENTRE[2]
            found.append(
                Bounce(step * PERIOD_S + hit, there.at, there.speed, out, face.normal, face.speed, apex)
            )
            left -= hit
            now = Flying(there.at, out, tuple(float(w) for w in spin), now.gain)
            top = there.at[2]
        now, paddle = now.after(left), paddle.after(PERIOD_S)
        top = max(top, now.at[2])
        step += 1
    return found


def meets(now: Flying, paddle: Moving, radius: float) -> float | None:
    """Time into the period at which the ball comes onto the face's plane, by halving; None where it does not."""

    def gap(s: float) -> float:
        face = paddle.after(s)
        return dot(plus(now.after(s).at, face.at, -1.0), face.normal) - radius

    if gap(PERIOD_S) >= 0 or gap(0.0) < 0:
        return None
    lo, hi = 0.0, PERIOD_S
    for _ in range(50):
        middle = (lo + hi) / 2
        lo, hi = (middle, hi) if gap(middle) > 0 else (lo, middle)
    return lo


def leaving(
    apex_m: float, off_m: float = 0.0, bearing_rad: float = 0.0, aside_m_s: float = 0.0
) -> tuple[Vector, Vector]:
    """Start of a ball, a tenth of a millimetre above the centre's height, that rises to an apex without drag."""
    c, s = cos(bearing_rad), sin(bearing_rad)
    at = plus(CENTRE, (off_m * c, off_m * s, 1e-4))
    return at, (aside_m_s * c, aside_m_s * s, sqrt(2 * GRAVITY * apex_m))


BEARINGS = (0.0, pi / 2, pi, 3 * pi / 2)
STILL = Seen(
    0.0, (*CENTRE[:2], 1.2), (0.0,) * 3, 0.0, (0.5, 0.1, 0.88), (0.0, 0.0, 1.0), (0.0,) * 3, (0.0,) * 3, 0
)
"""A ball at rest above the centre and the paddle at rest below it."""
