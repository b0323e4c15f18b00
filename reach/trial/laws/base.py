"""What a law of control sees, what it is set up with, and what it owes."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Mapping
from dataclasses import dataclass
from typing import ClassVar, NamedTuple

from reach.cell import Ball, Contact

Triple = tuple[float, float, float]
Twist = tuple[float, float, float, float, float, float]


class Seen(NamedTuple):
    """What a law sees at one control period; world axes.

    Attributes
    ----------
    t_s : since the trial's start
    ball_m, ball_m_s : the ball's centre, as the sensor gives it
    ball_age_s : how old that is
    paddle_m, paddle_normal : strike point and unit face normal, true
    paddle_m_s, paddle_rad_s : twist of the paddle at the strike point
    contacts : of ball and face so far; known without delay
    """

    t_s: float
    ball_m: Triple
    ball_m_s: Triple
    ball_age_s: float
    paddle_m: Triple
    paddle_normal: Triple
    paddle_m_s: Triple
    paddle_rad_s: Triple
    contacts: int


@dataclass(frozen=True, eq=False)
class Setup:
    """What stays as it is during a trial.

    Attributes
    ----------
    period_s : control period
    gravity_m_s2 : its size; it points down
    centre_m : the ball's centre at contact
    apex_m : wanted, above the centre
    ball, contact : what the law may know of them
    gains : every gain of the law by name: its own values, changed by the cell's
    """

    period_s: float
    gravity_m_s2: float
    centre_m: Triple
    apex_m: float
    ball: Ball
    contact: Contact
    gains: Mapping[str, float]


class Law(ABC):
    """A law of control: from what is seen to the paddle twist that is sent.

    1. `gains` names every gain with its value where the cell gives none. A cell may set these and no others.
    2. It is made once for every trial, by `__init__(setup)`. Two trials share nothing.
    3. `twist(seen)` is called once every control period, in order of time. It returns six finite numbers: velocity of
       the strike point in m/s and angular velocity of the paddle in rad/s, world axes. The paddle is to have that
       twist at the end of the period.
    4. It may remember what it saw.
    5. It must not change what it is given, and read no clock, file or random number: equal sights get equal twists.
    6. It tells nobody that it can't go on: where it sees no way it keeps the paddle still.
    """

    gains: ClassVar[dict[str, float]] = {}

    @abstractmethod
    def __init__(self, setup: Setup):
        """Take what stays as it is."""

    @abstractmethod
    def twist(self, seen: Seen) -> Twist:
        """Velocity of the strike point in m/s, then angular velocity in rad/s, for the end of this period."""


def ball_at(seen: Seen, ahead_s: float, gravity_m_s2: float, drag_per_m: float) -> Twist:
    """Where the ball will be `ahead_s` after the instant of a sight: position in m, then velocity in m/s.

    The sensor's age is made up for: any controller that knows its sensor's delay does so (common practice, no source).
    The acceleration at the sight is held: over 20 ms that errs by 0.01 mm and 1 mm/s for a table tennis ball at 2.4
    m/s. A contact in between is not known of.
    """
    x, y, z = seen.ball_m
    vx, vy, vz = seen.ball_m_s
    after = seen.ball_age_s + ahead_s
    half = 0.5 * after
    if drag_per_m == 0.0:
        step = gravity_m_s2 * after
        return x + vx * after, y + vy * after, z + (vz - gravity_m_s2 * half) * after, vx, vy, vz - step
    drag = drag_per_m * (vx * vx + vy * vy + vz * vz) ** 0.5
    ax, ay, az = -drag * vx, -drag * vy, -gravity_m_s2 - drag * vz
    return (
        x + (vx + ax * half) * after,
        y + (vy + ay * half) * after,
        z + (vz + az * half) * after,
        vx + ax * after,
        vy + ay * after,
        vz + az * after,
    )
