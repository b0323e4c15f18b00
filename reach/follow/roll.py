"""The whole motion: step after step from the start state through the log to a stand."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from typing import NamedTuple

import numpy as np

from reach.arm import Arm
from reach.cell import Array, Cell
from reach.evidence.motion import Motion
from reach.follow.direction import same_direction
from reach.follow.drive import DriveState
from reach.follow.reference import Reference
from reach.follow.rows import Rows
from reach.follow.step import GAVE_WAY, Step, Stepper
from reach.kinematics import logarithm
from reach.limits.base import Limit, Now
from reach.limits.brake import BrakeModel

POSTURE_SPEED = 0.2  # rad/s or m/s: cap of the slow return toward the start posture
BLAME_FROM_M_S = 1e-3  # shortfall of a step from which its multipliers are kept
REST_SPEED = 1e-7  # rad/s or m/s: below it the arm stands
STOP_WITHIN_S = 5.0  # an arm that does not stand this long after the command's end counts as not stopping


class Blame(NamedTuple):
    """A limit that held a step back: by how much the shortfall (m/s) shrinks for one per cent more of it."""

    step: int
    limit: str
    joint: int
    gain: float


class GaveWay(NamedTuple):
    """A limit that a step could not keep: by how much, in rad/s (m/s) of velocity change or in shares of torque."""

    step: int
    limit: str
    joint: int
    amount: float


@dataclass(frozen=True, eq=False)
class Roll:
    """A rolled-out motion and what happened on the way.

    Attributes
    ----------
    motion : Motion of the joints as sent; `delivered` behind the drive, the same object where there is none
    targets : (k, 6) twist each step went for, pose feedback included
    shortfall : (k,) m/s, by which it missed
    blames, gave_way : what held steps back, and what could not be kept
    elastic_steps, failed_steps, fallback_steps : int
    stopped : whether the arm stood at the end
    end_row : first row after the command's end
    """

    motion: Motion
    delivered: Motion
    targets: Array
    shortfall: Array
    blames: tuple[Blame, ...]
    gave_way: tuple[GaveWay, ...]
    elastic_steps: int
    failed_steps: int
    fallback_steps: int
    stopped: bool
    end_row: int


class _Record:
    """Growing lists of a roll; turned into a frozen Roll at the end."""

    def __init__(self) -> None:
        self.q: list[Array] = []
        self.v: list[Array] = []
        self.a: list[Array] = []
        self.real: list[tuple[Array, Array, Array]] = []
        self.targets: list[Array] = []
        self.shortfall: list[float] = []
        self.blames: list[Blame] = []
        self.gave_way: list[GaveWay] = []
        self.counts = {"elastic": 0, "failed": 0, "solved": 0}
        self.fallbacks = 0


def roll(
    cell: Cell,
    arm: Arm,
    limits: dict[str, Limit],
    reference: Reference,
    start: Array,
    pose_gain_per_s: float,
    give_up: Callable[[int, Array, Array], bool] | None = None,
) -> Roll:
    """Follow a reference from a start posture (n,), under limits, until the arm stands.

    Parameters
    ----------
    pose_gain_per_s : 0 replays the log as sent; above it the pose error is fed back
    give_up : called with the row and the state (q, v) at its start; True ends the roll there (for searches that only ask
        whether the verdict holds)

    Notes
    -----
    Integration is exact for constant acceleration in a period. Torque rate counts from the torque that holds
    the start state; the stop at the end is part of the motion.
    """
    assert cell.follow is not None
    dt, n = cell.period_s, arm.n
    solve = same_direction if cell.follow.shortfall == "same-direction" else Stepper.closest
    stepper = Stepper(cell, limits)
    q, v, a = start.copy(), _start_velocity(cell, n), np.zeros(n)
    state = arm.at(q, v)
    brake = BrakeModel(*(_tighter(limits[k]) for k in BRAKED_BY), state.mass.copy())
    torque, bias, bias_rate = state.bias.copy(), state.bias, np.zeros(n)
    commanded = int(np.ceil((reference.end_s - reference.t_s[0]) / dt - 1e-6))
    targets = reference.targets(dt, commanded)
    _, wanted_position, wanted_rotation = reference.at(reference.t_s[0] + dt * np.arange(commanded))
    drive = DriveState(cell.drive, q, v, dt) if cell.drive else None
    record, rest, zero = _Record(), np.zeros(6), np.zeros(n)
    posture_gain = cell.solver.posture_gain_per_s
    last = commanded + int(STOP_WITHIN_S / dt)
    stopped = False
    for k in range(last):
        real_q, real_v = (drive.q, drive.v) if drive else (q, v)
        if give_up is not None and give_up(k, real_q, real_v):
            break
        if k < commanded:
            target, posture_velocity = targets[k], posture_gain * (start - q)
            np.clip(posture_velocity, -POSTURE_SPEED, POSTURE_SPEED, out=posture_velocity)
            if pose_gain_per_s > 0:
                position, rotation = arm.pose(real_q) if drive else (state.position, state.rotation)
                turn = logarithm(wanted_rotation[k] @ rotation.T)
                target = target + pose_gain_per_s * np.concatenate([wanted_position[k] - position, turn])
        else:
            target, posture_velocity = rest, zero
            moving = np.abs(v).max() > REST_SPEED or np.abs(a).max() * dt > REST_SPEED
            if not moving and (drive is None or drive.settled(REST_SPEED)):
                stopped = True
                break
        now = Now(q, v, a, torque, state, brake.at(state, bias_rate), dt)
        step = solve(stepper, now, target, posture_velocity)
        a = step.change / dt
        record.q.append(q)
        record.v.append(v)
        record.a.append(a)
        record.targets.append(target)
        record.shortfall.append(step.shortfall)
        _note(record, k, step, now, stepper.rows)
        torque = state.mass @ a + state.bias
        next_v = v + step.change
        q = q + (v + next_v) * (dt / 2)
        v = next_v
        if drive:
            record.real.append((real_q, real_v, drive.advance(v)))
        state = arm.at(q, v)
        bias_rate = (state.bias - bias) / dt
        bias = state.bias
    final = (drive.q, drive.v) if drive else (q, v)
    return _finish(record, cell, reference, (q, v), final, stopped, min(commanded, len(record.q)))


BRAKED_BY = ("acceleration", "jerk", "torque", "torque rate")


def _tighter(limit: Limit) -> Array:
    return np.minimum(np.abs(limit.kept_lo), np.abs(limit.kept_hi))


def _start_velocity(cell: Cell, n: int) -> Array:
    return np.array(cell.arm.start_velocity) if cell.arm.start_velocity else np.zeros(n)


def _note(record: _Record, k: int, step: Step, now: Now, rows: Rows) -> None:
    """Keep what a step says beyond its motion: who held it back, what gave way, which solver answered."""
    record.counts[step.status] += 1
    record.fallbacks += step.fell_back
    if step.solution is not None and step.shortfall > BLAME_FROM_M_S:
        z, z_box = step.solution.z, step.solution.z_box
        if z.any() or z_box.any():
            record.blames.extend(_blames(k, z, z_box, step.shortfall, now, rows))
    elif step.slack is not None:
        record.gave_way.extend(_what_gave_way(k, step.slack, rows))


def _blames(k: int, z: Array, z_box: Array, shortfall: float, now: Now, rows: Rows) -> list[Blame]:
    """Active limits of a step, each with what one per cent more of it would gain, from the multipliers."""
    found = []
    for i in np.flatnonzero(np.abs(z_box) > 0):
        lanes = rows.joint_hi[:, i] if z_box[i] > 0 else -rows.joint_lo[:, i]
        if len(lanes) and lanes.min() < 1e3:
            kind = rows.joint_kinds[int(np.argmin(lanes))]
            found.append(Blame(k, kind.name, int(i), abs(z_box[i]) * kind.percent(now)[i] / shortfall))
    m = len(rows.limited)
    for row in np.flatnonzero(z[: 2 * m] > 0):
        i = rows.limited[row % m]
        lanes = rows.torque_hi[:, i] if row < m else -rows.torque_lo[:, i]
        kind = rows.torque_kinds[int(np.argmin(lanes))]
        scaled = kind.percent(now)[i] * rows.torque_scale[i]
        found.append(Blame(k, kind.name, int(i), z[row] * scaled / shortfall))
    if len(z) > 2 * m and rows.tool is not None and z[2 * m] > 0:
        found.append(Blame(k, rows.tool.name, 0, z[2 * m] * rows.tool.percent(now)[0] / shortfall))
    return [blame for blame in found if blame.gain > 0]


def _what_gave_way(k: int, slack: Array, rows: Rows) -> list[GaveWay]:
    n = len(rows.box_lo)
    found = []
    for i in np.flatnonzero(slack[:n] > GAVE_WAY):
        upper, lower = rows.joint_hi[:, i], -rows.joint_lo[:, i]
        lanes = np.minimum(upper, lower)
        found.append(GaveWay(k, rows.joint_kinds[int(np.argmin(lanes))].name, int(i), float(slack[i])))
    for j in range(n, len(slack)):
        if slack[j] > GAVE_WAY:
            is_tool = rows.tool is not None and j == n and len(slack) > n and rows.tool_rows_active
            found.append(GaveWay(k, "tool speed" if is_tool else "torque", -1, float(slack[j])))
    return found


def _finish(
    record: _Record,
    cell: Cell,
    reference: Reference,
    sent: tuple[Array, Array],
    final: tuple[Array, Array],
    stopped: bool,
    end_row: int,
) -> Roll:
    n = len(sent[0])
    rest = [np.zeros(n)]
    begin, dt = float(reference.t_s[0]), cell.period_s
    at_rest = np.zeros(n) if stopped else sent[1]
    motion = Motion(
        begin,
        dt,
        np.array([*record.q, sent[0]]),
        np.array([*record.v, at_rest]),
        np.array([*record.a, *rest]),
    )
    delivered = motion
    if record.real:
        q, v, a = (np.array(x) for x in zip(*record.real, strict=True))
        at_rest = np.zeros(n) if stopped else final[1]
        delivered = Motion(
            begin, dt, np.vstack([q, final[0]]), np.vstack([v, at_rest]), np.vstack([a, np.zeros((1, n))])
        )
    return Roll(
        motion,
        delivered,
        np.array(record.targets).reshape(-1, 6),
        np.array(record.shortfall),
        tuple(record.blames),
        tuple(record.gave_way),
        record.counts["elastic"],
        record.counts["failed"],
        record.fallbacks,
        stopped,
        end_row,
    )
