"""Arrays, vectors, placements and limits: what the other parts of a cell are made of."""

from __future__ import annotations

from dataclasses import dataclass
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
