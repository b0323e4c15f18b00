"""What a rally's envelope shows, as frozen data: the verdict and the report read nothing else."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Vec3
from reach.evidence.points import Texts


@dataclass(frozen=True, eq=False)
class RallyPoints:
    """Points of an envelope, m of them, one row each; nan and "" where there is nothing.

    A point is a ball that falls from an apex onto a place off the centre, and is returned to the centre in the bounces
    allowed.

    Attributes
    ----------
    centre (m, 3), apex_m, offset_m, bearing_rad : (m,)
    paddle_speed_m_s, face_tilt_rad : (m,) of the returning strike, along its normal, from the vertical
    flight_s : (m,) from one contact to the next; cycle_s : (m,) the fastest legal way found from one strike to the
        next, the longest of those needed; margin_s : (m,) what is left of the flight, the latency taken off; 0 at
        least where a motion was found that waits for the sight
    time_bound_s : (m,) from which on no joint by itself stands in the way, in the posture and at the joint velocities
        played; speed_bound_m_s : (m,) what the paddle's speed along the normal can't pass in that posture
    verdict, basis, limit, joint : (m,) in the words of the interface; what bounds the point
    reason : a sentence each
    q : (m, n) posture of a strike at the centre
    postures : (m,) how many were compared
    bare : (m,) verdicts with the margins at zero, by the nodes
    feasible_share, feasible_low, feasible_high : (m,) of the cases within the spreads that are still deliverable, with
        its interval (95 %); nan where there are no spreads
    largest_delay_s, largest_tilt_rad, largest_contact_offset_m, largest_restitution_error : (m,) each alone, with
        which the point still passes
    motions : what regenerates the demonstrated motion of a row: knots
    proof : (m,) SpeedProof or TimeProof of a point refused by speed or by time, else None
    """

    centre: Array
    apex_m: Array
    offset_m: Array
    bearing_rad: Array
    paddle_speed_m_s: Array
    face_tilt_rad: Array
    flight_s: Array
    cycle_s: Array
    margin_s: Array
    time_bound_s: Array
    speed_bound_m_s: Array
    verdict: Texts
    basis: Texts
    limit: Texts
    joint: Texts
    reason: tuple[str, ...]
    q: Array
    postures: NDArray[np.int64]
    bare: Texts
    feasible_share: Array
    feasible_low: Array
    feasible_high: Array
    largest_delay_s: Array
    largest_tilt_rad: Array
    largest_contact_offset_m: Array
    largest_restitution_error: Array
    motions: dict[int, Knots]
    proof: NDArray[np.object_] = field(default_factory=lambda: np.zeros(0, dtype=object))

    def __post_init__(self) -> None:
        if len(self.proof) != len(self.verdict):
            object.__setattr__(self, "proof", np.full(len(self.verdict), None))

    @property
    def proofs(self) -> dict[int, Proof]:
        """What proves the refusal of a row, where one product does."""
        return {row: one for row, one in enumerate(self.proof.tolist()) if one is not None}

    @property
    def margin_free(self) -> NDArray[np.bool_]:
        """Which points (m,) are deliverable with the margins at zero."""
        return np.asarray(self.bare == "deliverable", dtype=bool)


@dataclass(frozen=True, eq=False)
class Knots:
    """A joint motion as quintics between knots: t_s (k,) s, q, v, a (k, n); strike_s : instants of its contacts."""

    t_s: Array
    q: Array
    v: Array
    a: Array
    strike_s: tuple[float, ...]


@dataclass(frozen=True, eq=False)
class SpeedProof:
    """Why a strike can't be as fast as asked for in one posture, the best of those compared.

    With y = Jᵀ dual and dual[:3] · normal = 1 no joint velocity within the limits moves the paddle along the normal
    faster than Σ max(hi y, lo y), more by lateral · |dual[:3] − normal| and still · |dual[3:]| for what is accepted of
    speed across the normal and of turning.

    Attributes
    ----------
    strike : which of the point's strikes, from 0; stance : (n,) that it was compared from
    q : (n,) posture; normal : (3,) along which; dual : (6,) on the rows of the Jacobian, world axes
    bound_m_s : what the product says, the tool's cap included; needed_m_s : the strike's speed less what is accepted
    """

    strike: int
    stance: Array
    q: Array
    normal: Array
    dual: Array
    bound_m_s: float
    needed_m_s: float


@dataclass(frozen=True, eq=False)
class LegProof:
    """Why joints don't get from one strike to the next in exactly the flight, near the postures of one stance.

    The unknowns are the joint velocities at both strikes, within the limits, and changes of both postures. Every
    condition on them is a sum that stays below something; the multipliers add conditions up to one that nothing within
    the ranges of the unknowns keeps. `short` is by how much, rad or m.

    Attributes
    ----------
    leg : which of the point's legs, from 0; stance : (n,) that it was played from
    q : (2, n) postures of the two strikes; normal : (2, 3); speed_m_s : (2,) along it; flight_s : the leg's
    velocity_dual, place_dual : (2, 6) multipliers on the paddle's twist at each strike, and on its change of place and
        tilt, rows as of the Jacobian, world axes
    change_dual : (n,) multipliers on the change of each joint's velocity
    cut_joint, cut_sign : (c,) a joint and the direction in which it has a farthest way; cut_speeds : (c, 2) its
        velocities, times the sign, where the tangent of the farthest way is taken; cut_weight : (c,) multipliers,
        not below 0
    """

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


@dataclass(frozen=True, eq=False)
class TimeProof:
    """Why a point can't be played in time: from each stance compared a leg that can't."""

    legs: tuple[LegProof, ...]


Proof = SpeedProof | TimeProof


@dataclass(frozen=True)
class ApexEdge:
    """The lowest and the highest apex at one offset and bearing, by bisection, and what bounds each.

    None where no apex looked at is deliverable. `low_open`, `high_open`: no bound was met as far as it was looked.
    """

    offset_m: float
    bearing_rad: float
    low_m: float | None
    low_limit: str
    low_joint: str
    low_open: bool
    high_m: float | None
    high_limit: str
    high_joint: str
    high_open: bool


@dataclass(frozen=True)
class OffsetEdge:
    """The largest offset from which the ball is returned, at one apex and bearing, by bisection, and what bounds it.

    None where not even the centre is held; `open`: no bound was met as far as it was looked.
    """

    apex_m: float
    bearing_rad: float
    largest_m: float | None
    limit: str
    joint: str
    open: bool


@dataclass(frozen=True)
class Centre:
    """A place where the centre could stand: how many of the points asked for are deliverable there, of how many.

    apexes_m : those held at the centre itself; limit, joint : what bounds it first
    """

    position: Vec3
    deliverable: int
    undecided: int
    points: int
    apexes_m: tuple[float, ...]
    limit: str
    joint: str


@dataclass(frozen=True)
class Bounce:
    """The steady bounce at the centre, at one apex.

    Attributes
    ----------
    speed_m_s : of the paddle at impact; approach_m_s of the ball before it; restitution
    held : whether the steady cycle is deliverable
    window_m_s2 : paddle acceleration at impact between which the bounce is stable by itself; fastest_m_s2 : the band
        in which it settles fastest
    impact_m_s2 : paddle acceleration at impact of the demonstrated motion
    least_m_s2 : the most negative acceleration at impact with which the cycle keeps every limit, no further than the
        window's end; nan where none does
    tolerated_m_s2 : the acceleration at impact that the accepted speed error allows over the strike window
    speed_per_restitution : du/u over de, 1
    tilt_drift_m : next contact's shift for the accepted tilt error, a bounce; tilt_drift_m_per_deg for one degree
    place_apex_error_m : apex error for the accepted error of place, along the vertical, a bounce
    offset_left_m : the largest offset that is recovered at every bearing, less both errors; nan where not known
    face_left_m : the face's half width less the accepted error of place and the drift
    """

    apex_m: float
    flight_s: float
    speed_m_s: float
    approach_m_s: float
    restitution: float
    held: bool
    window_m_s2: tuple[float, float]
    fastest_m_s2: tuple[float, float]
    impact_m_s2: float
    least_m_s2: float
    tolerated_m_s2: float
    speed_per_restitution: float
    tilt_drift_m: float
    tilt_drift_m_per_deg: float
    place_apex_error_m: float
    offset_left_m: float
    face_left_m: float


@dataclass(frozen=True, eq=False)
class Shown:
    """One cycle for the side view: f instants, the arm's j points from the base to the strike point, world, m.

    apex_m, offset_m, bearing_rad : of the point shown; contact_s : instants of its contacts
    """

    apex_m: float
    offset_m: float
    bearing_rad: float
    t_s: Array
    outline: Array
    normal: Array
    ball: Array
    contact_s: tuple[float, ...]


@dataclass(frozen=True, eq=False)
class RallyEvidence:
    """Everything the verdict on an envelope rests on.

    Attributes
    ----------
    points : RallyPoints
    edges, offsets, centres, bounces : in order of offset and bearing; apex and bearing; place; apex
    shown : one demonstrated cycle, None where there is none
    effective_mass_kg, velocity_jump, joint_impulse : of the hardest hit at the centre, joints free to give (n,) and
        locked (n,); nan where there is no posture
    drag, lift : whether the flights have it
    nominal_only : whether no spread was stated
    kinds, unknown, not_checked, stopped : as of a survey
    """

    points: RallyPoints
    edges: tuple[ApexEdge, ...]
    offsets: tuple[OffsetEdge, ...]
    centres: tuple[Centre, ...]
    bounces: tuple[Bounce, ...]
    shown: Shown | None
    effective_mass_kg: float
    velocity_jump: Array
    joint_impulse: Array
    drag: bool
    lift: bool
    nominal_only: bool
    kinds: tuple[str, ...]
    unknown: tuple[tuple[str, str | None], ...]
    not_checked: tuple[str, ...]
    stopped: bool
