"""What strikes need of a cell, made once: arm, chain, limits, and how the paddle may move."""

from __future__ import annotations

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
        arm = Arm(cell.arm, cell.paddle)
        length = cell.solver.rotation_length_m or cell.paddle.radius_m or PLAIN_LENGTH_M
        return Setting(
            arm,
            Chain.of(arm),
            build_limits(cell),
            cell.accept,
            cell.period_s,
            cell.survey.rotation == "still",
            cell.paddle.shape == "disc",
            length,
            cell.survey.run_up_m,
        )

    @property
    def ends(self) -> tuple[Array, Array]:
        """Kept-back ends of travel (n,), infinite where there are none."""
        position = self.limits["position"]
        return position.kept_lo, position.kept_hi

    @property
    def tool_cap_m_s(self) -> float:
        """Kept-back cap on the strike point's speed, infinite where there is none."""
        return float(self.limits["tool speed"].kept_hi[0])

    def velocities(self, q: Array) -> tuple[Array, Array]:
        """Joint velocities (m, n) that postures (m, n) can have at all, in a motion from rest to rest.

        Within the kept-back limit, and |v| <= √(2 a · travel): gained on the way behind, lost on the way ahead.
        """
        velocity, acceleration = self.limits["velocity"], self.limits["acceleration"]
        lo, hi = self.ends
        up, down = np.maximum(hi - q, 0.0), np.maximum(q - lo, 0.0)
        gain, loss = acceleration.kept_hi, -acceleration.kept_lo
        with np.errstate(invalid="ignore"):
            forward = np.sqrt(2 * np.fmin(gain * down, loss * up))
            backward = np.sqrt(2 * np.fmin(loss * up, gain * down))
        # Where neither travel nor acceleration ends it, the product is infinite, or nan at an end without a limit.
        forward, backward = (np.where(np.isnan(x), 0.0, x) for x in (forward, backward))
        return -np.minimum(-velocity.kept_lo, backward), np.minimum(velocity.kept_hi, forward)
