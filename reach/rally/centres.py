"""Where else the centre could stand: a grid of centres, each with how much of the envelope it has."""

from __future__ import annotations

from collections import Counter

import numpy as np

from reach.cell import Rally, Vec3
from reach.evidence.rallies import Centre
from reach.rally.court import Kit, Point, points_of
from reach.rally.player import REACH
from reach.rally.points import tightest


def grid(rally: Rally) -> list[Vec3]:
    """The grid of centres, x slowest; a hair over the last one still counts."""
    if rally.centres_box_m is None:
        return []
    axes = []
    for low, high in zip(*rally.centres_box_m, strict=True):
        count = int((high - low) / rally.centres_spacing_m + 1e-9) + 1
        axes.append(low + rally.centres_spacing_m * np.arange(count))
    points = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    return [(x, y, z) for x, y, z in points.tolist()]


def weighed(kit: Kit, centre: Vec3) -> Centre:
    """How the points do around one centre, by the nodes: from the stance that holds most of the steady bounces."""
    court, points = kit.court(centre), points_of(kit.rally)
    if not len(court.stances):
        return Centre(centre, 0, 0, len(points), (), REACH, "")
    steady = [Point(apex, 0.0, 0.0) for apex in kit.rally.apexes_m]
    latency = kit.rally.latency_s
    held = [court.delivered(court.exchanges(steady, k), k, latency)[0] for k in range(len(court.stances))]
    stance = int(np.argmax([good.sum() for good in held]))
    made = court.exchanges(points, stance)
    good, _ = court.delivered(made, stance, latency)
    limits: Counter[tuple[str, str]] = Counter()
    short = [one for one, fine in zip(made, good, strict=True) if one is not None and not fine]
    if short:
        played = court.players[stance].play(short, latency)
        limits.update(tightest(court.players[stance], played, k) for k in range(len(short)))
    (limit, joint), _ = limits.most_common(1)[0] if limits else (("", ""), 0)
    apexes = tuple(apex for apex, fine in zip(kit.rally.apexes_m, held[stance], strict=True) if fine)
    open_points = int((~good).sum())
    return Centre(centre, int(good.sum()), open_points, len(points), apexes, limit, joint)
