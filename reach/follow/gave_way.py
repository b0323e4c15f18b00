"""What elastic steps could not keep."""

from __future__ import annotations

from collections.abc import Callable, Mapping

import numpy as np

from reach.follow.rolled import GaveWay
from reach.follow.rows import Lanes
from reach.follow.step import Step
from reach.limits.base import SIGNS, Now

ROUNDING = 1e-6  # rad/s, m/s or shares of torque: smaller slack gives nothing way


def gave_way(joint: Lanes, steps: Mapping[int, Step], then: Callable[[int], Now]) -> list[GaveWay]:
    """What gave way in the elastic ones among steps by their number.

    Parameters
    ----------
    joint : the joints' own bounds
    then : what a step knew, by its number
    """
    found = []
    for k, step in steps.items():
        if step.slack is None:
            continue
        n = len(step.change)
        joint.tightest(then(k))
        over = (SIGNS * step.change - joint.values).max(axis=1)
        found += [
            GaveWay(k, joint.kinds[kind].name, lane, float(over[kind, lane]))
            for kind, lane in np.argwhere(over > ROUNDING).tolist()
        ]
        kinds = ["tool speed"] * step.tool
        kinds += ["torque"] * (len(step.slack) - n - len(kinds))
        amounts = zip(kinds, step.slack[n:].tolist(), strict=True)
        found += [GaveWay(k, kind, -1, amount) for kind, amount in amounts if amount > ROUNDING]
    return found
