"""What strikes need of a cell, made once: arm, chain, limits, and how the paddle may move."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from reach.arm import Arm
from reach.cell import Accept, Array, Cell
from reach.kinematics import Chain
from reach.limits.base import Limit
from reach.limits.build import build_limits

PLAIN_LENGTH_M = 0.1  # turns a rate of rotation into a speed where the paddle gives no radius


@dataclass(frozen=True, eq=False)
class Setting:
    """A cell made ready for strikes.

    Attributes
    ----------
    limits : by name
    still : the paddle does not turn at the strike, but for the spin of a disc; else it may
    spin_free : a disc may turn about its normal
    length_m : turns a rate of rotation into a speed of points on the paddle
    run_up_m : longest way of the strike point before and after the strike, None where joint travel alone ends it
    """

    arm: Arm
    chain: Chain
    limits: dict[str, Limit]
    accept: Accept
    period_s: float
    still: bool
    spin_free: bool
    length_m: float
    run_up_m: float | None

    @staticmethod
    def of(cell: Cell) -> Setting:
        """The setting of a cell with a survey."""
        assert cell.survey is not None, "the cell has no strikes"
        return Setting.made(cell, cell.survey.rotation == "still", cell.survey.run_up_m)

    @staticmethod
    def made(cell: Cell, still: bool = True, run_up_m: float | None = None) -> Setting:
        """The setting of a cell for strikes of any kind."""
        arm = Arm(cell.arm, cell.paddle)
        length = cell.solver.rotation_length_m or cell.paddle.radius_m or PLAIN_LENGTH_M
        return Setting(
            arm,
            Chain.of(arm),
            build_limits(cell),
            cell.accept,
            cell.period_s,
            still,
            cell.paddle.shape == "disc",
            length,
            run_up_m,
        )

    @property
    def ends(self) -> tuple[Array, Array]:
        """Kept-back ends of travel (n,), infinite where there are none."""
        position = self.limits["position"]
        return position.kept_lo, position.kept_hi

    @property
    def hold_s(self) -> float:
        """For how long a strike's speed is held: the strike window, out to whole control periods on both sides.

        Between rows velocity is a straight line, so what a row outside the window does would reach into it.
        """
        return 2 * self.period_s * math.ceil(self.accept.strike_window_s / 2 / self.period_s - 1e-9)

    @property
    def tool_cap_m_s(self) -> float:
        """Kept-back cap on the strike point's speed, infinite where there is none."""
        return float(self.limits["tool speed"].kept_hi[0])

    def velocities(self, q: Array) -> tuple[Array, Array]:
        """Joint velocities (m, n) that postures (m, n) can have at all, in a motion from rest to rest.

        Within the kept-back limit, and |v| <= √(2 a · travel): forward it is gained after the low end and lost before
        the high one, backward the other way round.
        """
        velocity, acceleration = self.limits["velocity"], self.limits["acceleration"]
        lo, hi = self.ends
        up, down = np.maximum(hi - q, 0.0), np.maximum(q - lo, 0.0)
        with np.errstate(invalid="ignore"):
            square = 2 * np.fmin(acceleration.kept_hi * down, -acceleration.kept_lo * up)
        # Zero travel times an unlimited acceleration is nan: a joint at its end can't have come from there.
        most = np.sqrt(np.where(np.isnan(square), 0.0, square))
        return -np.minimum(-velocity.kept_lo, most), np.minimum(velocity.kept_hi, most)
