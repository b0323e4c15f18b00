"""What the items of a second opinion come to: by kind, by comparison, the differing ones, what was left out."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import NamedTuple

from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Check, Item, counts
from reach.report.alike import alike

NOTHING_COMPARED = "nothing was compared"  # of an item with neither a comparison nor a reason


class Found(NamedTuple):
    """A comparison and the item it was made for."""

    item: Item
    check: Check


@dataclass(frozen=True)
class Kind:
    """How the items of one kind came out; `worst` is None where nothing was compared."""

    kind: str
    items: int
    agree: int
    differ: int
    not_checkable: int
    worst: Found | None


class Left(NamedTuple):
    """What was left out: the kind, how many items of it, and why."""

    kind: str
    items: int
    why: str


def kinds(items: Iterable[Item]) -> list[Kind]:
    """Return each kind in the order in which it came."""
    found = []
    for kind, mine in _by_kind(items).items():
        count = counts(mine)
        found.append(
            Kind(kind, len(mine), count[AGREE], count[DIFFER], count[NOT_CHECKABLE], worst(made(mine)))
        )
    return found


def made(items: Iterable[Item]) -> list[Found]:
    """Return every comparison with its item."""
    return [Found(item, check) for item in items for check in item.checks]


def worst(found: Iterable[Found]) -> Found | None:
    """Return the comparison that is the largest difference, or comes nearest to one; the first of equals."""
    return max(found, key=lambda one: rank(one.check), default=None)


def rank(check: Check) -> tuple[bool, float]:
    """Return what comparisons are ordered by: those that differ above the others, then by share of what is allowed."""
    share = check.share
    if math.isnan(share):
        share = 0.0 if check.agrees else math.inf
    return not check.agrees, share


def per_check(items: Iterable[Item]) -> list[Found]:
    """Return the worst of each comparison of each kind, in the order in which they came."""
    groups: dict[tuple[str, str], Found] = {}
    for one in made(items):
        key = (one.item.kind, one.check.name)
        held = groups.get(key)
        if held is None or rank(one.check) > rank(held.check):
            groups[key] = one
    order = {kind: place for place, kind in enumerate(dict.fromkeys(kind for kind, _ in groups))}
    return sorted(groups.values(), key=lambda one: order[one.item.kind])


def first_of(found: Sequence[Found], most: int) -> list[Found]:
    """Return the worst `most`, in the order in which they came."""
    chosen = sorted(range(len(found)), key=lambda place: rank(found[place].check), reverse=True)[:most]
    return [found[place] for place in sorted(chosen)]


def differing(items: Iterable[Item]) -> list[Item]:
    """Return the items that differ: the worst of each kind, then the second of each, and so on."""
    groups = _by_kind(item for item in items if item.status == DIFFER)
    turns = []
    for place, mine in enumerate(groups.values()):
        mine.sort(key=lambda item: rank(off(item)[0]), reverse=True)
        turns += [(turn, place, item) for turn, item in enumerate(mine)]
    return [item for _, _, item in sorted(turns, key=lambda turn: turn[:2])]


def off(item: Item) -> list[Check]:
    """Return the comparisons that differ, the largest first."""
    return sorted((check for check in item.checks if not check.agrees), key=rank, reverse=True)


def left_out(items: Iterable[Item]) -> list[Left]:
    """Return what was not checked and why, reasons that are alike told once."""
    groups = _by_kind(item for item in items if item.left_out or not item.checks)
    return [
        Left(kind, count, why)
        for kind, mine in groups.items()
        for why, count in alike(item.left_out or NOTHING_COMPARED for item in mine)
    ]


def _by_kind(items: Iterable[Item]) -> dict[str, list[Item]]:
    groups: dict[str, list[Item]] = {}
    for item in items:
        groups.setdefault(item.kind, []).append(item)
    return groups
