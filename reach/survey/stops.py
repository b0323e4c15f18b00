"""What stops a strike from being faster: the limit whose loosening helps most, its joint, and the phase."""

from __future__ import annotations

from dataclasses import dataclass, replace

import numpy as np

from reach.cell import Array, Cell
from reach.evidence.record import Use
from reach.strike.setting import Setting
from reach.strike.sides import AT_BOUND, Upper
from reach.strike.stroke import Demonstration
from reach.variants import one_limit_scaled

LOOSER = 1.1
LEAST_GAIN = 0.002  # of the speed: a limit that gives less does not stop it
KINDS = ("velocity", "acceleration", "jerk", "torque", "torque rate", "tool speed", "position")
WINDOW = "strike window"  # the accepted errors over it, as a reason beside the limits
RUN_UP, IMPACT, FOLLOW_THROUGH = "run-up", "impact", "follow-through"


@dataclass(frozen=True)
class Stop:
    """Limit, joint ("" for none) and phase ("" for none)."""

    limit: str
    joint: str = ""
    phase: str = ""


def loosened(cell: Cell) -> dict[str, Setting]:
    """The setting with each kind of limit loosened by itself, where one is stated; and with a wider strike window."""
    base = Setting.of(cell)
    settings = {}
    for kind in KINDS:
        if np.isfinite(base.limits[kind].hi).any():
            settings[kind] = Setting.of(one_limit_scaled(cell, kind, None, LOOSER))
    accept = cell.accept
    wider = replace(
        accept,
        strike_speed_error_share=min(accept.strike_speed_error_share * LOOSER, 1.0),
        strike_lateral_m_s=accept.strike_lateral_m_s * LOOSER**2,
        strike_tilt_error_rad=accept.strike_tilt_error_rad * LOOSER**2,
    )
    settings[WINDOW] = Setting.of(replace(cell, accept=wider))
    return settings


def stop_at_bound(setting: Setting, above: Upper, i: int, q: Array) -> Stop:
    """What makes the upper bound of posture i, q (n,): the tool's cap, or the joint that gives most of it."""
    if above.own(setting.still)[i] >= setting.tool_cap_m_s:
        return Stop("tool speed", "", IMPACT)
    y = above.joints.dual[i] @ above.rows[i]
    side = np.where(y > 0, above.hi[i], above.lo[i])
    with np.errstate(invalid="ignore"):
        joint = int(np.nanargmax(np.where(y == 0, 0.0, y * side)))
    velocity = setting.limits["velocity"]
    kept = (velocity.kept_hi if y[joint] > 0 else velocity.kept_lo)[joint]
    limit = "velocity"
    if abs(side[joint]) < AT_BOUND * abs(kept):  # narrowed by what acceleration gains over the travel
        limit = "position" if _near_end(setting, q[joint], joint) else "acceleration"
    return Stop(limit, setting.arm.names[joint], IMPACT)


def _near_end(setting: Setting, q: float, joint: int) -> bool:
    """Whether a joint is nearer to an end of its travel than to its middle."""
    lo, hi = (side[joint] for side in setting.ends)
    return bool(min(q - lo, hi - q) < (hi - lo) / 4)


def stop_of(setting: Setting, shown: Demonstration, speed: float, loose: dict[str, float]) -> Stop:
    """What stops a demonstrated stroke below its bound: the kind that gains most, its most used joint, and when.

    Parameters
    ----------
    speed : of the quick timing as it is, m/s ; loose : with each kind loosened
    """
    if not loose:
        return Stop("")
    kind = max(loose, key=lambda name: loose[name])
    if loose[kind] < speed * (1 + LEAST_GAIN):
        return Stop("")
    if kind in (WINDOW, "tool speed"):
        return Stop(kind, "", IMPACT)
    uses = [use for use in shown.measured.uses if use.limit == kind and use.utilisation is not None]
    if not uses:
        return Stop(kind)
    use = max(uses, key=lambda one: one.utilisation or 0.0)
    return Stop(kind, use.joint or "", _phase(setting, use))


def _phase(setting: Setting, use: Use) -> str:
    half = setting.accept.strike_window_s / 2
    if use.time_s is None or abs(use.time_s) <= half:
        return IMPACT
    return RUN_UP if use.time_s < 0 else FOLLOW_THROUGH
