"""What the limits would have to be, laid out in columns: what every row shares is said once."""

from __future__ import annotations

from collections.abc import Iterable

from reach.cell import Bound, Cell
from reach.evidence.record import Need
from reach.report.alike import once
from reach.report.wording import number, owner
from reach.result import Result

FIELDS = {"torque rate": "torque_rate", "duty": "torque_continuous"}  # of a joint's limits, by their kinds
HEADER = ("limit", "joint", "now", "necessary", "sufficient", "unit")


def split(result: Result, unknown: Iterable[tuple[str, str | None]]) -> tuple[list[Need], list[Need]]:
    """Return the needs that were searched for, and those of unknown (limit, joint) pairs that nobody requires."""
    pairs = set(unknown)
    spare = {limit for limit, _ in pairs} - set(result.cell.accept.require)
    beyond = [need for need in result.needs if need.limit in spare and (need.limit, need.joint) in pairs]
    return [need for need in result.needs if need not in beyond], beyond


def rows(cell: Cell, needs: list[Need]) -> list[tuple[str, ...]]:
    """Return the cells under HEADER, a row each need."""
    return [
        (
            need.limit,
            owner(need.joint),
            _now(cell, need),
            number(need.necessary),
            number(need.sufficient),
            need.unit,
        )
        for need in needs
    ]


def meaning(needs: list[Need]) -> str:
    """Return what the two columns of values say."""
    if len(needs) == 1:
        return "necessary: with less it fails; sufficient: with this it passes; –: not found"
    return (
        "necessary: with less it fails, even with the others here granted (unknown ones unlimited, others at "
        "their sufficient value); sufficient: with this and the others here it passes; –: not found"
    )


def remarks(needs: list[Need]) -> list[str]:
    """Return the needs in words, once for those that differ in their names and numbers alone."""
    names = [name for need in needs for name in (need.joint, need.limit, need.unit) if name]
    return once((need.text for need in needs if need.text), names)


def not_searched(needs: list[Need]) -> str:
    """Return a line on the needs that nobody requires."""
    kinds = ", ".join(dict.fromkeys(need.limit for need in needs))
    return f"{kinds}: not required, so not searched; peaks in verdict.json" if kinds else ""


def _now(cell: Cell, need: Need) -> str:
    """The stated limit that a need is of, the larger side."""
    if need.joint is None:
        return (
            number(cell.tool.speed_m_s) if cell.tool is not None and need.limit == "tool speed" else "unknown"
        )
    limits = {joint.name: joint.limits for joint in cell.arm.joints}.get(need.joint)
    bound = getattr(limits, FIELDS.get(need.limit, need.limit), None)
    return number(max(abs(bound.lo), abs(bound.hi))) if isinstance(bound, Bound) else "unknown"
