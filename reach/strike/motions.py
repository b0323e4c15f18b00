"""The best whole motion through a strike from one posture: quick swing, straight stroke, full optimisation."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array
from reach.evidence.points import STRAIGHT, SWING
from reach.strike.optimise import SideProblem, optimised
from reach.strike.path import Load, Paths, load_along
from reach.strike.profile import Profile
from reach.strike.setting import Setting
from reach.strike.sides import Lower, profile_of, timed
from reach.strike.straight import straight_strokes
from reach.strike.stroke import Demonstration, demonstrate
from reach.strike.timing import Timing

KEPT_RUN_UP = 0.999  # of the run-up for a straight stroke: the joint path leaves the line by a little
PIECES = (20, 40)  # of a side, coarse and then fine; the finer one moves the answer by under 1 %


def swing(setting: Setting, normal: Array, direction: Array, below: Lower, i: int) -> Demonstration | None:
    """The quick swing of posture i as a motion."""
    if below.speed[i] <= 0:
        return None
    profile = below.profile(i, setting.hold_s)
    return demonstrate(setting, normal, direction, SWING, below.paths.take([i]), profile)


@dataclass(frozen=True, eq=False)
class Straights:
    """Straight strokes, attitude held, with their quick timing."""

    paths: Paths
    timing: Timing

    def motion(self, setting: Setting, normal: Array, direction: Array, i: int) -> Demonstration | None:
        """One of the strokes as a motion."""
        profile = profile_of(self.timing, i, setting.hold_s)
        return demonstrate(setting, normal, direction, STRAIGHT, self.paths.take([i]), profile)


def straights(
    setting: Setting, direction: Array, below: Lower, index: NDArray[np.int64], ceiling: Array
) -> Straights:
    """Straight strokes along directions (c, 3) through some postures `index` (c,), no faster than ceilings (c,)."""
    paths = straight_strokes(
        setting.chain,
        setting.ends,
        below.paths.q[index, 0, 0],
        below.tangent[index],
        direction,
        setting.spin_free,
        setting.length_m,
        None if setting.run_up_m is None else KEPT_RUN_UP * setting.run_up_m,
    )
    load = load_along(setting.arm, setting.limits, paths, bends=True)
    return Straights(paths, timed(setting, paths, load, ceiling))


def exact(
    setting: Setting, normal: Array, direction: Array, below: Lower, i: int, pieces: tuple[int, ...] = PIECES
) -> Demonstration | None:
    """The fully optimised swing of posture i as a motion."""
    if below.speed[i] <= 0:
        return None
    paths = below.paths.take([i])
    profile = optimised_profile(
        setting, below.load.take([i]), paths, below.profile(i, setting.hold_s), pieces
    )
    return demonstrate(setting, normal, direction, SWING, paths, profile)


def optimised_profile(
    setting: Setting, load: Load, paths: Paths, start: Profile, pieces: tuple[int, ...] = PIECES
) -> Profile:
    """The fastest profile of one stroke by sequential linear programs: each side by itself, then at one speed."""
    sides = []
    for k, side in enumerate((start.before, start.after)):
        problem = SideProblem(load, paths.distance[0, k], k, setting.hold_s)
        for count in pieces:
            side = optimised(problem, side, count)
        sides.append(side)
    speed = min(side.end[1] for side in sides)
    return Profile(*(side.slowed(speed / side.end[1]) for side in sides))
