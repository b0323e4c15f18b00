"""The freedom that a strike leaves to the joints' velocities, and a search of it for the fastest swing.

The rows that a strike fixes leave a null space, often of one or two dimensions. How fast a swing may be is, over that
space, the least of several smooth and nearly quasi-concave functions, so it has edges but hardly a second summit. A
compass search (Kolda, Lewis and Torczon, "Optimization by direct search: new perspectives on some classical and modern
methods", SIAM Review 45(3), 2003) with axes turned from round to round climbs along the edges; every swing of a round
is timed together.
"""

from __future__ import annotations

from collections.abc import Callable
from functools import cache

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array

ROUNDS = 16
FIRST_STEP = 0.5  # of what the joints can do, at the speed that there is
SHRINK = 0.6  # of the step, after a round that found nothing faster
BASES = 3  # sets of axes, used in turn
GAIN = 1e-4  # of the speed: less is not worth a step
NARROWEST, WIDEST = 1e-3, 10.0  # rad/s or m/s: ends of what the axes are scaled by

# Speeds (k,) of swings of some postures (k,) along tangents (k, n); 0 where not faster than the floors (k,).
Speeds = Callable[[NDArray[np.int64], Array, Array], Array]


def axes_of(rows: Array, scale: Array) -> Array:
    """Axes (c, n, d) of the null space of rows (c, r, n), unit vectors where each joint is measured in `scale`.

    Parameters
    ----------
    scale : (c, n) rad/s or m/s, what each joint can do
    """
    scale = np.clip(scale, NARROWEST, WIDEST)
    spare = max(rows.shape[2] - rows.shape[1], 0)
    vectors = np.linalg.svd(rows * scale[:, None, :])[2][:, rows.shape[2] - spare :]
    return np.asarray(scale[:, :, None] * vectors.transpose(0, 2, 1))


def climbed(speeds: Speeds, axes: Array, tangent: Array, speed: Array, enough: Array) -> tuple[Array, Array]:
    """Tangents (c, n) and speeds (c,) after the search from given ones.

    Parameters
    ----------
    axes : (c, n, d)
    enough : (c,) m/s, from there on nothing is looked for
    """
    tangent, speed = tangent.copy(), speed.copy()
    ahead = np.where(np.isfinite(enough), np.maximum(speed, enough), speed)
    step = FIRST_STEP / np.where(speed > 0, np.sqrt(speed * ahead), np.inf)
    compasses = _compasses(axes.shape[2])
    for k in range(ROUNDS if axes.shape[2] else 0):
        going = np.flatnonzero((speed > 0) & (speed < enough))
        if not len(going):
            break
        compass = compasses[k % len(compasses)]
        away = np.einsum("cnd,kd->ckn", axes[going], compass) * step[going, None, None]
        tried = tangent[going, None] + away
        owner = np.repeat(going, len(compass))
        floor = speed[owner] * (1 + GAIN)
        found = speeds(owner, tried.reshape(len(owner), -1), floor).reshape(len(going), len(compass))
        best = found.argmax(axis=1)
        up = np.flatnonzero(found.max(axis=1) > speed[going])
        tangent[going[up]] = tried[up, best[up]]
        speed[going[up]] = found[up, best[up]]
        step[np.delete(going, up)] *= SHRINK
    return tangent, speed


@cache
def _compasses(d: int) -> list[Array]:
    """Sets of directions (2d, d): both ways along axes, the first set's own and turned ones."""
    if d < 2:
        turned = [np.eye(d)]
    elif d == 2:
        angles = np.arange(BASES) * np.pi / 2 / BASES
        turned = [np.array([[np.cos(a), np.sin(a)], [-np.sin(a), np.cos(a)]]) for a in angles]
    else:
        rng = np.random.default_rng(0)
        turned = [np.eye(d)] + [np.linalg.qr(rng.normal(size=(d, d)))[0] for _ in range(BASES - 1)]
    return [np.concatenate([axes, -axes]) for axes in turned]
