"""How the arm is controlled, what is kept back of its limits, and what counts as delivered."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

import numpy as np

from reach.cell.basics import LimitName


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
