"""The mirror law: the paddle mirrors the ball's height, corrects its energy, and leans against its drift."""

from __future__ import annotations

from math import sqrt
from typing import ClassVar

from reach.ball import Air, launch, restitution, strike_for
from reach.trial.laws.base import Law, Seen, Setup, Twist, ball_at

DEEPEST_M = 0.25  # below the height of contact: about as far as an arm's stroke goes
HIGHEST_M = 0.05  # above it: a ball that is 0.15 m too low is lost, and the paddle need not go on after it
FASTEST_M_S = 3.0  # up or down: the highest cap on a tool's speed known for such arms
FARTHEST_M = 0.5  # aside of the centre, along x and y each: a ball farther off is lost
STEEPEST = 0.35  # sine of the tilt, 20 degrees: beyond, the ball goes off sideways faster than it goes up


class Mirror(Law):
    """Mirror law with energy term, and a face that leans by the ball's offset and lateral velocity.

    With b the ball's height over its centre at contact, eta = g b + vz²/2 and eta* the wanted one, the reference of the
    paddle's height, from its height at contact on, is

        r = -[k10 + k11 (eta* - eta)] b,  k10 = (1 - e)/(1 + e),

    and the one aside is under the ball. In flight eta is constant, so the reference moves at -[...] vz; contact is
    at b = r = 0, and v' = v [1 + (1 + e) k11 (eta* - v²/2)] the speed from bounce to bounce. Its slope at the fixed
    point is 1 - 2 (1 + e) k11 eta*: 0 with k11 = 1/(2 (1 + e) eta*), the dead-beat value, and -1 with twice that.

    Aside, a face leaning by theta changes the ball's lateral speed by 2 v theta if it has no friction, since the ball
    is pushed by 2 v along the normal. So theta = vx/(2 v) takes the lateral speed away, and theta = x/(8 h) sends the
    ball back by x within a flight of 2 v/g: 2 v theta · 2 v/g = 8 h theta. Both at once return it to the centre at the
    next contact, and stop it there at the second. With shares p and d of the two, offset and lateral speed go from
    bounce to bounce with a trace of 2 - p - d and a determinant of 1 - d.

    Gains
    -----
    mirror : share of k10. At 1/k10 the paddle copies the ball's speed one to one.
    energy : k11 as a share of its dead-beat value; stable below 2
    tilt_position : theta per offset as a share of 1/(8 h)
    tilt_velocity : theta per lateral speed as a share of 1/(2 v)
    follow_per_s : how fast an error of the strike point goes away, beside the reference's own velocity
    turn_per_s : the same of the normal

    The values were taken by simulating a paddle that does what it is told (tests/test_laws.py) and, for the two tilts,
    from the trace and determinant above: offset and lateral speed shrink to 0.45 of what they were at every bounce,
    and an error of energy to 0.3. The reference turns around at once at every contact, which no arm does: on the
    example's bench the paddle then lags by what acceleration limits leave, and a follow gain of 20/s drives it into
    them; 10/s keeps the ball within 4 mm of the centre there, 3 mm low.

    Deviations: with drag the ball comes down slower than it went up, so k10 and eta* are those of the wanted flight's
    two ends. The reference is kept within the constants of this module, so that a lost ball sends the paddle nowhere.
    The horizontal reference is under the ball less its radius along the normal, so that the strike point meets it.

    References
    ----------
    M. Bühler, D. E. Koditschek, P. J. Kindlmann, "Planning and control of robotic juggling and catching tasks", Int. J.
    Robotics Research 13(2) (1994) 101-118; "A simple juggling robot: theory and experimentation", in Experimental
    Robotics I (ISRR/ISER 1990). The formulas are from memory.
    """

    gains: ClassVar[dict[str, float]] = {
        "mirror": 1.0,
        "energy": 0.7,
        "tilt_position": 0.5,
        "tilt_velocity": 0.8,
        "follow_per_s": 10.0,
        "turn_per_s": 20.0,
    }

    def __init__(self, setup: Setup):
        gains, down = setup.gains, setup.gravity_m_s2
        air = Air.of(setup.ball, (0.0, 0.0, -down))
        centre = setup.centre_m
        wanted = launch(air, centre, centre, centre[2] + setup.apex_m)
        _, strike = strike_for(wanted.landing_velocity, wanted.velocity, setup.contact)
        speed = -float(wanted.landing_velocity[2])
        e = restitution(setup.contact, speed + strike)
        self.eta = speed * speed / 2
        self.kappa = gains["mirror"] * strike / speed
        self.kappa_eta = gains["energy"] / (2 * (1 + e) * self.eta)
        self.lean = gains["tilt_position"] / (8 * setup.apex_m)
        self.lean_speed = gains["tilt_velocity"] / (2 * speed)
        self.follow, self.turn = gains["follow_per_s"], gains["turn_per_s"]
        self.centre, self.radius = centre, setup.ball.radius_m
        self.period, self.gravity, self.drag = setup.period_s, down, air.drag_per_m

    def twist(self, seen: Seen) -> Twist:
        """Velocity of the reference at the period's end, and gains on what is left to it then."""
        period, radius, follow = self.period, self.radius, self.follow
        x, y, z, vx, vy, vz = ball_at(seen, period, self.gravity, self.drag)
        cx, cy, cz = self.centre
        x, vx = _near(x - cx, vx)
        y, vy = _near(y - cy, vy)
        r, rate = self._height(z - cz, vz)
        mx, my, mx_s, my_s = self._tilt(x, y, vx, vy)
        mz = sqrt(1.0 - mx * mx - my * my)
        mz_s = -(mx * mx_s + my * my_s) / mz
        px, py, pz = seen.paddle_m
        ux, uy, uz = seen.paddle_m_s
        nx, ny, nz = seen.paddle_normal
        turn, rest = self.turn, 1.0 - period * self.turn  # the normal is seen now, the reference a period on
        qx, qy, qz = turn * mx + rest * mx_s, turn * my + rest * my_s, turn * mz + rest * mz_s
        return (
            vx - radius * mx_s + follow * (cx + x - radius * mx - px - period * ux),
            vy - radius * my_s + follow * (cy + y - radius * my - py - period * uy),
            rate - radius * mz_s + follow * (cz + r - radius * mz - pz - period * uz),
            ny * qz - nz * qy,
            nz * qx - nx * qz,
            nx * qy - ny * qx,
        )

    def _height(self, b: float, vz: float) -> tuple[float, float]:
        """Reference of the height over that of contact in m, and its rate in m/s."""
        kappa = self.kappa + self.kappa_eta * (self.eta - self.gravity * b - 0.5 * vz * vz)
        r = -kappa * b
        if r < -DEEPEST_M:
            return -DEEPEST_M, 0.0
        if r > HIGHEST_M:
            return HIGHEST_M, 0.0
        rate = -kappa * vz
        if self.drag:  # takes eta away at drag |vz|³, which turns kappa
            rate -= self.kappa_eta * self.drag * abs(vz) ** 3 * b
        return r, (rate if -FASTEST_M_S < rate < FASTEST_M_S else FASTEST_M_S if rate > 0 else -FASTEST_M_S)

    def _tilt(self, x: float, y: float, vx: float, vy: float) -> tuple[float, float, float, float]:
        """Horizontal part of the wanted normal, and its rate in 1/s while the ball flies."""
        lean, lean_speed = self.lean, self.lean_speed
        mx, my = -lean * x - lean_speed * vx, -lean * y - lean_speed * vy
        square = mx * mx + my * my
        if square > STEEPEST * STEEPEST:
            share = STEEPEST / sqrt(square)
            return mx * share, my * share, 0.0, 0.0
        return mx, my, -lean * vx, -lean * vy


def _near(aside: float, velocity: float) -> tuple[float, float]:
    """Offset and velocity of a reference that goes no farther aside than FARTHEST_M."""
    if -FARTHEST_M <= aside <= FARTHEST_M:
        return aside, velocity
    return (FARTHEST_M if aside > 0 else -FARTHEST_M), 0.0
