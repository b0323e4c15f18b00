"""The second opinion on a followed log: motion, limits, strikes and verdict decided anew."""

from __future__ import annotations

from collections.abc import Callable

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.trace import FINE, Trace, fine
from reach.recheck.demands import check_demands
from reach.recheck.follow.command import LOG, Command, Log, command_of, first_pose, log_again
from reach.recheck.follow.strikes import strike_items
from reach.recheck.follow.uses import limit_items
from reach.recheck.shares import verdict_checks
from reach.recheck.stored import BadFolder, Stored, largest, number_in
from reach.recheck.turns import apart

MOTION = "motion.npz"
SOLVER_FAILED = "that no solver answered in some step leaves no trace"
SEARCHED = "that no posture reaches the log's first pose rests on a search"
REST = 1e-6  # rad/s or m/s, and by the period a change of it: below it the arm stands
Progress = Callable[[str], None]


def items(stored: Stored, ground: Ground, progress: Progress) -> list[Item]:
    """Every claim of a followed log.

    Raises
    ------
    BadFolder
    """
    check_demands(stored)
    log = Log.of(stored)
    found = [_log_item(stored, log)]
    if MOTION not in stored.arrays:
        return found + _without_motion(stored, ground, log)
    progress("recheck: the motion")
    q, v, a = (stored.finite(MOTION, name, (None, len(ground.names))) for name in ("q", "v", "a"))
    if not len(q) == len(v) == len(a):
        raise BadFolder("q", "v and a have other lengths", f"{stored.folder}/evidence/{MOTION}")
    if not len(q) > 1:
        raise BadFolder("q", "has less than two rows", f"{stored.folder}/evidence/{MOTION}")
    begin = log.t_s[0]
    trace = fine(q, v, a, ground.period_s, begin)
    first = ground.chain.seen(q[:1], v[:1])
    command = command_of(stored, log, *first_pose(log, first.place[0], first.axes[0]))
    found.append(_motion_item(stored, ground, trace))
    found.append(_command_item(stored, command, len(q), begin))
    progress("recheck: the limits")
    uses, broken = limit_items(stored, ground, trace)
    found += uses
    progress("recheck: the strikes")
    strikes, faults = strike_items(stored, ground, log, command, trace)
    found += strikes
    stands = bool(max(largest(v[-1]), largest(a[-1]) * ground.period_s) <= REST)
    found.append(Item("motion", "the end", (same("the arm stands", stands, stored.at("stopped")),)))
    failures = [*broken, *faults, *([] if stands else ["no stand"])]
    return [*found, _verdict(stored, ground, failures)]


def notes(stored: Stored) -> list[str]:
    """What of it rests on a search."""
    return [
        f"{SEARCHED}: {entry.get('text')}"
        for entry in stored.tables("blocked")
        if entry.get("basis") == "searched"
    ]


def _log_item(stored: Stored, log: Log) -> Item:
    """The log stored against its file."""
    again = log_again(stored)
    if isinstance(again, str):
        return Item("as stated", "log", (), again)
    checks = []
    for name in ("t_s", "twist", "strike", "pose"):
        own, kept = again.get(name), getattr(log, name)
        if own is None or kept is None:
            checks.append(same(f"{name} given", own is not None, kept is not None))
            continue
        kept = np.asarray(kept, dtype=float).reshape(len(kept), -1)
        if own.shape != kept.shape:
            checks.append(same(f"shape of {name}", own.shape, kept.shape))
            continue
        if name == "pose":  # a quaternion is made a unit one while it is read
            own[:, 3:] /= np.linalg.norm(own[:, 3:], axis=1)[:, None]
        checks.append(Check(name, largest(own - kept), allowed.NUMBER, ""))
    return Item("as stated", "log", tuple(checks))


def _motion_item(stored: Stored, ground: Ground, trace: Trace) -> Item:
    """The motion as one of constant accelerations, from the stated start; what the strike point does in it."""
    q, v, a, t_s = (rows[::FINE] for rows in (trace.q, trace.v, trace.a, trace.t_s))
    m, dt, start = len(q), ground.period_s, stored.vector(len(ground.names), "arm", "start")
    seen = ground.chain.seen(q, v)
    place, axes, twist = (
        stored.finite(MOTION, name, (m, *rest))
        for name, rest in (("position", (3,)), ("rotation", (3, 3)), ("twist", (6,)))
    )
    off = {
        "start posture": (q[0] - start, allowed.JOINT, "rad or m"),
        "instants": (t_s - stored.finite(MOTION, "t_s", (m,)), allowed.TIME_S, "s"),
        "period": (float(stored.finite(MOTION, "period_s", ())) - dt, 0.0, "s"),
        "velocity integrated": (np.diff(v, axis=0) - a[:-1] * dt, REST, "per s"),
        "position integrated": (np.diff(q, axis=0) - (v[1:] + v[:-1]) / 2 * dt, REST * dt, "rad or m"),
        "strike point": (seen.place - place, allowed.PLACE_M, "m"),
        "paddle axes": (apart(seen.axes, axes), allowed.TURN_RAD, "rad"),
        "speed": (seen.linear - twist[:, :3], allowed.SPEED_M_S, "m/s"),
        "turning": (seen.angular - twist[:, 3:], allowed.RATE_RAD_S, "rad/s"),
    }
    checks = (Check(name, largest(values), most, unit) for name, (values, most, unit) in off.items())
    return Item("motion", "joints and strike point", tuple(checks))


def _command_item(stored: Stored, command: Command, rows: int, begin: float) -> Item:
    """The command, where the motion's rows have it."""
    twist, position, _ = command.at(begin + stored.number("period_s") * np.arange(rows))
    twist = twist - stored.finite(MOTION, "wanted_twist", (rows, 6))
    position = position - stored.finite(MOTION, "wanted_position", (rows, 3))
    checks = (
        Check("place", largest(position), allowed.PLACE_M, "m"),
        Check("speed", largest(twist[:, :3]), allowed.SPEED_M_S, "m/s"),
        Check("turning", largest(twist[:, 3:]), allowed.RATE_RAD_S, "rad/s"),
    )
    return Item("command", "", checks)


def _without_motion(stored: Stored, ground: Ground, log: Log) -> list[Item]:
    """A log that was not rolled: what stood against it before any motion."""
    found, blocked = [], stored.tables("blocked")
    if not blocked:
        raise BadFolder(
            MOTION, "is missing, and cell.json has nothing that stood against a motion", stored.folder
        )
    for entry in blocked:
        limit, joint = entry.get("limit"), entry.get("joint")
        if limit == "torque" and joint in ground.names:
            found.append(_overloaded(stored, ground, ground.names.index(joint), number_in(entry, "value")))
        elif limit == "reach" and entry.get("basis") == "proved" and log.pose is not None:
            found.append(_elsewhere(stored, ground, log))
    return [*found, _verdict(stored, ground, ["no motion"], "" if found else SEARCHED)]


def _overloaded(stored: Stored, ground: Ground, joint: int, claimed: float) -> Item:
    """The load of holding the start posture, above the stated torque."""
    name, q = ground.names[joint], stored.vector(len(ground.names), "arm", "start")[None]
    if ground.engine is None:
        return Item("start", name, (), ground.why_no_engine)
    load = float(ground.engine.torque(q, 0 * q, 0 * q)[0, joint])
    limits = ground.limits
    over = max(load - limits.hi["torque"][joint], limits.lo["torque"][joint] - load)
    most = allowed.PEAK_SHARE * max(abs(load), 1.0)
    off = Check("load", abs(load - claimed), most, limits.units["torque"][joint])
    return Item("start", name, (off, same("above its limit", bool(over > 0), True)))


def _elsewhere(stored: Stored, ground: Ground, log: Log) -> Item:
    """The start posture, away from the log's first pose by more than is accepted."""
    q = stored.vector(len(ground.names), "arm", "start")[None]
    seen = ground.chain.seen(q, 0 * q)
    place, axes = first_pose(log, seen.place[0], seen.axes[0])
    far = float(np.linalg.norm(place - seen.place[0])) > ground.accept["strike_position_m"]
    turned = float(apart(axes[None], seen.axes)[0]) > ground.accept["strike_tilt_error_rad"]
    return Item("start", "first pose", (same("away from the start posture", far or turned, True),))


def _verdict(stored: Stored, ground: Ground, failures: list[str], why: str = "") -> Item:
    """The verdict that follows from what was found here; `why` it may not be checkable."""
    if not failures and ground.engine is None:
        return Item("verdict", "", (), f"torque is part of it: {ground.why_no_engine}")
    failed, guessed = stored.number("failed_steps") > 0, stored.flag("guessed")
    checks = []
    if failures and not failed:
        own = "not deliverable"
    else:
        asked = _guessed(stored)
        checks.append(same("contacts only guessed", asked, guessed))
        open_ = failed or bool(ground.unknown & set(ground.accept["require"])) or asked
        own = "undecided" if open_ else "deliverable"
    checks += verdict_checks(stored, own)
    return Item("verdict", "", tuple(checks), SOLVER_FAILED if failed else why)


def _guessed(stored: Stored) -> bool:
    """Whether strikes are peaks of the command that nobody confirmed."""
    unmarked = not stored.has(LOG, "strike") and len(stored.entries("strikes")) > 0
    return unmarked and stored.at("follow", "strikes") != "guessed-ok"
