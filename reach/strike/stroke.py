"""A whole strike as a joint motion, re-checked by `measure`: what "demonstrated" rests on."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array
from reach.evidence.measure import Measured, measure
from reach.evidence.motion import Motion
from reach.evidence.record import Use
from reach.strike.path import Paths
from reach.strike.profile import Profile
from reach.strike.setting import Setting
from reach.verdict import ROUNDING

SLOWER = 0.995  # a stroke that a measure refuses is slowed by this much at a time
SLOWEST = 0.5  # and given up below this share
HOLD_STEPS = 12
DUTY = "duty"
WINDOW_POINTS = 5


@dataclass(frozen=True, eq=False)
class Demonstration:
    """A whole motion through a strike, rest to rest, that keeps every stated limit.

    Attributes
    ----------
    speed : along the direction, m/s
    kind : of stroke
    q, tangent : (n,) posture and joint velocity at the strike per m/s
    curve, profile, motion, strike_row : how it goes
    measured : Measured
    """

    speed: float
    kind: str
    q: Array
    tangent: Array
    curve: Curve
    profile: Profile
    motion: Motion
    strike_row: int
    measured: Measured


def demonstrate(
    setting: Setting, normal: Array, direction: Array, kind: str, path: Paths, profile: Profile
) -> Demonstration | None:
    """The stroke as a motion, slowed until `measure` and the strike window pass; None where they never do.

    Parameters
    ----------
    normal, direction : (3,) of the strike, unit vectors, world axes
    kind : of stroke, SWING or STRAIGHT
    path : of one stroke
    """
    curve = Curve(path)
    factor = _holding(setting, normal, direction, curve, profile)
    while factor >= SLOWEST:
        slowed = profile.slowed(factor) if factor < 1 else profile
        motion, row = motion_along(curve, slowed, setting.period_s)
        measured = measure(setting.arm, setting.chain, setting.limits, motion)
        if not any(broken(use) for use in measured.uses):
            q, tangent, speed = motion.q[row], curve.slope(0.0), slowed.speed
            return Demonstration(speed, kind, q, tangent, curve, slowed, motion, row, measured)
        factor *= SLOWER
    return None


def broken(use: Use) -> bool:
    """Whether a motion passes a stated limit. Duty is a mean over a cycle, and one stroke is none."""
    return use.limit != DUTY and use.utilisation is not None and use.utilisation > 1 + ROUNDING


def motion_along(curve: Curve, profile: Profile, period_s: float) -> tuple[Motion, int]:
    """The joint motion on the control grid and the row of its strike.

    Velocities are the path's at the rows, accelerations constant between them; positions follow by exact
    integration both ways from the strike, where posture and velocity are exact.
    """
    s, speed, row = profile.sampled(period_s)
    v = curve.slopes(s) * speed[:, None]
    steps = (v[1:] + v[:-1]) / 2 * period_s
    way = np.concatenate([np.zeros((1, v.shape[1])), np.cumsum(steps, axis=0)])
    q = curve.posture + way - way[row]
    a = np.concatenate([np.diff(v, axis=0) / period_s, np.zeros((1, v.shape[1]))])
    start = -row * period_s
    return Motion(start, period_s, q, v, a), row


def _holding(setting: Setting, normal: Array, direction: Array, curve: Curve, profile: Profile) -> float:
    """The largest factor on the speed with which speed, direction, place and tilt hold over the strike window."""
    half, top = setting.accept.strike_window_s / 2, profile.speed
    if half == 0 or _holds(setting, normal, direction, curve, top):
        return 1.0
    low, high = 0.0, 1.0
    for _ in range(HOLD_STEPS):
        middle = (low + high) / 2
        if _holds(setting, normal, direction, curve, middle * top):
            low = middle
        else:
            high = middle
    return low


def _holds(setting: Setting, normal: Array, direction: Array, curve: Curve, speed: float) -> bool:
    accept = setting.accept
    s = np.linspace(-0.5, 0.5, WINDOW_POINTS) * accept.strike_window_s * speed
    _, rotation, twist = setting.chain.twists(curve.at(s), curve.slopes(s) * speed)
    error = twist[:, :3] - speed * direction
    along = error @ normal
    aside = np.linalg.norm(error - along[:, None] * normal, axis=1)
    tilt = np.arccos(np.clip(rotation[:, :, 2] @ normal, -1.0, 1.0))
    return bool(
        (np.abs(along) <= accept.strike_speed_error_share * speed * float(direction @ normal)).all()
        and (aside <= accept.strike_lateral_m_s).all()
        and (tilt <= accept.strike_tilt_error_rad).all()
    )


class Curve:
    """A joint path of one stroke between its nodes: a straight line, or quintics by value and two derivatives."""

    def __init__(self, path: Paths):
        self.posture = path.q[0, 0, 0]
        self._tangent = path.slope[0, 0, 0]
        self._spline, self._ends = None, (0.0, 0.0)
        if path.bend.any():
            from scipy.interpolate import BPoly

            s = np.concatenate([-path.distance[0, 0, :0:-1], path.distance[0, 1]])
            nodes = [np.concatenate([x[0, 0, :0:-1], x[0, 1]]) for x in (path.q, path.slope, path.bend)]
            self._ends = s[0], s[-1]
            self._spline = BPoly.from_derivatives(s, np.stack(nodes, axis=1))

    def at(self, s: Array) -> Array:
        """Postures (k, n) at path coordinates (k,)."""
        if self._spline is None:
            return np.asarray(self.posture + np.asarray(s)[:, None] * self._tangent)
        return np.asarray(self._spline(np.clip(s, *self._ends)))

    def slopes(self, s: Array) -> Array:
        """Joint velocity per m/s (k, n) at path coordinates (k,)."""
        if self._spline is None:
            return np.broadcast_to(self._tangent, (len(s), len(self._tangent)))
        return np.asarray(self._spline(np.clip(s, *self._ends), 1))

    def slope(self, s: float) -> Array:
        """Joint velocity per m/s (n,) at one path coordinate."""
        return np.asarray(self.slopes(np.array([s]))[0])
