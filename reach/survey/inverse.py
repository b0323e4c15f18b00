"""Inverse kinematics of strikes, many at once: from the nearest of seeded random postures, and from given ones.

A strike fixes the strike point and the face normal, five rows; the spin about the normal is left open. Damped
Gauss–Newton steps (Levenberg 1944; Marquardt 1963) with joints at their ends left out while they push outward.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.kinematics import Chain
from reach.strike.bound import strike_rows
from reach.strike.setting import Setting

LIBRARY = 20_000  # random postures to choose starts from
STARTS = 16  # a strike, of the library's nearest
MORE_STARTS = 48  # where those find nothing
DEEP_STARTS = 240  # before a strike is judged
STEPS = 14
MORE_STEPS = 40
TOLERANCE = 1e-9  # m, and rad by the paddle's length: a strike is met
LONGEST_STEP = 0.5  # rad or m of one joint in one step
PATIENCE = 6  # steps after which a posture must have come closer by
HOPELESS = 0.8  # this much of its error, or it is given up
FIRST_DAMPING = 1e-3  # of the rows' mean square
LEAST_DAMPING = 1e-10
WIDE_RAD = np.pi  # a joint is started within ± this of its middle
SAME = 0.05  # rad or m: postures closer than this in every joint count as one
TILT_WEIGHT_M = 0.3  # how far a tilt of one radian counts when the nearest postures are looked for


@dataclass(frozen=True, eq=False)
class Found:
    """Postures found for strikes: posture k, q[k] (n,), belongs to strike owner[k]; owners rise."""

    q: Array
    owner: NDArray[np.int64]

    def of(self, strikes: NDArray[np.int64] | list[int]) -> Found:
        """The postures of some strikes (rising), their owners counted anew."""
        chosen = np.asarray(strikes, dtype=np.int64)
        keep = np.isin(self.owner, chosen)
        return Found(self.q[keep], np.searchsorted(chosen, self.owner[keep]))

    @staticmethod
    def none(joints: int) -> Found:
        """No postures."""
        return Found(np.zeros((0, joints)), np.zeros(0, dtype=np.int64))

    @staticmethod
    def joined(parts: list[Found]) -> Found:
        """Parts one after the other, as they are."""
        return Found(
            np.concatenate([part.q for part in parts]), np.concatenate([part.owner for part in parts])
        )


class Library:
    """Random postures inside the travel, with where they put the face.

    Parameters
    ----------
    seed : of the postures; they are the same for every strike, whatever the order and whoever asks
    """

    def __init__(self, setting: Setting, seed: int):
        from scipy.spatial import KDTree

        lo, hi = setting.ends
        ends = np.isfinite(lo) & np.isfinite(hi)
        middle = np.where(ends, (np.where(ends, lo, 0.0) + np.where(ends, hi, 0.0)) / 2, 0.0)
        turns = ~setting.arm.sliding
        # One whole turn about the middle is enough: further ones only lie nearer to an end.
        lo = np.where(turns | ~ends, np.fmax(lo, middle - WIDE_RAD), lo)
        hi = np.where(turns | ~ends, np.fmin(hi, middle + WIDE_RAD), hi)
        self.q = np.random.default_rng(seed).uniform(lo, hi, (LIBRARY, len(lo)))
        position, rotation, _, _ = setting.chain.placements(self.q)
        self._tree = KDTree(_place(position, rotation[:, :, 2]))

    def nearest(self, position: Array, normal: Array, count: int) -> Array:
        """The nearest postures (m, count, n) to strikes (m, 3), (m, 3)."""
        _, index = self._tree.query(_place(position, normal), k=count)
        return np.asarray(self.q[index])


def _place(position: Array, normal: Array) -> Array:
    return np.hstack([position, TILT_WEIGHT_M * normal])


def from_library(
    setting: Setting, library: Library, position: Array, normal: Array, deep: bool = False
) -> tuple[Found, NDArray[np.int64]]:
    """Postures of strikes (m, 3), (m, 3), and from how many starts (m,) each was looked for.

    More starts where the first find nothing, or `deep`: many for all.
    """
    m = len(position)
    if deep:
        wide = library.nearest(position, normal, DEEP_STARTS)
        return _solved(setting, wide, position, normal, STEPS), np.full(m, DEEP_STARTS)
    starts = np.full(m, STARTS)
    found = _solved(setting, library.nearest(position, normal, STARTS), position, normal, STEPS)
    left = np.setdiff1d(np.arange(m), found.owner)
    if len(left):
        more = library.nearest(position[left], normal[left], STARTS + MORE_STARTS)
        again = _solved(setting, more, position[left], normal[left], MORE_STEPS)
        found = merged([found, Found(again.q, left[again.owner])])
        starts[left] += MORE_STARTS
    return found, starts


def from_postures(setting: Setting, starts: Found, position: Array, normal: Array) -> Found:
    """Postures of strikes (m, 3), (m, 3) from given starts, each for its owner."""
    rows = starts.owner
    q, met = reach_strikes(setting, starts.q, position[rows], normal[rows], STEPS)
    return _distinct(Found(q[met], rows[met]))


def merged(parts: list[Found]) -> Found:
    """Postures of several searches together, each distinct one once, the earlier search's first."""
    both = Found.joined(parts)
    order = np.argsort(both.owner, kind="stable")
    return _distinct(Found(both.q[order], both.owner[order]))


def _solved(setting: Setting, starts: Array, position: Array, normal: Array, steps: int) -> Found:
    m, count, n = starts.shape
    owner = np.repeat(np.arange(m), count)
    q, met = reach_strikes(setting, starts.reshape(-1, n), position[owner], normal[owner], steps)
    return _distinct(Found(q[met], owner[met]))


def _distinct(found: Found) -> Found:
    """Each posture once: one goes when an earlier one of its strike, itself kept, is close."""
    if not len(found.owner):
        return found
    owners, first, counts = np.unique(found.owner, return_index=True, return_counts=True)
    most = int(counts.max())
    place = np.searchsorted(owners, found.owner)
    rank = np.arange(len(found.owner)) - first[place]
    table = np.full((len(owners), most, found.q.shape[1]), np.inf)
    table[place, rank] = found.q
    kept = np.zeros((len(owners), most), dtype=bool)
    for k in range(most):
        with np.errstate(invalid="ignore"):
            close = np.abs(table[:, :k] - table[:, k : k + 1]).max(axis=2) <= SAME
        kept[:, k] = ~(close & kept[:, :k]).any(axis=1)
    keep = kept[place, rank]
    return Found(found.q[keep], found.owner[keep])


def reach_strikes(
    setting: Setting, q: Array, position: Array, normal: Array, steps: int, tolerance: float = TOLERANCE
) -> tuple[Array, NDArray[np.bool_]]:
    """Move postures (c, n) to strikes (c, 3), (c, 3) in at most so many steps; which ones (c,) are met."""
    lo, hi = setting.ends
    q = np.clip(q, lo, hi)
    met = np.zeros(len(q), dtype=bool)
    damping = np.full(len(q), FIRST_DAMPING)
    last, mark = np.full(len(q), np.inf), np.full(len(q), np.inf)
    active = np.arange(len(q))
    for step in range(steps + 1):
        rows, error = strike_errors(
            setting.chain, q[active], position[active], normal[active], setting.length_m
        )
        size = np.linalg.norm(error, axis=1)
        done = size <= tolerance
        met[active[done]] = True
        damping[active] = np.where(
            size < last[active],
            np.maximum(damping[active] * 0.1, LEAST_DAMPING),
            np.minimum(damping[active] * 10, 1),
        )
        last[active] = size
        going = ~done
        if step % PATIENCE == 0:
            going &= size < HOPELESS * mark[active]
            mark[active] = size
        active, rows, error = active[going], rows[going], error[going]
        if step == steps or not len(active):
            break
        q[active] = _stepped(q[active], rows, error, damping[active], lo, hi)
    return q, met


def strike_errors(
    chain: Chain, q: Array, position: Array, normal: Array, length_m: float
) -> tuple[Array, Array]:
    """Rows (c, 5, n) and what is missing (c, 5) of postures from strikes, both in m."""
    at, rotation, jacobian = chain.jacobians(q)
    rows = strike_rows(jacobian, rotation, True, length_m)
    face = rotation[:, :, 2]
    axis = np.cross(face, normal)
    sine, cosine = np.linalg.norm(axis, axis=1), np.einsum("ci,ci->c", face, normal)
    angle = np.arctan2(sine, cosine)
    turned = axis * (angle / np.where(sine > 1e-12, sine, 1.0))[:, None]
    # A face that looks the other way may turn about any axis in it.
    turned[(sine <= 1e-12) & (cosine < 0)] = np.pi * rotation[(sine <= 1e-12) & (cosine < 0), :, 0]
    tilt = length_m * np.einsum("cji,cj->ci", rotation[:, :, :2], turned)
    return rows, np.hstack([position - at, tilt])


def _stepped(q: Array, rows: Array, error: Array, damping: Array, lo: Array, hi: Array) -> Array:
    """One damped step; joints at an end that are pushed outward are left out, no joint goes far or past its end."""
    pull = np.einsum("crn,cr->cn", rows, error)
    stuck = ((q <= lo) & (pull < 0)) | ((q >= hi) & (pull > 0))
    free = np.where(stuck[:, None, :], 0.0, rows)
    gram = free @ free.transpose(0, 2, 1)
    ridge = damping * np.trace(gram, axis1=1, axis2=2) / gram.shape[1] + 1e-12
    gram[:, range(gram.shape[1]), range(gram.shape[1])] += ridge[:, None]
    step = np.einsum("crn,cr->cn", free, np.linalg.solve(gram, error[:, :, None])[:, :, 0])
    longest = np.abs(step).max(axis=1, keepdims=True)
    step *= np.minimum(1.0, LONGEST_STEP / np.maximum(longest, 1e-12))
    return np.asarray(np.clip(q + step, lo, hi))
