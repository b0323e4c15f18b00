"""The whole motion: step after step from the start state through the log to a stand."""

from __future__ import annotations

import numpy as np

from reach.arm import Arm
from reach.cell import Array, Cell
from reach.follow.commands import Commands
from reach.follow.direction import same_direction
from reach.follow.drive import DriveState
from reach.follow.gave_way import gave_way
from reach.follow.rolled import Roll, motion_of, now_at
from reach.follow.rub import Chords
from reach.follow.step import BLOCK, Step, Stepper, start_velocity
from reach.limits.base import Brake, Limit, Now
from reach.limits.brake import BrakeModel

HOPELESS_STEPS = 200  # in a row without keeping all rows: what came after would be no physics
CLOSE_FOR = 20  # steps for which all rows stay in once a step came near a position or velocity limit
CAUTIOUS_FOR = 5  # steps for which a cautious braking ability serves
CHORD_ROUNDS = 3  # times that a step is solved again where friction bends more than its rows know
POSTURE_EVERY = 5  # steps between looks at that return
POSTURE_SPEED = 0.2  # rad/s or m/s: cap of the slow return toward the start posture
REST_SPEED = 1e-7  # rad/s or m/s: below it the arm stands
STOP_WITHIN_S = (
    2.0  # an arm that does not stand this long after the command's end, its drive's settling apart, does
)
# not stop: it sags under a load that its torque can't hold
SETTLING_LAGS = 20  # time constants in which a drive comes to rest


def roll(
    cell: Cell,
    arm: Arm,
    limits: dict[str, Limit],
    commands: Commands,
    start: Array,
    careful: bool = False,
) -> Roll:
    """Follow commands from a start posture (n,), under limits, until the arm stands or they are over.

    Parameters
    ----------
    careful : check every step at once; for commands that can't go back

    Notes
    -----
    Integration is exact for constant acceleration in a period. Torque rate counts from the torque that holds
    the start state; the stop at the end is part of the motion.
    """
    return _Roller(cell, arm, limits, commands, start, careful).run()


class _Roller:
    """State of a roll under way. Lists grow a row a step; nothing of it leaves but the frozen Roll."""

    def __init__(
        self,
        cell: Cell,
        arm: Arm,
        limits: dict[str, Limit],
        commands: Commands,
        start: Array,
        careful: bool,
    ):
        self.cell, self.arm, self.commands, self.careful = cell, arm, commands, careful
        self.dt, self.start = cell.period_s, start
        self.keeps_direction = cell.follow is not None and cell.follow.shortfall == "same-direction"
        self.stepper = Stepper(cell, limits)
        self.brakes = BrakeModel(limits, self.dt)
        self.commanded = commands.steps
        self.rest = np.zeros(6)
        v = start_velocity(cell)
        self.drive = DriveState(cell.drive, start, v, self.dt) if cell.drive else None
        self.q: list[Array] = [start.copy()]
        self.v: list[Array] = [v]
        self.change: list[Array] = []
        self.real: list[tuple[Array, Array]] = []
        self.real_change: list[Array] = []
        self.target: list[Array] = []
        self.torque: list[Array] = []
        self.brake_of: list[Brake] = []
        self.noted: dict[int, Step] = {}  # steps that were checked at once, with what they say
        self.shortfall: list[Array] = []
        self.z: list[Array] = []
        self.z_box: list[Array] = []
        self.checked = 0
        self.free_slots: set[int] = set()  # slots whose step kept every row without being asked to
        self.was_free = True
        self.in_vain = 0  # steps in a row that could not keep their rows
        self.careful_at = -1  # step that is to be checked at once
        self.close_until = 0  # step up to which no row is left out
        self.cautious_until = 0  # step up to which the cautious braking ability serves
        self.state = arm.at(start, v)
        self.bias_before = self.state.bias
        self.last_change, self.last_torque = np.zeros(arm.n), self.state.bias

    def run(self) -> Roll:
        drive = self.cell.drive
        settling = drive.delay_s + SETTLING_LAGS * drive.lag_s if drive else 0.0
        last = self.commanded + int((STOP_WITHIN_S + settling) / self.dt)
        stopped, k = False, 0
        while True:
            ended = k >= last or self.in_vain >= HOPELESS_STEPS or self.commands.over(k, *self._real(k))
            stopped = not ended and k >= self.commanded and self._at_rest()
            if ended or stopped or k - self.checked == BLOCK:
                if (bad := self._settle(k)) is not None:
                    k = self._back_to(bad)
                    continue
                if ended or stopped:
                    break
            self._step(k)
            k += 1
        return self._finish(stopped)

    def _real(self, k: int) -> tuple[Array, Array]:
        """The joints' state at row k, behind the drive where there is one."""
        return (self.drive.q, self.drive.v) if self.drive else (self.q[k], self.v[k])

    def _at_rest(self) -> bool:
        still = np.abs(self.v[-1]).max() <= REST_SPEED and np.abs(self.last_change).max() <= REST_SPEED
        return bool(still) and (self.drive is None or self.drive.settled(REST_SPEED))

    def _step(self, k: int) -> None:
        """Solve and apply step k."""
        q, v, state, dt = self.q[k], self.v[k], self.state, self.dt
        if k % POSTURE_EVERY == 0 or k == self.commanded:
            self.posture_velocity = self._posture_velocity(k, q)
        target = self._target(k)
        change, brake = self._solve(k, target)
        change = self._rubbing(k, target, brake, change)
        self.last_torque = self.stepper.rows.torque_of(state, change)
        next_v = v + change
        next_q = (v + next_v) * (dt / 2)
        next_q += q
        self.q.append(next_q)
        self.v.append(next_v)
        self.change.append(change)
        self.target.append(target)
        self.torque.append(self.last_torque)
        self.brake_of.append(brake)
        if self.drive:
            self.real.append((self.drive.q, self.drive.v))
            self.real_change.append(self.drive.advance(next_v))
        self.last_change, self.bias_before = change, state.bias
        self.state = self.arm.at(next_q, next_v)

    def _rubbing(self, k: int, target: Array, brake: Brake, change: Array) -> Array:
        """Step k solved again where it passes its torque or torque rate by the bend of dry friction."""
        rows, now = self.stepper.rows, self._now(k, brake)
        chords = rows.chords(now, change)
        if chords is not None and k not in self.noted and k - self.checked not in self.free_slots:
            change = self._noted(
                k, self._careful_step(k, target, brake)
            )  # a solver's mere word bends nothing
            chords = rows.chords(now, change)
        for _ in range(CHORD_ROUNDS):
            if chords is None:
                break
            again = self._careful_step(k, target, brake, chords)
            if again.status != "solved":
                break  # what it passes is less than what would have to give way
            change = self._noted(k, again)
            chords = rows.chords(now, change)
        return change

    def _posture_velocity(self, k: int, q: Array) -> Array:
        """Slow return toward the start posture; nothing while stopping."""
        if k >= self.commanded:
            return np.zeros(self.arm.n)
        wanted = self.cell.solver.posture_gain_per_s * (self.start - q)
        return np.asarray(np.clip(wanted, -POSTURE_SPEED, POSTURE_SPEED))

    def _target(self, k: int) -> Array:
        """The twist (6,) to go for: the command's, or zero while stopping."""
        if k >= self.commanded:
            return self.rest
        return self.commands.target(k, *self._real(k), None if self.drive else self.state)

    def _solve(self, k: int, target: Array) -> tuple[Array, Brake]:
        """The change of velocity of step k, and the braking ability that it was planned with.

        Far from every position and velocity limit those rows are left out, and a step that might miss them is
        solved again with them; near one they stay in for a while.
        """
        if k >= self.close_until and not self.keeps_direction:
            if k >= self.cautious_until:
                self.cautious, self.caution = self.brakes.cautious(self.state)
                self.cautious_until = k + CAUTIOUS_FOR
            change = self._attempt(k, target, self.cautious, close=False)
            if change is not None:
                if self.stepper.rows.clear(self.caution, self.q[k], self.v[k] + change, change):
                    return change, self.cautious
                self.free_slots.discard(k - self.checked)
            self.close_until = k + CLOSE_FOR
        brake = self.brakes.at(self.state, self.bias_before)
        change = self._attempt(k, target, brake, close=True)
        if change is not None:
            return change, brake
        return self._noted(k, self._careful_step(k, target, brake)), brake

    def _careful_step(self, k: int, target: Array, brake: Brake, chords: Chords | None = None) -> Step:
        """The step with all its rows, checked at once."""
        slot, now = k - self.checked, self._now(k, brake)
        self.stepper.cost(now, target, self.posture_velocity, slot)
        problem = self.stepper.problem(now, slot, chords=chords)
        if self.keeps_direction:
            return same_direction(self.stepper, problem, slot, target)
        return self.stepper.careful(problem)

    def _now(self, k: int, brake: Brake) -> Now:
        return Now(self.q[k], self.v[k], self.last_change, self.last_torque, self.state, brake)

    def _attempt(self, k: int, target: Array, brake: Brake, close: bool) -> Array | None:
        """The step without any row where that keeps them all, else by the first solver, whose word the block checks.

        None where the step must be checked at once.
        """
        stepper, slot, now = self.stepper, k - self.checked, self._now(k, brake)
        stepper.cost(now, target, self.posture_velocity, slot)
        if self.keeps_direction or self.careful or k == self.careful_at:
            return None
        block = stepper.block
        if self.was_free:
            change = stepper.free(now, close)
            if change is not None:
                block.x[slot], block.z[slot], block.z_box[slot] = change, 0.0, 0.0
                self.free_slots.add(slot)
                return change
        problem = stepper.problem(now, slot, close)
        if problem is not block.problems[slot]:
            return None
        change = stepper.quick(problem, slot)
        self.was_free = change is not None and not (block.z[slot].any() or block.z_box[slot].any())
        return change

    def _noted(self, k: int, step: Step) -> Array:
        """Keep a step that was checked at once out of the block's check, and what it says."""
        if k not in self.noted:
            self.in_vain = 0 if step.status == "solved" else self.in_vain + 1
        self.noted[k] = step
        block, slot, m = self.stepper.block, k - self.checked, self.stepper.rows.count
        self.was_free = False
        self.free_slots.discard(slot)
        block.x[slot] = step.change
        block.z[slot] = 0.0 if step.z is None else step.z[:m]
        block.z_box[slot] = 0.0 if step.z_box is None else step.z_box
        return step.change

    def _settle(self, k: int) -> int | None:
        """Check the block's answers up to step k and keep what they say; the first bad step, or None."""
        count = k - self.checked
        if count == 0:
            return None
        block = self.stepper.block
        unchecked = [
            s for s in range(count) if s not in self.free_slots and self.checked + s not in self.noted
        ]
        bad = block.first_bad(unchecked) if unchecked else None
        self.free_slots = set()
        good = count if bad is None else bad
        x = block.x[:good]
        error = self.stepper.error[:good] + (self.stepper.task[:good] @ x[..., None])[..., 0]
        self.shortfall.append(np.sqrt(np.einsum("ki,ki->k", error, error)))
        self.z.append(block.z[:good].copy())
        self.z_box.append(block.z_box[:good].copy())
        self.checked += good
        return None if bad is None else self.checked

    def _back_to(self, k: int) -> int:
        """Undo steps k and later, so that step k is solved again with care."""
        self.commands.back_to(k)
        for rows in (self.change, self.target, self.torque, self.brake_of):
            del rows[k:]
        del self.q[k + 1 :], self.v[k + 1 :]
        for step in [s for s in self.noted if s >= k]:
            del self.noted[step]
        self.in_vain = 0
        while (
            self.in_vain < k
            and (earlier := self.noted.get(k - 1 - self.in_vain))
            and earlier.status != "solved"
        ):
            self.in_vain += 1
        self.careful_at, self.close_until, self.cautious_until = k, k + CLOSE_FOR, k
        due = self.commanded if k >= self.commanded else k - k % POSTURE_EVERY
        self.posture_velocity = self._posture_velocity(due, self.q[due])
        before = max(k - 1, 0)
        self.bias_before = self.arm.at(self.q[before], self.v[before]).bias
        self.state = self.arm.at(self.q[k], self.v[k])
        self.last_change = self.change[-1] if k else np.zeros(self.arm.n)
        self.last_torque = self.torque[-1] if k else self.state.bias
        if self.cell.drive:
            self.drive = DriveState(self.cell.drive, self.start, self.v[0], self.dt)
            del self.real[k:], self.real_change[k:]
            for v in self.v[1 : k + 1]:
                self.drive.advance(v)
        return k

    def _finish(self, stopped: bool) -> Roll:
        dt, steps = self.dt, len(self.change)
        begin = self.commands.begin_s
        sent = motion_of(begin, dt, self.q, self.v, self.change, stopped)
        delivered = sent
        if self.drive:
            q = [*(pair[0] for pair in self.real), self.drive.q]
            v = [*(pair[1] for pair in self.real), self.drive.v]
            delivered = motion_of(begin, dt, q, v, self.real_change, stopped)
        n, m = self.arm.n, self.stepper.rows.count
        z_tool = np.zeros(steps)
        for k, step in self.noted.items():
            if step.tool and step.z is not None:
                z_tool[k] = step.z[m:].max()
        steps_noted = self.noted.values()
        return Roll(
            sent=sent,
            delivered=delivered,
            targets=np.array(self.target).reshape(-1, 6),
            shortfall=np.concatenate(self.shortfall) if self.shortfall else np.zeros(0),
            torque=np.array(self.torque).reshape(-1, n),
            z=np.vstack(self.z) if self.z else np.zeros((0, m)),
            z_box=np.vstack(self.z_box) if self.z_box else np.zeros((0, n)),
            z_tool=z_tool,
            brakes=tuple(self.brake_of),
            gave_way=tuple(gave_way(self.stepper.rows.joint, self.noted, self._then)),
            elastic_steps=sum(step.status == "elastic" for step in steps_noted),
            failed_steps=sum(step.status == "failed" for step in steps_noted),
            fallback_steps=sum(step.fell_back for step in steps_noted),
            stopped=stopped,
            end_row=min(self.commanded, steps),
        )

    def _then(self, k: int) -> Now:
        """What step k knew."""
        return now_at(self.arm, self.q[k], self.v[k], self.change, self.torque, self.brake_of[k], k)
