"""Paths of a stroke in joint space, many at once: nodes on both sides of the strike, and the load along them.

The path coordinate s is in metres of strike-point travel at the strike's own speed; s = 0 is the strike. Each stroke is
two problems that are alike: the run-up, and the follow-through run backwards in time.
"""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np
from numpy.typing import NDArray

from reach.arm import FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S, Arm
from reach.cell import Array
from reach.kinematics import Chain
from reach.limits.base import Limit

NODES = 17  # a side, the strike's own included
CROWDING = 1.5  # nodes at (k / 16)^1.5 of the length: closer together near the strike
LONGEST_M = 2.0  # of a side where neither travel nor run-up ends it sooner
FARTHEST_TURN_RAD = np.pi  # of a joint without end stops, a side
KEPT_RUN_UP = 0.9998  # of the run-up: what the way's summing over the nodes may be off
ROUNDS = 4  # of finding where the run-up ends, each with nodes that end where the last one said
NEWTON_NEAR = 0.1  # relative distance from where on a step along the pace at the end is taken
SPREAD = (np.arange(NODES) / (NODES - 1)) ** CROWDING


@dataclass(frozen=True, eq=False)
class Paths:
    """Strokes (m of them) as joint paths with nodes; the side axis is run-up, follow-through.

    Attributes
    ----------
    distance : (m, 2, k) of the nodes from the strike, m, rising from 0; s is minus that before it, plus it after
    q, slope, bend : (m, 2, k, n) joint position, its first and second derivative by s
    pace : (m, 2, k) speed of the strike point per m/s of ds/dt
    """

    distance: Array
    q: Array
    slope: Array
    bend: Array
    pace: Array

    def take(self, rows: list[int] | NDArray[np.int64]) -> Paths:
        """Some of the strokes."""
        return Paths(*(getattr(self, name)[rows] for name in ("distance", "q", "slope", "bend", "pace")))


@dataclass(frozen=True, eq=False)
class Load:
    """What a stroke asks along its path, a row for each limited quantity (torque, and acceleration where it bends).

    value = a s̈ + b ṡ² + c + losses(ṡ), its rate by time from the derivatives by s; m strokes, 2 sides, k nodes, r rows.

    Attributes
    ----------
    a, b, c : (m, 2, k, r) ; da, db, dc : their derivatives by s
    viscous : (m, 2, k, r) loss per ṡ ; dry : (m, 2, k, r) dry friction with its sign
    rub : (m, 2, k, r) most that the losses' slope by joint velocity can be
    rub_width : (m, 2, k, r) ṡ over which dry friction turns over
    lo, hi, rate : (m, r) kept-back limits; infinite where unknown
    fastest : (m, 2, k) largest ṡ by joint velocity and tool speed
    acceleration, jerk : (m,) largest s̈ and s⃛ by joints whose path is straight; infinite where the rows hold them
    turning : (m, 2, k, r) |slope| and bending : (m, 2, k, r) |bend| of the joint of each row
    """

    a: Array
    b: Array
    c: Array
    da: Array
    db: Array
    dc: Array
    viscous: Array
    dry: Array
    rub: Array
    rub_width: Array
    lo: Array
    hi: Array
    rate: Array
    fastest: Array
    acceleration: Array
    jerk: Array
    turning: Array
    bending: Array

    def take(self, rows: list[int] | NDArray[np.int64]) -> Load:
        """Some of the strokes."""
        return Load(*(getattr(self, name)[rows] for name in self.__dataclass_fields__))


def swings(
    chain: Chain, ends: tuple[Array, Array], q: Array, tangent: Array, run_up_m: float | None
) -> Paths:
    """Straight joint lines through postures q (m, n) along tangents (m, n), as long as travel and run-up let them be.

    Parameters
    ----------
    ends : (n,) kept-back ends of travel, low and high, infinite where there are none
    run_up_m : longest way of the strike point a side
    """
    m, n = q.shape
    travel = travel_along(ends, q, tangent)
    slope = np.broadcast_to(tangent[:, None, None, :], (m, 2, NODES, n))
    paths = _straight_nodes(q, slope, travel)
    paths = replace(paths, pace=_pace(chain, paths.q, paths.slope))
    for _ in range(ROUNDS if run_up_m is not None else 0):
        paths = _straight_nodes(q, slope, _within_run_up(paths, KEPT_RUN_UP * (run_up_m or 0.0)))
        paths = replace(paths, pace=_pace(chain, paths.q, paths.slope))
    return paths


def travel_along(ends: tuple[Array, Array], q: Array, tangent: Array) -> Array:
    """How far (m, 2) in s joint lines through postures (m, n) may go before and after the strike."""
    lo, hi = ends
    with np.errstate(divide="ignore", invalid="ignore"):
        up, down = (hi - q) / np.abs(tangent), (q - lo) / np.abs(tangent)
        ahead = np.where(tangent > 0, up, np.where(tangent < 0, down, np.inf)).min(axis=1)
        behind = np.where(tangent > 0, down, np.where(tangent < 0, up, np.inf)).min(axis=1)
        turn = (FARTHEST_TURN_RAD / np.abs(tangent)).min(axis=1)
    travel = np.minimum(np.stack([behind, ahead], axis=1), turn[:, None])
    return np.asarray(np.clip(travel, 0.0, LONGEST_M))


def _straight_nodes(q: Array, slope: Array, length: Array) -> Paths:
    distance = length[:, :, None] * SPREAD
    s = distance * np.array([-1.0, 1.0])[None, :, None]
    nodes = q[:, None, None, :] + s[..., None] * slope
    return Paths(distance, nodes, slope, np.zeros_like(nodes), np.ones_like(distance))


def _pace(chain: Chain, q: Array, slope: Array) -> Array:
    n = q.shape[-1]
    twist = chain.twists(q.reshape(-1, n), slope.reshape(-1, n))[2]
    return np.asarray(np.linalg.norm(twist[:, :3], axis=1).reshape(q.shape[:-1]))


def _within_run_up(paths: Paths, run_up_m: float) -> Array:
    """Length (m, 2) in s at which the strike point has gone its run-up, or all there is.

    One interpolation, or near the end one Newton step, from the nodes.

    The way is the integral of the pace by Simpson's rule on uneven steps.
    """
    x, f = paths.distance, paths.pace
    first, second = np.diff(x, axis=2)[:, :, ::2], np.diff(x, axis=2)[:, :, 1::2]
    both = first + second
    with np.errstate(divide="ignore", invalid="ignore"):
        parts = (2 - second / first) * f[:, :, 0:-1:2] + both**2 / (first * second) * f[:, :, 1::2]
        pieces = both / 6 * (parts + (2 - first / second) * f[:, :, 2::2])
    way = np.nan_to_num(pieces).cumsum(axis=2)
    over = way[:, :, -1] > run_up_m
    length = x[:, :, -1].copy()
    for i, side in np.argwhere(over).tolist():
        length[i, side] = np.interp(run_up_m, np.append(0.0, way[i, side]), x[i, side, ::2])
    near = np.abs(way[:, :, -1] / run_up_m - 1) < NEWTON_NEAR
    step = (run_up_m - way[:, :, -1]) / np.maximum(f[:, :, -1], 1e-9)
    return np.where(near & over, x[:, :, -1] + step, length)


def load_along(arm: Arm, limits: dict[str, Limit], paths: Paths, bends: bool) -> Load:
    """The load of strokes against kept-back limits.

    Parameters
    ----------
    bends : whether joint paths bend, so that acceleration and jerk need rows of their own
    """
    m, _, k, n = paths.q.shape
    flat = paths.q.reshape(-1, n)
    slope, bend = paths.slope.reshape(-1, n), paths.bend.reshape(-1, n)
    still = np.zeros_like(flat)
    c = arm.torque(flat, still, still)
    a = arm.torque(flat, still, slope) - c
    b = arm.torque(flat, slope, bend) - c - arm.losses(slope)
    torque, rate = limits["torque"], limits["torque rate"]
    rows = [x.reshape(m, 2, k, n) for x in (a, b, c)]
    turning, bending = np.abs(paths.slope), np.abs(paths.bend)
    viscous = arm.damping * paths.slope
    dry = arm.friction * np.sign(paths.slope)
    width = np.where(arm.sliding, FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S)
    rub = np.broadcast_to(arm.damping + arm.friction / width, viscous.shape)
    rub_width = width / np.maximum(turning, 1e-9)
    lo, hi, most = torque.kept_lo, torque.kept_hi, rate.tighter
    acceleration, jerk = np.full(m, np.inf), np.full(m, np.inf)
    if bends:
        zero = np.zeros_like(rows[0])
        rows = [
            np.concatenate(pair, axis=3) for pair in zip(rows, (paths.slope, paths.bend, zero), strict=True)
        ]
        viscous, dry, rub = (np.concatenate([x, zero], axis=3) for x in (viscous, dry, rub))
        turning, bending, rub_width = (np.concatenate([x, x], axis=3) for x in (turning, bending, rub_width))
        lo = np.concatenate([lo, limits["acceleration"].kept_lo])
        hi = np.concatenate([hi, limits["acceleration"].kept_hi])
        most = np.concatenate([most, limits["jerk"].tighter])
    else:
        acceleration, jerk = (
            _of_path(limits[kind].tighter, turning[:, 0, 0]) for kind in ("acceleration", "jerk")
        )
    derivatives = [_by_s(paths.distance, x) for x in rows]
    shape = (m, len(lo))
    return Load(
        a=rows[0],
        b=rows[1],
        c=rows[2],
        da=derivatives[0],
        db=derivatives[1],
        dc=derivatives[2],
        viscous=viscous,
        dry=dry,
        rub=rub,
        rub_width=rub_width,
        lo=np.broadcast_to(lo, shape),
        hi=np.broadcast_to(hi, shape),
        rate=np.broadcast_to(most, shape),
        fastest=_fastest(limits, paths),
        acceleration=acceleration,
        jerk=jerk,
        turning=turning,
        bending=bending,
    )


def _of_path(most: Array, turning: Array) -> Array:
    """What limits (n,) leave of a path's own rate (m,), joints turning by (m, n); nothing where one turns endlessly."""
    with np.errstate(divide="ignore", invalid="ignore"):
        shares = most / turning
    return np.asarray(np.where(np.isnan(shares), 0.0, shares).min(axis=1))


def _fastest(limits: dict[str, Limit], paths: Paths) -> Array:
    velocity = limits["velocity"]
    with np.errstate(divide="ignore", invalid="ignore"):
        side = np.where(paths.slope > 0, velocity.kept_hi, -velocity.kept_lo) / np.abs(paths.slope)
        joint = np.where(paths.slope == 0, np.inf, side).min(axis=-1)
        tool = limits["tool speed"].kept_hi[0] / np.maximum(paths.pace, 1e-12)
    return np.asarray(np.minimum(joint, tool))


def _by_s(distance: Array, values: Array) -> Array:
    """Derivative of node values (m, 2, k, r) by distance; its sign does not matter where it is used in size."""
    spread = SPREAD
    inner = np.gradient(values, spread, axis=2, edge_order=2)
    length = np.maximum(distance[:, :, -1], 1e-9)
    return np.asarray(inner / length[:, :, None, None])
