"""The numbers of a survey that compare two cells side by side, from its points alone."""

from __future__ import annotations

import math
from collections import Counter
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Survey
from reach.evidence.points import Points
from reach.result import SurveyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

SHARES = (1.0, 0.95, 0.9, 0.5)  # of the strikes, whose speeds are told
REACH = "reach"  # the limit of a strike that no posture was found for
PROVED = "proved"
LENGTH_UNITS = ("", "m", "m²", "m³")

Mask = NDArray[np.bool_]


@dataclass(frozen=True)
class Count:
    """How often a limit of a joint in a phase is what stops a strike from being faster."""

    limit: str
    joint: str
    phase: str
    not_deliverable: int
    undecided: int
    all: int


@dataclass(frozen=True)
class Family:
    """What one posture family delivers without the others: strikes, their share, and the median speed of those it
    has a motion for (m/s); `best` counts the strikes that it does fastest."""

    name: str
    delivered: int
    share: float
    best: int
    median_m_s: float


@dataclass(frozen=True)
class Region:
    """The part of the box delivered, for every face or for one at least, in m to the power of `dimensions`.

    Each point stands for the part of the box that is nearest to it.
    """

    dimensions: int
    whole: float
    every_face: float
    some_face: float

    @property
    def unit(self) -> str:
        """Unit of the three sizes."""
        return LENGTH_UNITS[self.dimensions]


@dataclass(frozen=True)
class Hit:
    """What one hit does to a joint at most: velocity jump with joints free to give, impulse with joints locked.

    In rad/s and N·m·s; m/s and N·s where the joint slides. nan where no ball is given.
    """

    joint: str
    sliding: bool
    velocity_jump: float
    impulse: float


def way_of_striking(survey: Survey | None) -> str:
    """Return which of the two upper bounds holds for the cell: still or free."""
    return "still" if survey is None else survey.rotation


def bound_in_force(points: Points, survey: Survey | None) -> Array:
    """Return the upper bound (m,) that the cell asks for, m/s: the paddle still, or free to turn at the strike.

    Zero for unreachable strikes; infinite where none was found.
    """
    bound = points.bound_free_m_s if way_of_striking(survey) == "free" else points.bound_still_m_s
    return np.where(unreachable(points), 0.0, np.where(np.isnan(bound), np.inf, bound))


def demonstrated(points: Points) -> Array:
    """Return the demonstrated speed (m,) in m/s, zero where no motion was found."""
    return np.nan_to_num(points.demonstrated_m_s, nan=0.0)


def unreachable(points: Points) -> Mask:
    """Return which strikes (m,) are out of reach."""
    return np.asarray(points.limit == REACH)


def speed_of_share(speeds: Array, share: float) -> float:
    """Return the largest speed that so great a share of the strikes has; nan without a strike."""
    if len(speeds) == 0:
        return math.nan
    needed = max(1, math.ceil(share * len(speeds) - 1e-9))
    return float(np.sort(speeds)[::-1][needed - 1])


def verdict_counts(points: Points) -> dict[str, int]:
    """Return how many strikes have each verdict."""
    return {word: int((points.verdict == word).sum()) for word in (DELIVERABLE, NOT_DELIVERABLE, UNDECIDED)}


def worst_limits(points: Points) -> list[Count]:
    """Return what stops strikes, that which stops most of those not deliverable first."""
    rows = list(zip(points.limit.tolist(), points.joint.tolist(), points.phase.tolist(), strict=True))
    total = Counter(rows)
    parts = {
        word: Counter(
            row for row, verdict in zip(rows, points.verdict.tolist(), strict=True) if verdict == word
        )
        for word in (NOT_DELIVERABLE, UNDECIDED)
    }
    found = [
        Count(*row, parts[NOT_DELIVERABLE][row], parts[UNDECIDED][row], count)
        for row, count in total.items()
        if row[0]
    ]
    return sorted(found, key=lambda c: (-c.not_deliverable, -c.undecided, -c.all, c.limit, c.joint, c.phase))


def families(result: SurveyResult) -> list[Family]:
    """Return what each posture family delivers alone, the best first."""
    points = result.evidence.points
    found = []
    for name, speeds in zip(result.evidence.families, points.family_demonstrated_m_s.T, strict=True):
        done = int((speeds >= points.required_m_s).sum())
        moved = speeds[speeds > 0]
        found.append(
            Family(
                name,
                done,
                done / max(len(speeds), 1),
                int((points.family == name).sum()),
                float(np.median(moved)) if len(moved) else math.nan,
            )
        )
    return sorted(found, key=lambda family: -family.delivered)


def region(result: SurveyResult) -> Region | None:
    """Return the part of the box that is delivered; None for listed strikes, and where the box is one point."""
    survey, shape = result.cell.survey, result.evidence.shape
    if shape is None or survey is None or max(shape[:3]) == 1:
        return None
    weight = np.ones(shape[:3])
    for axis, count in enumerate(shape[:3]):
        if count > 1:
            along = np.full(count, survey.spacing_m)
            along[[0, -1]] /= 2
            weight *= along.reshape([-1 if k == axis else 1 for k in range(3)])
    done = (result.evidence.points.verdict == DELIVERABLE).reshape(shape)
    return Region(
        sum(count > 1 for count in shape[:3]),
        float(weight.sum()),
        float(weight[done.all(axis=3)].sum()),
        float(weight[done.any(axis=3)].sum()),
    )


def hits(result: SurveyResult) -> list[Hit]:
    """Return the worst that one hit does to each joint."""
    points = result.evidence.points
    return [
        Hit(joint.name, joint.sliding, most(points.velocity_jump[:, i]), most(points.joint_impulse[:, i]))
        for i, joint in enumerate(result.cell.arm.joints)
    ]


def most(values: Array) -> float:
    """Return the largest size among values, those that are nan left out; nan where none is left."""
    known = np.abs(values[~np.isnan(values)])
    return float(known.max()) if known.size else math.nan


def extent(values: Array) -> tuple[float, float]:
    """Return the least and the largest of the values that are finite; nan twice where none is."""
    known = values[np.isfinite(values)]
    return (float(known.min()), float(known.max())) if known.size else (math.nan, math.nan)


def middle(values: Array) -> float:
    """Return the median of the values that are not nan; nan where none is left."""
    known = values[~np.isnan(values)]
    return float(np.median(known)) if known.size else math.nan
