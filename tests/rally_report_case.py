"""Invented results of rally and trial, whose names try to break out of every output."""

from __future__ import annotations

import itertools
from collections.abc import Sequence
from dataclasses import replace

import numpy as np
from test_report import NAMES, made_cell, made_motion

from reach.cell import Ball, Contact, Rally, Recovered, Sensor, Starts, Trial
from reach.evidence.motion import Motion
from reach.evidence.rallies import (
    ApexEdge,
    Bounce,
    Centre,
    Knots,
    OffsetEdge,
    RallyEvidence,
    RallyPoints,
    Shown,
)
from reach.evidence.record import Need, Reason, Remedy, Use
from reach.evidence.trials import Contacts, Run, Trace, TrialEvidence
from reach.result import RallyResult, TrialResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED, Verdict

G = 9.80665
E = 0.85
BALL = Ball(0.0027, 0.02, source="invented")
CONTACT = Contact(E, restitution_spread=0.03, source="invented")
CENTRE = (0.55, 0.0, 0.4)
KINDS = ("position", "velocity", "acceleration", "jerk", "torque", "torque rate")
GRID = ((0.45, -0.1, 0.3), (0.65, 0.1, 0.4))
NO_MOTION = Motion(0.0, 0.004, np.zeros((0, 3)), np.zeros((0, 3)), np.zeros((0, 3)))


def made_points(rally: Rally) -> RallyPoints:
    """Points that fail low for cycle time, high for a joint's speed, and far out for torque."""
    rows = list(itertools.product(rally.apexes_m, rally.offsets_m, rally.bearings_rad))
    m, n = len(rows), len(NAMES)
    apex, offset, bearing = (np.array(column, dtype=float) for column in zip(*rows, strict=True))
    flight = 2 * np.sqrt(2 * apex / G)
    cycle = 0.27 + 0.9 * offset + 0.03 * np.cos(bearing)
    speed = np.sqrt(2 * G * apex) * (1 - E) / (1 + E) * np.hypot(1, 3 * offset)
    bound = 0.33 - 0.4 * offset - 0.02 * np.cos(bearing)
    margin = flight - rally.latency_s - cycle
    slow, fast, near = margin < 0, speed > bound, np.abs(margin) < 0.02
    verdict = np.select(
        [fast, slow & ~near, near], [NOT_DELIVERABLE, NOT_DELIVERABLE, UNDECIDED], DELIVERABLE
    )
    done = verdict == DELIVERABLE
    share = np.where(done, np.clip(0.75 + 2 * margin, 0, 1), np.nan)
    motions = {
        int(row): Knots(
            np.array([0.0, 0.1, 0.3]), np.full((3, n), 0.1 * k), np.zeros((3, n)), np.ones((3, n)), (0.0, 0.3)
        )
        for k, row in enumerate(np.flatnonzero(done)[:3])
    }
    return RallyPoints(
        centre=np.tile(CENTRE, (m, 1)),
        apex_m=apex,
        offset_m=offset,
        bearing_rad=bearing,
        paddle_speed_m_s=speed,
        face_tilt_rad=np.arctan(offset / (8 * apex)),
        flight_s=flight,
        cycle_s=np.where(fast, np.nan, cycle),
        margin_s=np.where(fast, np.nan, margin),
        time_bound_s=0.8 * cycle,
        speed_bound_m_s=bound,
        verdict=verdict,
        basis=np.where(done, "demonstrated", "searched"),
        limit=np.where(fast, "velocity", np.where(done, "torque", "cycle time")),
        joint=np.where(fast, NAMES[1], np.where(done, NAMES[2], "")),
        reason=tuple('held, "all" of it' if x else "stopped,\nby a limit" for x in done.tolist()),
        q=np.where(done[:, None], 0.3, np.nan) * np.ones((m, n)),
        postures=np.where(done, 8, 0),
        bare=np.where(verdict == UNDECIDED, DELIVERABLE, verdict),
        feasible_share=share,
        feasible_low=np.clip(share - 0.1, 0, 1),
        feasible_high=np.clip(share + 0.05, 0, 1),
        largest_delay_s=np.where(done, margin, np.nan),
        largest_tilt_rad=np.where(done, 0.02, np.nan),
        largest_contact_offset_m=np.where(done, 0.012, np.nan),
        largest_restitution_error=np.where(done, 0.04, np.nan),
        motions=motions,
    )


def grid_places(rally: Rally) -> list[tuple[float, float, float]]:
    """Places of the grid of centres."""
    if rally.centres_box_m is None:
        return []
    low, high = (np.array(corner) for corner in rally.centres_box_m)
    counts = np.round((high - low) / rally.centres_spacing_m).astype(int) + 1
    axes = [lo + rally.centres_spacing_m * np.arange(count) for lo, count in zip(low, counts, strict=True)]
    return [tuple(float(x) for x in np.round(place, 9)) for place in itertools.product(*axes)]


def made_edges(rally: Rally) -> tuple[ApexEdge, ...]:
    """Edges that close in with the offset; beyond 0.25 m none is held."""
    edges = []
    for offset, bearing in itertools.product(rally.offsets_m, rally.bearings_rad):
        low = ((0.27 + 0.9 * offset + 0.03 * np.cos(bearing) + rally.latency_s) / 2) ** 2 * G / 2
        speed = (0.33 - 0.4 * offset - 0.02 * np.cos(bearing)) / np.hypot(1, 3 * offset)
        high = (speed * (1 + E) / (1 - E)) ** 2 / (2 * G)
        none = offset > 0.25 or high < low
        edges.append(
            ApexEdge(
                offset,
                bearing,
                None if none else float(low),
                "cycle time",
                "",
                False,
                None if none else float(high),
                "" if offset == 0 and bearing > 4 else "velocity" if offset < 0.1 else "torque",
                NAMES[1],
                offset == 0 and bearing > 4,
            )
        )
    return tuple(edges)


def made_offsets(rally: Rally) -> tuple[OffsetEdge, ...]:
    """Offsets recovered at each apex and bearing; the lowest apex holds none ahead."""
    return tuple(
        OffsetEdge(
            apex,
            bearing,
            None
            if apex < 0.12 and np.cos(bearing) > 0.9
            else float(0.08 + 0.2 * apex - 0.03 * np.cos(bearing)),
            "torque" if apex > 0.3 else "cycle time",
            NAMES[2] if apex > 0.3 else "",
            bool(apex > 0.7 and np.cos(bearing) < 0),
        )
        for apex, bearing in itertools.product(rally.apexes_m, rally.bearings_rad)
    )


def made_bounces(rally: Rally) -> tuple[Bounce, ...]:
    """Steady bounces: the first stable by itself, the second could be, the last is not held."""
    low = -2 * G * (1 + E**2) / (1 + E) ** 2
    bounces = []
    for k, apex in enumerate(rally.apexes_m):
        fall = float(np.sqrt(2 * G * apex))
        held = k < 3
        bounces.append(
            Bounce(
                apex_m=apex,
                flight_s=2 * fall / G,
                speed_m_s=fall * (1 - E) / (1 + E),
                approach_m_s=fall,
                restitution=E,
                held=held,
                window_m_s2=(low, 0.0),
                fastest_m_s2=(0.6 * low, 0.4 * low),
                impact_m_s2=(-4.0, 2.5, 6.0)[k] if held else float("nan"),
                least_m_s2=(low, -2.0, float("nan"))[k] if held else float("nan"),
                tolerated_m_s2=0.6 + k,
                speed_per_restitution=-2 / (1 - E**2),
                tilt_drift_m=8 * apex * np.radians(1.0),
                tilt_drift_m_per_deg=8 * apex * np.radians(1.0),
                place_apex_error_m=0.006,
                offset_left_m=0.05 - 0.04 * k if held else float("nan"),
                face_left_m=0.07 - 8 * apex * float(np.radians(1.0)),
            )
        )
    return tuple(bounces)


def made_centres(rally: Rally) -> tuple[Centre, ...]:
    """Places that hold less the farther they are from the centre."""
    asked = len(rally.apexes_m) * len(rally.offsets_m) * len(rally.bearings_rad)
    centres = []
    for place in grid_places(rally):
        share = float(np.clip(1.1 - 5 * np.linalg.norm(np.subtract(place, CENTRE)), 0, 1))
        done = round(share * asked)
        centres.append(
            Centre(
                place,
                done,
                min(2, asked - done),
                asked,
                rally.apexes_m[:2] if done else (),
                "torque",
                NAMES[0],
            )
        )
    return tuple(centres)


def made_shown() -> Shown:
    """One cycle of a bobbing arm, the ball thrown back to the centre."""
    t = np.linspace(0.0, 0.57, 58)
    bob = 0.05 * np.sin(2 * np.pi * t / 0.57)
    outline = np.stack(
        [
            np.column_stack([np.zeros_like(t), np.zeros_like(t), np.zeros_like(t)]),
            np.column_stack([np.zeros_like(t), np.zeros_like(t), np.full_like(t, 0.3)]),
            np.column_stack([0.25 - 0.3 * bob, np.zeros_like(t), 0.62 + 0.7 * bob]),
            np.column_stack([0.55 + 0 * t, 0.05 * t / 0.57, 0.45 + 1.5 * bob]),
            np.column_stack([0.55 + 0 * t, 0.05 * t / 0.57, 0.38 + bob]),
        ],
        axis=1,
    )
    normal = np.column_stack([0.1 * np.cos(2 * np.pi * t / 0.57), 0 * t, np.ones_like(t)])
    normal /= np.linalg.norm(normal, axis=1, keepdims=True)
    height = 0.4 + np.sqrt(2 * G * 0.4) * t - G * t**2 / 2
    ball = np.column_stack([0.6 - 0.05 * t / 0.57, 0 * t, height])
    return Shown(0.4, 0.05, 0.0, t, outline, normal, ball, (0.0, 0.57))


def rally_result(rally: Rally, verdict: str = NOT_DELIVERABLE, nominal: bool = False) -> RallyResult:
    """A whole invented result of a rally."""
    points = made_points(rally)
    if nominal:
        nothing = np.full(len(points.verdict), np.nan)
        points = replace(points, feasible_share=nothing, feasible_low=nothing, feasible_high=nothing)
    evidence = RallyEvidence(
        points=points,
        edges=made_edges(rally),
        offsets=made_offsets(rally),
        centres=made_centres(rally),
        bounces=made_bounces(rally),
        shown=made_shown(),
        effective_mass_kg=1.43,
        velocity_jump=np.array([0.011, -0.024, 0.004]),
        joint_impulse=np.array([0.003, 0.0091, -0.002]),
        drag=True,
        lift=False,
        nominal_only=nominal,
        kinds=KINDS,
        unknown=(*(("jerk", name) for name in NAMES),),
        not_checked=("jerk", "friction"),
        stopped=False,
    )
    held = points.verdict == DELIVERABLE
    cell = replace(made_cell(NAMES), follow=None, rally=rally, ball=BALL, contact=CONTACT)
    grounds = f"{held.sum()} of {len(held)} points deliverable"
    return RallyResult(
        cell=cell,
        evidence=evidence,
        verdict=Verdict(verdict, f"{verdict}: {grounds}; not checked: jerk, friction", (grounds,)),
        without_margins="undecided",
        reasons=(
            Reason(
                *(True, "velocity", NAMES[1], "impact", None, None, 0.4, 0.33, "m/s", "searched"),
                f"velocity of {NAMES[1]} stops 9 points",
            ),
            Reason(
                False, "cycle time", None, None, None, None, 0.3, 0.29, "s", "searched", "2 come too late"
            ),
        ),
        needs=(Need(NAMES[1], "velocity", 3.1, 3.4, "rad/s", f"{NAMES[1]} needs 3.4 rad/s"),),
        remedies=(Remedy("a bouncier face", "all points", True), Remedy("a nearer centre", "more", False)),
        headroom_share=-0.07,
        headroom_text="limits would have to grow by 7 %",
        notes=("note with <i>markup</i>",),
    )


QUARTERS = tuple(np.radians([0.0, 90.0, 180.0, 270.0]))
WHOLE = Rally(
    CENTRE,
    (0.1, 0.2, 0.4, 0.8),
    (0.0, 0.05, 0.1),
    QUARTERS,
    latency_s=0.02,
    centres_box_m=GRID,
    centres_spacing_m=0.1,
    contact_offset_spread_m=0.003,
)


def whole_rally() -> RallyResult:
    """Four apexes, three offsets, four bearings, a grid of centres."""
    return rally_result(WHOLE)


def nothing_held() -> RallyResult:
    """No point is deliverable; there is no posture, no cycle to show, nan wherever it may stand."""
    made = rally_result(replace(WHOLE, centres_box_m=None))
    points = made.evidence.points
    m = len(points.verdict)
    none = np.full(m, np.nan)
    gone = {
        name: none
        for name in (
            *("paddle_speed_m_s", "face_tilt_rad", "flight_s", "cycle_s", "margin_s", "time_bound_s"),
            *("speed_bound_m_s", "feasible_share", "feasible_low", "feasible_high", "largest_delay_s"),
            *("largest_tilt_rad", "largest_contact_offset_m", "largest_restitution_error"),
        )
    }
    points = replace(
        points,
        **gone,
        verdict=np.full(m, NOT_DELIVERABLE),
        basis=np.full(m, "proved"),
        limit=np.full(m, "reach"),
        joint=np.full(m, ""),
        q=np.full((m, len(NAMES)), np.nan),
        bare=np.full(m, NOT_DELIVERABLE),
        motions={},
    )
    evidence = replace(
        made.evidence,
        points=points,
        edges=tuple(
            replace(e, low_m=None, high_m=None, low_limit="reach", high_limit="reach")
            for e in made.evidence.edges
        ),
        offsets=tuple(
            replace(edge, largest_m=None, limit="reach", joint="") for edge in made.evidence.offsets
        ),
        bounces=tuple(
            replace(
                b,
                held=False,
                impact_m_s2=np.nan,
                least_m_s2=np.nan,
                offset_left_m=np.nan,
                fastest_m_s2=(np.nan, np.nan),
            )
            for b in made.evidence.bounces
        ),
        shown=None,
        effective_mass_kg=np.nan,
        velocity_jump=np.full(len(NAMES), np.nan),
        joint_impulse=np.full(len(NAMES), np.nan),
    )
    return replace(made, evidence=evidence)


def no_point() -> RallyResult:
    """Stopped before the first point."""
    made = nothing_held()
    points = made.evidence.points
    cut = {name: getattr(points, name)[:0] for name in vars(points) if name not in ("reason", "motions")}
    empty = replace(points, **cut, reason=(), motions={})
    return replace(
        made,
        evidence=replace(
            made.evidence, points=empty, edges=(), offsets=(), centres=(), bounces=(), stopped=True
        ),
    )


def one_point() -> RallyResult:
    """A single apex at the centre, a single bearing, no spread."""
    return rally_result(Rally(CENTRE, (0.3,), (0.0,), (0.0,)), DELIVERABLE, nominal=True)


def one_bearing() -> RallyResult:
    """One bearing, many offsets out to where nothing is held."""
    return rally_result(Rally(CENTRE, (0.15, 0.3), (0.0, 0.1, 0.2, 0.3), (np.pi / 2,)))


def many_points() -> RallyResult:
    """Five hundred and four points in a dozen directions, and many places for the centre."""
    rally = Rally(
        CENTRE,
        tuple(np.linspace(0.1, 0.8, 7)),
        tuple(np.linspace(0.0, 0.25, 6)),
        tuple(np.arange(12) * np.pi / 6),
        centres_box_m=((0.35, -0.3, 0.2), (0.75, 0.3, 0.2)),
        centres_spacing_m=0.4,
    )
    made = rally_result(rally)
    dense = replace(rally, centres_box_m=((0.35, -0.3, 0.2), (0.75, 0.3, 0.6)), centres_spacing_m=0.02)
    return replace(made, evidence=replace(made.evidence, centres=made_centres(dense)))


def stopped_rally() -> RallyResult:
    """Stopped after the points: no edge, no bounce, no cycle to show."""
    made = whole_rally()
    empty = {"edges": (), "offsets": (), "centres": (), "bounces": (), "shown": None, "stopped": True}
    return replace(made, evidence=replace(made.evidence, **empty))


RALLIES = {
    "stopped": stopped_rally,
    "whole": whole_rally,
    "nothing held": nothing_held,
    "no point": no_point,
    "one point": one_point,
    "one bearing": one_bearing,
    "many points": many_points,
}


def made_contacts(count: int, wanted_m: float, offset: Sequence[float], settle: float) -> Contacts:
    """Contacts whose offset and apex error shrink, or grow, by a factor a bounce."""
    k = np.arange(count)
    away = np.asarray(offset, dtype=float) * (settle**k)[:, None]
    apex = np.maximum(wanted_m * (1 + 0.3 * settle**k * np.cos(k)), 0.02)
    flight = 2 * np.sqrt(2 * apex / G)
    fall = np.sqrt(2 * G * apex)
    down = np.column_stack([0 * fall, 0 * fall, -fall])
    return Contacts(
        t_s=0.3 + np.concatenate([[0.0], np.cumsum(flight)[:-1]]) if count else np.zeros(0),
        ball=np.column_stack([CENTRE[0] + away[:, 0], away[:, 1], np.full(count, CENTRE[2])]),
        face=0.2 * away,
        ball_in=down,
        ball_out=-down,
        spin_out=np.zeros((count, 3)),
        paddle_m_s=fall * (1 - E) / (1 + E),
        tilt_rad=0.3 * np.linalg.norm(away, axis=1),
        tilt_bearing_rad=np.arctan2(away[:, 1], away[:, 0]),
        apex_m=apex,
        offset_m=np.linalg.norm(away, axis=1),
    )


def made_trace(contacts: Contacts, end_s: float) -> Trace:
    """Parabolas from contact to contact, and a paddle that bobs below."""
    t = np.linspace(0.0, max(end_s, 0.3), int(max(end_s, 0.3) / 0.016) + 2)
    times = np.concatenate([[-0.2], contacts.t_s])
    row = np.clip(np.searchsorted(times, t, side="right") - 1, 0, len(times) - 1)
    up = np.concatenate([[0.5 * G * 0.5], contacts.ball_out[:, 2]])[row]
    ahead = t - times[row]
    places = np.vstack([[CENTRE], contacts.ball])[row]
    ball = places + np.column_stack([0 * t, 0 * t, up * ahead - G * ahead**2 / 2])
    paddle = np.column_stack([0 * t + CENTRE[0], 0 * t, 0.37 + 0.03 * np.sin(9 * t)])
    return Trace(t, ball, paddle)


def made_trial_uses(share: float) -> tuple[Use, ...]:
    """Limits over one trial; jerk unknown."""
    uses = []
    for kind, unit, limit in (
        ("position", "rad", 2.9),
        ("velocity", "rad/s", 2.6),
        ("torque", "N·m", 87.0),
        ("jerk", "rad/s³", None),
    ):
        for k, name in enumerate(NAMES):
            used = share * (0.4 + 0.2 * k + (0.1 if kind == "torque" else 0.0))
            peak = used * (limit or 1000.0)
            low, kept = (None, None) if limit is None else (-limit, 0.9 * limit)
            share_used = None if limit is None else used
            uses.append(
                Use(
                    *(kind, name, unit, low, limit, None if kept is None else -kept, kept, "invented"),
                    *(peak, 0.4, share_used, peak, np.zeros(0)),
                )
            )
    return tuple(uses)


def made_run(
    offset: tuple[float, float],
    lateral: tuple[float, float],
    outcome: str,
    recovered: bool,
    bounces: int,
    settle: float,
) -> Run:
    """One trial that ends as told."""
    contacts = made_contacts(bounces, 0.3, offset, settle)
    end = float(contacts.t_s[-1]) + 0.2 if bounces else 0.5
    share = 0.8 if recovered else 1.3
    return Run(
        offset=np.array(offset),
        lateral=np.array(lateral),
        outcome=outcome,  # one of the words of Outcome
        text=f"{outcome} after {bounces} bounces, <odd> & \x1b text",
        recovered=recovered,
        recovered_at=5 if recovered else None,
        bounces=bounces,
        limit="" if recovered else "torque",
        joint="" if recovered else NAMES[1],
        ended_s=end,
        contacts=contacts,
        trace=made_trace(contacts, end),
        oscillation_m=0.004 if bounces > 20 else float("nan"),
        uses=made_trial_uses(share),
        broken=() if recovered else (f"torque of {NAMES[2]}",),
        motion=made_motion(len(NAMES), 0.2),
        elastic_steps=3,
        failed_steps=0,
    )


def trial_result(
    runs: tuple[Run, ...],
    asked: int,
    verdict: str = NOT_DELIVERABLE,
    trial: Trial | None = None,
    blocked: str = "",
) -> TrialResult:
    """A whole invented result of a trial."""
    trial = trial or Trial(
        gains=(("lift <k>", 0.12), ("centring", 1.5)),
        starts=Starts((0.08,), QUARTERS, (0.0, 0.1)),
        sensor=Sensor(100.0, 0.02, 0.002, 0.03),
        bounces=50,
    )
    done = sum(run.recovered for run in runs)
    share = done / len(runs) if runs else float("nan")
    evidence = TrialEvidence(
        runs=runs,
        asked=asked,
        centre=CENTRE,
        apex_m=trial.apex_m,
        flight_s=2 * float(np.sqrt(2 * trial.apex_m / G)),
        ready=None if blocked else np.array([0.1, -0.6, 1.2]),
        law=trial.law,
        gains=trial.gains,
        recovered_share=share,
        low=max(share - 0.2, 0.0),
        high=min(share + 0.2, 1.0),
        kinds=KINDS,
        unknown=tuple(("jerk", name) for name in NAMES),
        not_checked=("jerk", "drive tracking"),
        stopped=len(runs) < asked and not blocked,
        blocked=blocked,
    )
    cell = replace(made_cell(NAMES), follow=None, trial=trial, ball=BALL, contact=CONTACT)
    grounds = f"recovered {done} of {len(runs)} starts"
    return TrialResult(
        cell=cell,
        evidence=evidence,
        verdict=Verdict(verdict, f"{verdict}: {grounds}; not checked: jerk, drive tracking", (grounds,)),
        without_margins="not deliverable",
        reasons=(
            Reason(
                *(True, "torque", NAMES[1], None, None, None, None, None, "", "demonstrated"),
                f"torque of {NAMES[1]} loses 2 balls",
            ),
        ),
        needs=(),
        remedies=(Remedy("a softer law", "more starts", False),),
        headroom_share=None,
        headroom_text="no factor tried delivers",
        notes=("note with <i>markup</i>",),
    )


def whole_trial() -> TrialResult:
    """Eight starts: five recovered, one held too far out, one past the edge, one run away."""
    places = [(0.08 * float(np.cos(b)), 0.08 * float(np.sin(b))) for b in QUARTERS]
    runs = [made_run(place, (0.0, 0.0), "held", True, 50, 0.7) for place in places]
    runs.append(made_run(places[0], (0.1, 0.0), "held", True, 50, 0.8))
    runs.append(made_run(places[1], (0.0, 0.1), "held", False, 50, 1.0))
    runs.append(made_run(places[2], (-0.1, 0.0), "missed past the edge", False, 7, 1.2))
    runs.append(made_run(places[3], (0.0, -0.1), "ran away", False, 12, 1.1))
    return trial_result(tuple(runs), 8)


def blocked_trial() -> TrialResult:
    """No posture to start from, so no run."""
    return trial_result((), 4, blocked="no posture holds the paddle under the centre")


def lost_at_once() -> TrialResult:
    """One start, no bounce, a sensor that sees the true state."""
    run = replace(made_run((0.0, 0.0), (0.0, 0.0), "limit", False, 0, 1.0), uses=(), motion=NO_MOTION)
    empty = Trace(np.zeros(0), np.zeros((0, 3)), np.zeros((0, 3)))
    return trial_result((replace(run, trace=empty),), 1, trial=Trial())


def stopped_trial() -> TrialResult:
    """Stopped after two of six starts; a solver gave up."""
    runs = (
        made_run((0.08, 0.0), (0.0, 0.0), "held", True, 50, 0.7),
        made_run((0.0, 0.08), (0.2, 0.1), "solver failed", False, 3, 1.5),
    )
    return trial_result(runs, 6, UNDECIDED)


def many_trials() -> TrialResult:
    """Two hundred starts, anywhere and any way, all but a few recovered."""
    rng = np.random.default_rng(2)
    runs = []
    for k in range(200):
        at, lateral = rng.uniform(-0.1, 0.1, 2), rng.uniform(-0.2, 0.2, 2)
        lost = k % 25 == 3
        runs.append(
            made_run(
                (float(at[0]), float(at[1])),
                (float(lateral[0]), float(lateral[1])),
                "too fast to catch" if lost else "held",
                not lost,
                5 if lost else 30,
                1.6 if lost else 0.75,
            )
        )
    trial = Trial(bounces=30, recovered=Recovered(0.03, 0.05, 8, 15), required_share=0.9)
    return trial_result(tuple(runs), 200, DELIVERABLE, trial)


TRIALS = {
    "whole": whole_trial,
    "blocked": blocked_trial,
    "lost at once": lost_at_once,
    "stopped": stopped_trial,
    "many": many_trials,
}
