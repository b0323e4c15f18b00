"""Refusals of an envelope's points decided anew: each by one product of its multipliers with what holds anyway.

Any multipliers prove something; nothing here rests on how they were found (weak duality and Farkas' lemma:
D. Bertsimas and J. Tsitsiklis, Introduction to Linear Optimization, 1997, chapter 4, from memory).
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.bounds import DUAL, cap_m_s, ends, velocity_box
from reach.recheck.arm.chain import Array
from reach.recheck.arm.ground import Ground
from reach.recheck.rally.exchange import Exchange
from reach.recheck.stored import CELL, BadFolder, Stored, largest
from reach.recheck.turns import between

PROOFS = "proofs.npz"
STILL_RAD_S = 0.2  # a paddle that turns no faster counts as still at a strike
LOOSE = 0.2  # rad or m: a posture may lie off by as much of each joint
FASTEST = 100.0  # rad/s or m/s: no joint is taken to be faster
UNLIMITED = 1e9  # per s and per s²: stands for a limit that is not known, in ways from strike to strike
FACE_RAD = 1e-7  # of a face in a posture: the search for postures ends at 1e-9 m of the paddle's rim
ROUNDING = 1e-11  # of the sum of all sizes that go into a product; they are a hundred numbers of 1e-16
LEAST_SHARE = 1e-9  # of the same sum: a product that stays above it is no rounding


@dataclass(frozen=True, eq=False)
class Speed:
    """A claim that a strike can't be as fast as asked for in a posture: fields as in DEVELOPERS.md."""

    strike: int
    stance: Array
    q: Array
    normal: Array
    dual: Array
    bound_m_s: float
    needed_m_s: float


@dataclass(frozen=True, eq=False)
class Leg:
    """A claim that joints do not get from one strike to the next in the flight, from one stance."""

    leg: int
    stance: Array
    q: Array
    normal: Array
    speed_m_s: Array
    flight_s: float
    velocity_dual: Array
    place_dual: Array
    change_dual: Array
    cut_joint: NDArray[np.int64]
    cut_sign: Array
    cut_speeds: Array
    cut_weight: Array
    short: float


class Asked(NamedTuple):
    """What a point asks for: its strikes, the centre (3,) and the ball's radius in m, ball's mass over the arm's."""

    exchange: Exchange
    centre: Array
    radius_m: float
    mass_ratio: float

    def places(self) -> Array:
        """Strike points (s, 3): one radius below the ball along the normal."""
        return np.asarray(self.centre + self.exchange.place - self.radius_m * self.exchange.normal)


class Box(NamedTuple):
    """Ranges of joint velocities, and the largest gain and loss of speed (n,), margins kept back."""

    lo: Array
    hi: Array
    gain: Array
    brake: Array


def claims(stored: Stored, points: int, n: int) -> dict[int, Speed | list[Leg]]:
    """What a folder holds as proofs, by the row of the point.

    Raises
    ------
    BadFolder
    """
    if PROOFS not in stored.arrays:
        return {}
    rows, kinds = stored.array(PROOFS, "rows", (None,), "i"), stored.array(PROOFS, "kind", (None,), "U")
    place = f"{stored.folder}/evidence/{PROOFS}"
    numbers = [int(row) for row in rows]
    sound = len(set(numbers)) == len(kinds) == len(numbers) and all(0 <= row < points for row in numbers)
    if not sound or not set(kinds.tolist()) <= {"speed", "time"}:
        raise BadFolder("rows", "or kind does not name each proof once", place)
    return {
        row: _speed(stored, row, n) if kind == "speed" else _legs(stored, row, n)
        for row, kind in zip(numbers, kinds.tolist(), strict=True)
    }


def mass_ratio(stored: Stored, ground: Ground, stance: Array) -> float | None:
    """The ball's mass over the arm's effective mass along the vertical in a stance (n,), joints free to give.

    0 where the paddle does not give; None where it does and there is no engine or no stance. Columns of the inertia
    are torques of unit accelerations, less those of none.
    """
    if stored.at("contact", "arm_gives") is not True:
        return 0.0
    if ground.engine is None or not np.isfinite(stance).all():
        return None
    n = len(stance)
    unit, still = np.vstack([np.eye(n), np.zeros((1, n))]), np.zeros((n + 1, n))
    torque = ground.engine.torque(np.tile(stance, (n + 1, 1)), still, unit)
    row = ground.chain.jacobian(stance)[2][2]
    return stored.number("ball", "mass_kg") * float(row @ np.linalg.solve(torque[:n] - torque[n], row))


def speed_item(ground: Ground, where: str, asked: Asked, claim: Speed) -> tuple[Item, bool]:
    """Whether the dual vector proves that the strike is too fast in the posture, and whether it does.

    With y = Jᵀλ and λ·(normal, 0) = 1 the speed along the normal is at most Σ max(hi y, lo y), and what the accepted
    speed across the normal and the accepted turning add at most: their sizes times those of λ there.
    """
    speeds = asked.exchange.speeds(asked.mass_ratio)
    at = _index(claim.strike, len(speeds), "strike")
    place, axes, jacobian = ground.chain.jacobian(claim.q)
    normal, dual = asked.exchange.normal[at], claim.dual
    lo, hi = velocity_box(ground, claim.q)
    y = jacobian.T @ dual
    terms = np.maximum(y * lo, y * hi)
    most = min(float(terms.sum()) + _freedom(ground, dual, normal), cap_m_s(ground))
    needed = float(speeds[at]) * (1 - float(ground.accept["strike_speed_error_share"]))
    low, high = ends(ground)
    checks = (
        Check("bound", abs(most - claim.bound_m_s), allowed.SPEED_M_S, "m/s"),
        Check("needed", abs(needed - claim.needed_m_s), allowed.SPEED_M_S, "m/s"),
        Check("bound above what is needed", float(np.maximum(most - needed, 0.0)), 0.0, "m/s"),
        Check("dual", abs(float(dual[:3] @ normal) - 1), DUAL, "1"),
        Check("dual on the spin", abs(float(dual[3:] @ axes[:, 2])), DUAL, "m"),
        Check("normal", largest(claim.normal - normal), allowed.TURN_RAD, "rad"),
        *_posture(asked, at, place, axes[:, 2]),
        Check(
            "travel",
            largest(np.maximum(np.maximum(low - claim.q, claim.q - high), 0.0)),
            allowed.PLACE_M,
            "m",
        ),
    )
    return Item("speed bound", where, checks), most < needed


def time_item(
    ground: Ground, where: str, asked: list[Asked], legs: list[Leg], stances: int
) -> tuple[Item, bool]:
    """Whether from each stance compared one leg is shown to be too short for the joints, and whether it is.

    Parameters
    ----------
    asked : for each leg, with its stance's ratio of masses
    stances : how many were compared
    """
    box = _ranges(ground)
    worst: dict[str, Check] = {}
    proved = len(legs) == stances and len(legs) > 0
    for one, leg in zip(asked, legs, strict=True):
        checks, share = _leg_checks(ground, box, one, leg)
        proved = proved and share > LEAST_SHARE
        for check in checks:
            if check.name not in worst or not check.share <= worst[check.name].share:
                worst[check.name] = check
    distinct = np.unique(np.round([leg.stance for leg in legs], 6), axis=0)
    counted = same("stances", len(distinct), stances)
    return Item("time bound", where, (counted, *worst.values())), proved


def _leg_checks(ground: Ground, box: Box, asked: Asked, leg: Leg) -> tuple[list[Check], float]:
    """Comparisons of one leg, and by what share of all sizes its conditions can't be kept."""
    exchange = asked.exchange
    at = _index(leg.leg, len(exchange.flights_s), "leg")
    speeds = exchange.speeds(asked.mass_ratio)[at : at + 2]
    normals, flight_s = exchange.normal[at : at + 2], float(exchange.flights_s[at])
    total, size = _product(ground, box, leg, normals, speeds, flight_s)
    share = total / size if size > 0 else 0.0
    place, axes, _ = ground.chain.jacobian(leg.stance)
    level = asked.centre - np.array([0.0, 0.0, asked.radius_m])
    spins = []
    checks = [
        Check("multipliers below 0", largest(np.minimum(leg.cut_weight, 0.0)), 0.0, ""),
        Check("short", abs(total - leg.short), max(ROUNDING * size, allowed.PLACE_M), "rad or m"),
        Check("conditions that can be kept", float(np.maximum(LEAST_SHARE - share, 0.0)), 0.0, ""),
        Check("normal", largest(leg.normal - normals), allowed.TURN_RAD, "rad"),
        Check("speed", largest(leg.speed_m_s - speeds), allowed.SPEED_M_S, "m/s"),
        Check("flight", abs(leg.flight_s - flight_s), allowed.TIME_S, "s"),
        Check("stance, place", largest(place - level), allowed.PLACE_M, "m"),
        Check("stance, face", _angle(axes[:, 2], np.array([0.0, 0.0, 1.0])), FACE_RAD, "rad"),
    ]
    for k in range(2):
        place, axes, _ = ground.chain.jacobian(leg.q[k])
        checks += _posture(asked, at + k, place, axes[:, 2])
        spins += [leg.velocity_dual[k, 3:] @ axes[:, 2], leg.place_dual[k, 3:] @ axes[:, 2]]
    scale = 1 + largest(leg.velocity_dual) + largest(leg.place_dual)
    return [*checks, Check("multipliers on the spin", largest(spins), DUAL * scale, "")], float(share)


def _product(
    ground: Ground, box: Box, leg: Leg, normals: Array, speeds: Array, flight_s: float
) -> tuple[float, float]:
    """By how much the sum of a leg's conditions stays above what it may be, and the sum of all sizes in it.

    Conditions on the joint velocities v and changes of posture d at both strikes: the accepted motion of the paddle,
    the accepted change of place and tilt, the change of velocity that the flight has time for, and for each cut a
    joint's way. A joint that begins with a and ends with b has at an instant t of a time T at most the least of
    a + gain t, b + brake (T − t) and its top, so with any t₀, t₁ >= 0, t₀ + t₁ <= T it covers at most
    a t₀ + gain t₀²/2 + top (T − t₀ − t₁) + b t₁ + brake t₁²/2; t₀ and t₁ are the times in which the first and the
    second are least for the speeds of the cut.
    """
    n = len(box.lo)
    v, d = np.zeros((2, n)), np.zeros((2, n))
    change = leg.change_dual
    sides = [float(np.maximum(change * box.gain, -change * box.brake).sum()) * flight_s]
    share = float(ground.accept["strike_speed_error_share"])
    for k in range(2):
        _, _, jacobian = ground.chain.jacobian(leg.q[k])
        dual, placing = leg.velocity_dual[k], leg.place_dual[k]
        along = float(dual[:3] @ normals[k])
        sides += [
            along * float(speeds[k]),
            abs(along * float(speeds[k])) * share,
            _freedom(ground, dual, normals[k]),
        ]
        sides.append(float(ground.accept["strike_position_m"]) * float(np.linalg.norm(placing[:3])))
        sides.append(float(ground.accept["strike_tilt_error_rad"]) * float(np.linalg.norm(placing[3:])))
        v[k] += jacobian.T @ dual
        d[k] += jacobian.T @ placing
    v += [-change, change]
    way = leg.q[1] - leg.q[0]
    for i, sign, at, weight in zip(leg.cut_joint, leg.cut_sign, leg.cut_speeds, leg.cut_weight, strict=True):
        gain, brake = (box.gain[i], box.brake[i]) if sign > 0 else (box.brake[i], box.gain[i])
        top = box.hi[i] if sign > 0 else -box.lo[i]
        begin_s, end_s, most = _tangent(at, flight_s, float(gain), float(brake), float(top))
        v[:, i] -= weight * sign * np.array([begin_s, end_s])
        d[:, i] += weight * sign * np.array([-1.0, 1.0])
        sides += [weight * most, -weight * sign * way[i]]
    lo, hi = np.maximum(box.lo, -FASTEST), np.minimum(box.hi, FASTEST)
    least = np.concatenate([np.minimum(v * lo, v * hi).ravel(), -np.abs(d).ravel() * LOOSE])
    return float(least.sum()) - float(np.sum(sides)), float(np.abs(least).sum() + np.abs(sides).sum())


def _tangent(at: Array, time_s: float, gain: float, brake: float, top: float) -> tuple[float, float, float]:
    """Times that a joint gains and brakes for speeds (2,) at its ends, and the most it covers but for a t₀ + b t₁."""
    begin, end = float(at[0]), float(at[1])
    turn = (end - begin + brake * time_s) / (gain + brake)
    fast = begin + gain * turn > top
    begin_s = (top - begin) / gain if fast else turn
    end_s = (top - end) / brake if fast else time_s - turn
    begin_s = min(max(begin_s, 0.0), time_s)
    end_s = min(max(end_s, 0.0), time_s - begin_s)
    cruise = top * (time_s - begin_s - end_s) if fast else 0.0
    return begin_s, end_s, gain * begin_s**2 / 2 + cruise + brake * end_s**2 / 2


def _ranges(ground: Ground) -> Box:
    """Joint velocities and their changes with the margins kept back; those not known stand at UNLIMITED."""
    sides = []
    for kind, sign in (("velocity", -1), ("velocity", 1), ("acceleration", 1), ("acceleration", -1)):
        stated = ground.limits.lo[kind] if sign < 0 else ground.limits.hi[kind]
        kept = np.abs(stated) * (1 - float(ground.margins[f"{kind}_share"]))
        sides.append(np.where(np.isfinite(kept), np.minimum(kept, UNLIMITED), UNLIMITED))
        if kind == "acceleration" and not (sides[-1] > 0).all():
            raise BadFolder("arm.joints", "has a joint whose acceleration is limited to nothing", CELL)
    return Box(-sides[0], *sides[1:])


def _freedom(ground: Ground, dual: Array, normal: Array) -> float:
    """What motion across the normal and turning, as accepted, add at most to a dual vector's product."""
    across = dual[:3] - (dual[:3] @ normal) * normal
    lateral = float(ground.accept["strike_lateral_m_s"])
    return lateral * float(np.linalg.norm(across)) + STILL_RAD_S * float(np.linalg.norm(dual[3:]))


def _posture(asked: Asked, at: int, place: Array, normal: Array) -> list[Check]:
    """Whether a posture's strike point and face are those of a strike."""
    return [
        Check("posture, place", largest(place - asked.places()[at]), allowed.PLACE_M, "m"),
        Check("posture, face", _angle(normal, asked.exchange.normal[at]), FACE_RAD, "rad"),
    ]


def _angle(one: Array, other: Array) -> float:
    return float(between(one[None], other[None])[0])


def _index(number: int, count: int, name: str) -> int:
    if not 0 <= number < count:
        raise BadFolder(name, f"names number {number} of {count}", PROOFS)
    return number


def _whole(stored: Stored, name: str) -> int:
    return int(stored.array(PROOFS, name, (), "i"))


def _speed(stored: Stored, row: int, n: int) -> Speed:
    stance, q = (stored.finite(PROOFS, f"{name}_{row}", (n,)) for name in ("stance", "q"))
    normal, dual = stored.finite(PROOFS, f"normal_{row}", (3,)), stored.finite(PROOFS, f"dual_{row}", (6,))
    bound, needed = (
        float(stored.finite(PROOFS, f"{name}_{row}", ())) for name in ("bound_m_s", "needed_m_s")
    )
    return Speed(_whole(stored, f"strike_{row}"), stance, q, normal, dual, bound, needed)


def _legs(stored: Stored, row: int, n: int) -> list[Leg]:
    number = stored.array(PROOFS, f"leg_{row}", (None,), "i")
    k = len(number)
    shapes: dict[str, tuple[int | None, ...]] = {
        **{"stance": (k, n), "q": (k, 2, n), "normal": (k, 2, 3), "speed_m_s": (k, 2), "flight_s": (k,)},
        **{"velocity_dual": (k, 2, 6), "place_dual": (k, 2, 6), "change_dual": (k, n), "short": (k,)},
    }
    whole = {name: stored.finite(PROOFS, f"{name}_{row}", shape) for name, shape in shapes.items()}
    owner = stored.array(PROOFS, f"cut_leg_{row}", (None,), "i")
    c = len(owner)
    joint = stored.array(PROOFS, f"cut_joint_{row}", (c,), "i")
    sign, weight = (stored.finite(PROOFS, f"{name}_{row}", (c,)) for name in ("cut_sign", "cut_weight"))
    speeds = stored.finite(PROOFS, f"cut_speeds_{row}", (c, 2))
    inside = ((joint >= 0) & (joint < n)).all() and ((owner >= 0) & (owner < k)).all()
    if not inside or not (np.abs(sign) == 1).all():
        place = f"{stored.folder}/evidence/{PROOFS}"
        raise BadFolder(f"cut_joint_{row}", "or leg or sign of a cut is none", place)
    found = []
    for i in range(k):
        mine = owner == i
        given = {name: array[i] for name, array in whole.items()}
        given |= {name: float(given[name]) for name in ("flight_s", "short")}
        cuts = (joint[mine].astype(np.int64), sign[mine], speeds[mine], weight[mine])
        named = dict(zip(("cut_joint", "cut_sign", "cut_speeds", "cut_weight"), cuts, strict=True))
        found.append(Leg(leg=int(number[i]), **given, **named))
    return found
