"""What a second opinion says of a run, item by item, as frozen data: the report reads nothing else."""

from __future__ import annotations

from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Literal

Status = Literal["agree", "differ", "not checkable"]
AGREE: Status = "agree"
DIFFER: Status = "differ"
NOT_CHECKABLE: Status = "not checkable"
STATUSES = (AGREE, DIFFER, NOT_CHECKABLE)


@dataclass(frozen=True)
class Check:
    """One comparison.

    Attributes
    ----------
    name : what was compared
    difference : its size in `unit`, 0 where equal; of a claim "at most" how far it is passed; nan differs
    allowed : what rounding may leave
    unit : of both; "" for words, where 1 is a difference
    text : both sides where they are words
    """

    name: str
    difference: float
    allowed: float
    unit: str
    text: str = ""

    @property
    def agrees(self) -> bool:
        """Whether both sides are the same but for rounding."""
        return self.difference <= self.allowed

    @property
    def share(self) -> float:
        """The difference in shares of what is allowed; infinite where nothing is."""
        if self.allowed > 0:
            return self.difference / self.allowed
        return 0.0 if self.difference == 0 else float("inf")


@dataclass(frozen=True)
class Item:
    """One thing that a run claims, and the comparisons that decide whether it holds.

    Attributes
    ----------
    kind : what is claimed ("as stated", "motion", "limits", "torque", "bound", …)
    where : of what ("strike 12", "j3"), "" for the whole
    checks : made
    left_out : why it could not be checked, or not all of it; "" where it was
    """

    kind: str
    where: str
    checks: tuple[Check, ...] = ()
    left_out: str = ""

    @property
    def status(self) -> Status:
        """A difference counts first, then what was left out."""
        if any(not check.agrees for check in self.checks):
            return DIFFER
        return NOT_CHECKABLE if self.left_out or not self.checks else AGREE

    @property
    def worst(self) -> Check | None:
        """The comparison that comes nearest to a difference, or is the largest one."""
        if not self.checks:
            return None
        return max(self.checks, key=lambda check: (not check.agrees, check.share))


def same(name: str, ours: object, stored: object) -> Check:
    """Two words or values that must be equal."""
    text = "" if ours == stored else f"{ours} here, {stored} stored"
    return Check(name, 0.0 if ours == stored else 1.0, 0.0, "", text)


def counts(items: Iterable[Item]) -> dict[Status, int]:
    """How many items have each status."""
    found: dict[Status, int] = dict.fromkeys(STATUSES, 0)
    for item in items:
        found[item.status] += 1
    return found


def decided(items: Sequence[Item]) -> Status:
    """What all items together say: a difference first, then what could not be checked."""
    found = counts(items)
    if found[DIFFER]:
        return DIFFER
    return NOT_CHECKABLE if found[NOT_CHECKABLE] or not items else AGREE
