"""The frozen description of a cell: arm, paddle, limits, margins, acceptance, command log. Data only.

Everything is in SI units and in radians. Arrays are read-only.
"""

from __future__ import annotations

from dataclasses import dataclass, field
from typing import Literal

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Vec3 = tuple[float, float, float]

STANDARD_GRAVITY_M_S2 = 9.80665  # 3rd CGPM, 1901

LimitName = Literal[
    "position", "velocity", "acceleration", "jerk", "torque", "torque rate", "duty", "tool speed"
]


@dataclass(frozen=True)
class Input:
    """A file that was read, with the SHA-256 of its bytes."""

    path: str
    sha256: str


@dataclass(frozen=True)
class Pose:
    """A placement: translation in m, then roll-pitch-yaw about fixed x, y, z in rad (URDF's convention)."""

    xyz_m: Vec3 = (0.0, 0.0, 0.0)
    rpy_rad: Vec3 = (0.0, 0.0, 0.0)

    @property
    def rotation(self) -> Array:
        """Rotation matrix Rz(yaw) Ry(pitch) Rx(roll), shape (3, 3)."""
        (cr, cp, cy), (sr, sp, sy) = np.cos(self.rpy_rad), np.sin(self.rpy_rad)
        return np.array(
            [
                [cy * cp, cy * sp * sr - sy * cr, cy * sp * cr + sy * sr],
                [sy * cp, sy * sp * sr + cy * cr, sy * sp * cr - cy * sr],
                [-sp, cp * sr, cp * cr],
            ]
        )


@dataclass(frozen=True)
class Bound:
    """A stated limit lo <= x <= hi and where it was stated; ±inf where there is known to be none."""

    lo: float
    hi: float
    source: str


@dataclass(frozen=True)
class JointLimits:
    """What is known of one joint; None is unknown, never zero and never infinite.

    Units: rad (m for a sliding joint), per s, per s², per s³; N·m (N), N·m/s (N/s);
    armature (reflected rotor inertia) kg·m² (kg), damping N·m·s/rad (N·s/m), dry friction N·m (N).
    """

    position: Bound | None = None
    velocity: Bound | None = None
    acceleration: Bound | None = None
    jerk: Bound | None = None
    torque: Bound | None = None
    torque_rate: Bound | None = None
    torque_continuous: Bound | None = None
    armature: float | None = None
    damping: float | None = None
    friction: float | None = None


@dataclass(frozen=True)
class Joint:
    """One joint of the chain from base to tip, in the user's own name."""

    name: str
    kind: Literal["revolute", "continuous", "prismatic"]
    limits: JointLimits = field(default_factory=JointLimits)

    @property
    def sliding(self) -> bool:
        """True for a prismatic joint, whose position is in metres."""
        return self.kind == "prismatic"


@dataclass(frozen=True)
class HeldJoint:
    """A joint off the chain, held at a value in rad or m; `name` is the user's, `model_name` that of `model_xml`."""

    name: str
    model_name: str
    value: float


@dataclass(frozen=True)
class ArmSpec:
    """The arm as read and checked.

    Attributes
    ----------
    urdf_path : str
    model_xml : str
        A URDF of links, joints and inertias alone, rewritten from the checked one: canonical names
        (joint i of the chain is "chain_i", the tip link is "tip"), every limit attribute present,
        continuous joints written as revolute, no geometry.
    tip : str
        The tip link's name in the user's file.
    joints : tuple of Joint
        The chain in order from base to tip.
    held : tuple of HeldJoint
    base : Pose
        Base (root link) in the world.
    gravity_m_s2 : Vec3
        In world axes.
    start : tuple of float, or None
        Start posture, one value a joint; None asks for a posture for the log's first pose.
    start_velocity : tuple of float
    """

    urdf_path: str
    model_xml: str
    tip: str
    joints: tuple[Joint, ...]
    held: tuple[HeldJoint, ...] = ()
    base: Pose = Pose()
    gravity_m_s2: Vec3 = (0.0, 0.0, -STANDARD_GRAVITY_M_S2)
    start: tuple[float, ...] | None = None
    start_velocity: tuple[float, ...] = ()


@dataclass(frozen=True)
class Part:
    """A further mass on the paddle (holder, screws, sensor): a point unless an inertia is given.

    com_m in the face frame; inertia about the part's own centre, face-frame axes (xx, yy, zz, xy, xz, yz).
    """

    mass_kg: float
    com_m: Vec3
    inertia_kg_m2: tuple[float, ...] = (0.0,) * 6


@dataclass(frozen=True)
class Paddle:
    """The rigid paddle: face frame on the tip link (origin the strike point, z out of the face), shape, mass."""

    mount: Pose
    mass_kg: float
    shape: Literal["disc", "plate", "given"]
    radius_m: float | None = None
    size_m: tuple[float, float] | None = None
    thickness_m: float = 0.0
    com_m: Vec3 | None = None
    inertia_kg_m2: tuple[float, ...] | None = None
    parts: tuple[Part, ...] = ()


@dataclass(frozen=True)
class Tool:
    """A maker's cap on the speed of the strike point."""

    speed_m_s: float
    source: str


@dataclass(frozen=True)
class Ball:
    """The ball; `source` names the rule a preset came from."""

    mass_kg: float
    radius_m: float
    drag_coefficient: float = 0.0
    lift_coefficient: float = 0.0
    air_kg_m3: float = 1.2
    source: str = "cell"


@dataclass(frozen=True)
class Contact:
    """The pair of ball and face; `arm_gives`: the arm's effective mass counts, else the paddle does not give."""

    restitution: float
    restitution_spread: float = 0.0
    restitution_at: tuple[tuple[float, float], ...] = ()
    friction: float = 0.0
    tangential_restitution: float = 0.0
    arm_gives: bool = False
    source: str = "cell"


@dataclass(frozen=True)
class Drive:
    """How the real joints follow what is sent to them: pure delay, first-order lag, timing jitter (±)."""

    delay_s: float = 0.0
    lag_s: float = 0.0
    jitter_s: float = 0.0


@dataclass(frozen=True)
class SolverSpec:
    """QP solvers by qpsolvers' names, the weight of rotation (m), the null-space return rate (1/s)."""

    name: str = "daqp"
    fallback: str = "piqp"
    rotation_length_m: float | None = None
    posture_gain_per_s: float = 0.5


@dataclass(frozen=True)
class Margins:
    """What a plan keeps back from every stated limit; shares of one for all but position."""

    position_rad: float = 0.002
    position_m: float = 0.0005
    velocity_share: float = 0.02
    acceleration_share: float = 0.02
    torque_share: float = 0.10
    torque_rate_share: float = 0.05
    jerk_share: float = 0.05


@dataclass(frozen=True)
class Accept:
    """What counts as delivered."""

    at: Literal["strikes", "throughout"] = "strikes"
    strike_speed_error_share: float = 0.03
    strike_lateral_m_s: float = 0.05
    strike_position_m: float = 0.005
    strike_tilt_error_rad: float = float(np.radians(1.0))
    strike_window_s: float = 0.010
    strikes_share: float = 1.0
    require: tuple[LimitName, ...] = ("position", "velocity", "torque", "torque rate")


@dataclass(frozen=True, eq=False)
class CommandLog:
    """Commanded paddle twists as sent.

    Attributes
    ----------
    t_s : (N,) strictly increasing
    twist : (N, 6) vx, vy, vz in m/s, wx, wy, wz in rad/s, in the frame and about the point of Follow
    strike : (N,) bool, or None where the log marks none
    pose : (N, 7) px, py, pz in m, unit quaternion qw, qx, qy, qz, world axes, of the strike point; or None
    mends : what was mended while reading, a line each
    source : the file, or "arrays"
    """

    t_s: Array
    twist: Array
    strike: NDArray[np.bool_] | None = None
    pose: Array | None = None
    mends: tuple[str, ...] = ()
    source: str = "arrays"


@dataclass(frozen=True)
class Follow:
    """How a command log is to be read and followed."""

    frame: Literal["world", "base", "paddle"]
    point: Literal["strike", "tip"] | Vec3
    commands: CommandLog
    interpolation: Literal["hold", "linear"] = "hold"
    shortfall: Literal["closest", "same-direction"] = "closest"
    pose_gain_per_s: float = 0.0
    strikes: Literal["marked", "guessed-ok"] = "marked"
    strike_min_m_s: float = 0.1
    strike_min_gap_s: float = 0.15
    max_gap_s: float = 0.1
    time_faults: Literal["refuse", "mend"] = "refuse"


@dataclass(frozen=True, eq=False)
class Survey:
    """Strikes to be tried: every face at every point of a box, or a list of strikes.

    Attributes
    ----------
    box_m, spacing_m : two corners, low and high, and the points' spacing from the low one; box None for a list
    listed : (k, 3) points of listed strikes, row k with face k; None for a box
    normals, directions : (k, 3) unit vectors, world axes: face normal and direction of the strike
    speeds_m_s : (k,) required paddle speed along the normal
    ball_in_m_s : the incoming ball's velocity where the cell gives it
    rotation : whether the paddle may turn at the strike
    run_up_m : paddle travel allowed before and after the strike; None: joint travel alone
    required_share : of the strikes; exact : the full optimisation at every point; max_points : strikes at most
    """

    box_m: tuple[Vec3, Vec3] | None
    spacing_m: float
    listed: Array | None
    normals: Array
    directions: Array
    speeds_m_s: Array
    ball_in_m_s: Vec3 | None = None
    rotation: Literal["still", "free"] = "still"
    run_up_m: float | None = None
    required_share: float = 1.0
    exact: bool = False
    max_points: int = 2_000_000

    @property
    def counts(self) -> tuple[int, int, int]:
        """Points of the box along x, y and z; a hair over the last one still counts."""
        if self.box_m is None:
            return (0, 0, 0)
        x, y, z = (int((hi - lo) / self.spacing_m + 1e-9) + 1 for lo, hi in zip(*self.box_m, strict=True))
        return x, y, z

    @property
    def size(self) -> int:
        """How many strikes."""
        x, y, z = self.counts
        return len(self.normals) * (x * y * z if self.listed is None else 1)


QUARTERS_RAD = (0.0, float(np.pi / 2), float(np.pi), float(3 * np.pi / 2))


@dataclass(frozen=True)
class Rally:
    """Ball flights to keep up: every apex with every offset and bearing.

    Attributes
    ----------
    centre_m : the ball's centre at contact
    apexes_m : above the centre
    offsets_m, bearings_rad : where the ball comes down, from the centre; bearings from +x, counter-clockwise from above
    recover_within_bounces : strikes after which the ball is to be at the centre again
    latency_s : from the ball seen to the arm moving
    required_share : of the points
    centres_box_m, centres_spacing_m : where else the centre may stand, a grid; None: only the centre
    contact_offset_spread_m, velocity_spread_m_s : standard deviations of where the ball meets the face, and of the
        ball's velocity, each along both horizontal axes; cases : of a spread, a point
    """

    centre_m: Vec3
    apexes_m: tuple[float, ...]
    offsets_m: tuple[float, ...] = (0.0,)
    bearings_rad: tuple[float, ...] = QUARTERS_RAD
    recover_within_bounces: int = 1
    latency_s: float = 0.0
    required_share: float = 1.0
    centres_box_m: tuple[Vec3, Vec3] | None = None
    centres_spacing_m: float = 0.1
    contact_offset_spread_m: float = 0.0
    velocity_spread_m_s: float = 0.0
    cases: int = 40


@dataclass(frozen=True)
class Starts:
    """How trials begin: a ball that leaves the centre's height for its apex, off the centre, with lateral speed.

    Every offset with every bearing and every speed outward along that bearing; then `random` more, anywhere within the
    largest offset and the largest lateral speed.
    """

    offsets_m: tuple[float, ...] = (0.0,)
    bearings_rad: tuple[float, ...] = QUARTERS_RAD
    lateral_m_s: tuple[float, ...] = (0.0,)
    random: int = 0


@dataclass(frozen=True)
class Sensor:
    """How the ball is seen; rate 0: its true state at every control period. Noise: standard deviation of each axis."""

    rate_hz: float = 0.0
    latency_s: float = 0.0
    position_noise_m: float = 0.0
    velocity_noise_m_s: float = 0.0


@dataclass(frozen=True)
class Recovered:
    """What counts as recovered: contacts this near to the centre and apexes this near to the wanted one, from the
    `by_bounce`-th at the latest, and for `then_for` bounces on."""

    within_m: float = 0.02
    apex_error_m: float = 0.03
    by_bounce: int = 10
    then_for: int = 20


LawName = Literal["mirror", "planning"]


@dataclass(frozen=True)
class Trial:
    """A law of control to be tried on ball and arm.

    Attributes
    ----------
    law : a law of this program's own, or the name of a class in `law_file`
    law_file : the user's Python file, None for a law of this program's own
    gains : (name, value) pairs, the law's own
    centre_m : the ball's centre at contact; None: that of [rally], else above the strike point of the start posture
    apex_m, bounces, starts, sensor, required_share, recovered : how it is tried and judged
    """

    law: str = "mirror"
    law_file: str | None = None
    gains: tuple[tuple[str, float], ...] = ()
    centre_m: Vec3 | None = None
    apex_m: float = 0.3
    bounces: int = 50
    starts: Starts = Starts()
    sensor: Sensor = Sensor()
    required_share: float = 1.0
    recovered: Recovered = Recovered()


@dataclass(frozen=True)
class Cell:
    """A whole cell file, checked.

    `follow`, `survey`, `rally` and `trial` are None where the file has no such table. `inputs` are the files read;
    `notes` are things the readers found worth saying that are no faults (a limit ignored, a joint held at zero by
    default).
    """

    path: str
    arm: ArmSpec
    paddle: Paddle
    period_s: float = 0.001
    tool: Tool | None = None
    ball: Ball | None = None
    contact: Contact | None = None
    drive: Drive | None = None
    solver: SolverSpec = SolverSpec()
    margins: Margins = Margins()
    accept: Accept = Accept()
    follow: Follow | None = None
    survey: Survey | None = None
    rally: Rally | None = None
    trial: Trial | None = None
    inputs: tuple[Input, ...] = ()
    notes: tuple[str, ...] = ()
