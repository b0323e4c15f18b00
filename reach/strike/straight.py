"""Straight strokes with held attitude: strikes that forgive a ball that comes a little early or late."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from reach.cell import Array
from reach.kinematics import Chain
from reach.strike.bound import EXACT, strike_rows
from reach.strike.path import NODES, SPREAD, Paths

LONGEST_M = 0.6  # a side, where no run-up ends it sooner
STRAIN = 4.0  # times the joint speed at the strike: from there the line runs into a singularity
SHORTEST_M = 1e-6  # stands for no room at all
REFINED = 3
DAMPING = 1e-6  # of the largest eigenvalue, in the inverse of the rows


def straight_strokes(
    chain: Chain,
    ends: tuple[Array, Array],
    q: Array,
    tangent: Array,
    direction: Array,
    spin_free: bool,
    length_m: float,
    run_up_m: float | None,
) -> Paths:
    """Strokes along straight lines through postures q (m, n), the face's attitude held.

    The joints move as near to `tangent` as the line lets them: dq/ds = t + J⁺ (d - J t) on the rows that the strike
    fixes, integrated both ways from the strike by the midpoint rule, once to find how far it goes and once again with
    its nodes there.

    Parameters
    ----------
    ends : (n,) kept-back ends of travel, low and high
    tangent : (m, n) joint velocity at the strike per m/s
    direction : (m, 3) unit vectors
    length_m : turns a rate of rotation into a speed
    run_up_m : longest way a side
    """
    m, n = q.shape
    longest = LONGEST_M if run_up_m is None else run_up_m
    lo, hi = ends
    q, tangent, direction = (np.repeat(x, 2, axis=0) for x in (q, tangent, direction))
    way = np.tile([-1.0, 1.0], m)

    def integrated(length: Array) -> tuple[Array, Array]:
        return _integrate(chain, q, tangent, direction, way * length, spin_free, length_m)

    nodes, slopes = integrated(np.full(2 * m, longest))
    exact = _misses(chain, q, slopes[:, 0], direction, spin_free, length_m) <= EXACT
    inside = ((nodes >= lo) & (nodes <= hi)).all(axis=2) & exact[:, None]
    calm = np.abs(slopes).max(axis=2) <= STRAIN * np.abs(slopes[:, :1]).max(axis=2)
    good = np.minimum.accumulate(inside & calm, axis=1).sum(axis=1) - 1
    length = longest * SPREAD[np.maximum(good, 0)]  # none where the line can't be begun
    nodes, slopes = integrated(np.maximum(length, SHORTEST_M))
    distance = np.maximum(length, SHORTEST_M)[:, None] * SPREAD
    shape = (m, 2, NODES)
    paths = Paths(
        distance.reshape(shape),
        nodes.reshape(*shape, n),
        slopes.reshape(*shape, n),
        np.zeros((*shape, n)),
        np.ones(shape),
    )
    return replace(paths, bend=_bends(paths))


def _integrate(
    chain: Chain,
    q: Array,
    tangent: Array,
    direction: Array,
    ends: Array,
    spin_free: bool,
    length_m: float,
) -> tuple[Array, Array]:
    """Nodes and slopes (m, NODES, n) along each line, from the strike out to path coordinates `ends` (m,)."""

    def slope(at: Array, near: Array) -> Array:
        _, rotation, jacobian = chain.jacobians(at)
        rows = strike_rows(jacobian, rotation, spin_free, length_m)
        miss = -np.einsum("mrn,mn->mr", rows, near)
        miss[:, :3] += direction
        gram = rows @ rows.transpose(0, 2, 1)
        gram += DAMPING * np.trace(gram, axis1=1, axis2=2)[:, None, None] * np.eye(rows.shape[1])
        return np.asarray(
            near + np.einsum("mrn,mr->mn", rows, np.linalg.solve(gram, miss[:, :, None])[:, :, 0])
        )

    first = slope(q, tangent)
    for _ in range(REFINED):  # the damping taken out again: the strike itself is exact
        first = slope(q, first)
    nodes, slopes = [q], [first]
    for step in np.diff(SPREAD):
        h = (ends * step)[:, None]
        middle = slope(nodes[-1] + h / 2 * slopes[-1], tangent)
        nodes.append(nodes[-1] + h * middle)
        slopes.append(slope(nodes[-1], tangent))
    return np.stack(nodes, axis=1), np.stack(slopes, axis=1)


def _misses(
    chain: Chain, q: Array, slope: Array, direction: Array, spin_free: bool, length_m: float
) -> Array:
    """How far (m,) slopes (m, n) at the strike are from the line: of its rows, per m/s."""
    _, rotation, jacobian = chain.jacobians(q)
    rows = np.einsum("mrn,mn->mr", strike_rows(jacobian, rotation, spin_free, length_m), slope)
    rows[:, :3] -= direction
    return np.asarray(np.abs(rows).max(axis=1))


def _bends(paths: Paths) -> Array:
    """Second derivative by s at the nodes, by differences over both sides together."""
    bends = np.empty_like(paths.slope)
    for i, (distance, slope) in enumerate(zip(paths.distance, paths.slope, strict=True)):
        s = np.concatenate([-distance[0, :0:-1], distance[1]])
        both = np.gradient(np.concatenate([slope[0, :0:-1], slope[1]]), s, axis=0, edge_order=2)
        bends[i, 0], bends[i, 1] = both[NODES - 1 :: -1], both[NODES - 1 :]
    return bends
