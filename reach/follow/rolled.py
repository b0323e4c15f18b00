"""A rolled-out motion, and what each of its steps knew."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from reach.arm import Arm
from reach.cell import Array
from reach.evidence.motion import Motion
from reach.limits.base import Brake, Now


class GaveWay(NamedTuple):
    """A limit that a step could not keep: by how much, in rad/s (m/s) of velocity change or in shares of torque."""

    step: int
    limit: str
    joint: int
    amount: float


@dataclass(frozen=True, eq=False)
class Roll:
    """A rolled-out motion and what happened on the way; k steps.

    Attributes
    ----------
    sent : Motion of the joints as sent; `delivered` behind the drive, the same object where there is none
    targets : (k, 6) twist each step went for, pose feedback included
    shortfall : (k,) m/s, by which it missed: ‖W (J v⁺ + J̇ v dt − ν)‖
    torque : (k, n) at each step's start
    z, z_box : (k, 2m), (k, n) multipliers of each step's torque rows and box, zero where it was not plainly solved
    z_tool : (k,) the largest of the tool's rows
    brakes : braking ability that each step was planned with
    gave_way : what could not be kept
    elastic_steps, failed_steps, fallback_steps : int
    stopped : whether the arm stood at the end
    end_row : first row after the command's end
    """

    sent: Motion
    delivered: Motion
    targets: Array
    shortfall: Array
    torque: Array
    z: Array
    z_box: Array
    z_tool: Array
    brakes: tuple[Brake, ...]
    gave_way: tuple[GaveWay, ...]
    elastic_steps: int
    failed_steps: int
    fallback_steps: int
    stopped: bool
    end_row: int


def now_at(
    arm: Arm,
    q: Array,
    v: Array,
    changes: Sequence[Array] | Array,
    torques: Sequence[Array] | Array,
    brake: Brake,
    k: int,
) -> Now:
    """What step k knew: the state (q, v) and what the step before did."""
    state = arm.at(q, v)
    change = changes[k - 1] if k else np.zeros(arm.n)
    torque = torques[k - 1] if k else state.bias
    return Now(q, v, change, torque, state, brake)


def motion_of(
    begin: float, dt: float, q: list[Array], v: list[Array], change: list[Array], stopped: bool
) -> Motion:
    """The motion of states q, v (m, n) and changes of velocity (m - 1, n).

    Its last row is at rest if `stopped`; a motion that was cut goes on as it went, so that the cut breaks no limit.
    """
    speeds = np.array(v)
    if stopped:
        speeds[-1] = 0.0
    n = speeds.shape[1]
    last = change[-1:] if change and not stopped else [np.zeros(n)]
    accelerations = np.array([*change, *last]).reshape(-1, n) / dt
    return Motion(begin, dt, np.array(q), speeds, accelerations)
