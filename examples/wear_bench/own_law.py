"""A law of control of your own, on one page. In the cell: [trial] law = "own_law.py:OwnLaw", and run with --allow-code.

The class is made anew for every trial and asked once every control period. It needs nothing from the program.
"""

from typing import ClassVar


class OwnLaw:
    """The paddle moves against the ball, somewhat more so when the ball flies too low, and leans against its drift."""

    # Every gain with its value; [trial.gains] in the cell may set these, and no others.
    gains: ClassVar = {
        "energy": 0.4,  # how much harder to strike per missing share of the ball's energy
        "lean_per_m": 0.25,  # tilt of the face per offset of the ball, rad/m
        "lean_s_per_m": 0.17,  # and per lateral speed, rad s/m
        "follow_per_s": 10.0,  # twice as much drives the example's arm into its acceleration limits
        "turn_per_s": 20.0,
    }

    def __init__(self, setup):
        """Keep what stays as it is during a trial."""
        self.gains = setup.gains
        self.centre = setup.centre_m  # of the ball at contact
        self.radius = setup.ball.radius_m
        self.gravity = setup.gravity_m_s2  # its size; it points down
        self.energy = setup.gravity_m_s2 * setup.apex_m  # wanted, per mass
        e = setup.contact.restitution
        self.mirror = (1 - e) / (1 + e)  # paddle's speed over ball's speed that keeps the apex

    def twist(self, seen):
        """The twist that the paddle is to have at the end of this period: vx, vy, vz in m/s, wx, wy, wz in rad/s."""
        # What the sensor shows is old: move it on to now.
        age, g = seen.ball_age_s, self.gravity
        vx, vy, vz = seen.ball_m_s[0], seen.ball_m_s[1], seen.ball_m_s[2] - g * age
        x = seen.ball_m[0] + vx * age - self.centre[0]
        y = seen.ball_m[1] + vy * age - self.centre[1]
        z = seen.ball_m[2] + (vz + g * age / 2) * age - self.centre[2]

        # Height: against the ball, by a share that makes up for missing energy.
        missing = 1 - (g * z + vz * vz / 2) / self.energy
        share = self.mirror + self.gains["energy"] * max(-0.3, min(0.3, missing))
        height = max(-0.2, min(0.05, -share * z))
        rise = -share * vz

        # Tilt: the horizontal part of the normal that sends the ball back.
        lean, lean_speed = self.gains["lean_per_m"], self.gains["lean_s_per_m"]
        mx = max(-0.2, min(0.2, -lean * x - lean_speed * vx))
        my = max(-0.2, min(0.2, -lean * y - lean_speed * vy))
        nx, ny, _ = seen.paddle_normal

        # Where the strike point is to be, against where it is.
        px, py, pz = (p - c for p, c in zip(seen.paddle_m, self.centre, strict=True))
        follow, turn = self.gains["follow_per_s"], self.gains["turn_per_s"]
        ahead = (vx + follow * (x - self.radius * mx - px), vy + follow * (y - self.radius * my - py))
        up = rise + follow * (height - self.radius - pz)
        return (*ahead, up, -turn * (my - ny), turn * (mx - nx), 0.0)
