"""The commanded motion: what a log's twists ask of the strike point, in world axes, and where they lead."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array, Cell, Follow
from reach.kinematics import exponential

SNAP_SHARE = 1e-6  # a stamp this close to a control instant, in periods, is taken to be on it


@dataclass(frozen=True, eq=False)
class Reference:
    """The commanded motion of the strike point, integrated from the command alone.

    Attributes
    ----------
    t_s : (k,) instants at which the command or the control changes
    twist : (k, 6) commanded twist from that instant on, world axes, strike point; at the end of the log zero
    slope : (k, 6) its rate until the next instant (zero with "hold")
    position : (k, 3), rotation : (k, 3, 3)
    end_s : the instant at which the command ends
    interpolation : "hold" or "linear"
    """

    t_s: Array
    twist: Array
    slope: Array
    position: Array
    rotation: Array
    end_s: float
    interpolation: str

    def at(self, t_s: Array) -> tuple[Array, Array, Array]:
        """Commanded twist (m, 6), position (m, 3) and axes (m, 3, 3) at times (m,)."""
        t = np.asarray(t_s, dtype=float)
        k = np.clip(np.searchsorted(self.t_s, t + 1e-12, side="right") - 1, 0, len(self.t_s) - 1)
        ahead = np.clip(t - self.t_s[k], 0.0, None)[:, None]
        mean = self.twist[k] + self.slope[k] * ahead / 2
        position = self.position[k] + mean[:, :3] * ahead
        rotation = exponential(mean[:, 3:] * ahead) @ self.rotation[k]
        return self.twist[k] + self.slope[k] * ahead, position, rotation

    def targets(self, period_s: float, steps: int) -> Array:
        """What the velocity at the end of each control period should deliver, shape (steps, 6).

        With "hold" it is the command in force when the period begins: a controller can't act on a sample
        before it comes. With "linear" it is the command at the period's end.
        """
        begin = self.t_s[0] + period_s * np.arange(steps)
        if self.interpolation == "linear":
            due = begin + period_s
            return self.at(np.where(due < self.end_s - 1e-9, due, due - SNAP_SHARE * period_s))[0]
        k = np.clip(np.searchsorted(self.t_s, begin + 1e-12, side="right") - 1, 0, len(self.t_s) - 1)
        ahead = np.clip(begin + period_s - self.t_s[k], 0.0, None)[:, None]
        targets = self.twist[k] + self.slope[k] * ahead
        targets[begin >= self.end_s - 1e-12] = 0.0
        return np.asarray(targets)


def build_reference(cell: Cell, follow: Follow, position: Array, rotation: Array) -> Reference:
    """Integrate the command from a start pose of the strike point.

    Parameters
    ----------
    position : (3,), rotation : (3, 3)
        Strike point and paddle axes at the first stamp.

    Notes
    -----
    Instants are the union of stamps and control instants. Between two of them the twist is constant in its
    own axes and about its own point, and the pose moves by the exponential of its mean, which is exact for
    "hold" and of second order in the control period for "linear". The last sample holds for one more period of the
    log's median.
    """
    log = follow.commands
    end_s = float(log.t_s[-1] + np.median(np.diff(log.t_s)))
    t = _instants(log.t_s, end_s, cell.period_s)
    sent, rate = _sent_twists(follow, t, end_s)
    span = np.append(np.diff(t), 0.0)
    fixed_axes = cell.arm.base.rotation if follow.frame == "base" else np.eye(3)
    offset = _point_offset(cell, follow)

    mean = sent + rate * span[:, None] / 2
    if follow.frame == "paddle":
        rotations = _products(rotation, exponential(mean[:, 3:] * span[:, None]), before=False)
        steps = np.einsum("kij,kj->ki", rotations, _body_translation(mean, span))
        axes_of_twist = rotations
    else:
        rotations = _products(rotation, exponential(mean[:, 3:] @ fixed_axes.T * span[:, None]), before=True)
        steps = mean[:, :3] @ fixed_axes.T * span[:, None]
        axes_of_twist = np.broadcast_to(fixed_axes, rotations.shape)
    moved = np.vstack([np.zeros((1, 3)), np.cumsum(steps[:-1], axis=0)])
    positions = position + rotation @ offset + moved - rotations @ offset
    twist = _at_strike_point(sent, axes_of_twist, rotations @ offset)
    next_twist = _at_strike_point(
        sent + rate * span[:, None], np.roll(axes_of_twist, -1, 0), np.roll(rotations @ offset, -1, 0)
    )
    slope = np.where(span[:, None] > 0, (next_twist - twist) / np.maximum(span, 1e-300)[:, None], 0.0)
    slope[t >= end_s - 1e-12] = 0.0
    return Reference(t, twist, slope, positions, rotations, end_s, follow.interpolation)


def _products(first: Array, turns: Array, before: bool) -> Array:
    """Rotations (k, 3, 3): the first, then each turn (k, 3, 3) but the last taken `before` (on the left) or after."""
    rotations, current = np.empty_like(turns), first
    rotations[0] = first
    turning = np.any(turns != np.eye(3), axis=(1, 2)).tolist()
    for k in range(len(turns) - 1):
        if turning[k]:
            current = turns[k].dot(current) if before else current.dot(turns[k])
        rotations[k + 1] = current
    return rotations


def _instants(stamps: Array, end_s: float, period_s: float) -> Array:
    """Control instants and stamps, those that coincide but for rounding taken once."""
    count = int(np.ceil((end_s - stamps[0]) / period_s - SNAP_SHARE)) + 1
    grid = stamps[0] + period_s * np.arange(count)
    odd = np.append(stamps, end_s)
    nearest = np.clip(np.rint((odd - stamps[0]) / period_s).astype(int), 0, count - 1)
    odd = odd[np.abs(odd - grid[nearest]) > SNAP_SHARE * period_s]
    return np.union1d(grid, odd)


def _sent_twists(follow: Follow, t: Array, end_s: float) -> tuple[Array, Array]:
    """The twist as sent at instants t, and its rate until the next instant: (k, 6) each."""
    log = follow.commands
    slack = 1e-9 * max(1.0, abs(end_s))
    k = np.clip(np.searchsorted(log.t_s, t + slack, side="right") - 1, 0, len(log.t_s) - 1)
    twist, rate = log.twist[k].copy(), np.zeros((len(t), 6))
    if follow.interpolation == "linear":
        slopes = np.vstack([np.diff(log.twist, axis=0) / np.diff(log.t_s)[:, None], np.zeros((1, 6))])
        rate = slopes[k]
        twist += rate * (t - log.t_s[k])[:, None]
    over = t >= end_s - slack
    twist[over], rate[over] = 0.0, 0.0
    return twist, rate


def _point_offset(cell: Cell, follow: Follow) -> Array:
    """Offset (3,) from the strike point to the point that the twist refers to, paddle axes."""
    if follow.point == "strike":
        return np.zeros(3)
    if follow.point == "tip":
        return np.asarray(-cell.paddle.mount.rotation.T @ np.array(cell.paddle.mount.xyz_m))
    return np.array(follow.point)


def _at_strike_point(sent: Array, axes: Array, arm: Array) -> Array:
    """Twists in world axes, moved from the commanded point to the strike point (arm: one from the other)."""
    linear = np.einsum("kij,kj->ki", axes, sent[:, :3])
    angular = np.einsum("kij,kj->ki", axes, sent[:, 3:])
    return np.hstack([linear - np.cross(angular, arm), angular])


def _body_translation(twist: Array, span: Array) -> Array:
    """Translation (k, 3) of the exponential of body twists (k, 6) over spans (k,) (SE(3))."""
    w = twist[:, 3:] * span[:, None]
    v = twist[:, :3] * span[:, None]
    angle = np.linalg.norm(w, axis=1)
    small = angle < 1e-6
    safe = np.where(small, 1.0, angle)
    first = np.where(small, 0.5, (1 - np.cos(safe)) / safe**2)[:, None]
    second = np.where(small, 1 / 6, (safe - np.sin(safe)) / safe**3)[:, None]
    cross = np.cross(w, v)
    return np.asarray(v + first * cross + second * np.cross(w, cross), dtype=np.float64)
