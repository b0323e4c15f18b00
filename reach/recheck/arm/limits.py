"""Stated limits, what a motion makes of each, and how far it passes them."""

from __future__ import annotations

import math
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any, Protocol

import numpy as np

from reach.evidence.items import Check, Item
from reach.recheck import allowed
from reach.recheck.arm.chain import Array, Chain, sensible
from reach.recheck.arm.engine import Engine
from reach.recheck.arm.trace import FINE, Trace
from reach.recheck.stored import CELL, BadFolder

KINDS = ("position", "velocity", "acceleration", "jerk", "torque", "torque rate", "duty")
TORQUE_KINDS = ("torque", "torque rate", "duty")
TOOL = "tool speed"
FIELDS = {**{kind: kind for kind in KINDS}, "torque rate": "torque_rate", "duty": "torque_continuous"}
UNITS = {  # of a turning and of a sliding joint
    "position": ("rad", "m"),
    "velocity": ("rad/s", "m/s"),
    "acceleration": ("rad/s²", "m/s²"),
    "jerk": ("rad/s³", "m/s³"),
    "torque": ("N·m", "N"),
    "torque rate": ("N·m/s", "N/s"),
    "duty": ("N·m", "N"),
}


@dataclass(frozen=True, eq=False)
class Limits:
    """Stated limits of n joints by kind.

    Attributes
    ----------
    names : the joints'
    lo, hi : (n,) a kind; nan where unknown, infinite where known to be unlimited
    units : one a joint
    """

    names: tuple[str, ...]
    lo: dict[str, Array]
    hi: dict[str, Array]
    units: dict[str, tuple[str, ...]]

    @staticmethod
    def of(joints: Sequence[Mapping[str, Any]]) -> Limits:
        """The limits of joints as cell.json has them.

        Raises
        ------
        BadFolder
            Where one is no pair of numbers.
        """
        sliding = [joint.get("kind") == "prismatic" for joint in joints]
        lo, hi = ({kind: np.full(len(joints), np.nan) for kind in KINDS} for _ in range(2))
        for i, joint in enumerate(joints):
            stated = joint.get("limits")
            if not isinstance(stated, Mapping):
                raise BadFolder(f"arm.joints.{i}.limits", "is missing; run the command again", CELL)
            for kind in KINDS:
                where = f"arm.joints.{i}.limits.{FIELDS[kind]}"
                if FIELDS[kind] not in stated:
                    raise BadFolder(where, "is missing; run the command again", CELL)
                lo[kind][i], hi[kind][i] = _sides(stated[FIELDS[kind]], where)
        units = {kind: tuple(UNITS[kind][int(slides)] for slides in sliding) for kind in KINDS}
        return Limits(tuple(str(joint.get("name", "")) for joint in joints), lo, hi, units)

    def known(self, kind: str) -> bool:
        """Whether any joint has a stated limit of a kind."""
        return bool((~np.isnan(self.hi[kind])).any())

    def leeway(self, kind: str) -> Array:
        """What rounding may leave (n,) of each limit of a kind, in its unit."""
        sides = np.abs([self.lo[kind], self.hi[kind]])
        size = np.where(np.isfinite(sides), sides, 0.0).max(axis=0)
        return np.asarray(np.maximum(allowed.LIMIT_SHARE * size, allowed.LIMIT_LEAST))


class Standing(Protocol):
    """What a motion is measured by: a Ground."""

    @property
    def limits(self) -> Limits:
        """Stated limits."""

    @property
    def chain(self) -> Chain:
        """Kinematics."""

    @property
    def engine(self) -> Engine | None:
        """Dynamics."""

    @property
    def why_no_engine(self) -> str:
        """A sentence where there is none."""

    @property
    def tool_m_s(self) -> float:
        """Cap on the strike point's speed, infinite without one."""


def rates(values: Array, before: Array, period_s: float) -> Array:
    """Change (f, n) per second of values (f, n) over one control period, the first one against `before` (n,)."""
    earlier = np.vstack([np.broadcast_to(before, (FINE, values.shape[1])), values])[: len(values)]
    with np.errstate(over="ignore", invalid="ignore"):  # numbers that mean nothing show as nan
        return np.asarray((values - earlier) / period_s)


def values(trace: Trace, torque: Array | None, standing: Array | None) -> dict[str, Array]:
    """What a motion makes of each limit kind, (f, n), by kind; `duty` is (1, n).

    Jerk and torque rate are changes over one control period at every fine sample. Before the first row acceleration is
    0 and torque that of the posture held still.

    Parameters
    ----------
    torque : (f, n) N·m; without it the kinds of torque are left out
    standing : (n,) N·m
    """
    found = {
        "position": trace.q,
        "velocity": trace.v,
        "acceleration": trace.a,
        "jerk": rates(trace.a, np.zeros(trace.a.shape[1]), trace.period_s),
    }
    if torque is not None:
        start = np.zeros(torque.shape[1]) if standing is None else standing
        found["torque"] = torque
        found["torque rate"] = rates(torque, start, trace.period_s)
        with np.errstate(over="ignore", invalid="ignore"):
            found["duty"] = np.sqrt(np.mean(torque * torque, axis=0, keepdims=True))
    return found


def overshoot(limits: Limits, found: Mapping[str, Array]) -> dict[str, Array]:
    """How far (n,) each joint passes its stated limit at most, by kind, in its unit; 0 where kept or unknown.

    A measure that is nan passes it by nan.
    """
    out = {}
    for kind, measured in found.items():
        lo, hi = limits.lo[kind], limits.hi[kind]
        above = np.maximum(measured.max(axis=0) - hi, lo - measured.min(axis=0))
        out[kind] = np.where(np.isnan(hi), 0.0, np.maximum(above, 0.0))
    return out


def kept(limits: Limits, kind: str, past: Array) -> Check:
    """The comparison of a kind, by the joint that passes its limit most."""
    leeway = limits.leeway(kind)
    with np.errstate(over="ignore"):
        shares = np.where(np.isnan(past), np.inf, past / leeway)
    worst = int(np.argmax(shares))
    told = limits.names[worst] if past[worst] != 0 else ""
    return Check(kind, float(past[worst]), float(leeway[worst]), limits.units[kind][worst], told)


def motion_items(ground: Standing, where: str, trace: Trace, duty: bool = True) -> list[Item]:
    """Whether a motion keeps its stated limits: an item "limits" and an item "torque".

    An item is left out where no limit of its kinds is stated.
    """
    limits, items = ground.limits, []
    past = overshoot(limits, values(trace, None, None))
    checks = [kept(limits, kind, past[kind]) for kind in past if limits.known(kind)]
    if math.isfinite(ground.tool_m_s):
        with np.errstate(over="ignore", invalid="ignore"):
            speed = np.linalg.norm(ground.chain.seen(trace.q, trace.v).linear, axis=1).max()
        cap = ground.tool_m_s
        checks.append(Check(TOOL, max(float(speed) - cap, 0.0), allowed.LIMIT_SHARE * cap, "m/s"))
    if checks:
        items.append(Item("limits", where, tuple(checks)))
    kinds = [kind for kind in TORQUE_KINDS if limits.known(kind) and (duty or kind != "duty")]
    if kinds and ground.engine is None:
        items.append(Item("torque", where, (), ground.why_no_engine))
    elif kinds:
        torque, standing = torques(ground, trace)
        past = overshoot(limits, values(trace, torque, standing))
        items.append(Item("torque", where, tuple(kept(limits, kind, past[kind]) for kind in kinds)))
    return items


def torques(ground: Standing, trace: Trace) -> tuple[Array, Array]:
    """Torque (f, n) of a motion and that (n,) before it, without acceleration, in N·m, by the engine.

    Before it the arm stands in the first posture, or passes it at the first row's velocity where it starts with one.
    """
    assert ground.engine is not None
    standing = ground.engine.torque(trace.q[:1], trace.v[:1], 0.0 * trace.v[:1])[0]
    return ground.engine.torque(trace.q, trace.v, trace.a), standing


def _sides(stated: Any, where: str) -> tuple[float, float]:
    """Both sides of a limit: nan where it is unknown, infinite where a side is null."""
    if stated is None:
        return math.nan, math.nan
    sides = []
    for side, unlimited in (("lo", -math.inf), ("hi", math.inf)):
        if not isinstance(stated, Mapping) or side not in stated:
            raise BadFolder(where, f"has no {side}", CELL)
        value = stated[side]
        sides.append(unlimited if value is None else sensible(value, f"{where}.{side}"))
    if sides[0] > sides[1]:
        raise BadFolder(where, "has its lower side above its upper one", CELL)
    return sides[0], sides[1]
