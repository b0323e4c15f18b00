"""Strikes for tests: cells with a survey, published arms, random postures, outside linear programs, whole strokes."""

from __future__ import annotations

from dataclasses import replace
from functools import cache
from typing import NamedTuple

import numpy as np
from builders import cell_text, load_text, published_urdf
from scipy.optimize import linprog
from scipy.sparse import block_diag
from test_published_arms import ARMS

from reach.cell import Array, Bound, Cell, Survey
from reach.evidence.points import SWING
from reach.strike.motions import optimised_profile, straights
from reach.strike.path import Load, Paths
from reach.strike.profile import Profile
from reach.strike.setting import Setting
from reach.strike.sides import lower, upper
from reach.strike.stroke import Demonstration, demonstrate

SHARP = {"primal_feasibility_tolerance": 1e-10, "dual_feasibility_tolerance": 1e-10}

# Limits that no published file gives, invented: rough ones for a light six-axis arm.
INVENTED = {"acceleration": 12.0, "torque_rate": 1200.0}


def strikable(cell: Cell, run_up_m: float | None = None, rotation: str = "still") -> Cell:
    """The cell with one listed strike: what a setting needs of a survey."""
    up = np.array([[0.0, 0.0, 1.0]])
    survey = Survey(None, 0.1, np.zeros((1, 3)), up, up, np.ones(1), rotation=rotation, run_up_m=run_up_m)
    return replace(cell, survey=survey)


def bounded(cell: Cell, **given: float) -> Cell:
    """The cell with some limits, symmetric, of all its joints set; inf says that there is none."""
    limits = {name: Bound(-value, value, "made by the test") for name, value in given.items()}
    joints = tuple(replace(j, limits=replace(j.limits, **limits)) for j in cell.arm.joints)
    return replace(cell, arm=replace(cell.arm, joints=joints))


def rubless(cell: Cell) -> Cell:
    """The cell without damping and dry friction."""
    joints = tuple(replace(j, limits=replace(j.limits, damping=0.0, friction=0.0)) for j in cell.arm.joints)
    return replace(cell, arm=replace(cell.arm, joints=joints))


@cache
def published(name: str) -> Cell:
    """A published arm with the tests' ordinary paddle."""
    folder, file, tip, joints, posture = ARMS[name]
    start = dict(zip(joints, posture, strict=True))
    return load_text(cell_text(published_urdf(folder, file), tip, start))


def postures(setting: Setting, count: int, seed: int) -> Array:
    """Random postures (count, n) all over the arm's travel, or one turn where it is longer."""
    lo, hi = setting.ends
    rng = np.random.default_rng(seed)
    return rng.uniform(np.maximum(lo, -np.pi), np.minimum(hi, np.pi), (count, setting.arm.n))


def near(setting: Setting, posture: Array, spread: float, count: int, seed: int) -> Array:
    """Random postures (count, n) about one, inside the arm's travel."""
    lo, hi = setting.ends
    rng = np.random.default_rng(seed)
    return np.clip(posture + rng.uniform(-spread, spread, (count, setting.arm.n)), lo, hi)


def unit_vectors(count: int, seed: int) -> Array:
    """Random directions (count, 3)."""
    vectors = np.random.default_rng(seed).normal(size=(count, 3))
    return vectors / np.linalg.norm(vectors, axis=1)[:, None]


def frames(setting: Setting, q: Array) -> tuple[Array, Array]:
    """Paddle axes (m, 3, 3) and Jacobians (m, 6, n) of postures (m, n), posture by posture in Pinocchio."""
    both = [setting.arm.jacobian(x)[1:] for x in q]
    return np.array([x[0] for x in both]), np.array([x[1] for x in both])


def by_program(rows: Array, target: Array, lo: Array, hi: Array) -> tuple[Array, Array]:
    """The largest s (m,) with A v = s b, lo <= v <= hi, and the v (m, n), by HiGHS: m programs side by side in one.

    Parameters
    ----------
    rows : (m, r, n) ; target : (m, r) the b ; lo, hi : (m, n)
    """
    m, r, n = rows.shape
    matrix = block_diag(list(np.concatenate([rows, -target[:, :, None]], axis=2)))
    sides = np.stack([np.hstack([lo, np.zeros((m, 1))]), np.hstack([hi, np.full((m, 1), np.inf)])], axis=2)
    cost = np.tile(np.append(np.zeros(n), -1.0), m)
    done = linprog(
        cost, A_eq=matrix, b_eq=np.zeros(m * r), bounds=sides.reshape(-1, 2), method="highs", options=SHARP
    )
    assert done.status == 0, done.message
    answer = done.x.reshape(m, n + 1)
    return answer[:, -1], answer[:, :-1]


class Stroke(NamedTuple):
    """One swing as its quick timing proposes it, and the upper bound of its posture."""

    normal: Array
    direction: Array
    q: Array
    path: Paths
    load: Load
    quick: Profile
    bound: float


def swings_of(setting: Setting, q: Array, direction: Array | None = None) -> list[Stroke]:
    """Quick swings of postures (m, n), along their faces' normals where no direction is given; those there are."""
    normal = frames(setting, q)[0][:, :, 2]
    towards = normal if direction is None else direction
    above = upper(setting, q, towards)
    below = lower(setting, q, normal, towards, above)
    window, bound = setting.accept.strike_window_s, above.own(setting.still)
    return [
        Stroke(
            normal[i],
            towards[i],
            q[i],
            below.paths.take([i]),
            below.load.take([i]),
            below.profile(i, window),
            float(bound[i]),
        )
        for i in range(len(q))
        if below.speed[i] > 0
    ]


def straights_of(setting: Setting, q: Array) -> list[Demonstration]:
    """Straight strokes of postures (m, n) along their faces' normals, as motions; those there are."""
    normal = frames(setting, q)[0][:, :, 2]
    above = upper(setting, q, normal)
    below = lower(setting, q, normal, normal, above)
    some = np.flatnonzero(below.speed > 0)
    lines = straights(setting, normal[some], below, some, above.own(setting.still)[some])
    tried = [
        lines.motion(setting, normal[i], normal[i], j)
        for j, i in enumerate(some)
        if lines.timing.speed[j] > 0
    ]
    return [done for done in tried if done is not None]


def demonstrated(
    setting: Setting, stroke: Stroke, pieces: tuple[int, ...] | None = None
) -> Demonstration | None:
    """The swing as a motion: with its quick timing, or optimised with these numbers of pieces in turn."""
    profile = stroke.quick
    if pieces is not None:
        profile = optimised_profile(setting, stroke.load, stroke.path, stroke.quick, pieces)
    return demonstrate(setting, stroke.normal, stroke.direction, SWING, stroke.path, profile)
