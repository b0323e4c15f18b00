"""Rotations, written for this package alone."""

from __future__ import annotations

import numpy as np

SMALL_RAD = 1e-4  # below it sin x / x and (1 - cos x) / x² by their series, good to 1e-17


def from_rpy(rpy: np.ndarray) -> np.ndarray:
    """Rotation (3, 3) of roll, pitch and yaw about fixed axes, in that order."""
    roll, pitch, yaw = (
        exponential(angle * axis[None])[0] for angle, axis in zip(rpy, np.eye(3), strict=True)
    )
    return np.asarray(yaw @ pitch @ roll)


def from_quaternion(wxyz: np.ndarray) -> np.ndarray:
    """Rotation (3, 3) of a unit quaternion: its columns are what the axes are turned to."""
    w, turn = wxyz[0], wxyz[1:]
    columns = [
        axis + 2 * w * np.cross(turn, axis) + 2 * np.cross(turn, np.cross(turn, axis)) for axis in np.eye(3)
    ]
    return np.array(columns).T


def exponential(turns: np.ndarray) -> np.ndarray:
    """Rotations (k, 3, 3) about axes by angles, both in vectors (k, 3) in rad: Rodrigues' formula."""
    angle = np.linalg.norm(turns, axis=1)
    small = angle < SMALL_RAD
    safe = np.where(small, 1.0, angle)
    first = np.where(small, 1 - angle**2 / 6, np.sin(safe) / safe)
    second = np.where(small, 0.5 - angle**2 / 24, (1 - np.cos(safe)) / safe**2)
    cross = np.zeros((len(turns), 3, 3))
    x, y, z = turns.T
    cross[:, 0, 1], cross[:, 0, 2], cross[:, 1, 2] = -z, y, -x
    cross -= cross.transpose(0, 2, 1)
    return np.asarray(np.eye(3) + first[:, None, None] * cross + second[:, None, None] * (cross @ cross))


def between(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Angles (k,) in rad between unit vectors (k, 3)."""
    return np.asarray(
        np.arctan2(np.linalg.norm(np.cross(one, other), axis=1), np.einsum("ki,ki->k", one, other))
    )


def apart(one: np.ndarray, other: np.ndarray) -> np.ndarray:
    """Angles (k,) in rad of the rotations between frames (k, 3, 3): ‖R - R'‖ is √8 sin(angle / 2) (Frobenius)."""
    size = np.linalg.norm(one - other, axis=(1, 2)) / np.sqrt(8.0)
    return np.asarray(2 * np.arcsin(np.minimum(size, 1.0)))
