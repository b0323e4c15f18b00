"""A launch with drag and no lift under gravity that pulls straight down: one plane, solved by its hodograph."""

from __future__ import annotations

import math
from dataclasses import dataclass
from functools import cache

import numpy as np

from reach.cell import Array

NODES = 96  # of Gauss and Legendre's rule over a leg: within the bounds below it errs by some 1e-12 m and s at most
LEAST_SHARE = 0.1  # of g/k left by the pole of a rising leg at its end; nearer to it the rule is too coarse
MOST_SHARE = 20.0  # the same of a falling leg, whose pole is imaginary: some kh = 1.5
SOLVED_M = 1e-12  # how near heights and distance must come; rounding over some metres is a thousandth of it
ROUNDS = 12  # of Newton's method; from the vertical flight five do
NO_WAY_M_S = 1e-150  # a horizontal velocity of less has no square


@dataclass(frozen=True)
class Arc:
    """A flight in its plane by its ends: velocities along the way and upward in m/s, and the seconds between."""

    start_m_s: tuple[float, float]
    landing_m_s: tuple[float, float]
    apex_m_s: float
    flight_s: float


def arc(drag_per_m: float, down_m_s2: float, rise_m: float, drop_m: float, way_m: float) -> Arc | None:
    """The flight that rises and drops by given heights and covers a horizontal distance; None where drag is too strong.

    With p the slope of the path, u the horizontal velocity at the apex and v there, quadratic drag gives
    1/v² = 1/u² - (k/g)(p sqrt(1 + p²) + asinh p), whatever the flight (G. W. Parker, Am. J. Phys. 45 (1977) 606;
    from memory). In q = u p, the upward velocity without drag, and G = q sqrt(u² + q²) + u² asinh(q/u), this is
    v = u/sqrt(1 - k G/g), and it holds for a vertical flight too, u = 0, G = q |q|. Height, distance and time are
    integrals over q of q/(g - k G), u/(g - k G) and 1/sqrt(g (g - k G)). The ends of q and u are found by
    Newton's method from those of the vertical flight, v² = (g/k)(exp(2 k h) - 1) up and (g/k)(1 - exp(-2 k h)) down.

    Parameters
    ----------
    drag_per_m, down_m_s2 : k and g, above 0
    rise_m, drop_m : from the start to the apex and from there to the landing, not both 0
    way_m : between start and landing, seen from above
    """
    k, g = drag_per_m, down_m_s2
    if 2 * k * max(rise_m, drop_m) > math.log(MOST_SHARE):
        return None
    u = 0.0
    ends = [math.sqrt(-g / k * math.expm1(-2 * k * rise_m)), math.sqrt(g / k * math.expm1(2 * k * drop_m))]
    heights = rise_m, drop_m
    for _ in range(ROUNDS):
        with np.errstate(over="ignore", invalid="ignore"):  # of a way that no ball makes
            legs = [_Leg(sign, end, u, k, g) for sign, end in zip((1, -1), ends, strict=True)]
        if not all(LEAST_SHARE <= leg.share <= MOST_SHARE for leg in legs):
            return None
        for leg in legs:
            leg.integrate()
        off = [height - leg.height for height, leg in zip(heights, legs, strict=True)]
        missing = way_m - sum(leg.way for leg in legs)
        if max(abs(missing), *map(abs, off)) <= SOLVED_M:
            return _told(legs, u)
        slope = sum(leg.way_by_u - leg.way_by_height * leg.height_by_u for leg in legs)
        by_ends = sum(leg.way_by_height * lacks for leg, lacks in zip(legs, off, strict=True))
        more = (missing - by_ends) / slope
        ends = [
            end + (lacks - leg.height_by_u * more) / leg.height_by_end if end > 0 else 0.0
            for end, lacks, leg in zip(ends, off, legs, strict=True)
        ]
        u += more
    return None


class _Leg:
    """The part of a flight before its apex (sign 1) or after it (-1), over q from 0 to `end`."""

    def __init__(self, sign: int, end: float, u: float, k: float, g: float):
        nodes, weights = _rule()
        q = end * nodes
        root = np.sqrt(u * u + q * q)
        self.turn = np.arcsinh(q / u) if u > NO_WAY_M_S else np.zeros(len(q))
        self.size = sign * k / g
        self.shares = 1 - self.size * (q * root + u * u * self.turn)  # 1 - k G/g
        self.share = float(self.shares[-1])
        self.sign, self.end, self.u, self.g = sign, end, u, g
        self.q, self.inner = q[:-1], end / g * weights

    def integrate(self) -> None:
        """Find height and way, and their slopes by u, the end of q and each other."""
        shares, u = self.shares[:-1], self.u
        by_u = self.size * 2 * u * self.turn[:-1] / shares**2  # of 1/share
        over = float(self.inner @ (1 / shares))
        self.height = float(self.inner @ (self.q / shares))
        self.height_by_u = float(self.inner @ (self.q * by_u))
        self.height_by_end = self.end / (self.g * self.share)
        self.way = u * over
        self.way_by_u = over + u * float(self.inner @ by_u)
        self.way_by_height = u / self.end if self.end > 0 else 0.0

    @property
    def seconds(self) -> float:
        return float(self.inner @ (1 / np.sqrt(self.shares[:-1])))


def _told(legs: list[_Leg], u: float) -> Arc:
    """The arc of two legs."""
    (vx0, vz0), (vx1, vz1) = (
        (u / math.sqrt(leg.share), leg.sign * leg.end / math.sqrt(leg.share)) for leg in legs
    )
    return Arc((vx0, vz0), (vx1, vz1), u, sum(leg.seconds for leg in legs))


@cache
def _rule() -> tuple[Array, Array]:
    """Nodes of the rule over [0, 1], the end 1 after them, and its weights."""
    nodes, weights = np.polynomial.legendre.leggauss(NODES)
    return np.append((nodes + 1) / 2, 1.0), weights / 2
