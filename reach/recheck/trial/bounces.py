"""Bounces of a trial decided anew: the ball's flights, what the paddle did where they end, what contact made of it."""

from __future__ import annotations

import math
from dataclasses import dataclass, fields

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.chain import Seen
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.trace import FINE, Trace
from reach.recheck.ball import Air, Bounce, Flights, Outline, launch, refused, tops
from reach.recheck.stored import BadFolder, Stored, largest

RUNS = "runs.npz"
DEAD_SHARE, AWAY_TIMES = (
    0.03,
    3.0,
)  # of the wanted apex: a ball that rises no higher has died, a higher one run away
CROWD = 5  # bounces in a control period: the ball lies on the paddle
EDGE_M = 1e-6  # a ball so near to the face's edge may have missed it
SIDEWAYS = "a first flight with drag, where gravity pulls sideways, has no closed form"

Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Bounces:
    """Bounces of one start, k of them, as stored: see DEVELOPERS.md, "Evidence format"."""

    t_s: Array
    ball: Array
    face: Array
    ball_in: Array
    ball_out: Array
    spin_out: Array
    paddle_m_s: Array
    tilt_rad: Array
    tilt_bearing_rad: Array
    apex_m: Array
    offset_m: Array

    @staticmethod
    def of(stored: Stored, start: int) -> Bounces:
        """The bounces of a start, counted from 0."""
        count: int | None = None
        found = {}
        for name in (field.name for field in fields(Bounces)):
            width = {"face": (2,), "ball": (3,), "ball_in": (3,), "ball_out": (3,), "spin_out": (3,)}.get(
                name, ()
            )
            found[name] = stored.finite(RUNS, f"{name}_{start}", (count, *width))
            count = len(found[name])
            if count > stored.number("trial", "bounces"):
                raise BadFolder(
                    f"{name}_{start}",
                    "has more bounces than were asked for",
                    f"{stored.folder}/evidence/{RUNS}",
                )
        return Bounces(**found)

    @property
    def spin_in(self) -> Array:
        """Spins (k, 3) before each bounce; the first ball has none."""
        return np.vstack([np.zeros((1, 3)), self.spin_out])[: len(self.t_s)]


@dataclass(frozen=True, eq=False)
class Asked:
    """What was asked of all starts.

    Attributes
    ----------
    centre (3,), apex_m, bounces, within_m, apex_error_m, by_bounce, then_for, required_share : as of [trial]
    radius_m, mass_kg : of the ball
    rise (3,), flight_s : of the ball that reaches the apex; nan where it has no closed form
    longest_s : of a trial; what the ball does later was not looked at
    """

    air: Air
    bounce: Bounce
    outline: Outline
    centre: Array
    apex_m: float
    bounces: float
    within_m: float
    apex_error_m: float
    by_bounce: int
    then_for: int
    required_share: float
    radius_m: float
    mass_kg: float
    rise: Array
    flight_s: float
    longest_s: float

    @staticmethod
    def of(stored: Stored) -> Asked:
        """What cell.json has."""
        air, apex = Air.of(stored), stored.number("trial", "apex_m")
        rise = launch(air, apex) or (np.full(3, np.nan), math.nan)
        share, bounces = (stored.number("trial", key) for key in ("required_share", "bounces"))
        if not (apex > 0 and 0 <= share <= 1):
            raise refused("trial", "has no apex, or asks for a share that is none", stored)
        within, error, by, then = (
            stored.number("trial", "recovered", key)
            for key in ("within_m", "apex_error_m", "by_bounce", "then_for")
        )
        return Asked(
            air=air,
            bounce=Bounce.of(stored),
            outline=Outline.of(stored),
            centre=np.array([stored.number("centre_m", i) for i in range(3)]),
            apex_m=apex,
            bounces=bounces,
            within_m=within,
            apex_error_m=error,
            by_bounce=int(by),
            then_for=int(then),
            required_share=share,
            radius_m=stored.number("ball", "radius_m"),
            mass_kg=stored.number("ball", "mass_kg"),
            rise=rise[0],
            flight_s=rise[1],
            longest_s=math.inf if math.isnan(rise[1]) else (bounces + 2) * rise[1] * math.sqrt(AWAY_TIMES),
        )

    def ended(self, c: Bounces, period_s: float) -> tuple[str, Array]:
        """How the bounces end a trial, "" where they do not; and which (k,) could have been the last."""
        k, rise = len(c.t_s), c.apex_m + self.centre[2] - c.ball[:, 2]
        row = np.ceil(c.t_s / period_s - 1e-9)
        crowd = np.zeros(k, dtype=bool)
        crowd[CROWD - 1 :] = row[CROWD - 1 :] == row[: max(k - CROWD + 1, 0)]
        dead = (rise < DEAD_SHARE * self.apex_m) | crowd
        away, whole = rise > AWAY_TIMES * self.apex_m, np.arange(1, k + 1) >= self.bounces
        over = dead | away | whole
        if not k or not over[-1]:
            return "", over
        return "died on the paddle" if dead[-1] else "ran away" if away[-1] else "held", over

    def recovered_at(self, c: Bounces) -> int | None:
        """The bounce, counted from 1, from which contacts and apexes were good for as long as asked."""
        good = (c.offset_m <= self.within_m) & (np.abs(c.apex_m - self.apex_m) <= self.apex_error_m)
        for first in range(min(self.by_bounce, len(good) - self.then_for + 1)):
            if good[first : first + self.then_for].all():
                return first + 1
        return None


def begun(asked: Asked, offset: Array, lateral: Array, c: Bounces, last_s: float) -> Flights:
    """The flights (k + 1) from the start and from each bounce, to the next one or to an instant."""
    height = np.append(asked.centre[:2] + offset, asked.centre[2])
    begin, end = np.append(0.0, c.t_s), np.append(c.t_s, last_s)
    return Flights.of(
        asked.air,
        np.vstack([height, c.ball]),
        np.vstack([asked.rise + np.append(lateral, 0.0), c.ball_out]),
        np.vstack([np.zeros(3), c.spin_out]),
        end - begin,
    )


def flight_item(where: str, asked: Asked, c: Bounces, flights: Flights) -> Item:
    """Where and how the ball comes to each bounce, how high it goes from there, how far off the centre it is."""
    k, unknown = len(c.t_s), bool(np.isnan(asked.rise).any())
    place, velocity = (ends[unknown:k] for ends in flights.ends())
    apex = tops(asked.air, c.ball, c.ball_out, c.spin_out) - asked.centre[2]
    offset = np.linalg.norm(c.ball[:, :2] - asked.centre[:2], axis=1)
    order = bool((np.diff(c.t_s) >= 0).all() and (c.t_s >= 0).all())
    checks = (
        same("instants in order", order, True),
        Check("place", largest(place - c.ball[unknown:]), allowed.PLACE_M, "m"),
        Check("ball in", largest(velocity - c.ball_in[unknown:]), allowed.SPEED_M_S, "m/s"),
        Check("apex", largest(apex - c.apex_m), allowed.PLACE_M, "m"),
        Check("offset", largest(offset - c.offset_m), allowed.PLACE_M, "m"),
    )
    return Item("flight", where, checks, SIDEWAYS if unknown else "")


@dataclass(frozen=True, eq=False)
class Met:
    """The paddle at the instants of k bounces, by its joints' motion.

    Attributes
    ----------
    q : (k, n) ; seen : Seen
    arm : (k, 3) m, from the strike point to where the ball meets the face's plane
    face : (k, 3) m/s, velocity of the face there
    """

    q: Array
    seen: Seen
    arm: Array
    face: Array

    @staticmethod
    def of(ground: Ground, asked: Asked, c: Bounces, trace: Trace) -> Met:
        """The paddle of a motion."""
        q, v = state(trace, c.t_s)
        seen = ground.chain.seen(q, v)
        arm = c.ball - asked.radius_m * seen.normal - seen.place
        return Met(q, seen, arm, seen.linear + np.cross(seen.angular, arm))


def state(trace: Trace, t_s: Array) -> tuple[Array, Array]:
    """Joint positions and velocities (k, n) of a motion at instants (k,); nan outside of it."""
    q, v, a = (rows[::FINE] for rows in (trace.q, trace.v, trace.a))
    ticks = (t_s - trace.t_s[0]) / trace.period_s
    inside = (ticks >= -1e-6) & (ticks <= len(q) - 1 + 1e-6)
    row = np.clip(np.where(inside, ticks, 0), 0, len(q) - 1).astype(int)
    ahead = np.where(inside, (ticks - row) * trace.period_s, np.nan)[:, None]
    return q[row] + ahead * (v[row] + a[row] * (ahead / 2)), v[row] + ahead * a[row]


def impact_item(where: str, asked: Asked, ground: Ground, c: Bounces, met: Met | None) -> Item:
    """What contact makes of the ball.

    Without the joints' motion the face's normal and its speed along it are those stored; that decides for a face
    without friction that does not give.
    """
    bounce = asked.bounce
    if met is None:
        aside = np.array([np.cos(c.tilt_bearing_rad), np.sin(c.tilt_bearing_rad)]) * np.sin(c.tilt_rad)
        normal = np.vstack([aside, np.cos(c.tilt_rad)]).T
        face = c.paddle_m_s[:, None] * normal
        if bounce.friction > 0 or bounce.gives:
            return Item("impact", where, (), "its motion is not kept, and friction or give depends on it")
    else:
        normal, face = met.seen.normal, met.face
    ratio = np.zeros(len(c.t_s))
    if bounce.gives and met is not None:
        if ground.engine is None:
            return Item("impact", where, (), f"the arm gives: {ground.why_no_engine}")
        ratio = np.array([asked.mass_kg * given(ground, q) for q in met.q])
    out, spin = bounce.after(c.ball_in, c.spin_in, normal, face, ratio)
    checks = (
        Check("ball out", largest(out - c.ball_out), allowed.SPEED_M_S, "m/s"),
        Check("spin out", largest(spin - c.spin_out), allowed.SPEED_M_S, "m/s"),
    )
    return Item("impact", where, checks)


def given(ground: Ground, q: Array) -> float:
    """What the arm gives along the face's normal in a posture (n,), in 1/kg: n J M⁻¹ Jᵀ n at the strike point.

    The inertia matrix M comes column by column from the engine, as torques of unit accelerations less those of rest
    (M. W. Walker and D. E. Orin, J. Dyn. Sys. Meas. Control 104 (1982) 205, from memory).
    """
    assert ground.engine is not None
    if not np.isfinite(q).all():
        return math.nan
    n = len(q)
    units = np.vstack([np.zeros(n), np.eye(n)])
    torque = ground.engine.torque(np.tile(q, (n + 1, 1)), np.zeros((n + 1, n)), units)
    _, axes, jacobian = ground.chain.jacobian(q)
    row = axes[:, 2] @ jacobian[:3]
    try:
        return float(row @ np.linalg.solve((torque[1:] - torque[0]).T, row))
    except np.linalg.LinAlgError:
        return math.nan


def contact_item(where: str, asked: Asked, c: Bounces, met: Met, missed_m: float, end_s: float) -> Item:
    """Ball and face meet at each instant, on the face, and nowhere else."""
    axes, normal = met.seen.axes, met.seen.normal
    on_face = np.einsum("ki,kij->kj", met.arm, axes[:, :, :2])
    gap = np.einsum("ki,ki->k", c.ball - met.seen.place, normal) - asked.radius_m
    level = np.hypot(normal[:, 0], normal[:, 1])
    bearing = np.arctan2(normal[:, 1], normal[:, 0]) - c.tilt_bearing_rad
    past = np.maximum(asked.outline.past(on_face), 0.0)
    checks = (
        Check("in the motion", max(float(np.max(c.t_s, initial=0.0)) - end_s, 0.0), allowed.TIME_S, "s"),
        Check("gap", largest(gap), allowed.PLACE_M, "m"),
        Check("on the face", largest(on_face - c.face), allowed.PLACE_M, "m"),
        Check("past the edge", largest(past), allowed.PLACE_M, "m"),
        Check(
            "paddle",
            largest(np.einsum("ki,ki->k", met.face, normal) - c.paddle_m_s),
            allowed.SPEED_M_S,
            "m/s",
        ),
        Check("tilt", largest(np.arctan2(level, normal[:, 2]) - c.tilt_rad), allowed.TURN_RAD, "rad"),
        Check("bearing", largest(2 * np.sin(bearing / 2) * level), allowed.TURN_RAD, "rad"),
        Check("bounces left out", missed_m, allowed.PLACE_M, "m"),
    )
    return Item("contact", where, checks)


@dataclass(frozen=True, eq=False)
class Gaps:
    """Ball and face at the fine samples of a trial (f,).

    Attributes
    ----------
    flight : (f,) which flight the ball is on
    gap : (f,) m, from the ball to the face's plane
    past : (f,) m, how far the ball's foot lies past the face's edge, negative within
    """

    flight: Array
    gap: Array
    past: Array

    @staticmethod
    def of(asked: Asked, c: Bounces, flights: Flights, trace: Trace, seen: Seen, until_s: float) -> Gaps:
        """The gaps up to an instant."""
        f = int(np.searchsorted(trace.t_s, until_s + 1e-9, side="right"))
        t, normal = trace.t_s[:f], seen.normal[:f]
        flight = np.searchsorted(np.maximum.accumulate(c.t_s), t, side="right")
        after = t - np.append(0.0, c.t_s)[flight]
        away = flights.places(flight, after) - seen.place[:f]
        gap = np.einsum("ki,ki->k", away, normal) - asked.radius_m
        return Gaps(flight, gap, asked.outline.past(np.einsum("ki,kij->kj", away, seen.axes[:f, :, :2])))

    def missed(self, last: int) -> float:
        """How deep in m the ball goes through the face without a bounce, at most, on flights 0 to `last`.

        A ball passes the face's plane beside its edge without a bounce; so what counts is where it comes through.
        """
        below = self.gap < -allowed.PLACE_M
        fresh = np.append(True, self.flight[1:] != self.flight[:-1])  # a flight's first sample
        through = below & np.append(False, ~below[:-1] | fresh[1:]) & (self.flight <= last)
        at = np.flatnonzero(through)
        before = np.maximum(at - 1, 0)
        fall = self.gap[before] - self.gap[at]
        share = np.divide(self.gap[before], fall, out=np.ones(len(at)), where=~fresh[at] & (fall > 0))
        past = self.past[before] + np.clip(share, 0, 1) * (self.past[at] - self.past[before])
        inside = np.where(fresh[at], self.past[at], past) < -EDGE_M
        return float(np.max(-self.gap[at][inside], initial=0.0))
