"""Mass, centre and inertia of the paddle with all that hangs on it, in the face frame."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array, Paddle


@dataclass(frozen=True, eq=False)
class RigidMass:
    """A rigid body: mass in kg, centre (3,) in m, inertia (3, 3) in kg·m² about that centre, face-frame axes."""

    mass_kg: float
    com_m: Array
    inertia_kg_m2: Array

    def plus(self, other: RigidMass) -> RigidMass:
        """The two bodies welded together (parallel-axis theorem)."""
        mass = self.mass_kg + other.mass_kg
        com = (self.mass_kg * self.com_m + other.mass_kg * other.com_m) / mass
        inertia = sum(
            body.inertia_kg_m2 + body.mass_kg * _point_inertia(body.com_m - com) for body in (self, other)
        )
        return RigidMass(mass, com, np.asarray(inertia))


def symmetric(xx: float, yy: float, zz: float, xy: float, xz: float, yz: float) -> Array:
    """Symmetric (3, 3) matrix from its six entries."""
    return np.array([[xx, xy, xz], [xy, yy, yz], [xz, yz, zz]])


def paddle_mass(paddle: Paddle) -> RigidMass:
    """Paddle and parts as one rigid body.

    A solid disc or a solid box lies behind its face: its centre is half a thickness along -z. Moments of
    inertia of the solid cylinder and the solid box: Meriam & Kraige, Engineering Mechanics: Dynamics,
    table D/4 (from memory).
    """
    m, t = paddle.mass_kg, paddle.thickness_m
    behind = np.array([0.0, 0.0, -t / 2])
    if paddle.shape == "disc":
        assert paddle.radius_m is not None
        r = paddle.radius_m
        across = m * (3 * r**2 + t**2) / 12
        body = RigidMass(m, behind, np.diag([across, across, m * r**2 / 2]))
    elif paddle.shape == "plate":
        assert paddle.size_m is not None
        x, y = paddle.size_m
        body = RigidMass(m, behind, m / 12 * np.diag([y**2 + t**2, x**2 + t**2, x**2 + y**2]))
    else:
        assert paddle.com_m is not None and paddle.inertia_kg_m2 is not None
        body = RigidMass(m, np.array(paddle.com_m), symmetric(*paddle.inertia_kg_m2))
    for part in paddle.parts:
        body = body.plus(RigidMass(part.mass_kg, np.array(part.com_m), symmetric(*part.inertia_kg_m2)))
    return body


def paddle_radius(paddle: Paddle) -> float:
    """Distance in m from the strike point to the paddle's rim; the default weight of rotation."""
    if paddle.radius_m is not None:
        return paddle.radius_m
    if paddle.size_m is not None:
        return float(np.hypot(*paddle.size_m)) / 2
    return 0.1


def _point_inertia(offset: Array) -> Array:
    return np.asarray(np.eye(3) * (offset @ offset) - np.outer(offset, offset))
