"""One cell made ready to run, and one run of it: start posture, reference, roll, evidence, verdict."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from reach.arm import Arm
from reach.cell import Accept, Array, Cell
from reach.errors import Fault, InputError
from reach.evidence.measure import Measured, base_load, measure
from reach.evidence.record import Evidence, Reason, Strike
from reach.evidence.strikes import (
    compare,
    flight_times,
    judge_strike,
    strike_faults,
    throughout_faults,
    track,
)
from reach.follow.commands import Replay
from reach.follow.contacts import Contacts, contacts
from reach.follow.reference import Reference, build_reference
from reach.follow.roll import roll
from reach.follow.rolled import Roll
from reach.kinematics import Chain, logarithm
from reach.limits.base import Limit
from reach.limits.build import build_limits, not_checked, unknown_limits
from reach.posture import postures
from reach.verdict import Verdict, judge


@dataclass(frozen=True, eq=False)
class Run:
    """One run of a cell.

    Attributes
    ----------
    cell : Cell with the start posture filled in
    reference, roll, measured : None where there was no start posture; measured too where a quick run missed
    """

    cell: Cell
    contacts: Contacts
    reference: Reference | None
    roll: Roll | None
    measured: Measured | None
    evidence: Evidence
    verdict: Verdict

    @property
    def passed(self) -> bool:
        """Whether nothing speaks against the motion; what is unknown counts as unlimited."""
        return self.verdict.verdict != "not deliverable"


def run(cell: Cell, quick: bool = False, seed: int = 0) -> Run:
    """Follow the cell's log once and judge it.

    Parameters
    ----------
    quick : end at the first strike that misses; for searches that only ask whether the verdict holds
    seed : of inverse kinematics' random starts, where start = "auto"
    """
    follow = cell.follow
    assert follow is not None, "the cell has no log to follow"
    arm = Arm(cell.arm, cell.paddle)
    limits = build_limits(cell)
    cell, blocked = _with_start(cell, arm, seed)
    if cell.arm.start is not None:
        blocked += _static_overload(cell, arm, np.array(cell.arm.start))
    if blocked or cell.arm.start is None:  # no motion to speak of
        found = contacts(follow, None)
        evidence = _no_motion(cell, limits, found, blocked)
        return Run(cell, found, None, None, None, evidence, judge(evidence, cell.accept))
    start = np.array(cell.arm.start)
    reference = build_reference(cell, follow, *first_pose(cell, arm, start))
    found = contacts(follow, reference)
    accept = cell.accept
    watch = _Watch(cell, arm, reference, found, accept) if quick else None
    commands = Replay(reference, arm, cell.period_s, follow.pose_gain_per_s, watch)
    rolled = roll(cell, arm, limits, commands, start)
    if watch is not None and watch.missed:
        evidence = _no_motion(cell, limits, found, ())  # cut at its first miss
        return Run(cell, found, reference, rolled, None, evidence, judge(evidence, accept))
    chain = Chain.of(arm)
    measured = measure(arm, chain, limits, rolled.delivered)
    evidence = _evidence(cell, limits, arm, chain, reference, found, rolled, measured)
    return Run(cell, found, reference, rolled, measured, evidence, judge(evidence, accept))


def first_pose(cell: Cell, arm: Arm, start: Array) -> tuple[Array, Array]:
    """Where the reference begins: the log's first pose where it has one, else the start posture's."""
    assert cell.follow is not None
    pose = cell.follow.commands.pose
    if pose is None:
        return arm.pose(start)
    return pose[0, :3].copy(), rotation_of(pose[0, 3:])


def rotation_of(quaternion: Array) -> Array:
    """Rotation matrix (3, 3) of a unit quaternion (w, x, y, z)."""
    w, x, y, z = quaternion
    return np.array(
        [
            [1 - 2 * (y * y + z * z), 2 * (x * y - w * z), 2 * (x * z + w * y)],
            [2 * (x * y + w * z), 1 - 2 * (x * x + z * z), 2 * (y * z - w * x)],
            [2 * (x * z - w * y), 2 * (y * z + w * x), 1 - 2 * (x * x + y * y)],
        ]
    )


def _with_start(cell: Cell, arm: Arm, seed: int) -> tuple[Cell, tuple[Reason, ...]]:
    """Fill in start = "auto" by inverse kinematics; say what blocks where none is found or it is far off."""
    assert cell.follow is not None
    pose = cell.follow.commands.pose
    if cell.arm.start is None:
        if pose is None:
            what = 'start = "auto" needs the pose columns in the command log; give start_rad instead'
            raise InputError([Fault(cell.path, "arm.start", what)])
        answer = postures(arm, pose[0, :3], rotation_of(pose[0, 3:]), seed=seed)
        if len(answer.q) == 0:
            text = f"no posture for the log's first pose; {answer.text}"
            return cell, (_block("reach", answer.basis, text),)
        best = tuple(float(x) for x in answer.q[0])
        return replace(cell, arm=replace(cell.arm, start=best)), ()
    if pose is None:
        return cell, ()
    position, rotation = arm.pose(np.array(cell.arm.start))
    off = float(np.linalg.norm(pose[0, :3] - position))
    turn = float(np.linalg.norm(logarithm(rotation_of(pose[0, 3:]) @ rotation.T)))
    accept, gain = cell.accept, cell.follow.pose_gain_per_s
    if gain == 0 and (off > accept.strike_position_m or turn > accept.strike_tilt_error_rad):
        text = (
            f"the start posture is {1000 * off:.1f} mm and {np.degrees(turn):.1f}° from the log's first pose, "
            'and a replay without pose feedback stays so; start = "auto" looks for a posture there'
        )
        return cell, (_block("reach", "proved", text),)
    return cell, ()


def _static_overload(cell: Cell, arm: Arm, start: Array) -> tuple[Reason, ...]:
    """Torque limits that holding the start posture alone breaks."""
    load = arm.static_torque(start)
    found = []
    for joint, torque in zip(cell.arm.joints, load.tolist(), strict=True):
        bound = joint.limits.torque
        if bound is not None and not bound.lo <= torque <= bound.hi:
            limit, unit = (bound.hi if torque > 0 else bound.lo), "N" if joint.sliding else "N·m"
            text = f"holding {joint.name} at the start takes {torque:.1f} {unit}, its limit is {limit:.1f}"
            block = _block("torque", "proved", text)
            found.append(replace(block, joint=joint.name, value=torque, bound=limit, unit=unit))
    return tuple(found)


def _block(limit: str, basis: str, text: str) -> Reason:
    """A reason that stands before any motion."""
    return Reason(True, limit, None, None, None, None, None, None, "", basis, text)


class _Watch:
    """Ends a roll at the first strike that is missed at its very instant."""

    def __init__(self, cell: Cell, arm: Arm, reference: Reference, found: Contacts, accept: Accept):
        self.missed = False
        self._misses: set[int] = set()
        self._arm, self._accept = Arm(arm.spec, cell.paddle), accept
        begin, dt = reference.t_s[0], cell.period_s
        self._begin, self._dt, self._reference = begin, dt, reference
        self._allowed = len(found.t_s) - int(np.ceil(accept.strikes_share * len(found.t_s) - 1e-9))
        rows = np.rint((found.t_s - begin) / dt).astype(int)
        near = np.abs(rows * dt + begin - found.t_s) <= accept.strike_window_s / 2
        self._rows = set(rows[near].tolist()) if accept.at == "strikes" else set()

    def __call__(self, row: int, q: Array, v: Array) -> bool:
        if row not in self._rows:
            return False
        wanted = self._reference.at(np.array([self._begin + row * self._dt]))
        position, rotation, jacobian = self._arm.jacobian(q)
        errors = compare(wanted, (jacobian @ v)[None], position[None], rotation[None])
        if strike_faults(errors, self._accept):
            self._misses.add(row)
            self.missed = len(self._misses) > self._allowed
        return self.missed


def _evidence(
    cell: Cell,
    limits: dict[str, Limit],
    arm: Arm,
    chain: Chain,
    reference: Reference,
    found: Contacts,
    rolled: Roll,
    measured: Measured,
) -> Evidence:
    motion, accept = rolled.delivered, cell.accept
    jitter = cell.drive.jitter_s if cell.drive else 0.0
    twist, _, axes = reference.at(found.t_s)
    speeds = np.einsum("ki,ki->k", twist[:, :3], axes[:, :, 2])
    strikes: tuple[Strike, ...] = tuple(
        judge_strike(float(t), found.marked, chain, motion, reference.at, accept, jitter, flight)
        for t, flight in zip(found.t_s, flight_times(found.t_s, speeds, cell.contact), strict=True)
    )
    beside = track(motion, reference.at, measured.position, measured.rotation, measured.twist, rolled.end_row)
    throughout = accept.at == "throughout" or not strikes
    return Evidence(
        motion=motion,
        torque=measured.torque,
        rms_torque=measured.rms_torque,
        uses=measured.uses,
        track=beside,
        strikes=strikes,
        base_load=base_load(arm, motion),
        guessed=found.guessed and cell.follow is not None and cell.follow.strikes != "guessed-ok",
        throughout_faults=throughout_faults(beside, accept) if throughout else (),
        stopped=rolled.stopped,
        unknown=unknown_limits(limits),
        not_checked=not_checked(cell, limits),
        blocked=(),
        failed_steps=rolled.failed_steps,
    )


def _no_motion(
    cell: Cell, limits: dict[str, Limit], found: Contacts, blocked: tuple[Reason, ...]
) -> Evidence:
    return Evidence(
        motion=None,
        torque=None,
        rms_torque=None,
        uses=(),
        track=None,
        strikes=(),
        base_load=None,
        guessed=found.guessed,
        throughout_faults=(),
        stopped=False,
        unknown=unknown_limits(limits),
        not_checked=not_checked(cell, limits),
        blocked=blocked,
        failed_steps=0,
    )
