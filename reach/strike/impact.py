"""What a hit does to the arm: effective mass, joint velocity jump and joint impulse, as a range of two models.

Joints free to give: the textbook two-body impact with the arm's effective mass along the normal (Asada 1983; Khatib
1987; Walker 1994); joints locked by stiff control: the paddle doesn't give, and all of the impulse goes through the
joints. Real joints lie between.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.arm import Arm
from reach.cell import Array, Ball


@dataclass(frozen=True, eq=False)
class Hit:
    """One hit.

    Attributes
    ----------
    effective_mass_kg : along the normal at the strike point, joints free
    velocity_jump : (n,) rad/s (m/s), joints free
    joint_impulse : (n,) N·m·s (N·s), joints locked
    ball_impulse : of the ball, N·s, joints free and locked
    """

    effective_mass_kg: float
    velocity_jump: Array
    joint_impulse: Array
    ball_impulse: tuple[float, float]


def effective_mass(inertia: Array, row: Array) -> float:
    """1 / (nᵀ J M⁻¹ Jᵀ n) in kg from the inertia (n, n) and the row nᵀ J (n,); infinite where nothing moves along n."""
    give = float(row @ np.linalg.solve(inertia, row))
    return 1 / give if give > 0 else np.inf


def hit(arm: Arm, q: Array, normal: Array, ball: Ball | None, restitution: float, approach_m_s: float) -> Hit:
    """A hit along the normal (3,) at posture q (n,), ball and face meeting at a speed; nan where there is no ball."""
    inertia, row = arm.inertia(q), normal @ arm.jacobian(q)[2][:3]
    mass = effective_mass(inertia, row)
    if ball is None:
        nothing = np.full(arm.n, np.nan)
        return Hit(mass, nothing, nothing, (np.nan, np.nan))
    locked = (1 + restitution) * ball.mass_kg * approach_m_s
    free = locked / (1 + ball.mass_kg / mass)
    jump = np.asarray(-np.linalg.solve(inertia, row) * free, dtype=np.float64)
    return Hit(mass, jump, -row * locked, (free, locked))
