"""The best whole motion through a strike from one posture: quick swing, straight stroke, full optimisation."""

from __future__ import annotations

import numpy as np

from reach.cell import Array
from reach.evidence.points import STRAIGHT, SWING
from reach.strike.optimise import SideProblem, optimised
from reach.strike.path import Load, Paths, load_along
from reach.strike.profile import Profile
from reach.strike.setting import Setting
from reach.strike.sides import Lower, profile_of, timed
from reach.strike.straight import straight_strokes
from reach.strike.stroke import Demonstration, demonstrate

PIECES = (20, 40)  # of a side, coarse and then fine; the finer one moves the answer by under 1 %


def swing(setting: Setting, normal: Array, direction: Array, below: Lower, i: int) -> Demonstration | None:
    """The quick swing of posture i as a motion."""
    if below.speed[i] <= 0:
        return None
    profile = below.profile(i, setting.accept.strike_window_s)
    return demonstrate(setting, normal, direction, SWING, below.paths.take([i]), profile)


def straight(
    setting: Setting, normal: Array, direction: Array, below: Lower, i: int, ceiling: float
) -> Demonstration | None:
    """The quick straight stroke through posture i, attitude held, as a motion."""
    paths, load = _straight(setting, direction, below, i)
    timing = timed(setting, paths, load, np.array([ceiling]))
    if timing.speed[0] <= 0:
        return None
    profile = profile_of(timing, 0, setting.accept.strike_window_s)
    return demonstrate(setting, normal, direction, STRAIGHT, paths, profile)


def exact(
    setting: Setting, normal: Array, direction: Array, below: Lower, i: int, pieces: tuple[int, ...] = PIECES
) -> Demonstration | None:
    """The fully optimised swing of posture i as a motion."""
    if below.speed[i] <= 0:
        return None
    paths = below.paths.take([i])
    profile = optimised_profile(
        setting, below.load.take([i]), paths, below.profile(i, setting.accept.strike_window_s), pieces
    )
    return demonstrate(setting, normal, direction, SWING, paths, profile)


def optimised_profile(
    setting: Setting, load: Load, paths: Paths, start: Profile, pieces: tuple[int, ...] = PIECES
) -> Profile:
    """The fastest profile of one stroke by sequential linear programs: each side by itself, then at one speed."""
    sides = []
    for k, side in enumerate((start.before, start.after)):
        problem = SideProblem(load, paths.distance[0, k], k, setting.accept.strike_window_s)
        for count in pieces:
            side = optimised(problem, side, count)
        sides.append(side)
    speed = min(side.end[1] for side in sides)
    return Profile(*(side.slowed(speed / side.end[1]) for side in sides))


def _straight(setting: Setting, direction: Array, below: Lower, i: int) -> tuple[Paths, Load]:
    q, tangent = below.paths.q[i : i + 1, 0, 0], below.tangent[i : i + 1]
    paths = straight_strokes(
        setting.chain,
        setting.ends,
        q,
        tangent,
        direction[None],
        setting.spin_free,
        setting.length_m,
        setting.run_up_m,
    )
    return paths, load_along(setting.arm, setting.limits, paths, bends=True)
