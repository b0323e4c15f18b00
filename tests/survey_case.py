"""Surveys for tests: strikes taken from postures, small boxes, sweeps as points, a worker that dies."""

from __future__ import annotations

import os
import tempfile
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any, NoReturn

import numpy as np
from builders import fer_cell, robot_cell
from numpy.typing import NDArray
from strike_case import near, postures, published, strikable

from reach.cell import Array, Cell, Survey
from reach.evidence.points import Points
from reach.strike.setting import Setting
from reach.survey.grid import Strikes, strikes
from reach.survey.inverse import Found
from reach.survey.look import Looker
from reach.survey.selfmotion import own_bound
from reach.survey.sweep import sweep

UP = np.array([[0.0, 0.0, 1.0]])

# The strike point at the flange of link2, the face across its last link: the links are 0.5 and 0.4 m (ORIGIN.md).
PLAIN_PADDLE = "[paddle]\nmount = { xyz_m = [0, 0, 0] }\nradius_m = 0.05\nmass_kg = 0.1\n"


@cache
def arm_cell(name: str) -> Cell:
    """A cell by a short name: the project's robots, link2 with a plain mount, and published arms."""
    if name == "fer":
        with tempfile.TemporaryDirectory() as folder:
            return fer_cell(Path(folder))
    if name in ("ur5", "z1", "xarm7"):
        return published(name)
    return robot_cell(name, paddle=PLAIN_PADDLE) if name == "link2" else robot_cell(name)


def boxed(
    cell: Cell,
    low: tuple[float, float, float],
    high: tuple[float, float, float],
    spacing_m: float,
    speed_m_s: float,
    normals: Array = UP,
    **survey: Any,
) -> Cell:
    """The cell with a box of strikes along their faces' normals."""
    speeds = np.full(len(normals), speed_m_s)
    return replace(cell, survey=Survey((low, high), spacing_m, None, normals, normals, speeds, **survey))


def listed(cell: Cell, position: Array, normal: Array, speed_m_s: float | Array, **survey: Any) -> Cell:
    """The cell with listed strikes (m, 3), (m, 3) along their faces' normals."""
    speeds = np.broadcast_to(np.asarray(speed_m_s, dtype=float), (len(position),)).copy()
    return replace(cell, survey=Survey(None, 0.1, position, normal, normal, speeds, **survey))


def asked(cell: Cell, **survey: Any) -> Cell:
    """The cell with some fields of its survey changed."""
    assert cell.survey is not None
    return replace(cell, survey=replace(cell.survey, **survey))


def faces_of(setting: Setting, q: Array) -> tuple[Array, Array]:
    """Strike points and face normals (m, 3) of postures (m, n), posture by posture in Pinocchio."""
    poses = [setting.arm.pose(x) for x in q]
    return np.array([point for point, _ in poses]), np.array([axes[:, 2] for _, axes in poses])


def struck(
    name: str, count: int, seed: int, speed_m_s: float, spread: float | None = None, **survey: Any
) -> Cell:
    """An arm with strikes listed that random postures make: from all over its travel, or near its working posture."""
    cell = arm_cell(name)
    setting = Setting.of(strikable(cell))
    if spread is None:
        q = postures(setting, count, seed)
    else:
        assert cell.arm.start is not None
        q = near(setting, np.array(cell.arm.start), spread, count, seed)
    return listed(cell, *faces_of(setting, q), speed_m_s, **survey)


def grid_of(cell: Cell) -> Strikes:
    """The strikes of a cell's survey."""
    assert cell.survey is not None
    return strikes(cell.survey)


def swept(cell: Cell, grid: Strikes | None = None, workers: int = 1, seed: int = 0) -> Points:
    """What a sweep finds of a cell's strikes."""
    return sweep(cell, grid_of(cell) if grid is None else grid, workers, seed).judged.points


def highest(setting: Setting, found: Found, direction: Array) -> Array:
    """The highest upper bound (m,) over the postures of each strike, -inf where it has none."""
    best = np.full(len(direction), -np.inf)
    np.maximum.at(best, found.owner, own_bound(setting, found.q, direction[found.owner]))
    return best


def looker(cell: Cell, seed: int = 0) -> Looker:
    """A Looker that leaves out what stops a strike and how it stands without margins."""
    return Looker(cell, seed, full=False)


def same(one: Points, other: Points) -> None:
    """Two sweeps with the very same rows."""
    for name, column in vars(one).items():
        theirs = getattr(other, name)
        if name == "profiles":
            for part, value in vars(column).items():
                np.testing.assert_array_equal(value, getattr(theirs, part), err_msg=part)
        elif name == "motions":
            assert column.keys() == theirs.keys()
            for row, motion in column.items():
                np.testing.assert_array_equal(motion.q, theirs[row].q)
        else:
            np.testing.assert_array_equal(column, theirs, err_msg=name)


def of_kind(points: Points, verdict: str) -> NDArray[np.int64]:
    """Rows of a verdict."""
    return np.flatnonzero(points.verdict == verdict)


def die(*_: object) -> NoReturn:
    """Take the place of a worker's task, and end its process."""
    os._exit(7)
