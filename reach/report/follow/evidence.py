"""evidence/: what an independent engine needs to check the run again."""

from __future__ import annotations

from dataclasses import asdict, fields
from typing import Any

import numpy as np

from reach.cell import CommandLog, Follow
from reach.report.stored import archive, cell_file
from reach.result import FollowResult

ARRAYS = ("t_s", "twist", "strike", "pose")  # of a log, where it has them


def evidence_files(result: FollowResult) -> dict[str, bytes | None]:
    """Return the content of motion.npz, log.npz and cell.json by file name; None for a file that must not be there."""
    evidence, follow = result.evidence, result.cell.follow
    own: dict[str, Any] = {
        "follow": None if follow is None else settings(follow),
        "drive": None if result.cell.drive is None else asdict(result.cell.drive),
        "strikes": [asdict(strike) for strike in evidence.strikes],
        "throughout": evidence.throughout_faults,
        "stopped": evidence.stopped,
        "guessed": evidence.guessed,
        "failed_steps": evidence.failed_steps,
        "blocked": [asdict(reason) for reason in evidence.blocked],
        "unknown": [{"limit": limit, "joint": joint} for limit, joint in evidence.unknown],
        "not_checked": evidence.not_checked,
    }
    return {
        "motion.npz": _motion(result),
        "log.npz": None if follow is None else _log(follow.commands),
        "cell.json": cell_file(result, own),
    }


def settings(follow: Follow) -> dict[str, Any]:
    """Return how the log is read, as plain data; the log's arrays stand in log.npz."""
    found = {item.name: getattr(follow, item.name) for item in fields(Follow) if item.name != "commands"}
    return {**found, "source": follow.commands.source, "mends": follow.commands.mends}


def _log(log: CommandLog) -> bytes:
    """Return t_s (N,), twist (N, 6) as sent, and strike (N,) and pose (N, 7) where the log has them."""
    return archive(**{name: getattr(log, name) for name in ARRAYS if getattr(log, name) is not None})


def _motion(result: FollowResult) -> bytes | None:
    """Return the motion, and beside it what the strike point did and was asked to do, as arrays.

    q, v, a, torque (m, n); t_s (m,), period_s; position, wanted_position (m, 3), rotation (m, 3, 3),
    twist, wanted_twist (m, 6), during (m,). SI units, world axes.
    """
    evidence = result.evidence
    motion, track, torque = evidence.motion, evidence.track, evidence.torque
    if motion is None or track is None or torque is None:
        return None
    return archive(
        q=motion.q,
        v=motion.v,
        a=motion.a,
        torque=torque,
        t_s=motion.t_s,
        period_s=np.array(motion.period_s),
        position=track.position,
        rotation=track.rotation,
        twist=track.twist,
        wanted_position=track.wanted_position,
        wanted_twist=track.wanted_twist,
        during=track.during,
    )
