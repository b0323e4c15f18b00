"""What is known of a random case without the program: by its own reading of the log, its own arm, linear programs.

A verdict that contradicts what is known here is false. Nothing of reach's kinematics, limits, follower or bounds is
used.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from random_arm import Arm, about
from random_case import Case
from random_commands import Log
from random_limits import Course, used

from reach.cell import Array

FINE = 4  # instants a control period at which the command is read
# Shares of kept-back limits and of tolerances that count as room enough. A motion may not come near a velocity limit or
# an end of travel, where a step must still be able to brake with half of what all joints have together.
ROOM = {
    "position": 0.7,
    "velocity": 0.6,
    "acceleration": 0.9,
    "jerk": 0.9,
    "torque": 0.85,
    "torque rate": 0.85,
    "duty": 0.9,
    "tool speed": 0.45,
    "command": 0.7,
}
SLACK = 1e-3  # a speed above a proof by less is no contradiction
POSTURE_PER_S, POSTURE_MOST = (
    0.5,
    0.2,
)  # slow return toward the start posture, and its cap (METHODS.md, [solver])
PLAIN_LENGTH_M = 0.1


@dataclass(frozen=True, eq=False)
class Command:
    """A log as read here: what it asks of the strike point, on an even grid of FINE instants a control period.

    t_s (f,) from the log's begin ; after, before (f, 6) twists from each instant on, and up to it, world axes
    place (f, 3), turn (f, 3, 3) ; targets (k, 6) : due at the end of each control period
    """

    t_s: Array
    after: Array
    before: Array
    place: Array
    turn: Array
    targets: Array


@dataclass(frozen=True, eq=False)
class Known:
    """What is known of a case: why it must not be deliverable, and why it must not be refused; empty where unknown.

    tracked, planted : largest share of ROOM that the least motion behind the twists, and the planted
    one, use ; nan where there is none
    """

    impossible: str
    possible: str
    tracked: float
    planted: float


def read_command(arm: Arm, log: Log, period_s: float) -> Command:
    """Integrate the log's twists from the start posture's pose.

    A held sample is in force from its stamp on, and what is due at a period's end is the one in force at its
    beginning; a line is drawn between samples. The last one holds for one more period of the log.
    """
    times = log.t_s - log.t_s[0]
    gap = float(np.median(np.diff(times)))
    steps = round((times[-1] + gap) / period_s)
    h = period_s / FINE
    t = h * np.arange(steps * FINE + 1)
    row = np.minimum(np.floor(t / gap + 1e-9).astype(int), len(times) - 1)
    sent, later = log.sent[row], log.sent[row]
    middle = sent
    if log.interpolation == "linear":
        rate = np.vstack([np.diff(log.sent, axis=0) / gap, np.zeros((1, 6))])[row]
        sent = sent + rate * (t - times[row])[:, None]
        middle, later = sent + rate * h / 2, sent + rate * h
    _, turns, places = arm.jacobian(log.start[None])
    turn, point = [turns[0]], [places[0] + turns[0] @ log.offset]
    base = arm.base[:3, :3]
    for k in range(len(t) - 1):
        linear, angular = middle[k, :3], middle[k, 3:]
        if log.frame == "paddle":
            half = rotation(turn[k] @ angular * h / 2) @ turn[k]
            axes = half
        else:
            axes = base if log.frame == "base" else np.eye(3)
        point.append(point[k] + axes @ linear * h)
        turn.append(rotation(axes @ angular * h) @ turn[k])
    turned, points = np.array(turn), np.array(point)
    after = in_world(sent, turned, base, log)
    before = np.vstack([after[:1], in_world(later[:-1], turned[1:], base, log)])
    ends = FINE * np.arange(1, steps + 1)
    targets = before[ends]
    if log.interpolation == "hold":
        begin = FINE * np.arange(steps)
        targets = in_world(sent[begin], turned[ends], base, log)
    after[-1] = 0.0
    return Command(t + log.t_s[0], after, before, points - turned @ log.offset, turned, targets)


def rotation(turn: Array) -> Array:
    """Rotation (3, 3) by a vector (3,) rad."""
    angle = float(np.linalg.norm(turn))
    return np.eye(3) if angle < 1e-14 else about(turn / angle, np.array([angle]))[0]


def in_world(sent: Array, turns: Array, base: Array, log: Log) -> Array:
    """Twists (k, 6) as sent, in world axes and of the strike point."""
    axes = {"world": np.eye(3)[None], "base": base[None], "paddle": turns}[log.frame]
    linear, angular = ((axes @ part[..., None])[..., 0] for part in (sent[:, :3], sent[:, 3:]))
    return np.hstack([linear - np.cross(angular, turns @ log.offset), angular])


def least_motion(case: Case, command: Command) -> Course | None:
    """The motion with the least joint velocities whose twist at every period's end is the one due, or the nearest to
    it, with a slow return to the start; then at rest. None where it runs off."""
    log, dt = case.log, case.period_s
    assert log is not None
    weight = np.array([1.0] * 3 + [PLAIN_LENGTH_M] * 3)[:, None]
    q, v = log.start.copy(), np.zeros(case.n)
    speeds = [v]
    for target in command.targets:
        back = np.clip(POSTURE_PER_S * (log.start - q), -POSTURE_MOST, POSTURE_MOST)
        new = v
        for _ in range(2):
            jacobian = case.arm.jacobian((q + (v + new) * dt / 2)[None])[0][0] * weight
            u, sizes, right = np.linalg.svd(jacobian, full_matrices=False)
            keep = sizes > 1e-6 * max(sizes[0], 1e-9)
            right, inverse = right[keep], 1 / sizes[keep]
            new = (
                right.T @ (inverse * (u[:, keep].T @ (target * weight[:, 0])))
                + back
                - right.T @ (right @ back)
            )
        if not np.abs(new).max() < 100.0:
            return None
        q, v = q + (v + new) * dt / 2, new
        speeds.append(v)
    return Course.of(log.start, np.array([*speeds, 0 * v, 0 * v]), dt)


def room(case: Case, command: Command, path: Course) -> float:
    """The largest share that a motion uses of ROOM, over all limits and tolerances."""
    shares = used(case.arm, case.kept, path)
    jacobians = case.arm.jacobian(path.q)[0]
    twists = np.einsum("mij,mj->mi", jacobians, path.v)
    if np.isfinite(case.tool_m_s):
        shares["tool speed"] = float(np.linalg.norm(twists[:, :3], axis=1).max()) / case.tool_kept_m_s
    shares["command"] = errors(case, command, path)
    return max(share / ROOM[kind] for kind, share in shares.items())


def fine_states(path: Course) -> tuple[Array, Array]:
    """Joint positions and velocities (f, n) FINE times a control period."""
    ahead = path.period_s * np.arange(FINE) / FINE
    q = path.q[:-1, None] + path.v[:-1, None] * ahead[:, None] + path.a[:-1, None] * ahead[:, None] ** 2 / 2
    v = path.v[:-1, None] + path.a[:-1, None] * ahead[:, None]
    n = path.q.shape[1]
    return np.vstack([q.reshape(-1, n), path.q[-1:]]), np.vstack([v.reshape(-1, n), path.v[-1:]])


def errors(case: Case, command: Command, path: Course) -> float:
    """The largest share of a tolerance that a motion's errors use, at strikes or throughout."""
    log, accept = case.log, case.accept
    assert log is not None
    q, v = fine_states(path)
    count = min(len(q), len(command.t_s))
    jacobians, turns, places = case.arm.jacobian(q[:count])
    twists = np.einsum("mij,mj->mi", jacobians, v[:count])
    found = [
        _compared(twists, wanted[:count], turns, places, command, count)
        for wanted in (command.after, command.before)
    ]
    speed, lateral, place, tilt, along = (np.maximum(*pair) for pair in zip(*found, strict=True))
    least = np.minimum(found[0][4], found[1][4])
    allowed = [accept[key] for key in ("strike_lateral_m_s", "strike_position_m")]
    allowed.append(np.radians(accept["strike_tilt_error_deg"]))
    share = accept["strike_speed_error_share"]
    marked = strikes_of(log)
    if log.at == "throughout" or not len(marked):
        rows, peak = slice(0, None, FINE), float(along.max(initial=0.0))
        worst = [float(speed[rows].max()) / max(share * peak, 1e-3)]
        parts = [rows] * 3
    else:
        half = accept["strike_window_s"] / 2
        near = np.abs(command.t_s[:count, None] - marked).min(axis=1) <= half + case.period_s / FINE
        worst = [float((speed[near] / np.maximum(share * least[near], 1e-12)).max())]
        parts = [near] * 3
    sizes = zip((lateral, place, tilt), parts, allowed, strict=True)
    return max(worst + [float(size[part].max()) / most for size, part, most in sizes])


def _compared(
    twists: Array, wanted: Array, turns: Array, places: Array, command: Command, count: int
) -> tuple[Array, Array, Array, Array, Array]:
    """Errors (f,) of speed along the commanded normal, aside of it, of place, of tilt; and the commanded speed."""
    normal = command.turn[:count, :, 2]
    off = twists[:, :3] - wanted[:, :3]
    along = np.einsum("mi,mi->m", off, normal)
    aside = np.linalg.norm(off - along[:, None] * normal, axis=1)
    place = np.linalg.norm(places - command.place[:count], axis=1)
    cross = np.linalg.norm(np.cross(turns[:, :, 2], normal), axis=1)
    tilt = np.arctan2(cross, np.einsum("mi,mi->m", turns[:, :, 2], normal))
    return np.abs(along), aside, place, tilt, np.abs(np.einsum("mi,mi->m", wanted[:, :3], normal))


def strikes_of(log: Log) -> Array:
    """Instants of the marked strikes; marks in a row are one."""
    if log.marks is None:
        return np.zeros(0)
    return np.asarray(log.t_s[log.marks & ~np.append(False, log.marks[:-1])])


def top_speed(case: Case) -> float:
    """A speed of the strike point that no motion passes, m/s: each joint's limit times its longest lever, or the
    tool's cap; both as stated."""
    levers = np.where(case.arm.sliding, 1.0, case.arm.levers(case.limits.reach_of_slides()))
    return float(min(np.sum(case.limits.fastest() * levers), case.tool_m_s))


def impossible_follow(case: Case, command: Command) -> str:
    """Why no motion whatever delivers a log, by what needs no search; else empty."""
    log = case.log
    assert log is not None
    rest = np.zeros((1, case.n))
    static = case.arm.torque(log.start[None], rest, rest)[0]
    over = np.maximum(static - case.limits.hi["torque"], case.limits.lo["torque"] - static)
    scale = np.maximum(np.abs(static), 1e-3)
    if not log.auto and np.nanmax(over / scale, initial=-1.0) > SLACK:
        return "the start posture alone asks more torque than a joint has"
    marked, share = strikes_of(log), case.accept["strike_speed_error_share"]
    most = top_speed(case)
    if log.at == "throughout" or not len(marked):
        return ""
    rows = np.rint((marked - log.t_s[0]) / case.period_s * FINE).astype(int)
    along = np.abs(np.einsum("mi,mi->m", command.after[rows, :3], command.turn[rows, :, 2]))
    lost = int(np.sum(along * (1 - share) > most * (1 + SLACK) + SLACK))
    needed = int(np.ceil(case.accept["strikes_share"] * len(marked) - 1e-9))
    if len(marked) - lost < needed:
        return f"a strike at {along.max():.2f} m/s, where joints and levers make {most:.2f} m/s at most"
    return ""


def known_follow(case: Case) -> Known:
    """What is known of a followed log.

    Possible: the least motion behind the twists keeps within ROOM of every kept-back limit and every tolerance; nothing
    is known where the drives lag or the start is to be found.
    """
    log = case.log
    assert log is not None
    command = read_command(case.arm, log, case.period_s)
    no = impossible_follow(case, command)
    if no or case.drive or log.auto:
        return Known(no, "", np.nan, np.nan)
    planted = np.nan if log.planted is None else room(case, command, padded(log.planted))
    path = least_motion(case, command) if not planted > 5 else None
    tracked = np.nan if path is None else room(case, command, path)
    yes = f"the least motion uses {tracked:.2f} of its room" if tracked <= 1 else ""
    return Known("", yes, tracked, planted)


def padded(path: Course) -> Course:
    """The motion and two periods of rest after it."""
    return Course.of(path.q[0], np.vstack([path.v, 0 * path.v[:2]]), path.period_s)


def known_blow(case: Case, index: int) -> Known:
    """What is known of a surveyed strike: out of reach or above what levers and limits make, or allowed by the joints'
    velocities in the posture that it was planted in."""
    blow = case.blows[index]
    first, most = case.arm.before[0, :3, 3], case.kept.fastest()
    slides = case.limits.reach_of_slides()
    length = float(case.arm.levers(slides)[0] + slides[0] * bool(case.arm.sliding[0]))
    if np.linalg.norm(blow.place - first) > length * (1 + SLACK):
        return Known("out of reach", "", np.nan, np.nan)
    levers = np.where(case.arm.sliding, 1.0, case.arm.levers(slides))
    along = float(blow.along @ blow.normal)
    top = min(float(np.sum(most * levers)), case.tool_kept_m_s) * along
    if blow.required > top * (1 + SLACK):
        return Known(
            f"required {blow.required:.3f}, levers and limits make {top:.3f} m/s at most", "", np.nan, np.nan
        )
    if blow.posture is not None and blow.bound >= blow.required * (1 + SLACK):
        return Known(
            "", f"the planted posture allows {blow.bound:.4f} of {blow.required:.4f} m/s", np.nan, blow.bound
        )
    return Known("", "", np.nan, blow.bound)
