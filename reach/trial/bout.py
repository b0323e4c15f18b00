"""One trial: the loop rolled on the arm, measured, and what became of it."""

from __future__ import annotations

from collections import Counter
from dataclasses import dataclass, replace

import numpy as np

from reach.advice.blame import Blames
from reach.arm import Arm
from reach.ball import Air, Flight, launch
from reach.cell import Array, Cell, Recovered, Vec3
from reach.evidence.measure import measure
from reach.evidence.record import Use
from reach.evidence.trials import Contacts, Run, Trace
from reach.follow.roll import roll
from reach.follow.rolled import Roll
from reach.kinematics import Chain
from reach.limits.base import Limit
from reach.limits.build import build_limits
from reach.strike.setting import Setting
from reach.strike.sides import upper
from reach.trial.laws import LawFault, Setup, aside, gains_of, law_class, made
from reach.trial.loop import AWAY_TIMES, GoneBack, Loop, Loss
from reach.trial.starts import Eye, Start
from reach.verdict import ROUNDING

SHORT_M_S = 0.05  # a step that misses the law's twist by more was held back
SHORT_STEPS = 3  # of them in the last LAST_S: a limit had its part in the loss
LOOKED_AT = 60  # of those steps, the last ones, whose multipliers are looked at
LAST_S = 0.1  # before a trial's end: a limit that holds the paddle back then has its part in how it ends


@dataclass(frozen=True, eq=False)
class Ground:
    """What all trials of a cell share, once a process.

    Attributes
    ----------
    cell : with the ready posture as its start
    centre (3,) : of the ball at contact
    flight_s : of the wanted apex
    """

    cell: Cell
    arm: Arm
    chain: Chain
    limits: dict[str, Limit]
    centre: Array
    flight_s: float
    law: type
    gains: dict[str, float]
    seed: int

    @staticmethod
    def of(cell: Cell, centre: Vec3, ready: Array, seed: int) -> Ground:
        """The ground of a cell whose trials begin in a ready posture (n,)."""
        trial = cell.trial
        assert trial is not None and cell.ball is not None
        still = replace(
            cell, arm=replace(cell.arm, start=tuple(ready.tolist()), start_velocity=()), follow=None
        )
        law = law_class(trial, cell.path)
        arm = Arm(cell.arm, cell.paddle)
        rise = launch(Air.of(cell.ball, cell.arm.gravity_m_s2), (0, 0, 0), (0, 0, 0), trial.apex_m)
        return Ground(
            cell=still,
            arm=arm,
            chain=Chain.of(arm),
            limits=build_limits(cell),
            centre=np.array(centre),
            flight_s=rise.flight_s,
            law=law,
            gains=gains_of(law, trial, cell.path),
            seed=seed,
        )

    def crossing_m_s(self, way: Array) -> float:
        """Fastest that the strike point can go along a direction (2,) aside in the ready posture, by its bound."""
        ready, along = np.array(self.cell.arm.start), np.append(way / np.linalg.norm(way), 0.0)
        return float(upper(Setting.made(self.cell, still=False), ready[None], along[None]).free[0])


def play(ground: Ground, start: Start, number: int, keep_motion: bool) -> Run:
    """One trial.

    Parameters
    ----------
    number : of the start; with the seed it fixes the sensor's noise
    keep_motion : whether the joints' motion goes into the answer
    """
    trial = ground.cell.trial
    assert trial is not None
    try:
        try:
            loop, done = rolled(ground, start, number, careful=False)
        except GoneBack:
            loop, done = rolled(ground, start, number, careful=True)
    except LawFault as fault:
        return _unplayed(ground, start, f"the law can't be made: {fault.text}")
    measured = measure(ground.arm, ground.chain, ground.limits, done.delivered)
    passed = tuple(
        f"{use.limit} of {use.joint}" if use.joint else use.limit for use in measured.uses if _passed(use)
    )
    contacts = loop.found()
    loss = _ending(ground, loop, done)
    at = recovered_at(contacts, trial.recovered, trial.apex_m)
    kept = loss.outcome == "held" and at is not None
    limit, joint = ("", "") if kept or loss.outcome == "law failed" else _held_back(ground, done, contacts)
    if limit and loss.outcome == "missed past the edge":
        of = f" of {joint}" if joint else ""
        loss = Loss("limit", f"{loss.text}; the {limit}{of} held the paddle back before it")
    if passed and loss.outcome == "held":
        loss = Loss("limit", f"{loss.text}, but the motion passes the {', '.join(passed)}")
    return Run(
        offset=start.offset,
        lateral=start.lateral,
        outcome=loss.outcome,
        text=loss.text,
        recovered=kept and not passed,
        recovered_at=at,
        bounces=len(contacts.t_s),
        limit=limit,
        joint=joint,
        ended_s=len(done.shortfall) * ground.cell.period_s,
        contacts=contacts,
        trace=loop.trace(),
        oscillation_m=_oscillation(contacts, trial.recovered.then_for),
        uses=tuple(replace(use, series=np.zeros(0)) for use in measured.uses),
        broken=passed,
        motion=done.delivered if keep_motion else None,
        elastic_steps=done.elastic_steps,
        failed_steps=done.failed_steps,
    )


def _passed(use: Use) -> bool:
    """Whether a motion passes a stated limit, its mean load too: a trial is many cycles."""
    return use.utilisation is not None and use.utilisation > 1 + ROUNDING


def recovered_at(contacts: Contacts, asked: Recovered, apex_m: float) -> int | None:
    """The bounce, counted from one, from which a trial counts as recovered; None where it does not."""
    good = (contacts.offset_m <= asked.within_m) & (np.abs(contacts.apex_m - apex_m) <= asked.apex_error_m)
    for first in range(min(asked.by_bounce, len(good))):
        last = first + asked.then_for
        if last <= len(good) and good[first:last].all():
            return first + 1
    return None


def rolled(ground: Ground, start: Start, number: int, careful: bool) -> tuple[Loop, Roll]:
    """The loop of one trial and what the arm did in it.

    Raises
    ------
    GoneBack
        A step was found bad after the ball had gone on; with `careful` it can't be.
    LawFault
        The law can't be made.
    """
    cell, trial = ground.cell, ground.cell.trial
    assert trial is not None and cell.ball is not None and cell.contact is not None
    centre = ground.centre
    air = Air.of(cell.ball, cell.arm.gravity_m_s2)
    rise = launch(air, (0, 0, 0), (0, 0, 0), trial.apex_m).velocity
    ball = Flight(
        0.0,
        centre + np.array([*start.offset, 0.0]),
        rise + np.array([*start.lateral, 0.0]),
        np.zeros(3),
        air,
    )
    x, y, z = centre.tolist()
    setup = Setup(
        period_s=cell.period_s,
        gravity_m_s2=air.down_m_s2,
        centre_m=(x, y, z),
        apex_m=trial.apex_m,
        ball=cell.ball,
        contact=cell.contact,
        gains=dict(ground.gains),
    )
    law = made(ground.law, setup)
    eye = Eye(trial.sensor, cell.period_s, np.random.default_rng([ground.seed, 2, number]))
    longest = (trial.bounces + 2) * ground.flight_s * np.sqrt(AWAY_TIMES)
    loop = Loop(cell, ground.arm, law, eye, ball, centre, trial.apex_m, trial.bounces, longest)
    start_q = np.array(cell.arm.start)
    with aside():
        return loop, roll(cell, ground.arm, ground.limits, loop, start_q, careful)


def _ending(ground: Ground, loop: Loop, done: Roll) -> Loss:
    """How a trial ended, a ball out of reach told from one that was merely missed."""
    if done.failed_steps:
        return Loss("solver failed", f"no solver answered in {done.failed_steps} steps")
    loss = loop.loss
    if loss is None:
        return Loss("limit", "the arm could no longer keep its limits, or the trial took too long")
    needed = float(np.linalg.norm(loss.needed))
    if loss.outcome == "missed past the edge" and needed > 0:
        able = ground.crossing_m_s(loss.needed)
        if needed > able:
            speeds = f"{needed:.2f} m/s, it can do {able:.2f}"
            return Loss("too fast to catch", f"{loss.text}; to be there the paddle had to cross at {speeds}")
    return loss


def _held_back(ground: Ground, done: Roll, contacts: Contacts) -> tuple[str, str]:
    """The limit and joint that held the paddle back most at the end of the last flight; "" where none did.

    Steps right after a hit don't count, but where flights have got as short: a law that steps its twist there is short
    with any arm.
    """
    period_s, steps = ground.cell.period_s, len(done.shortfall)
    first = max(0, steps - int(LAST_S / period_s))
    short = first + np.flatnonzero(done.shortfall[first:] > SHORT_M_S)
    if len(short) < SHORT_STEPS:
        return "", ""
    blames = Blames(ground.cell, ground.arm, done)
    gains: Counter[tuple[str, int]] = Counter()
    for step in short[-LOOKED_AT:].tolist():
        for blame in blames.of(step):
            gains[blame.limit, blame.joint] += blame.gain * done.shortfall[step]
    if not gains:
        return "", ""
    (limit, joint), _ = gains.most_common(1)[0]
    return limit, "" if limit == "tool speed" else ground.arm.names[joint]


def _oscillation(contacts: Contacts, last: int) -> float:
    if len(contacts.t_s) < last:
        return float("nan")
    return float(np.sqrt(np.mean(contacts.offset_m[-last:] ** 2)))


def _unplayed(ground: Ground, start: Start, text: str) -> Run:
    """A trial whose law could not even be made."""
    none = np.zeros(0)
    three, two = np.zeros((0, 3)), np.zeros((0, 2))
    contacts = Contacts(none, three, two, three, three, three, none, none, none, none, none)
    return Run(
        offset=start.offset,
        lateral=start.lateral,
        outcome="law failed",
        text=text,
        recovered=False,
        recovered_at=None,
        bounces=0,
        limit="",
        joint="",
        ended_s=0.0,
        contacts=contacts,
        trace=Trace(none, three, three),
        oscillation_m=float("nan"),
        uses=(),
        broken=(),
        motion=None,
        elastic_steps=0,
        failed_steps=0,
    )
