"""Both sides of every strike's speed over the postures found for it, and the motions that show the lower one."""

from __future__ import annotations

from dataclasses import dataclass
from enum import Enum

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.strike.motions import exact, straights, swing
from reach.strike.setting import Setting
from reach.strike.sides import NEAR_BOUND, Lower, Upper, along, begun, part_of, promise, searched, upper
from reach.strike.stroke import Demonstration
from reach.survey.family import Folds
from reach.survey.grid import Strikes
from reach.survey.inverse import Found
from reach.survey.selfmotion import leaders

WITHIN = 1.2  # times the quick speed: what is asked beyond it, no optimisation has ever made up (at most 1.1 measured)
CANDIDATES, PROMISING = 2, 4  # postures of a strike, by bound and by promise, that get both sides
SEARCHED = 2  # of those, the fastest by a first try: their joint velocity at the strike is searched


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
    at = found.owner
    hope = promise(setting, above, found.q, strikes.normal[at], strikes.direction[at])
    hopes = np.lexsort((-hope, at))
    picked[hopes[leaders(found, PROMISING)]] = True
    if not setting.still:  # where the paddle may turn, the best still one may yet gain speed sooner
        best = largest(above.still, found.owner, len(strikes))
        picked[best[best >= 0]] = True
    picked[np.unique(np.stack([found.owner, family]), axis=1, return_index=True)[1]] = True
    pick = np.flatnonzero(picked)
    at = found.owner[pick]
    below = _swings(
        setting, found.q[pick], strikes.normal[at], strikes.direction[at], part_of(above, pick), at
    )
    return Weighed(found, above, pick, below, family[pick])


def _swings(
    setting: Setting, q: Array, normal: Array, direction: Array, above: Upper, owner: NDArray[np.int64]
) -> Lower:
    """A quick motion of each posture q (p, n); the most is made of each strike's fastest ones, which decide it."""
    starts, speed = begun(setting, q, normal, direction, above)
    tangent, own = starts[0].copy(), above.own(setting.still)
    order = np.lexsort((-speed, owner))
    ranked = Found(q[order], owner[order])
    done = np.zeros(owner.max() + 1)  # fastest of each strike so far
    np.maximum.at(done, owner, np.where(speed >= NEAR_BOUND * own, speed, 0.0))
    for rank in range(SEARCHED):
        top = order[np.setdiff1d(leaders(ranked, rank + 1), leaders(ranked, rank))]
        top = top[NEAR_BOUND * own[top] > done[owner[top]]]
        tangent[top], found = searched(
            setting, q[top], normal[top], direction[top], part_of(above, top), starts[:, top]
        )
        done[owner[top]] = np.maximum(done[owner[top]], found)
    return along(setting, q, normal, direction, above, tangent)


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


def show(setting: Setting, strikes: Strikes, weighed: Weighed, effort: Effort) -> dict[int, Shown]:
    """The fastest whole motion found for each strike that a posture reaches: quick ones first, then what costs more."""
    need = strikes.required_m_s / np.einsum("mi,mi->m", strikes.direction, strikes.normal)
    below, found = weighed.below, {}
    quick = {int(k): weighed.own(int(k)) for k in np.unique(weighed.found.owner)}
    best: dict[int, Demonstration | None] = {}
    for k, own in quick.items():
        best[k] = swing(setting, strikes.normal[k], strikes.direction[k], below, int(own[0]))
    if best:
        _try_straight(setting, strikes, weighed, need, {k: int(own[0]) for k, own in quick.items()}, best)
    bounds = weighed.above.own(setting.still)
    for k, own in quick.items():
        top, reached = int(own[0]), best[k]
        bound = float(bounds[weighed.pick[own]].max())
        short = reached is None or reached.speed < need[k]
        may_decide = short and need[k] <= min(bound, WITHIN * float(below.speed[top]))
        if effort is Effort.FULL or (effort is Effort.DECIDE and may_decide):
            reached = _faster(reached, exact(setting, strikes.normal[k], strikes.direction[k], below, top))
        found[k] = Shown(reached, top, _by_family(setting, strikes, k, weighed, own, float(need[k]), reached))
    return found


def _try_straight(
    setting: Setting,
    strikes: Strikes,
    weighed: Weighed,
    need: Array,
    tops: dict[int, int],
    best: dict[int, Demonstration | None],
) -> None:
    """Put a straight stroke in the place of swings that fall short, where its timing is faster."""
    short = [k for k, one in best.items() if one is None or one.speed < need[k]]
    short = [k for k in short if weighed.below.speed[tops[k]] > 0]
    if not short:
        return
    index = np.array([tops[k] for k in short])
    ceiling = weighed.above.own(setting.still)[weighed.pick[index]]
    lines = straights(setting, strikes.direction[short], weighed.below, index, ceiling)
    for j, k in enumerate(short):
        one = best[k]
        if lines.timing.speed[j] > (0.0 if one is None else one.speed):
            best[k] = _faster(one, lines.motion(setting, strikes.normal[k], strikes.direction[k], j))


def _by_family(
    setting: Setting,
    strikes: Strikes,
    k: int,
    weighed: Weighed,
    own: NDArray[np.int64],
    need: float,
    best: Demonstration | None,
) -> dict[int, float]:
    """Speeds by family number: the best motion's, and of other families those that by quick timing deliver."""
    families = {} if best is None else {int(weighed.family[own[0]]): best.speed}
    for i in own.tolist():
        number = int(weighed.family[i])
        if number not in families and weighed.below.speed[i] >= need:
            other = swing(setting, strikes.normal[k], strikes.direction[k], weighed.below, i)
            if other is not None:
                families[number] = other.speed
    return families


def _faster(best: Demonstration | None, other: Demonstration | None) -> Demonstration | None:
    if best is None or (other is not None and other.speed > best.speed):
        return other
    return best


def largest(values: Array, owner: NDArray[np.int64], count: int) -> NDArray[np.int64]:
    """Index (count,) of each owner's largest value, -1 where it has none; the first of equals."""
    out = np.full(count, -1, dtype=np.int64)
    order = np.lexsort((-values, owner))
    owners, first = np.unique(owner[order], return_index=True)
    out[owners] = order[first]
    return out
