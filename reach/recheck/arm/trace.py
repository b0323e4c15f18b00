"""Motions on the fine grid that limits are measured on, and quintics brought to the control grid."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.recheck.arm.chain import Array
from reach.recheck.stored import BadFolder

FINE = 4  # samples a control period
MOST_NUMBERS = 20_000_000  # of a motion's positions; half an hour of seven joints at 1 kHz has 14 million
LONGEST = 1_000_000  # control periods of a motion through knots; a minute at 1 kHz has 60,000


@dataclass(frozen=True, eq=False)
class Trace:
    """A motion, a row each FINE-th part of a control period.

    Attributes
    ----------
    t_s : (f,)
    q, v, a : (f, n) rad, rad/s, rad/s², m for sliding joints; `a` holds until the next control row
    strike : row of the strike, None where there is none or are many
    period_s : control period
    """

    t_s: Array
    q: Array
    v: Array
    a: Array
    strike: int | None
    period_s: float


def fine(
    q: Array, v: Array, a: Array, period_s: float, start_s: float = 0.0, strike: int | None = None
) -> Trace:
    """A motion (m, n) of constant acceleration inside each control period, on the fine grid; the last row once.

    Parameters
    ----------
    strike : control row of the strike
    """
    m = len(q)
    if m == 0 or q.size > MOST_NUMBERS:
        raise BadFolder("motion", f"has no rows, or more than {MOST_NUMBERS} positions")
    row = np.append(np.repeat(np.arange(m - 1), FINE), m - 1)
    part = np.append(np.tile(np.arange(FINE), m - 1), 0)
    since = (part * period_s / FINE)[:, None]
    with np.errstate(over="ignore", invalid="ignore"):  # numbers that mean nothing show as nan
        place, speed = q[row] + since * (v[row] + since * a[row] / 2), v[row] + since * a[row]
    return Trace(
        start_s + row * period_s + since[:, 0],
        place,
        speed,
        np.asarray(a[row], dtype=np.float64),
        None if strike is None else strike * FINE,
        period_s,
    )


def quintic(t_s: Array, q: Array, v: Array, a: Array, period_s: float) -> tuple[Array, Array, Array]:
    """Quintics through knots (k, n) at times (k,) as a motion (m, n) on the control grid, from the first knot on.

    Velocities are the quintics' at the rows, and the last knot's from there on; accelerations are constant between
    rows, positions follow exactly from the first knot. Coefficients of a quintic by its ends: L. Biagiotti and
    C. Melchiorri, Trajectory Planning for Automatic Machines and Robots, 2008, section 2.1.7 (from memory).
    """
    gaps = np.diff(t_s)
    if len(gaps) == 0 or not (gaps > 0).all() or not t_s[-1] - t_s[0] <= LONGEST * period_s:
        raise BadFolder(
            "knots", f"are not two or more, one after the other, within {LONGEST} control periods"
        )
    last = float(t_s[-1] - t_s[0])
    rows = int(np.ceil(last / period_s - 1e-9)) + 1
    t = t_s[0] + np.minimum(np.arange(rows) * period_s, last)
    leg = np.clip(np.searchsorted(t_s, t, side="right") - 1, 0, len(t_s) - 2)
    h = gaps[leg, None]
    x = t[:, None] - t_s[leg, None]
    v0, v1, a0, a1, gap = v[leg], v[leg + 1], a[leg], a[leg + 1], q[leg + 1] - q[leg]
    c3 = (20 * gap - (8 * v1 + 12 * v0) * h - (3 * a0 - a1) * h**2) / (2 * h**3)
    c4 = (-30 * gap + (14 * v1 + 16 * v0) * h + (3 * a0 - 2 * a1) * h**2) / (2 * h**4)
    c5 = (12 * gap - 6 * (v1 + v0) * h + (a1 - a0) * h**2) / (2 * h**5)
    speed = v0 + x * (a0 + x * (3 * c3 + x * (4 * c4 + x * 5 * c5)))
    speed[-1] = v[-1]
    gain = np.zeros_like(speed)
    gain[:-1] = (speed[1:] - speed[:-1]) / period_s
    place = np.empty_like(speed)
    place[0] = q[0]
    place[1:] = q[0] + np.cumsum((speed[:-1] + speed[1:]) * (period_s / 2), axis=0)
    return place, speed, gain
