"""The ball meets the paddle: outline of the face, instant of first contact, and what contact makes of the ball."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from reach.ball.impact import impact
from reach.ball.path import root_of
from reach.cell import Array, Contact, Paddle

TOUCH_M = 1e-12  # a gap or a dip of less is rounding
SLOPE_SHARE = 1e-3  # of the sampling step: over which the gap's slope at an end is taken
DIP_S = 1e-10  # how near the bottom of a dip is found

Gap = Callable[[float], float]


@dataclass(frozen=True)
class Face:
    """The outline of the face about the strike point: a disc, or a plate along the face frame's x and y.

    Attributes
    ----------
    half_sizes_m : along x and y; of a disc its radius both times
    """

    shape: Literal["disc", "plate"]
    half_sizes_m: tuple[float, float]

    @classmethod
    def of(cls, paddle: Paddle) -> Face | None:
        """The face of a paddle; None where its shape is not known."""
        if paddle.shape == "disc" and paddle.radius_m is not None:
            return cls("disc", (paddle.radius_m, paddle.radius_m))
        if paddle.shape == "plate" and paddle.size_m is not None:
            return cls("plate", (paddle.size_m[0] / 2, paddle.size_m[1] / 2))
        return None

    @property
    def half_width_m(self) -> float:
        """Radius of the greatest circle about the strike point within the outline."""
        return min(self.half_sizes_m)

    def past(self, x: float, y: float) -> float:
        """Distance in m of a point of the face's plane past the edge; 0 within."""
        if self.shape == "disc":
            return max(0.0, math.hypot(x, y) - self.half_sizes_m[0])
        wide, high = self.half_sizes_m
        return math.hypot(max(0.0, abs(x) - wide), max(0.0, abs(y) - high))

    def holds(self, x: float, y: float) -> bool:
        """Whether a point of the face's plane lies on the face, its edge included."""
        return self.past(x, y) == 0


@dataclass(frozen=True, eq=False)
class Struck:
    """The ball right after contact.

    Attributes
    ----------
    ball_out, spin_out : (3,) m/s, (3,) m/s radius times angular velocity; world axes
    contact_point_face : (2,) m, where on the face, along its x and y from the strike point
    """

    ball_out: Array
    spin_out: Array
    contact_point_face: Array


def struck(
    position: ArrayLike,
    velocity: ArrayLike,
    spin_m_s: ArrayLike,
    face_position: ArrayLike,
    face_rotation: ArrayLike,
    face_twist: ArrayLike,
    contact: Contact,
    ball_radius_m: float,
    mass_ratio: float = 0.0,
) -> Struck:
    """The contact of a ball with a face that moves and turns, by `impact` with the face's velocity at the contact.

    Parameters
    ----------
    position, velocity, spin_m_s : (3,) m, (3,) m/s, (3,) m/s, of the ball's centre; radius times angular velocity
    face_position, face_rotation : (3,) m, (3, 3), of the face frame, whose origin is the strike point
    face_twist : (6,) vx, vy, vz in m/s of the strike point, wx, wy, wz in rad/s; world axes
    mass_ratio : ball's mass over the paddle's effective mass along the normal

    Raises
    ------
    NoContact
        The ball does not come nearer to the face.
    """
    rotation, twist = np.asarray(face_rotation, dtype=float), np.asarray(face_twist, dtype=float)
    normal = rotation[:, 2]
    arm = np.asarray(position, dtype=float) - ball_radius_m * normal - np.asarray(face_position, dtype=float)
    there = twist[:3] + np.cross(twist[3:], arm)
    out, spin = impact(velocity, normal, there, contact, spin_m_s, mass_ratio)
    return Struck(out, spin, np.asarray(arm @ rotation[:, :2]))


def first_contact(gap: Gap, begin_s: float, end_s: float, step_s: float) -> float | None:
    """First instant at which a ball comes onto the face from above, None where it does not.

    The gap, (ball's centre - strike point) · normal - ball's radius, falls through zero there. A gap that begins at
    or below zero counts once it has been above, unless it falls at the beginning: then the beginning is the contact.
    The instant is found by Brent's method and does not depend on the step. A dip below zero and back between samples
    is found too where the gap is smooth over three of them; so is a hop above zero and back from below.

    Parameters
    ----------
    gap : of an instant in s, in m
    begin_s, end_s : first and last instant
    step_s : most between two samples
    """
    if not end_s > begin_s:
        return None
    count = math.ceil((end_s - begin_s) / step_s)
    samples = _Samples(gap, begin_s, end_s, count)
    first = samples.at(0)
    if first <= TOUCH_M and samples.rise_at_begin() < 0:
        return begin_s
    above = first > TOUCH_M
    for i in range(1, count + 1):
        side = 1 if above else -1
        turn = samples.turn(i, side)
        there = samples.at(i)
        if turn is not None and (above or there <= 0):
            if not above:
                return root_of(gap, turn, samples.time(i))
            before = samples.time(i - 1)
            return root_of(gap, before if before < turn else samples.time(i - 2), turn)
        if above and there <= 0:
            return root_of(gap, samples.time(i - 1), samples.time(i))
        above = above or turn is not None or there > TOUCH_M
    return None


class _Samples:
    """A gap at `count` + 1 instants, evenly apart and taken when first asked for, and where it turns between them."""

    def __init__(self, gap: Gap, begin: float, end: float, count: int):
        self.gap, self.begin, self.end, self.count = gap, begin, end, count
        self.width = (end - begin) / count
        self.values: list[float] = []

    def time(self, i: int) -> float:
        return self.begin + i * self.width if i < self.count else self.end

    def at(self, i: int) -> float:
        while len(self.values) <= i:
            self.values.append(self.gap(self.time(len(self.values))))
        return self.values[i]

    def rise_at_begin(self) -> float:
        return self.gap(self.begin + SLOPE_SHARE * self.width) - self.at(0)

    def rise_at_end(self) -> float:
        return self.at(self.count) - self.gap(self.end - SLOPE_SHARE * self.width)

    def turn(self, i: int, side: int) -> float | None:
        """Where the gap, up to sample i, goes over zero from its side (1 above, -1 below) and turns back; else None.

        Such a turn shows as a sample nearer to zero than both beside it. It is sought where that sample is no farther
        from zero than its second difference: a parabola through the three turns within an eighth of that from it.
        In the first and in the last span it shows by the slope at the end.
        """
        near, here = side * self.at(i - 1), side * self.at(i)
        if i >= 2:
            far = side * self.at(i - 2)
            if near <= min(far, here) and near <= far - 2 * near + here:
                return self._over(i - 2, i, side)
        if i == 1 and (here >= near or side < 0) and side * self.rise_at_begin() < 0:
            return self._over(0, 1, side)
        if i == self.count and here <= near and side * self.rise_at_end() > 0:
            return self._over(i - 1, i, side)
        return None

    def _over(self, first: int, last: int, side: int) -> float | None:
        """Where between two samples the gap is farthest over zero from its side, None where it is not over."""
        from scipy.optimize import minimize_scalar

        begin, end = self.time(first), self.time(last)
        found = minimize_scalar(
            lambda after: side * self.gap(begin + after),
            bounds=(0.0, end - begin),
            method="bounded",
            options={"xatol": DIP_S},
        )
        return begin + float(found.x) if found.fun < -TOUCH_M else None
