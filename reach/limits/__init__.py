"""The limit kinds: each gives the step its rows and the evidence its measure. LIMITS lists them.

To add a kind: one file with both faces, one line here, one field in cell.JointLimits.
"""

from __future__ import annotations

from reach.limits.acceleration import Acceleration
from reach.limits.base import Limit
from reach.limits.duty import Duty
from reach.limits.jerk import Jerk
from reach.limits.position import Position
from reach.limits.tool_speed import ToolSpeed
from reach.limits.torque import Torque
from reach.limits.torque_rate import TorqueRate
from reach.limits.velocity import Velocity

LIMITS: dict[str, type[Limit]] = {
    kind.name: kind for kind in (Position, Velocity, Acceleration, Jerk, Torque, TorqueRate, Duty, ToolSpeed)
}
