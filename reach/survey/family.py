"""Families of postures: on which side of each fold of the chain they stand.

A joint is a fold where the chain loses a direction of motion of the paddle whenever that joint stands at a certain
angle, whatever the others do: an elbow, a wrist. Postures of one family are on the same sides of all folds.
"""

from __future__ import annotations

from dataclasses import dataclass, fields
from functools import lru_cache

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.kinematics import Chain

SAMPLES = 6  # random postures that must all be singular at a fold
GRID = 180  # angles a turn that are looked at
BISECTIONS = 40
SINGULAR = 1e-7  # smallest over largest singular value
STEEP = 3.0  # times the mean slope toward a fold that its value may have near it
NEAR = 0.05  # the same, where a closer look begins
MIDDLE_RAD = 1e-6  # rounding of where the middle between two angles is
SIX_AXES = 6  # arms of fewer are judged by where the strike point can go
ONE = "one"  # the family's name where the chain has no fold


@dataclass(frozen=True, eq=False)
class Folds:
    """The folds of a chain.

    Attributes
    ----------
    joints, names : index and name of each joint that is one
    angles : for each its stretched and folded angle, rising, in [-pi, pi)
    """

    joints: tuple[int, ...]
    names: tuple[str, ...]
    angles: tuple[tuple[float, float], ...]

    @property
    def families(self) -> tuple[str, ...]:
        """Names of all families, by number."""
        return tuple(self._name(number) for number in range(2 ** len(self.joints)))

    def numbers(self, q: Array) -> NDArray[np.int64]:
        """The family (m,) of postures q (m, n), as an index into `families`."""
        number = np.zeros(len(q), dtype=np.int64)
        for k, (joint, (low, high)) in enumerate(zip(self.joints, self.angles, strict=True)):
            turn = np.mod(q[:, joint] + np.pi, 2 * np.pi) - np.pi
            between = (turn > low) & (turn < high)
            # "+" is the side whose middle is the positive angle.
            plus = between if low + high > -MIDDLE_RAD else ~between
            number += plus.astype(np.int64) << k
        return number

    def _name(self, number: int) -> str:
        return (
            " ".join(f"{name}{'+' if number >> k & 1 else '−'}" for k, name in enumerate(self.names)) or ONE
        )


class _Alike:
    """A chain that counts as the same as another of the same numbers."""

    def __init__(self, chain: Chain):
        self.chain = chain
        self._key = tuple(np.asarray(getattr(chain, item.name)).tobytes() for item in fields(Chain))

    def __eq__(self, other: object) -> bool:
        return isinstance(other, _Alike) and self._key == other._key

    def __hash__(self) -> int:
        return hash(self._key)


def folds(chain: Chain, names: tuple[str, ...]) -> Folds:
    """The folds of a chain, by looking for angles of one joint at which all of several random postures are singular."""
    found = _angles(_Alike(chain))
    return Folds(
        tuple(joint for joint, _ in found),
        tuple(names[joint] for joint, _ in found),
        tuple(angles for _, angles in found),
    )


@lru_cache(maxsize=8)  # of one run; a search changes limits and bases, and comes back to the same arm
def _angles(alike: _Alike) -> tuple[tuple[int, tuple[float, float]], ...]:
    """Each joint that is a fold, with its two angles."""
    chain, found = alike.chain, []
    rank = _rank(chain)
    for joint in np.flatnonzero(~np.asarray(chain.sliding)).tolist():
        zeros = _zeros(chain, joint, rank)
        if len(zeros) == 2:
            found.append((joint, (zeros[0], zeros[1])))
    return tuple(found)


def _postures(chain: Chain) -> Array:
    return np.random.default_rng(0).uniform(-1.0, 1.0, (SAMPLES, len(chain.axes))) * np.where(
        chain.sliding, 1, np.pi
    )


def _rank(chain: Chain) -> int:
    sizes = _sizes(chain, _postures(chain))
    return int((sizes > SINGULAR * sizes[:, :1]).sum(axis=1).max())


def _sizes(chain: Chain, q: Array) -> Array:
    rows = 6 if len(chain.axes) >= SIX_AXES else 3
    return np.asarray(np.linalg.svd(chain.jacobians(q)[2][:, :rows], compute_uv=False))


def _zeros(chain: Chain, joint: int, rank: int) -> list[float]:
    """Angles (in [-pi, pi), rising) at which every posture with that joint there is singular."""

    def least(angles: Array) -> Array:
        q = np.repeat(_postures(chain)[None], len(angles), axis=0)
        q[:, :, joint] = angles[:, None]
        sizes = _sizes(chain, q.reshape(-1, len(chain.axes)))
        return np.asarray((sizes[:, rank - 1] / sizes[:, 0]).reshape(len(angles), SAMPLES).max(axis=1))

    step = 2 * np.pi / GRID
    grid = -np.pi + step * (np.arange(GRID) + 0.37)  # off the round angles, where folds often are
    values = least(np.asarray(grid, dtype=np.float64))
    dips = (values <= np.roll(values, 1)) & (values <= np.roll(values, -1)) & (values < NEAR)
    found = []
    for at in grid[dips].tolist():
        low, high = at - step, at + step
        slope = float(least(np.array([low, high])).max()) / step  # of a value that goes to zero in between
        for _ in range(BISECTIONS):  # of thirds: the value falls and rises once
            a, b = low + (high - low) / 3, high - (high - low) / 3
            va, vb = least(np.array([a, b])).tolist()
            if min(va, vb) > STEEP * slope * (high - low):
                break  # it does not get there
            low, high = (low, b) if va < vb else (a, high)
        if least(np.array([(low + high) / 2]))[0] < SINGULAR:
            turn = float(np.mod((low + high) / 2 + np.pi, 2 * np.pi) - np.pi)
            found.append(-np.pi if np.pi - turn < 1e-6 else turn)
    return sorted(found)
