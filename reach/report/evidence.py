"""evidence/: what an independent engine needs to check the run again."""

from __future__ import annotations

import io
import json
from dataclasses import asdict

import numpy as np

from reach.report.document import strict
from reach.result import FollowResult

SCHEMA = "strikecheck/evidence/1"


def evidence_files(result: FollowResult) -> dict[str, bytes | None]:
    """Return the content of motion.npz and cell.json by file name; None for a file that must not be there."""
    return {"motion.npz": _motion(result), "cell.json": _cell(result)}


def _motion(result: FollowResult) -> bytes | None:
    """Return the motion, and beside it what the strike point did and was asked to do, as arrays.

    q, v, a, torque (m, n); t_s (m,), period_s; position, wanted_position (m, 3), rotation (m, 3, 3),
    twist, wanted_twist (m, 6), during (m,). SI units, world axes.
    """
    evidence = result.evidence
    motion, track, torque = evidence.motion, evidence.track, evidence.torque
    if motion is None or track is None or torque is None:
        return None
    out = io.BytesIO()
    np.savez(
        out,
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
    return out.getvalue()


def _cell(result: FollowResult) -> bytes:
    """Return the arm, its stated limits, the paddle and what counts as delivered, to full precision.

    A limit that is null is unknown; a side of a limit that is null is known to be unlimited.
    """
    cell = result.cell
    content = {
        "schema": SCHEMA,
        "verdict": result.verdict.verdict,
        "period_s": cell.period_s,
        "arm": asdict(cell.arm),
        "paddle": asdict(cell.paddle),
        "tool": None if cell.tool is None else asdict(cell.tool),
        "accept": asdict(cell.accept),
        "strikes": [asdict(strike) for strike in result.evidence.strikes],
        "inputs": [asdict(source) for source in cell.inputs],
    }
    tidy = strict(content, digits=None)
    return (json.dumps(tidy, ensure_ascii=False, allow_nan=False, indent=1) + "\n").encode()
