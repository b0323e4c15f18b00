"""What the limits would have to be, laid out in columns: what every row shares is said once."""

from __future__ import annotations

from reach.evidence.record import Need, Use
from reach.report.alike import once
from reach.report.wording import number, plain
from reach.result import FollowResult

HEADER = ("limit", "joint", "now", "necessary", "sufficient", "unit")


def split(result: FollowResult) -> tuple[list[Need], list[Need]]:
    """Return the needs that were searched for, and those of unknown limits that nobody requires."""
    unknown = set(result.evidence.unknown)
    spare = {limit for limit, _ in unknown} - set(result.cell.accept.require)
    beyond = [need for need in result.needs if need.limit in spare and (need.limit, need.joint) in unknown]
    return [need for need in result.needs if need not in beyond], beyond


def rows(result: FollowResult, needs: list[Need]) -> list[tuple[str, ...]]:
    """Return the cells under HEADER, a row each need."""
    uses = {(use.limit, use.joint): use for use in result.evidence.uses}
    return [
        (
            need.limit,
            "tool" if need.joint is None else plain(need.joint),
            _now(uses.get((need.limit, need.joint))),
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


def _now(use: Use | None) -> str:
    if use is None or use.lo is None or use.hi is None:
        return "unknown"
    return number(max(abs(use.lo), abs(use.hi)))
