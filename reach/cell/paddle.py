"""The paddle, the ball, and their contact."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from reach.cell.basics import Pose, Vec3


@dataclass(frozen=True)
class Part:
    """A further mass on the paddle (holder, screws, sensor): a point unless an inertia is given.

    com_m in the face frame; inertia about the part's own centre, face-frame axes (xx, yy, zz, xy, xz, yz).
    """

    mass_kg: float
    com_m: Vec3
    inertia_kg_m2: tuple[float, ...] = (0.0,) * 6


@dataclass(frozen=True)
class Paddle:
    """The rigid paddle: face frame on the tip link (origin the strike point, z out of the face), shape, mass."""

    mount: Pose
    mass_kg: float
    shape: Literal["disc", "plate", "given"]
    radius_m: float | None = None
    size_m: tuple[float, float] | None = None
    thickness_m: float = 0.0
    com_m: Vec3 | None = None
    inertia_kg_m2: tuple[float, ...] | None = None
    parts: tuple[Part, ...] = ()


@dataclass(frozen=True)
class Tool:
    """A maker's cap on the speed of the strike point."""

    speed_m_s: float
    source: str


@dataclass(frozen=True)
class Ball:
    """The ball; `source` names the rule a preset came from."""

    mass_kg: float
    radius_m: float
    drag_coefficient: float = 0.0
    lift_coefficient: float = 0.0
    air_kg_m3: float = 1.2
    source: str = "cell"


@dataclass(frozen=True)
class Contact:
    """The pair of ball and face; `arm_gives`: the arm's effective mass counts, else the paddle does not give."""

    restitution: float
    restitution_spread: float = 0.0
    restitution_at: tuple[tuple[float, float], ...] = ()
    friction: float = 0.0
    tangential_restitution: float = 0.0
    arm_gives: bool = False
    source: str = "cell"
