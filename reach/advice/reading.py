"""How a log's twists were read, in words, and whether another reading fits its logged pose far better."""

from __future__ import annotations

from dataclasses import replace
from itertools import product
from typing import Literal

import numpy as np

from reach.cell import Array, Cell, Follow
from reach.follow.bench import rotation_of
from reach.follow.reference import build_reference

BETTER_FACTOR = 3.0  # another reading must fit this many times better to be pointed out,
WORTH_M = 0.003  # and the chosen one must miss the logged pose by more than this (rms)

FRAMES = {
    "world": "along the world's axes",
    "base": "along the axes of the arm's base",
    "paddle": "along the axes of the commanded paddle, z out of the face",
}


def reading_in_words(follow: Follow) -> str:
    """One sentence on frame, point and interpolation."""
    if follow.point == "strike":
        point = "of the strike point on the face"
    elif follow.point == "tip":
        point = "of the tip link's origin"
    else:
        point = "of the point ({:g}, {:g}, {:g}) m in the face frame".format(*follow.point)
    held = "held until the next sample" if follow.interpolation == "hold" else "linear between samples"
    gain = follow.pose_gain_per_s
    feedback = f"with pose feedback of {gain:g} per s" if gain > 0 else "replayed as sent"
    return f"twists are velocities {point}, {FRAMES[follow.frame]}, {held}, {feedback}"


def fit_to_pose(cell: Cell, follow: Follow) -> float:
    """RMS distance in m between the pose that a log's twists lead to and the one that it holds.

    Rotation counts at the paddle's radius of 0.1 m.
    """
    pose = follow.commands.pose
    assert pose is not None
    reference = build_reference(cell, follow, pose[0, :3].copy(), rotation_of(pose[0, 3:]))
    _, position, axes = reference.at(follow.commands.t_s)
    logged = np.array([rotation_of(quaternion) for quaternion in pose[:, 3:]])
    turn = np.linalg.norm(axes - logged, axis=(1, 2)) / np.sqrt(2)  # about the angle in rad
    miss = np.linalg.norm(position - pose[:, :3], axis=1) + 0.1 * turn
    return float(np.sqrt(np.mean(miss**2)))


def better_reading(cell: Cell) -> str | None:
    """A note where another frame or point fits the logged pose far better than the cell's; None where not."""
    follow = cell.follow
    if follow is None or follow.commands.pose is None:
        return None
    chosen = fit_to_pose(cell, follow)
    if chosen < WORTH_M:
        return None
    frames: tuple[Literal["world", "base", "paddle"], ...] = ("world", "base", "paddle")
    points: tuple[Literal["strike", "tip"], ...] = ("strike", "tip")
    others = [
        replace(follow, frame=frame, point=point)
        for frame, point in product(frames, points)
        if (frame, point) != (follow.frame, follow.point)
    ]
    fits = [fit_to_pose(cell, other) for other in others]
    best = int(np.argmin(fits))
    if fits[best] * BETTER_FACTOR > chosen:
        return None
    other = others[best]
    return (
        f'the logged pose looks like frame = "{other.frame}", point = "{other.point}": its twists lead there within '
        f"{1000 * fits[best]:.1f} mm (rms), those read as the cell says miss it by {1000 * chosen:.1f} mm"
    )


def stamp_statistics(t_s: Array) -> str:
    """Rate and jitter of a log's stamps, in words."""
    gaps = np.diff(t_s)
    median = float(np.median(gaps))
    off = np.abs(gaps - median)
    return (
        f"{len(t_s)} samples over {t_s[-1] - t_s[0]:.3f} s, {1 / median:.1f} per s; jitter "
        f"p50 {1000 * np.percentile(off, 50):.3f}, p99 {1000 * np.percentile(off, 99):.3f}, "
        f"max {1000 * off.max():.3f} ms"
    )
