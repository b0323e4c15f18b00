"""How much of every limit a followed motion uses, against what was claimed."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.limits import KINDS, TORQUE_KINDS, overshoot, torques, values
from reach.recheck.arm.trace import FINE, Trace
from reach.recheck.stored import VERDICT, Stored, largest, number_in

MOTION = "motion.npz"
PASSIVE = tuple(kind for kind in KINDS if kind not in TORQUE_KINDS)


def limit_items(stored: Stored, ground: Ground, trace: Trace) -> tuple[list[Item], list[str]]:
    """The use of every limit, of every joint and of the tool; and what is broken, in words."""
    claims = {
        (entry.get("joint"), entry.get("limit")): entry
        for entry in stored.entries("limits")
        if isinstance(entry.get("joint"), str | None) and isinstance(entry.get("limit"), str)
    }
    torque = standing = None
    if ground.engine is not None:
        torque, standing = torques(ground, trace)
    seen = values(trace, torque, standing)
    over = overshoot(ground.limits, seen)
    found, broken = [], []
    for i, joint in enumerate(ground.names):
        for what, kinds in (("limits", PASSIVE), ("torque", TORQUE_KINDS)):
            if what == "torque" and torque is None:
                found.append(Item(what, joint, (), ground.why_no_engine))
                continue
            checks = []
            for kind in kinds:
                bound = float(ground.limits.lo[kind][i]), float(ground.limits.hi[kind][i])
                unit, passed = ground.limits.units[kind][i], float(over[kind][i])
                checks += _use(kind, unit, seen[kind][:, i], bound, passed, claims.get((joint, kind)))
                broken += [f"{kind} of {joint}"] * (passed > allowed.LIMIT_SHARE * _scale(bound))
            if what == "torque" and torque is not None:
                checks.append(_row_by_row(stored, ground, torque, i))
            found.append(Item(what, joint, tuple(checks)))
    return [*found, _tool(ground, trace, claims.get((None, "tool speed")), broken)], broken


def _row_by_row(stored: Stored, ground: Ground, torque: np.ndarray, i: int) -> Check:
    """Torque of a joint at the motion's rows against what was stored."""
    rows = stored.finite(MOTION, "torque", (len(torque[::FINE]), len(ground.names)))
    off = largest(torque[::FINE, i] - rows[:, i])
    return Check(
        "torque, row by row", off, allowed.TORQUE_SHARE * largest(torque), ground.limits.units["torque"][i]
    )


def _tool(ground: Ground, trace: Trace, claim: dict[str, Any] | None, broken: list[str]) -> Item:
    """Speed of the strike point against the maker's cap; where it is passed, that is added to what is broken."""
    speed = np.linalg.norm(ground.chain.seen(trace.q, trace.v).linear, axis=1)
    cap = ground.tool_m_s
    passed = max(float(speed.max()) - cap, 0.0)
    if passed > allowed.LIMIT_SHARE * cap:
        broken.append("tool speed")
    return Item("limits", "the tool", tuple(_use("tool speed", "m/s", speed, (-cap, cap), passed, claim)))


def _use(
    kind: str,
    unit: str,
    series: np.ndarray,
    bound: tuple[float, float],
    over: float,
    claim: dict[str, Any] | None,
) -> list[Check]:
    """The peak claimed against the extremes here, and whether the stated limit is kept."""
    if claim is None:
        return [same(f"{kind} in {VERDICT}", "measured", "missing")]
    peak, used = number_in(claim, "delivered_peak"), number_in(claim, "utilisation")
    ends = np.array([series.max(), series.min()])
    most = float(np.abs(ends - peak).min())
    rounding = max(allowed.PEAK_SHARE * max(_scale(bound), largest(ends)), allowed.LIMIT_LEAST)
    checks = [Check(kind, most, rounding, unit)]
    if used > 1 + allowed.LIMIT_SHARE:
        checks.append(same(f"{kind} passed", over > 0, True))
    else:
        least = max(allowed.LIMIT_SHARE * _scale(bound), allowed.LIMIT_LEAST)
        checks.append(Check(f"{kind} kept", over, least, unit))
    return checks


def _scale(bound: tuple[float, float]) -> float:
    """The larger finite side of a limit, 0 without one."""
    return max((abs(side) for side in bound if math.isfinite(side)), default=0.0)
