"""A point that the envelope calls deliverable is held by the planning law in a trial.

The two know nothing of each other: the envelope plans quintics in joint space; the law plans in the paddle's space from
what it sees, and the follower makes joints of it, one control step after the other.
"""

from __future__ import annotations

from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest

from reach import load_cell
from reach.cell import Cell, Rally, Recovered, Starts, Trial
from reach.evidence.trials import Run
from reach.rally.court import Kit, Point
from reach.rally.points import judged, score
from reach.trial.bout import Ground, play
from reach.trial.starts import Start
from reach.verdict import DELIVERABLE

EXAMPLE = Path(__file__).parents[1] / "examples" / "wear_bench" / "cell.toml"
CENTRE = (0.6, 0.0, 0.52)
BOUNCES = 4
# Recovered at the second bounce, that is in one return, and kept there.
NEAR = Recovered(within_m=0.01, apex_error_m=0.02, by_bounce=2, then_for=BOUNCES - 1)


def points(count: int, seed: int) -> list[Point]:
    """Random points: apex 0.06 to 0.8 m, even in its logarithm, offsets up to 0.2 m, any bearing."""
    rng = np.random.default_rng(seed)
    apex = np.exp(rng.uniform(np.log(0.06), np.log(0.8), count))
    columns = apex, rng.uniform(0.0, 0.2, count), rng.uniform(0.0, 2 * np.pi, count)
    return [Point(*row) for row in zip(*(column.tolist() for column in columns), strict=True)]


def trial_of(cell: Cell, point: Point, posture: np.ndarray) -> Run:
    """The planning law on a point, from the posture that the envelope played it from."""
    trial = Trial(
        "planning",
        centre_m=CENTRE,
        apex_m=point.apex_m,
        bounces=BOUNCES,
        starts=Starts((point.offset_m,), (point.bearing_rad,)),
        recovered=NEAR,
    )
    ground = Ground.of(replace(cell, trial=trial), CENTRE, posture, 0)
    toward = np.array([np.cos(point.bearing_rad), np.sin(point.bearing_rad)])
    return play(ground, Start(point.offset_m * toward, np.zeros(2)), 0, keep_motion=False)


def disagreements(count: int, seed: int) -> tuple[int, list[tuple[float, str]]]:
    """How many of random points are deliverable, at most `count`; the share of the flight left as margin at those that
    the law does not hold, and how they end."""
    cell = replace(load_cell(EXAMPLE), rally=Rally(CENTRE, (0.3,)))
    kit = Kit(cell, 0)
    court, asked = kit.court(CENTRE), points(3 * count, seed)
    found = judged(court, asked, score(court, asked).best)
    rows = np.flatnonzero(found.verdict == DELIVERABLE)[:count]
    runs = [(row, trial_of(cell, asked[int(row)], found.q[row])) for row in rows]
    return len(rows), [
        f"{asked[int(row)]}: {run.outcome}, {run.text}" for row, run in runs if not run.recovered
    ]


def test_deliverable_points_are_held_by_the_planning_law() -> None:
    count, lost = disagreements(8, seed=0)
    assert count == 8
    assert not lost


@pytest.mark.campaign
@pytest.mark.parametrize("seed", range(1, 4))
def test_fifty_deliverable_points_are_held_by_the_planning_law(seed: int) -> None:
    """But for one with next to no time left: the law's way in the paddle's space asks a little more than the joints'.

    Of the 150 points one is lost, with a margin of 0.8 ms of a flight of 388 ms.
    """
    count, lost = disagreements(50, seed)
    assert count == 50
    assert len(lost) <= 1 and all(share < 0.005 for share, _ in lost)
