"""Upper bounds on the strike speed of a posture, in closed form over vertices, many at once, each with its proof.

The largest s with A v = s b and lo <= v <= hi, where A are the rows of the Jacobian that the strike fixes, is a
linear program. Its dual, the least Σ max(hi_i y_i, lo_i y_i) with y = Aᵀλ and λᵀb = 1, has its optimum where r - 1
of the y_i are zero: λ is then the generalised cross product of r - 1 columns of A, and all choices of columns are
tried. Any λ with λᵀb = 1 is a valid proof (weak duality), so rounding can only loosen a bound, never break it.
"""

from __future__ import annotations

from dataclasses import dataclass
from functools import cache
from itertools import combinations

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.kinematics import Chain

EXACT = 1e-6  # of a strike's speed: joint velocities further from what it asks are no strike
RANK_TOLERANCE = 1e-7  # of the largest singular value (rows in m/s): below it a row counts as none
FLAT = 1e-10  # of the size of r columns' product: largest minor of a matrix that may lack rank
ASIDE_TOLERANCE = 1e-7  # part of the wanted twist outside the range of A that counts as none
IDLE = 1e-9  # of the largest |y| × range: a joint whose part is less neither helps nor hinders
OUTSIDE = 1e-9  # of a joint's range: farther out than this is not rounding
VAST = 1e4  # rad/s or m/s: stands for no limit
WIDEST = 10.0  # rad/s or m/s: range of a joint that columns are scaled by
UNLIMITED_M_S = 100.0  # a strike speed from here on is bounded by nothing
BLOCK_VALUES = 2_000_000  # numbers held at once


@dataclass(frozen=True, eq=False)
class Bounds:
    """Upper bounds of m postures.

    Attributes
    ----------
    speed : (m,) m/s along the direction; 0 where no joint motion produces it, inf where unlimited
    dual : (m, r) its dual vector on the rows of A
    """

    speed: Array
    dual: Array


def strike_rows(jacobian: Array, rotation: Array, spin_free: bool, length_m: float) -> Array:
    """Rows (m, 5 or 6, n) that a strike with a still paddle fixes, all in m/s.

    Parameters
    ----------
    jacobian : (m, 6, n) linear then angular, world axes
    rotation : (m, 3, 3) paddle axes, z the face normal
    spin_free : the disc may turn about its normal, a plate may not
    length_m : turns a rate of rotation into a speed
    """
    axes = rotation[:, :, :2] if spin_free else rotation
    turning = length_m * (axes.transpose(0, 2, 1) @ jacobian[:, 3:])
    return np.concatenate([jacobian[:, :3], turning], axis=1)


def world_dual(dual: Array, rotation: Array, length_m: float) -> Array:
    """A dual vector (m, r) on the rows of `strike_rows`, or on the three linear ones, as (m, 6) on the Jacobian's."""
    out = np.zeros((len(dual), 6))
    out[:, :3] = dual[:, :3]
    turning = dual.shape[1] - 3
    if turning:
        out[:, 3:] = length_m * np.einsum("mij,mj->mi", rotation[:, :, :turning], dual[:, 3:])
    return out


def upper_bounds(rows: Array, direction: Array, lo: Array, hi: Array) -> Bounds:
    """Upper bounds of m postures.

    Parameters
    ----------
    rows : (m, r, n) all in one unit
    direction : (m, 3) unit vectors; rows after the third must stay zero
    lo, hi : (m, n) or (n,) joint velocities, lo <= 0 <= hi; infinite where there is no limit
    """
    m, r, n = rows.shape
    target = np.zeros((m, r))
    target[:, :3] = direction
    lo, hi = (np.broadcast_to(side, (m, n)) for side in _limited(lo, hi))
    out = Bounds(np.zeros(m), np.zeros((m, r)))
    block = max(1, BLOCK_VALUES // _vertex_numbers(n, r))
    for k in range(0, m, block):
        part = slice(k, k + block)
        low = np.ones(len(target[part]), dtype=bool)
        if r <= n:
            speed, dual, low = _full_rank(rows[part], target[part], lo[part], hi[part])
            out.speed[part], out.dual[part] = speed, dual
        for i in np.flatnonzero(low) + k:
            out.speed[i], out.dual[i] = _reduced(rows[i], target[i], lo[i], hi[i])
    out.speed[out.speed > UNLIMITED_M_S] = np.inf
    return out


def certified(rows: Array, direction: Array, lo: Array, hi: Array, dual: Array) -> Array:
    """What a dual vector (m, r) proves (m,): Σ max(hi y, lo y) / λᵀd with y = Aᵀλ; one product, no trust."""
    y = np.einsum("mrn,mr->mn", rows, dual)
    return np.asarray(_value(y, *_limited(lo, hi)) / np.einsum("mi,mi->m", dual[:, :3], direction))


def covering_bound(chain: Chain, velocity: Array, position: Array, direction: Array) -> Array:
    """A speed (m,) along directions (m, 3) at points (m, 3) that no posture passes, however it gets there.

    Each joint adds at most its speed times its lever: the first one's lever is known, its axis being fixed; another's
    is no longer than the links beyond it. A sliding joint adds its speed.

    Parameters
    ----------
    velocity : (n,) the larger side of each joint's kept-back limit
    """
    n = len(chain.axes)
    _, _, origins, axes = chain.placements(np.zeros((1, n)))
    lengths = [float(np.linalg.norm(offset)) for offset in chain.offsets[1:]] + [
        float(np.linalg.norm(chain.face_offset))
    ]
    levers = np.cumsum(lengths[::-1])[::-1]
    if chain.sliding.any():
        levers = np.full(n, np.inf)  # links change their length; only what slides itself is bounded
    total = np.zeros(len(position))
    for i in range(n):
        if chain.sliding[i]:
            total += velocity[i]
        elif i == 0:
            turning = np.cross(axes[0, 0], position - origins[0, 0])
            total += velocity[0] * np.abs(np.einsum("mi,mi->m", turning, direction))
        else:
            total += velocity[i] * levers[i]
    return total


def _value(y: Array, lo: Array, hi: Array) -> Array:
    return np.asarray(np.maximum(y * hi, y * lo).sum(axis=-1))


def maximisers(rows: Array, direction: Array, lo: Array, hi: Array, bounds: Bounds) -> Array:
    """Joint velocities (m, n) that reach the bounds; nan where a bound is 0 or infinite. Arrays as for `upper_bounds`.

    Joints with y = Aᵀλ apart from 0 stand at the side it pushes to; the idle ones follow from the rows, as near to the
    middle of their ranges as they let them be. Where that leaves the box, a linear program finds a corner of it.
    """
    m, r, n = rows.shape
    lo, hi = np.broadcast_to(lo, (m, n)), np.broadcast_to(hi, (m, n))
    y, spans = np.einsum("mrn,mr->mn", rows, bounds.dual), _spans(lo, hi)
    size = np.abs(y) * spans
    idle = size <= IDLE * size.max(axis=1, keepdims=True)
    side = np.where(y > 0, hi, lo)
    good = np.isfinite(bounds.speed) & (bounds.speed > 0) & (np.isfinite(side) | idle).all(axis=1)
    with np.errstate(invalid="ignore"):
        middle = np.where(np.isfinite(lo + hi), (lo + hi) / 2, 0.0)
    push = np.where(idle, middle, side)
    push[~good] = np.nan
    target = np.zeros((m, r))
    target[:, :3] = direction
    missing = bounds.speed[good, None] * target[good] - np.einsum("mrn,mn->mr", rows[good], push[good])
    free = np.where(idle, spans, 0.0)[good]
    step = np.linalg.pinv(rows[good] * free[:, None, :], rcond=RANK_TOLERANCE) @ missing[:, :, None]
    push[good] += step[:, :, 0] * free
    with np.errstate(invalid="ignore"):
        outside = ((push > hi + OUTSIDE * spans) | (push < lo - OUTSIDE * spans)).any(axis=1)
    for i in np.flatnonzero(outside):
        push[i] = _corner(rows[i], target[i], lo[i], hi[i])
    return np.asarray(np.clip(push, lo, hi))


def _corner(rows: Array, target: Array, lo: Array, hi: Array) -> Array:
    """A joint velocity (n,) of the largest strike speed, by scipy's HiGHS; nan where it finds none."""
    from scipy.optimize import linprog

    sides = [*zip(lo, hi, strict=True), (0.0, None)]
    equal = np.column_stack([rows, -target])
    answer = linprog(np.append(np.zeros(len(lo)), -1.0), A_eq=equal, b_eq=np.zeros(len(rows)), bounds=sides)
    return np.asarray(answer.x[:-1]) if answer.status == 0 else np.full(len(lo), np.nan)


def _limited(lo: Array, hi: Array) -> tuple[Array, Array]:
    """Joint velocities with a huge limit where there is none, so that nothing times it stays next to nothing."""
    return np.maximum(lo, -VAST), np.minimum(hi, VAST)


def _spans(lo: Array, hi: Array) -> Array:
    """Widths of the joints' ranges, at most WIDEST: columns scaled by them are of one size."""
    return np.clip(hi - lo, 1e-12, WIDEST)


def _full_rank(rows: Array, target: Array, lo: Array, hi: Array) -> tuple[Array, Array, NDArray[np.bool_]]:
    """Bounds (m,) and duals (m, r) of postures whose rows are independent, and which ones may not be (m,)."""
    m, r, n = rows.shape
    # Postures last: long inner loops.
    columns = np.ascontiguousarray((rows * _spans(lo, hi)[:, None, :]).transpose(2, 1, 0))
    low_side, high_side = (np.ascontiguousarray((side / _spans(lo, hi)).T) for side in (lo, hi))
    duals = _cross_products(columns, r)  # (k, r, m)
    along = np.einsum("krm,mr->km", duals, target)
    size = np.abs(duals).max(axis=(0, 1))
    usable = np.abs(along) > 1e-9 * np.maximum(size, 1e-300)
    scale = 1 / np.where(usable, along, 1.0)
    values, largest = np.zeros(usable.shape), np.zeros(m)
    idle = np.zeros((len(duals), n, 1), dtype=bool)
    if r > 1:
        idle[np.arange(len(duals))[:, None], _subsets(n, r - 1)] = True
    for j in range(n):
        y = sum(duals[:, i] * columns[j, i] for i in range(r))
        # Of columns that a product is made of, rounding alone is left, whatever their scale: no sign of full rank.
        largest = np.maximum(largest, np.where(idle[:, j], 0.0, np.abs(y)).max(axis=0))
        y *= scale
        values += np.maximum(y * high_side[j], y * low_side[j])
    values[~usable] = np.inf
    best = np.argmin(values, axis=0)
    at = np.arange(m)
    dual = duals[best, :, at] * scale[best, at][:, None]
    norms = np.sort(np.sqrt((columns**2).sum(axis=1)), axis=0)[::-1][:r]
    low = largest < FLAT * np.prod(norms, axis=0)
    return values[best, at], dual, np.asarray(low | ~np.isfinite(dual).all(axis=1) | ~usable.any(axis=0))


def _reduced(rows: Array, target: Array, lo: Array, hi: Array) -> tuple[float, Array]:
    """Bound and dual (r,) of one posture whose rows depend on each other: in the rows of its rank."""
    u, sizes, _ = np.linalg.svd(rows)
    rank = int((sizes > RANK_TOLERANCE * max(sizes[0], 1e-12)).sum())
    inside = u[:, :rank]
    aside = target - inside @ (inside.T @ target)
    miss = float(np.linalg.norm(aside))
    if miss > ASIDE_TOLERANCE:
        # λ along the part of the direction that no joint motion makes: y = 0 proves the bound 0.
        return 0.0, aside / miss**2
    goal = (inside.T @ target)[None]
    speed, dual, _ = _full_rank((inside.T @ rows)[None], goal, lo[None], hi[None])
    return float(speed[0]), inside @ dual[0]


def _cross_products(columns: Array, r: int) -> Array:
    """Generalised cross products (k, r, m) of every choice of r - 1 of n columns (n, r, m), by growing minors."""
    n, _, m = columns.shape
    if r == 1:
        return np.ones((1, 1, m))
    minors = columns  # minors[s, i]: choice s of columns, choice i of rows
    for size in range(2, r):
        last, before, taken = _growth(n, r, size)
        grown = np.zeros((len(last), len(taken), m))
        for place in range(size):
            # Expansion along the last column: sign, the row taken by it, and the rows that are left.
            sign = -1.0 if (size - 1 - place) % 2 else 1.0
            left, row = taken[:, place, 1], taken[:, place, 0]
            for i in range(len(taken)):
                grown[:, i] += sign * columns[last, row[i]] * minors[before, left[i]]
        minors = grown
    signs = np.array([-1.0 if i % 2 else 1.0 for i in range(r)])
    # Rows were chosen in order; component i of the product is the minor without row i.
    return np.asarray(minors[:, ::-1] * signs[None, :, None])


@cache
def _subsets(n: int, size: int) -> NDArray[np.int64]:
    """Choices of columns (k, size), in order."""
    return np.array(list(combinations(range(n), size)), dtype=np.int64).reshape(-1, size)


@cache
def _growth(n: int, r: int, size: int) -> tuple[NDArray[np.int64], NDArray[np.int64], NDArray[np.int64]]:
    """How minors of `size` come from smaller ones: each choice's last column (k,), the choice of the columns before
    it (k,), and for each choice of rows (i, size, 2) the row taken out and the choice of the rows left."""
    chosen = list(combinations(range(n), size))
    smaller = {pick: i for i, pick in enumerate(combinations(range(n), size - 1))}
    fewer = {pick: i for i, pick in enumerate(combinations(range(r), size - 1))}
    last = np.array([pick[-1] for pick in chosen])
    before = np.array([smaller[pick[:-1]] for pick in chosen])
    taken = [
        [(pick[place], fewer[pick[:place] + pick[place + 1 :]]) for place in range(size)]
        for pick in combinations(range(r), size)
    ]
    return last, before, np.array(taken)


@cache
def _vertex_numbers(n: int, r: int) -> int:
    """Numbers held for one posture while its vertices are tried."""
    widest = max(len(_subsets(n, k)) * len(_subsets(r, k)) for k in range(1, max(r, 2)))
    return max(1, 3 * widest + len(_subsets(n, max(r - 1, 0))) * n)
