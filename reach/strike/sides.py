"""Both sides of a strike's speed in given postures: what can't be passed there, and what a quick timing allows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.bound import Bounds, maximisers, strike_rows, upper_bounds, world_dual
from reach.strike.path import Load, Paths, load_along, swings, travel_along
from reach.strike.profile import Profile, double_s
from reach.strike.setting import Setting
from reach.strike.timing import Timing, fastest

AT_BOUND = 0.995  # of the upper bound: nothing worth looking for is left
BEYOND = 1e3  # m/s: a bound above it counts as unlimited
STEP_M = 1e-3  # along the path, for its curvature at the strike
KEPT = 0.98  # of what the strike window allows by the curvature alone; the motion itself decides


@dataclass(frozen=True, eq=False)
class Upper:
    """Upper bounds of c postures; speeds along the direction, m/s.

    Attributes
    ----------
    still, free : (c,) the paddle not turning at the strike, and turning; the tool's cap included
    dual_still, dual_free : (c, 6) dual vectors on the Jacobian's rows; they prove the joints' part
    rows : (c, r, n) the rows that the cell's own way of striking fixes; joints : Bounds on them, without the cap
    lo, hi : (c, n) joint velocities used
    """

    still: Array
    free: Array
    dual_still: Array
    dual_free: Array
    rows: Array
    joints: Bounds
    lo: Array
    hi: Array

    def own(self, still: bool) -> Array:
        """The bound (c,) of the cell's own way of striking."""
        return self.still if still else self.free


def upper(setting: Setting, q: Array, direction: Array) -> Upper:
    """Upper bounds in postures q (c, n) for strikes along directions (c, 3)."""
    lo, hi = setting.velocities(q)
    _, rotation, jacobian = setting.chain.jacobians(q)
    rows = strike_rows(jacobian, rotation, setting.spin_free, setting.length_m)
    linear = np.ascontiguousarray(jacobian[:, :3])
    still, free = upper_bounds(rows, direction, lo, hi), upper_bounds(linear, direction, lo, hi)
    cap = setting.tool_cap_m_s
    return Upper(
        np.minimum(still.speed, cap),
        np.minimum(free.speed, cap),
        world_dual(still.dual, rotation, setting.length_m),
        world_dual(free.dual, rotation, setting.length_m),
        rows if setting.still else linear,
        still if setting.still else free,
        lo,
        hi,
    )


def promise(setting: Setting, above: Upper, q: Array, normal: Array, direction: Array) -> Array:
    """What to expect of postures (c,), m/s, to rank them by: the bound, what the joints could gain over the way that
    there is, or what holds over the strike window, whichever is least. A guess, no bound."""
    tangent = _tangents(above.rows, direction, above.lo, above.hi, above.joints)
    usable = np.asarray(np.isfinite(tangent).all(axis=1))
    safe = np.where(usable[:, None], tangent, 1.0)
    way = travel_along(setting.ends, q, safe).min(axis=1)
    if setting.run_up_m is not None:
        way = np.minimum(way, setting.run_up_m)
    gain = (alone(setting, q) / np.maximum(np.abs(safe), 1e-12)).min(axis=1)
    held = _held(setting, q, safe, normal, direction)
    return np.where(usable, np.minimum.reduce([above.own(setting.still), np.sqrt(2 * gain * way), held]), 0.0)


@dataclass(frozen=True, eq=False)
class Lower:
    """What c postures surely do by a quick timing of a swing.

    Attributes
    ----------
    speed : (c,) along the direction, m/s; 0 where none is safe
    tangent : (c, n) joint velocity at the strike per m/s
    paths, load, timing : of each posture's best swing
    """

    speed: Array
    tangent: Array
    paths: Paths
    load: Load
    timing: Timing

    def profile(self, i: int, window_s: float) -> Profile:
        """The timing of one posture's swing as a profile."""
        return profile_of(self.timing, i, window_s)


def profile_of(timing: Timing, i: int, window_s: float) -> Profile:
    """The double-S timing of one stroke as a profile."""
    speed = float(timing.speed[i])
    before, after = (
        double_s(speed, float(a), float(j), window_s)
        for a, j in zip(timing.acceleration[i], timing.jerk[i], strict=True)
    )
    return Profile(before, after)


def lower(setting: Setting, q: Array, normal: Array, direction: Array, above: Upper) -> Lower:
    """The quickest safe swing of postures q (c, n) through strikes along directions (c, 3) with normals (c, 3).

    The joint direction of the upper bound is tried first; where acceleration or torque end it sooner, so are the
    direction that gains speed soonest, and the one between; where the paddle may turn, also that of a still one.
    """
    first = _tangents(above.rows, direction, above.lo, above.hi, above.joints)
    best = _timed(setting, q, normal, direction, above, first)
    short = np.flatnonzero(best.speed < AT_BOUND * above.own(setting.still))
    if len(short):
        posture, face, along = q[short], normal[short], direction[short]
        near = part_of(above, short)
        quick = _quickest(setting, posture, along, near)
        tangents = [quick, (quick + first[short]) / 2]
        if not setting.still:
            tangents.append(_still(setting, posture, along, near))
        for tangent in tangents:
            tried = _timed(setting, posture, face, along, near, tangent)
            better = np.flatnonzero(np.asarray(tried.speed > best.speed[short] * (1 + 1e-6)))
            best = _replaced(best, short[better], tried, better)
    return best


def timed(setting: Setting, paths: Paths, load: Load, ceiling: Array) -> Timing:
    """The quick timing of strokes, no faster than a ceiling (c,)."""
    top = np.minimum(ceiling, load.fastest[:, :, 0].min(axis=1))
    return fastest(load, paths.distance, setting.accept.strike_window_s, np.minimum(top, BEYOND))


def _timed(
    setting: Setting, q: Array, normal: Array, direction: Array, above: Upper, tangent: Array
) -> Lower:
    usable = np.asarray(np.isfinite(tangent).all(axis=1))
    safe = np.where(usable[:, None], tangent, 1.0)
    paths = swings(setting.chain, setting.ends, q, safe, setting.run_up_m)
    load = load_along(setting.arm, setting.limits, paths, bends=False)
    ceiling = np.minimum(above.own(setting.still), _held(setting, q, safe, normal, direction))
    timing = timed(setting, paths, load, np.where(usable, ceiling, 0.0))
    return Lower(np.where(usable, timing.speed, 0.0), safe, paths, load, timing)


def _tangents(rows: Array, direction: Array, lo: Array, hi: Array, bounds: Bounds) -> Array:
    """Joint velocity per m/s (c, n) of the bounds' maximisers; where nothing limits it, with the least motion."""
    velocity = maximisers(rows, direction, lo, hi, bounds)
    with np.errstate(divide="ignore", invalid="ignore"):
        tangent = velocity / bounds.speed[:, None]
    for i in np.flatnonzero(np.isinf(bounds.speed)):
        target = np.r_[direction[i], np.zeros(rows.shape[1] - 3)]
        tangent[i] = np.linalg.pinv(rows[i]) @ target
    return np.asarray(tangent)


def _quickest(setting: Setting, q: Array, direction: Array, above: Upper) -> Array:
    """Joint velocity per m/s (c, n) along which the strike's speed grows soonest, each joint by itself.

    The same linear program as the bound's, on accelerations: the kept-back limit or what torque gives the joint alone.
    """
    each = alone(setting, q)
    bounds = upper_bounds(above.rows, direction, -each, each)
    return _tangents(above.rows, direction, -each, each, bounds)


def alone(setting: Setting, q: Array) -> Array:
    """Acceleration (c, n) that each joint could have by itself: its kept-back limit, or what its torque leaves."""
    acceleration, torque = setting.limits["acceleration"], setting.limits["torque"]
    static = setting.arm.torque(q, np.zeros_like(q), np.zeros_like(q))
    spare = np.maximum(np.minimum(torque.kept_hi - static, static - torque.kept_lo), 0.0)
    each = np.minimum(acceleration.tighter, spare / setting.arm.inertia_diagonals(q))
    return np.clip(np.where(np.isfinite(each), each, BEYOND), 1e-3, BEYOND)


def _still(setting: Setting, q: Array, direction: Array, above: Upper) -> Array:
    """Joint velocity per m/s (c, n) of the upper bound with a paddle that does not turn."""
    _, rotation, jacobian = setting.chain.jacobians(q)
    rows = strike_rows(jacobian, rotation, setting.spin_free, setting.length_m)
    return _tangents(rows, direction, above.lo, above.hi, upper_bounds(rows, direction, above.lo, above.hi))


def _held(setting: Setting, q: Array, tangent: Array, normal: Array, direction: Array) -> Array:
    """Speed (c,) up to which speed, direction and tilt hold over the strike window, by the path's curvature there."""
    accept, half = setting.accept, setting.accept.strike_window_s / 2
    if half == 0:
        return np.full(len(q), np.inf)
    ends = [setting.chain.twists(q + sign * STEP_M * tangent, tangent) for sign in (-1, 1)]
    bend = (ends[1][2][:, :3] - ends[0][2][:, :3]) / (2 * STEP_M)
    _, rotation, twist = setting.chain.twists(q, tangent)
    along = np.einsum("ci,ci->c", direction, normal)
    normal_bend = np.einsum("ci,ci->c", bend, normal)
    aside = np.linalg.norm(bend - normal_bend[:, None] * normal, axis=1)
    turning = np.linalg.norm(np.cross(twist[:, 3:], rotation[:, :, 2]), axis=1)
    wheeling = [np.cross(end[2][:, 3:], end[1][:, :, 2]) for end in ends]
    swerve = np.linalg.norm(wheeling[1] - wheeling[0], axis=1) / (2 * STEP_M)
    with np.errstate(divide="ignore"):
        return np.asarray(
            KEPT
            * np.minimum.reduce(
                [
                    accept.strike_speed_error_share * along / (np.abs(normal_bend) * half),
                    np.sqrt(accept.strike_lateral_m_s / (aside * half)),
                    accept.strike_tilt_error_rad / (turning * half),
                    np.sqrt(2 * accept.strike_tilt_error_rad / swerve) / half,
                ]
            )
        )


def part_of(above: Upper, rows: NDArray[np.int64]) -> Upper:
    """The upper bounds of some of the postures."""
    return Upper(
        still=above.still[rows],
        free=above.free[rows],
        dual_still=above.dual_still[rows],
        dual_free=above.dual_free[rows],
        rows=above.rows[rows],
        joints=Bounds(above.joints.speed[rows], above.joints.dual[rows]),
        lo=above.lo[rows],
        hi=above.hi[rows],
    )


def _replaced(best: Lower, at: NDArray[np.int64], other: Lower, rows: NDArray[np.int64]) -> Lower:
    """The best with some postures' swings taken from another."""
    if len(at) == 0:
        return best
    timing = Timing(*(_put(a, at, b, rows) for a, b in _pairs(best.timing, other.timing)))
    paths = Paths(*(_put(a, at, b, rows) for a, b in _pairs(best.paths, other.paths)))
    load = Load(*(_put(a, at, b, rows) for a, b in _pairs(best.load, other.load)))
    return Lower(
        _put(best.speed, at, other.speed, rows),
        _put(best.tangent, at, other.tangent, rows),
        paths,
        load,
        timing,
    )


def _pairs(first: object, second: object) -> list[tuple[Array, Array]]:
    return list(zip(vars(first).values(), vars(second).values(), strict=True))


def _put(a: Array, at: NDArray[np.int64], b: Array, rows: NDArray[np.int64]) -> Array:
    out = a.copy()
    out[at] = b[rows]
    return out
