"""What is asked of a cell: a log to follow, strikes to survey, a rally to keep up, a law to try."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np
from numpy.typing import NDArray

from reach.cell.basics import Array, Vec3


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
    lateral_m_s : the ball's speed when it comes down there, outward along the bearing
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
    lateral_m_s: float = 0.0
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
    `by_bounce`-th at the latest, and for `then_for` bounces on; and the ball kept up for all bounces asked."""

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
