"""Both sides of every strike's speed over the postures found for it, and the motions that show the lower one."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from enum import Enum

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.motions import exact, straight, swing
from reach.strike.setting import Setting
from reach.strike.sides import Lower, Upper, lower, part_of, upper
from reach.strike.stroke import Demonstration
from reach.survey.family import Folds
from reach.survey.grid import Strikes
from reach.survey.inverse import Found
from reach.survey.selfmotion import leaders

WITHIN = 1.2  # times the quick speed: what is asked beyond it, no optimisation has ever made up (at most 1.1 measured)
CANDIDATES = 3  # postures of a strike that get both sides, beside the best of each family


@dataclass(frozen=True, eq=False)
class Weighed:
    """Postures of m strikes: all with their upper bounds, those picked with a quick motion too.

    Attributes
    ----------
    found, above : the postures, the highest bound of each strike first, and their bounds
    pick : (p,) indices of the postures that were timed
    below : Lower of those, in that order
    family : (p,) of those
    """

    found: Found
    above: Upper
    pick: NDArray[np.int64]
    below: Lower
    family: NDArray[np.int64]

    def own(self, strike: int) -> NDArray[np.int64]:
        """Which of the picked postures are a strike's, the fastest first."""
        mine = np.flatnonzero(self.found.owner[self.pick] == strike)
        return np.asarray(mine[np.argsort(-self.below.speed[mine], kind="stable")])


def weigh(setting: Setting, folds: Folds, strikes: Strikes, found: Found) -> Weighed:
    """Both sides for the postures found for strikes."""
    above = upper(setting, found.q, strikes.direction[found.owner])
    order = np.lexsort((-above.own(setting.still), found.owner))
    found, above = Found(found.q[order], found.owner[order]), part_of(above, order)
    family = folds.numbers(found.q)
    picked = np.zeros(len(order), dtype=bool)
    picked[leaders(found, CANDIDATES)] = True
    picked[np.unique(np.stack([found.owner, family]), axis=1, return_index=True)[1]] = True
    pick = np.flatnonzero(picked)
    at = found.owner[pick]
    below = lower(setting, found.q[pick], strikes.normal[at], strikes.direction[at], part_of(above, pick))
    return Weighed(found, above, pick, below, family[pick])


@dataclass(frozen=True, eq=False)
class Shown:
    """What motions show of one strike.

    Attributes
    ----------
    best : the fastest whole motion, None where there is none
    index : of its posture among the picked ones; of the fastest by quick timing where there is no motion
    families : speed along the direction by family number
    """

    best: Demonstration | None
    index: int
    families: dict[int, float]


class Effort(Enum):
    """How much is spent on a strike's motion: quick ones, the optimisation where it may decide, or in any case."""

    QUICK = 0
    DECIDE = 1
    FULL = 2


def show(setting: Setting, strikes: Strikes, strike: int, weighed: Weighed, effort: Effort) -> Shown:
    """The fastest whole motion found for a strike: quick swing first, then what costs more."""
    normal, direction = strikes.normal[strike], strikes.direction[strike]
    need = float(strikes.required_m_s[strike] / (direction @ normal))
    own, below = weighed.own(strike), weighed.below
    quick = [i for i in own.tolist() if below.speed[i] > 0]
    if not quick:
        return Shown(None, int(own[0]), {})
    top = quick[0]
    bound = float(weighed.above.own(setting.still)[weighed.pick[own]].max())
    best = swing(setting, normal, direction, below, top)
    if setting.still and (best is None or best.speed < need):
        ceiling = float(weighed.above.still[weighed.pick[top]])
        best = _faster(best, straight(setting, normal, direction, below, top, ceiling))
    short = best is None or best.speed < need
    may_decide = short and need <= min(bound, WITHIN * float(below.speed[top]))
    if effort is Effort.FULL or (effort is Effort.DECIDE and may_decide):
        best = _faster(best, exact(setting, normal, direction, below, top))
    families = {} if best is None else {int(weighed.family[top]): best.speed}
    for i in _first_of_others(weighed, quick):
        # Of the other families a motion is made only where it says that they deliver.
        if below.speed[i] >= need:
            other = swing(setting, normal, direction, below, i)
            if other is not None:
                families[int(weighed.family[i])] = other.speed
    return Shown(best, top, families)


def _faster(best: Demonstration | None, other: Demonstration | None) -> Demonstration | None:
    if best is None or (other is not None and other.speed > best.speed):
        return other
    return best


def _first_of_others(weighed: Weighed, quick: list[int]) -> Iterator[int]:
    """The fastest posture of each family but the first one's."""
    seen = {int(weighed.family[quick[0]])}
    for i in quick:
        number = int(weighed.family[i])
        if number not in seen:
            seen.add(number)
            yield i


def largest(values: Array, owner: NDArray[np.int64], count: int) -> NDArray[np.int64]:
    """Index (count,) of each owner's largest value, -1 where it has none; the first of equals."""
    out = np.full(count, -1, dtype=np.int64)
    order = np.lexsort((-values, owner))
    owners, first = np.unique(owner[order], return_index=True)
    out[owners] = order[first]
    return out
