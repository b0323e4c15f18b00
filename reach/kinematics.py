"""The chain's kinematics for many postures at once, in numpy; tied to arm.py by a test."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.arm import Arm
from reach.cell import Array


@dataclass(frozen=True, eq=False)
class Chain:
    """Fixed geometry of a serial chain.

    Attributes
    ----------
    rotations : (n, 3, 3), offsets : (n, 3)
        Placement of each joint in the frame of the one before (the world for the first).
    axes : (n, 3) unit axis of each joint, its own frame
    sliding : (n,) bool
    face_rotation : (3, 3), face_offset : (3,)
        Strike frame in the last joint's frame.
    """

    rotations: Array
    offsets: Array
    axes: Array
    sliding: np.ndarray
    face_rotation: Array
    face_offset: Array

    @staticmethod
    def of(arm: Arm) -> Chain:
        """The chain of an arm."""
        rotations, offsets, axes = zip(*arm.chain(), strict=True)
        return Chain(
            np.array(rotations), np.array(offsets), np.array(axes), arm.sliding, *arm.face_placement()
        )

    def placements(self, q: Array) -> tuple[Array, Array, Array, Array]:
        """Strike points, paddle axes, and each joint's origin and axis, for m postures.

        Parameters
        ----------
        q : (m, n)

        Returns
        -------
        position (m, 3), rotation (m, 3, 3), origins (n, m, 3), axes (n, m, 3), world axes
        """
        m = len(q)
        rotation = np.broadcast_to(np.eye(3), (m, 3, 3))
        position = np.zeros((m, 3))
        origins, axes = np.empty((len(self.axes), m, 3)), np.empty((len(self.axes), m, 3))
        for i, axis in enumerate(self.axes):
            position = position + rotation @ self.offsets[i]
            rotation = rotation @ self.rotations[i]
            origins[i], axes[i] = position, rotation @ axis
            if self.sliding[i]:
                position = position + axes[i] * q[:, i, None]
            else:
                rotation = rotation @ turns(axis, q[:, i])
        return position + rotation @ self.face_offset, rotation @ self.face_rotation, origins, axes

    def twists(self, q: Array, v: Array) -> tuple[Array, Array, Array]:
        """Strike points (m, 3), paddle axes (m, 3, 3) and twists (m, 6), world axes, for m states (m, n)."""
        position, rotation, origins, axes = self.placements(q)
        twist = np.zeros((len(q), 6))
        for i in range(len(self.axes)):
            speed = v[:, i, None]
            if self.sliding[i]:
                twist[:, :3] += axes[i] * speed
            else:
                turning = axes[i] * speed
                twist[:, :3] += np.cross(turning, position - origins[i])
                twist[:, 3:] += turning
        return position, rotation, twist

    def jacobians(self, q: Array) -> tuple[Array, Array, Array]:
        """Strike points (m, 3), paddle axes (m, 3, 3) and Jacobians (m, 6, n), world axes, for postures (m, n)."""
        position, rotation, origins, axes = self.placements(q)
        matrix = np.zeros((len(q), 6, len(self.axes)))
        for i in range(len(self.axes)):
            if self.sliding[i]:
                matrix[:, :3, i] = axes[i]
            else:
                matrix[:, :3, i] = np.cross(axes[i], position - origins[i])
                matrix[:, 3:, i] = axes[i]
        return position, rotation, matrix


def turns(axis: Array, angle: Array) -> Array:
    """Rotations (m, 3, 3) about one unit axis (3,) by angles (m,) in rad (Rodrigues)."""
    x, y, z = axis
    cross = np.array([[0.0, -z, y], [z, 0.0, -x], [-y, x, 0.0]])
    return np.asarray(
        np.eye(3)
        + np.sin(angle)[:, None, None] * cross
        + (1 - np.cos(angle))[:, None, None] * (cross @ cross)
    )


def exponential(rotation_vector: Array) -> Array:
    """Rotations (m, 3, 3) of rotation vectors (m, 3) in rad."""
    angle = np.linalg.norm(rotation_vector, axis=1)
    safe = np.where(angle > 0, angle, 1.0)
    x, y, z = (rotation_vector / safe[:, None]).T
    zero = np.zeros_like(x)
    cross = np.array([[zero, -z, y], [z, zero, -x], [-y, x, zero]]).transpose(2, 0, 1)
    return np.asarray(
        np.eye(3)
        + np.sin(angle)[:, None, None] * cross
        + (1 - np.cos(angle))[:, None, None] * (cross @ cross)
    )


def logarithm(rotation: Array) -> Array:
    """Rotation vector (3,) in rad of one rotation (3, 3); angles up to pi."""
    skew = np.array(
        [rotation[2, 1] - rotation[1, 2], rotation[0, 2] - rotation[2, 0], rotation[1, 0] - rotation[0, 1]]
    )
    sine, cosine = np.linalg.norm(skew) / 2, (np.trace(rotation) - 1) / 2
    angle = np.arctan2(sine, cosine)
    if sine > 1e-6:
        return np.asarray(skew / 2 * (angle / sine))
    if cosine > 0:
        return np.asarray(skew / 2)
    values, vectors = np.linalg.eigh((rotation + rotation.T) / 2)
    return np.asarray(vectors[:, np.argmax(values)] * angle)
