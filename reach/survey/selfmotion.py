"""The freedom that a strike leaves to the arm: spin about the normal, and a redundant arm's self-motion.

From each of a strike's best postures steps are made along the null vectors of its five rows, to wherever the upper
bound grows, with a step that is halved where it does not; a pattern search, so that no slope of a bound with corners
is needed. All postures that were tried count among those compared.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.bound import strike_rows, upper_bounds
from reach.strike.setting import Setting
from reach.survey.inverse import Found, reach_strikes, strike_errors

FIRST_STEP = 0.4  # rad of the unit null vector
ROUNDS = 5
RETURN_STEPS = 2  # of inverse kinematics, back onto the strike, within a round
LAST_STEPS = 6  # and at the end
LEADERS = 4  # postures of a strike that are moved
LOOSE_M = 2e-3  # a posture this near the strike counts within a round


@dataclass(frozen=True, eq=False)
class Moved:
    """Postures after the search: as Found; tried (m,) counts the postures looked at for each strike."""

    found: Found
    tried: NDArray[np.int64]


def own_bound(setting: Setting, q: Array, direction: Array) -> Array:
    """Upper bound (c,) of postures for the cell's own way of striking, without the tool's cap."""
    lo, hi = setting.velocities(q)
    _, rotation, jacobian = setting.chain.jacobians(q)
    if setting.still:
        rows = strike_rows(jacobian, rotation, setting.spin_free, setting.length_m)
    else:
        rows = np.ascontiguousarray(jacobian[:, :3])
    return upper_bounds(rows, direction, lo, hi).speed


def best_first(found: Found, value: Array) -> Found:
    """The postures of each strike by falling value."""
    order = np.lexsort((-value, found.owner))
    return Found(found.q[order], found.owner[order])


def leaders(found: Found, count: int) -> NDArray[np.int64]:
    """Indices of the first `count` postures of each strike."""
    rank = np.arange(len(found.owner)) - np.searchsorted(found.owner, found.owner)
    return np.flatnonzero(rank < count)


def improved(
    setting: Setting, found: Found, position: Array, normal: Array, direction: Array, count: int = LEADERS
) -> Moved:
    """Move the `count` best postures of m strikes (m, 3) along the freedom left to them, each to a higher bound."""
    m = len(position)
    pick = leaders(found, count)
    q, owner = found.q[pick].copy(), found.owner[pick]
    place, face, along = position[owner], normal[owner], direction[owner]
    value = own_bound(setting, q, along)
    tried = np.bincount(found.owner, minlength=m)
    step = np.full(len(q), FIRST_STEP)
    for _ in range(ROUNDS if len(q) else 0):
        for null in _null_vectors(setting, q, place, face):
            left = np.arange(len(q))
            for sign in (1.0, -1.0):
                away = q[left] + sign * step[left, None] * null[left]
                other, near = reach_strikes(setting, away, place[left], face[left], RETURN_STEPS, LOOSE_M)
                there = np.where(near, own_bound(setting, other, along[left]), -np.inf)
                tried += np.bincount(owner[left[near]], minlength=m)
                better = there > value[left]
                q[left[better]], value[left[better]] = other[better], there[better]
                left = left[~better]
                if not len(left):
                    break
        step = step / 2
    q, met = reach_strikes(setting, q, place, face, LAST_STEPS)
    return Moved(Found(q[met], owner[met]), tried)


def _null_vectors(setting: Setting, q: Array, position: Array, normal: Array) -> list[Array]:
    """Unit vectors (c, n) of the freedom that the five rows leave, the same ones for the same postures."""
    rows, _ = strike_errors(setting.chain, q, position, normal, setting.length_m)
    spare = rows.shape[2] - rows.shape[1]
    if spare <= 0:
        return []
    gram = rows @ rows.transpose(0, 2, 1)
    gram += 1e-9 * np.trace(gram, axis1=1, axis2=2)[:, None, None] * np.eye(rows.shape[1])
    # The unit joint vectors less what the rows see of them; those that keep most, made orthogonal.
    project = np.eye(rows.shape[2]) - rows.transpose(0, 2, 1) @ np.linalg.solve(gram, rows)
    vectors: list[Array] = []
    left = project
    for _ in range(spare):
        most = np.argmax(np.einsum("cij,cij->cj", left, left), axis=1)
        vector = left[np.arange(len(q)), :, most]
        vector = vector / np.maximum(np.linalg.norm(vector, axis=1, keepdims=True), 1e-12)
        vectors.append(vector)
        left = left - vector[:, :, None] * np.einsum("ci,cij->cj", vector, left)[:, None, :]
    return vectors
