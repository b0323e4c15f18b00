"""What a followed motion shows, as frozen data: the verdict and the report read nothing else."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array
from reach.evidence.motion import Motion


@dataclass(frozen=True, eq=False)
class Use:
    """One limit of one joint (joint None: the tool) and how much of it a motion used.

    Attributes
    ----------
    lo, hi : stated limit in `unit`, None where unknown; kept_lo, kept_hi: less the margin
    source : where it was stated
    peak : the value that used most of it (unknown limits: the largest in size)
    time_s : when; None for a mean over the motion (duty)
    utilisation : share of the stated limit at the peak, None where unknown; above 1 it is broken
    demand_peak : the value exact tracking would have asked for, in `unit`
    series : (m,) value of largest use in each control period, aligned with the motion's rows
    """

    limit: str
    joint: str | None
    unit: str
    lo: float | None
    hi: float | None
    kept_lo: float | None
    kept_hi: float | None
    source: str
    peak: float
    time_s: float | None
    utilisation: float | None
    demand_peak: float
    series: Array

    @property
    def known(self) -> bool:
        """Whether the limit is stated at all."""
        return self.hi is not None


@dataclass(frozen=True, eq=False)
class Track:
    """Commanded beside delivered at the motion's rows, shape (m, …), m/s, m and rad.

    commanded_normal, delivered_normal : (m,) speed along the commanded face normal
    velocity_error : (m,) size of the strike point's velocity error; position_error : (m,); tilt_error : (m,)
    position, wanted_position : (m, 3); rotation : (m, 3, 3); twist, wanted_twist : (m, 6)
    during : (m,) bool, rows before the command's end
    """

    t_s: Array
    commanded_normal: Array
    delivered_normal: Array
    velocity_error: Array
    position_error: Array
    tilt_error: Array
    position: Array
    wanted_position: Array
    rotation: Array
    twist: Array
    wanted_twist: Array
    during: np.ndarray


@dataclass(frozen=True)
class Strike:
    """One contact: commanded against delivered, the worst over the window around it.

    Attributes
    ----------
    marked : from the log; False where guessed from a peak
    delivered_share : delivered over commanded normal speed, where they differ most
    faults : which acceptance items fail, in words; empty where the strike is delivered
    limit, joint : what stopped it, None where nothing did or it is not known
    basis : "demonstrated"
    next_contact_shift_m : how far the tilt error moves the next contact, None where the apex is not known;
        shift_per_degree_m : what 1° would
    """

    time_s: float
    marked: bool
    commanded_m_s: float
    delivered_m_s: float
    delivered_share: float | None
    lateral_m_s: float
    tilt_error_deg: float
    position_error_m: float
    faults: tuple[str, ...]
    limit: str | None = None
    joint: str | None = None
    basis: str = "demonstrated"
    next_contact_shift_m: float | None = None
    shift_per_degree_m: float | None = None

    @property
    def delivered(self) -> bool:
        """Whether every acceptance item holds over the window."""
        return not self.faults


@dataclass(frozen=True)
class BaseLoad:
    """Peak force in N and moment in N·m that the moving part puts on its stand, about the base origin."""

    force_peak_n: float
    moment_peak_nm: float


@dataclass(frozen=True)
class Reason:
    """What fell short: limit and joint, from when to when, value against bound, and whether it decides the verdict."""

    decides: bool
    limit: str
    joint: str | None
    phase: str | None
    time_s: float | None
    until_s: float | None
    value: float | None
    bound: float | None
    unit: str
    basis: str
    text: str


@dataclass(frozen=True)
class Need:
    """What an unknown or failing limit would have to be; None where not found."""

    joint: str | None
    limit: str
    necessary: float | None
    sufficient: float | None
    unit: str
    text: str


@dataclass(frozen=True)
class Remedy:
    """One change and what it does; `verified` says that a run with the change was made and came out so."""

    change: str
    effect: str
    verified: bool


@dataclass(frozen=True)
class SolverCount:
    """How the steps were solved."""

    name: str
    fallback: str
    steps: int
    elastic_steps: int
    failed_steps: int
    fallback_steps: int


@dataclass(frozen=True, eq=False)
class Evidence:
    """Everything the verdict on a followed log rests on.

    Attributes
    ----------
    motion : what the joints did, None where there was no start posture
    torque : (m, n) at the motion's rows, N·m
    rms_torque : (n,) over the motion
    uses : every limit of every joint, known or not
    track, strikes, base_load : None or empty where there was no motion
    guessed : whether contacts were guessed from peaks and not confirmed
    throughout_faults : where judged throughout, what failed, in words
    stopped : whether the arm stood at the end
    unknown : (limit, joint) pairs nobody stated
    not_checked : names of what was not checked at all
    blocked : reasons that stand before any motion (start pose out of reach, static overload)
    failed_steps : steps that no solver answered
    """

    motion: Motion | None
    torque: Array | None
    rms_torque: Array | None
    uses: tuple[Use, ...]
    track: Track | None
    strikes: tuple[Strike, ...]
    base_load: BaseLoad | None
    guessed: bool
    throughout_faults: tuple[str, ...]
    stopped: bool
    unknown: tuple[tuple[str, str | None], ...]
    not_checked: tuple[str, ...]
    blocked: tuple[Reason, ...]
    failed_steps: int
