"""What trials of a law show, as frozen data: the verdict and the report read nothing else."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Vec3
from reach.evidence.motion import Motion
from reach.evidence.record import Use

Outcome = Literal[
    "held",  # every bounce asked for was made
    "missed past the edge",
    "too fast to catch",
    "died on the paddle",
    "ran away",
    "limit",
    "law failed",
    "solver failed",
]


@dataclass(frozen=True, eq=False)
class Contacts:
    """Contacts of one trial, k of them, in order.

    Attributes
    ----------
    t_s : (k,) ; ball : (k, 3) its centre, world, m ; face : (k, 2) contact point on the face, face frame, m
    ball_in, ball_out : (k, 3) m/s ; spin_out : (k, 3) m/s, radius times angular velocity
    paddle_m_s : (k,) along its normal ; tilt_rad : (k,) of the face from the vertical ; tilt_bearing_rad : (k,)
    apex_m : (k,) of the flight that follows, above the centre ; offset_m : (k,) from the centre, horizontal
    """

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


@dataclass(frozen=True, eq=False)
class Trace:
    """A trial over time, at every few control periods: ball (f, 3) and strike point (f, 3), world, m."""

    t_s: Array
    ball: Array
    paddle: Array


@dataclass(frozen=True, eq=False)
class Run:
    """One trial.

    Attributes
    ----------
    offset : (2,) m and lateral : (2,) m/s of the ball at the start, from the centre, world x and y
    outcome : how it ended; text : the same in a sentence, with figures
    recovered : whether it counts as recovered, which a ball lost later does not; recovered_at : the bounce from which
        contacts and apexes were good for as long as asked, None where they never were
    bounces : contacts made
    limit, joint : what held the arm back at the end of a trial that is not recovered, "" where nothing did
    ended_s : when
    contacts, trace : what happened
    oscillation_m : root mean square of the offsets over the last bounces that `recovered` asks for; nan before
    uses : limits over the whole motion, without their series
    broken : names of stated limits that the motion passes ("torque of j2")
    motion : what the joints did; None where it is not kept, which the cell, the seed and the start make again
    elastic_steps, failed_steps : of the follower
    """

    offset: Array
    lateral: Array
    outcome: Outcome
    text: str
    recovered: bool
    recovered_at: int | None
    bounces: int
    limit: str
    joint: str
    ended_s: float
    contacts: Contacts
    trace: Trace
    oscillation_m: float
    uses: tuple[Use, ...]
    broken: tuple[str, ...]
    motion: Motion | None
    elastic_steps: int
    failed_steps: int


@dataclass(frozen=True, eq=False)
class TrialEvidence:
    """Everything the verdict on a law rests on.

    Attributes
    ----------
    runs : in order of the starts; those left when it was stopped are missing
    asked : how many starts there are
    centre : of the ball at contact; apex_m wanted; flight_s of that apex
    ready : (n,) posture that the trials start from, None where there is none (then there are no runs)
    law : its name; gains : (name, value) of all its gains, defaults included
    recovered_share, low, high : of the runs, with its interval (95 %, Wilson 1927)
    kinds, unknown, not_checked, stopped : as of a survey
    blocked : why there is no run, in words, "" where there are
    """

    runs: tuple[Run, ...]
    asked: int
    centre: Vec3
    apex_m: float
    flight_s: float
    ready: Array | None
    law: str
    gains: tuple[tuple[str, float], ...]
    recovered_share: float
    low: float
    high: float
    kinds: tuple[str, ...]
    unknown: tuple[tuple[str, str | None], ...]
    not_checked: tuple[str, ...]
    stopped: bool
    blocked: str

    @property
    def recovered(self) -> NDArray[np.bool_]:
        """Which of the runs (r,) count as recovered."""
        return np.array([run.recovered for run in self.runs], dtype=bool)
