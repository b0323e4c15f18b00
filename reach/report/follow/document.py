"""The answer on a followed log as plain data."""

from __future__ import annotations

from dataclasses import asdict
from typing import Any

import numpy as np

from reach.evidence.record import Strike, Track, Use
from reach.report.cautions import with_speed
from reach.report.document import whole
from reach.report.follow.wording import tilt_meaning
from reach.result import FollowResult

VERSION = 1  # of the schema


def document(result: FollowResult) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema."""
    evidence = result.evidence
    own = {
        "without_pose_gain": result.without_pose_gain,
        "limits": [_limit(use) for use in evidence.uses],
        "strikes": [_strike(strike) for strike in evidence.strikes],
        "tilt_meaning": tilt_meaning(result),
        "tracking": tracking(evidence.track),
        "base_load": None if evidence.base_load is None else asdict(evidence.base_load),
        "rms_torque_nm": _rms_torque(result),
        "solver": asdict(result.solver),
        "reading": result.reading,
    }
    return whole(result, VERSION, own, evidence.unknown, cautions(result))


def cautions(result: FollowResult) -> tuple[str, ...]:
    """Return the cautions for the motion."""
    return with_speed(peak_tool_speed(result), "this motion")


def peak_tool_speed(result: FollowResult) -> float | None:
    """Return the largest speed of the strike point over the motion's rows in m/s; None without a motion."""
    track = result.evidence.track
    if track is None or len(track.twist) == 0:
        return None
    return float(np.linalg.norm(track.twist[:, :3], axis=1).max())


def tracking(track: Track | None) -> dict[str, float | None]:
    """Return the tracking errors while the command lasts; None each where there is no motion."""
    names = ("velocity_rms_m_s", "velocity_peak_m_s", "position_peak_m", "tilt_peak_deg")
    if track is None or not np.any(track.during):
        return dict.fromkeys(names)
    velocity = track.velocity_error[track.during]
    values = (
        np.sqrt(np.mean(velocity**2)),
        velocity.max(),
        track.position_error[track.during].max(),
        np.degrees(track.tilt_error[track.during].max()),
    )
    return {name: float(value) for name, value in zip(names, values, strict=True)}


def _limit(use: Use) -> dict[str, Any]:
    return {
        "joint": use.joint,
        "limit": use.limit,
        "unit": use.unit,
        "bound": [use.lo, use.hi] if use.known else None,
        "kept_bound": [use.kept_lo, use.kept_hi] if use.known else None,
        "source": use.source,
        "demand_peak": use.demand_peak,
        "delivered_peak": use.peak,
        "utilisation": use.utilisation,
        "time_s": use.time_s,
    }


def _strike(strike: Strike) -> dict[str, Any]:
    return {**asdict(strike), "delivered": strike.delivered}


def _rms_torque(result: FollowResult) -> list[dict[str, Any]]:
    rms = result.evidence.rms_torque
    if rms is None:
        return []
    return [
        {"joint": joint.name, "rms": float(value)}
        for joint, value in zip(result.cell.arm.joints, rms, strict=True)
    ]
