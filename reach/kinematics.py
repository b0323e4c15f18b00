"""The chain's kinematics for many postures at once, in numpy; tied to arm.py by a test."""

from __future__ import annotations

from dataclasses import dataclass
from functools import cached_property
from typing import NamedTuple

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
        frames = self._frames(q)
        origins, axes = (np.array(x).transpose(0, 2, 1) for x in (frames.origins, frames.axes))
        return frames.position.T, frames.rotation(), origins, axes

    def twists(self, q: Array, v: Array) -> tuple[Array, Array, Array]:
        """Strike points (m, 3), paddle axes (m, 3, 3) and twists (m, 6), world axes, for m states (m, n)."""
        frames = self._frames(q)
        twist = np.zeros((6, len(q)))
        for i, (origin, axis) in enumerate(zip(frames.origins, frames.axes, strict=True)):
            moving = axis * v[:, i]
            if self.sliding[i]:
                twist[:3] += moving
            else:
                twist[:3] += _cross(moving, frames.position - origin)
                twist[3:] += moving
        return frames.position.T, frames.rotation(), twist.T

    def jacobians(self, q: Array) -> tuple[Array, Array, Array]:
        """Strike points (m, 3), paddle axes (m, 3, 3) and Jacobians (m, 6, n), world axes, for postures (m, n)."""
        frames = self._frames(q)
        matrix = np.zeros((len(q), 6, len(self.axes)))
        for i, (origin, axis) in enumerate(zip(frames.origins, frames.axes, strict=True)):
            if self.sliding[i]:
                matrix[:, :3, i] = axis.T
            else:
                matrix[:, :3, i] = _cross(axis, frames.position - origin).T
                matrix[:, 3:, i] = axis.T
        return frames.position.T, frames.rotation(), matrix

    def _frames(self, q: Array) -> _Frames:
        """Where everything is, components first: long loops over the postures."""
        m = len(q)
        columns = [np.repeat(unit[:, None], m, axis=1) for unit in np.eye(3)]
        position = np.zeros((3, m))
        origins, axes = [], []
        for i, (turn, offset) in enumerate(zip(*self._about_z, strict=True)):
            position = position + _combined(columns, offset)
            columns = [_combined(columns, turn[:, k]) for k in range(3)]
            origins.append(position)
            axes.append(columns[2])
            if self.sliding[i]:
                position = position + columns[2] * q[:, i]
            else:
                sine, cosine = np.sin(q[:, i]), np.cos(q[:, i])
                x, y, z = columns
                columns = [x * cosine + y * sine, y * cosine - x * sine, z]
        turn, offset = self._face_about_z
        position = position + _combined(columns, offset)
        return _Frames(position, [_combined(columns, turn[:, k]) for k in range(3)], origins, axes)

    @cached_property
    def _about_z(self) -> tuple[list[Array], list[Array]]:
        """Placements of the joints (3, 3), (3,) in frames turned so that every axis is z."""
        turns, offsets, before = [], [], np.eye(3)
        for rotation, offset, axis in zip(self.rotations, self.offsets, self.axes, strict=True):
            own = _from_z(axis)
            turns.append(before.T @ rotation @ own)
            offsets.append(before.T @ offset)
            before = own
        return turns, offsets

    @cached_property
    def _face_about_z(self) -> tuple[Array, Array]:
        before = _from_z(self.axes[-1])
        return before.T @ self.face_rotation, before.T @ self.face_offset


class _Frames(NamedTuple):
    """Of m postures: strike point (3, m), the paddle's three axes (3, m), each joint's origin and axis (3, m)."""

    position: Array
    columns: list[Array]
    origins: list[Array]
    axes: list[Array]

    def rotation(self) -> Array:
        """Paddle axes (m, 3, 3)."""
        return np.ascontiguousarray(np.array(self.columns).transpose(2, 1, 0))


def _combined(columns: list[Array], parts: Array) -> Array:
    """Sum (3, m) of three columns (3, m) by their parts (3,); zeros and ones cost nothing."""
    total: Array | None = None
    for column, part in zip(columns, parts.tolist(), strict=True):
        if part != 0.0:
            term = column if part == 1.0 else column * part
            total = term if total is None else total + term
    return np.zeros_like(columns[0]) if total is None else total


def _cross(a: Array, b: Array) -> Array:
    """Cross products (3, m)."""
    return np.stack([a[1] * b[2] - a[2] * b[1], a[2] * b[0] - a[0] * b[2], a[0] * b[1] - a[1] * b[0]])


def _from_z(axis: Array) -> Array:
    """A rotation (3, 3) that takes z to a unit axis; rounding of a right angle away is put back to zero."""
    x, y, z = axis
    if z > 1 - 1e-15:
        return np.eye(3)
    if z < -1 + 1e-15:
        return np.diag([1.0, -1.0, -1.0])
    size = np.hypot(x, y)
    about = np.array([-y / size, x / size, 0.0])
    return np.asarray(turns(about, np.array([np.arctan2(size, z)]))[0])


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
