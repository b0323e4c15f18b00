"""Both sides of a strike's speed in given postures: what can't be passed there, and what a quick timing allows."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.bound import EXACT, Bounds, maximisers, strike_rows, upper_bounds, world_dual
from reach.strike.freedom import axes_of, climbed
from reach.strike.path import FARTHEST_TURN_RAD, Load, Paths, load_along, swings, travel_along
from reach.strike.profile import Profile, double_s
from reach.strike.setting import Setting
from reach.strike.timing import Timing, fastest

AT_BOUND = 0.995  # of the upper bound: nothing worth looking for is left
NEAR_BOUND = 0.999  # of the upper bound: no faster swing is looked for
BLOCK = 256  # swings timed at once
SHORTEST = 1e-6  # rad or m: stands for no way at all
TIMES = 5  # run-up times tried
STARTS = 3  # of the search in more than two dimensions: one alone may end on a lower summit
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
    # What a turning paddle can't pass, a still one can't: the better proof where the still one's vertices are all but
    # parallel to its rows.
    looser = still.speed > free.speed
    dual = np.where(looser[:, None], 0.0, still.dual)
    dual[looser, :3] = free.dual[looser]
    cap = setting.tool_cap_m_s
    return Upper(
        np.minimum(np.minimum(still.speed, free.speed), cap),
        np.minimum(free.speed, cap),
        world_dual(dual, rotation, setting.length_m),
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
    """The quickest safe swing found of postures q (c, n) through strikes along directions (c, 3), normals (c, 3)."""
    starts, _ = begun(setting, q, normal, direction, above)
    tangent, _ = searched(setting, q, normal, direction, above, starts)
    return along(setting, q, normal, direction, above, tangent)


def begun(setting: Setting, q: Array, normal: Array, direction: Array, above: Upper) -> tuple[Array, Array]:
    """Joint velocities per m/s (k, c, n) of the fastest of a few swings, the fastest first, and its speed (c,).

    The joint direction of the upper bound is tried first; where acceleration or torque end it sooner, so are others.
    It is nan where the bound is 0. k is 1, or more where the rows leave much freedom.
    """
    own = above.own(setting.still)
    first = _tangents(above.rows, direction, above.lo, above.hi, above.joints)
    count = STARTS if above.rows.shape[2] - above.rows.shape[1] > 2 else 1
    best, speed = np.repeat(first[None], count, axis=0), np.zeros((count, len(q)))
    speed[0] = _speeds(setting, q, normal, direction, own, first, speed[0])
    short = np.flatnonzero(speed[0] < NEAR_BOUND * own)
    if len(short):
        near = part_of(above, short)
        for tangent in _tangents_to_try(setting, q[short], direction[short], near, first[short]):
            slowest = speed[-1, short]
            tried = _speeds(setting, q[short], normal[short], direction[short], own[short], tangent, slowest)
            both = np.concatenate([speed[:, short], tried[None]])
            order = np.argsort(-both, axis=0, kind="stable")[:count]
            at = np.arange(len(short))
            best[:, short] = np.concatenate([best[:, short], tangent[None]])[order, at]
            speed[:, short] = both[order, at]
    return best, speed[0]


def searched(
    setting: Setting, q: Array, normal: Array, direction: Array, above: Upper, starts: Array
) -> tuple[Array, Array]:
    """Joint velocity per m/s (c, n) and speed (c,) of the fastest swing found from given ones (k, c, n) on, in all
    the freedom that the rows leave."""
    own = above.own(setting.still)
    axes = axes_of(above.rows, (above.hi - above.lo) / 2)
    best, most = starts[0].copy(), np.zeros(len(q))

    def speeds(rows: NDArray[np.int64], tangent: Array, floor: Array) -> Array:
        return _speeds(setting, q[rows], normal[rows], direction[rows], own[rows], tangent, floor)

    for start in starts:
        speed = speeds(np.arange(len(q)), start, np.zeros(len(q)))
        tangent, speed = climbed(
            speeds, axes, start, speed, np.where(most < NEAR_BOUND * own, NEAR_BOUND * own, 0.0)
        )
        better = speed > most
        best[better], most[better] = tangent[better], speed[better]
    return best, most


def _tangents_to_try(setting: Setting, q: Array, direction: Array, above: Upper, first: Array) -> list[Array]:
    """Joint velocities per m/s (c, n) to begin with: the one that gains speed soonest, the one between it and the
    bound's, those of `_within_times`; where the paddle may turn, also that of a still one."""
    each = alone(setting, q)
    quick = _tangents(above.rows, direction, -each, each, upper_bounds(above.rows, direction, -each, each))
    tangents = [quick, (quick + first) / 2, *_within_times(setting, q, direction, above, each)]
    if not setting.still:
        tangents.append(_still(setting, q, direction, above))
    return tangents


def _within_times(setting: Setting, q: Array, direction: Array, above: Upper, each: Array) -> list[Array]:
    """Joint velocities per m/s (c, n), each of the fastest strike with a run-up of 2T from rest, for some T.

    Each joint by itself gains 2 a T at most, over a way that ends the travel at a speed of way / T: the bound's linear
    program once more. Short of the joints' coupling, of turning on and off, and of the velocity's limit it is exact.
    """
    lo, hi = setting.ends
    way = np.clip(np.minimum(hi - q, q - lo), SHORTEST, FARTHEST_TURN_RAD)
    own = np.sqrt(way / (2 * each))  # T of each joint, where both ends of its speed meet
    first, last = own.min(axis=1), own.max(axis=1)
    tangents = []
    for share in (np.arange(TIMES) + 0.5) / TIMES:
        time = (first ** (1 - share) * last**share)[:, None]
        most = np.minimum(way / time, 2 * each * time)
        slowest, fastest = np.maximum(above.lo, -most), np.minimum(above.hi, most)
        bounds = upper_bounds(above.rows, direction, slowest, fastest)
        tangents.append(_tangents(above.rows, direction, slowest, fastest, bounds))
    return tangents


def _speeds(
    setting: Setting, q: Array, normal: Array, direction: Array, own: Array, tangent: Array, floor: Array
) -> Array:
    """Speeds (k,) of swings by quick timing, no faster than `own` (k,); 0 where they do not pass the floors (k,)."""
    out = np.zeros(len(q))
    likely = np.flatnonzero(_may_pass(setting, q, tangent, floor))
    for k in range(0, len(likely), BLOCK):
        rows = likely[k : k + BLOCK]
        ceiling = np.minimum(own[rows], _held(setting, q[rows], tangent[rows], normal[rows], direction[rows]))
        passing = np.asarray(ceiling > floor[rows])
        rows, ceiling = rows[passing], ceiling[passing]
        if len(rows):
            paths = swings(setting.chain, setting.ends, q[rows], tangent[rows], setting.run_up_m)
            load = load_along(setting.arm, setting.limits, paths, bends=False)
            out[rows] = timed(setting, paths, load, ceiling, floor[rows]).speed
    return out


def _may_pass(setting: Setting, q: Array, tangent: Array, speed: Array) -> NDArray[np.bool_]:
    """Whether swings (k,) keep joint velocity at a speed (k,) and gain it over their travel; nan tangents don't."""
    velocity, most = setting.limits["velocity"], setting.limits["acceleration"].tighter
    usable = np.asarray(np.isfinite(tangent).all(axis=1))
    joint = np.where(usable[:, None], tangent, 1.0)
    with np.errstate(divide="ignore"):
        side = np.where(joint > 0, velocity.kept_hi, -velocity.kept_lo)
        fastest = (side / np.abs(joint)).min(axis=1)
        acceleration = (most / np.abs(joint)).min(axis=1)
    way = travel_along(setting.ends, q, joint).min(axis=1)
    gained = 2 * np.where(way > 0, acceleration, 0.0) * way
    return np.asarray(usable & (fastest >= speed) & (gained >= speed**2))


def along(setting: Setting, q: Array, normal: Array, direction: Array, above: Upper, tangent: Array) -> Lower:
    """The swings of postures (c, n) along tangents (c, n) as fast as they surely go; nan tangents have none."""
    usable = np.asarray(np.isfinite(tangent).all(axis=1))
    safe = np.where(usable[:, None], tangent, 1.0)
    paths = swings(setting.chain, setting.ends, q, safe, setting.run_up_m)
    load = load_along(setting.arm, setting.limits, paths, bends=False)
    ceiling = np.minimum(above.own(setting.still), _held(setting, q, safe, normal, direction))
    timing = timed(setting, paths, load, np.where(usable, ceiling, 0.0))
    return Lower(np.where(usable, timing.speed, 0.0), safe, paths, load, timing)


def timed(setting: Setting, paths: Paths, load: Load, ceiling: Array, floor: Array | None = None) -> Timing:
    """The quick timing of strokes, no faster than a ceiling (c,); speed 0 where it does not reach a floor (c,)."""
    top = np.minimum(np.minimum(ceiling, load.fastest[:, :, 0].min(axis=1)), BEYOND)
    return fastest(load, paths.distance, setting.hold_s, top, floor)


def _tangents(rows: Array, direction: Array, lo: Array, hi: Array, bounds: Bounds) -> Array:
    """Joint velocity per m/s (c, n) of the bounds' maximisers; where nothing limits it, with the least motion.

    Nan where it is not exactly the strike's: next to singular postures rounding leaves more than that.
    """
    velocity = maximisers(rows, direction, lo, hi, bounds)
    with np.errstate(divide="ignore", invalid="ignore"):
        tangent = velocity / bounds.speed[:, None]
    for i in np.flatnonzero(np.isinf(bounds.speed)):
        target = np.r_[direction[i], np.zeros(rows.shape[1] - 3)]
        tangent[i] = np.linalg.pinv(rows[i]) @ target
    done = np.einsum("crn,cn->cr", rows, tangent)
    done[:, :3] -= direction
    tangent[~(np.abs(done).max(axis=1) <= EXACT)] = np.nan
    return np.asarray(tangent)


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
