"""The result as plain data: what verdict.json holds and the other reports share."""

from __future__ import annotations

import importlib.metadata
import math
import platform
from dataclasses import asdict
from typing import Any

import numpy as np

import reach
from reach.evidence.record import Strike, Track, Use
from reach.report.cautions import cautions
from reach.report.wording import all_notes, tilt_meaning
from reach.result import FollowResult

SCHEMA = "strikecheck/follow/1"
DIGITS = 9  # significant digits of a value that leaves the program
TIME_DECIMALS = 9  # of an instant: nanoseconds, whatever the log's zero is
TIMES = ("time_s", "until_s")
# Names in versions beside this program's own, and the distributions they come from.
DISTRIBUTIONS = {
    "pinocchio": "pin",
    "qpsolvers": "qpsolvers",
    "numpy": "numpy",
    "scipy": "scipy",
    "daqp": "daqp",
    "piqp": "piqp",
}


def document(result: FollowResult) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema."""
    evidence = result.evidence
    content = {
        "schema": SCHEMA,
        "verdict": result.verdict.verdict,
        "sentence": result.verdict.sentence,
        "without_margins": result.without_margins,
        "without_pose_gain": result.without_pose_gain,
        "reasons": [asdict(reason) for reason in result.reasons],
        "not_checked": evidence.not_checked,
        "needs": [asdict(need) for need in result.needs],
        "remedies": [asdict(remedy) for remedy in result.remedies],
        "headroom_share": result.headroom_share,
        "headroom_text": result.headroom_text,
        "limits": [_limit(use) for use in evidence.uses],
        "unknown": [{"limit": limit, "joint": joint} for limit, joint in evidence.unknown],
        "strikes": [_strike(strike) for strike in evidence.strikes],
        "tilt_meaning": tilt_meaning(result),
        "tracking": tracking(evidence.track),
        "base_load": None if evidence.base_load is None else asdict(evidence.base_load),
        "rms_torque_nm": _rms_torque(result),
        "solver": asdict(result.solver),
        "reading": result.reading,
        "notes": all_notes(result),
        "cautions": cautions(result),
        "inputs": [asdict(source) for source in result.cell.inputs],
        "versions": versions(),
    }
    tidy: dict[str, Any] = strict(content)
    return tidy


def strict(value: Any, key: str = "", digits: int | None = DIGITS) -> Any:
    """Return the value as strict JSON allows it: no infinity and no nan (None instead), floats rounded
    to so many significant digits, instants to nanoseconds; with `digits` None nothing is rounded.

    Lone surrogates, which file names may hold and UTF-8 does not, become escapes.
    """
    if isinstance(value, dict):
        return {name: strict(item, name, digits) for name, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [strict(item, key, digits) for item in value]
    if isinstance(value, str):
        return encodable(value)
    if isinstance(value, (bool, np.bool_)):
        return bool(value)
    if isinstance(value, (int, np.integer)):
        return int(value)
    if isinstance(value, (float, np.floating)):
        return _rounded(float(value), key, digits)
    return value


def encodable(text: str) -> str:
    """Return the text with lone surrogates written as escapes."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")


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


def versions() -> dict[str, str | None]:
    """Return the versions of what produced the result; None for what is not installed as a distribution."""
    found: dict[str, str | None] = {"strikecheck": reach.__version__}
    for name, distribution in DISTRIBUTIONS.items():
        try:
            found[name] = importlib.metadata.version(distribution)
        except importlib.metadata.PackageNotFoundError:
            found[name] = None
    return {**found, "python": platform.python_version()}


def _rounded(value: float, key: str, digits: int | None) -> float | None:
    if not math.isfinite(value):
        return None
    if digits is None:
        return value
    rounded = round(value, TIME_DECIMALS) if key in TIMES else float(f"{value:.{digits}g}")
    return rounded + 0.0  # no negative zero


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
