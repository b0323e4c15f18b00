"""evidence/: what an independent engine needs to check the run again."""

from __future__ import annotations

from dataclasses import asdict

import numpy as np

from reach.report.stored import archive, cell_file
from reach.result import FollowResult


def evidence_files(result: FollowResult) -> dict[str, bytes | None]:
    """Return the content of motion.npz and cell.json by file name; None for a file that must not be there."""
    strikes = [asdict(strike) for strike in result.evidence.strikes]
    return {"motion.npz": _motion(result), "cell.json": cell_file(result, {"strikes": strikes})}


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
