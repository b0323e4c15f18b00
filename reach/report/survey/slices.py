"""Which slices through a survey's box are drawn, and what stands in their cells."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Survey
from reach.report.survey.numbers import demonstrated, unreachable
from reach.result import SurveyResult
from reach.verdict import NOT_DELIVERABLE, UNDECIDED

FACES = 4  # drawn at most
PANELS = 6  # of a face, at most
FEW_PANELS = 3  # of a face where several are drawn


@dataclass(frozen=True, eq=False)
class Slices:
    """The slices through a box that are drawn.

    Attributes
    ----------
    across, up, through : world axes (0, 1, 2) of a panel and of the way from slice to slice
    edges : cell edges along across and along up, m
    places_m : of the slices along `through`
    faces : rows of the faces drawn; whole: how many there are
    of : how many slices there are
    speed : (faces, slices, up, across) demonstrated, m/s; nan where unreachable
    hatched : the same shape, by what the hatch says
    """

    across: int
    up: int
    through: int
    edges: tuple[Array, Array]
    places_m: Array
    faces: tuple[int, ...]
    whole: int
    of: int
    speed: Array
    hatched: dict[str, NDArray[np.bool_]]

    @property
    def cells(self) -> int:
        """How many cells all panels have."""
        return int(self.speed.size)


def slices_of(result: SurveyResult) -> Slices | None:
    """Return the slices to draw; None for listed strikes and for one point."""
    survey, shape = result.cell.survey, result.evidence.shape
    if survey is None or survey.box_m is None or shape is None or max(shape[:3]) == 1:
        return None
    counts = shape[:3]
    # Level slices, unless the box is flat: then its own plane.
    through = 2 if min(counts) > 1 or counts[2] == 1 else (1 if counts[1] == 1 else 0)
    across, up = (axis for axis in range(3) if axis != through)
    faces = tuple(range(min(shape[3], FACES)))
    panels = PANELS if len(faces) <= 2 else FEW_PANELS
    rows = np.unique(np.round(np.linspace(0, counts[through] - 1, panels)).astype(int))

    def drawn(values: np.ndarray) -> np.ndarray:
        """The values (m,) of the cells drawn: faces, slices, up, across."""
        return values.reshape(shape).transpose(3, through, up, across)[: len(faces)][:, rows]

    points = result.evidence.points
    away = drawn(unreachable(points))
    hatched = {word: drawn(points.verdict == word) & ~away for word in (NOT_DELIVERABLE, UNDECIDED)}
    return Slices(
        across=across,
        up=up,
        through=through,
        edges=(_edges(survey, counts, across), _edges(survey, counts, up)),
        places_m=survey.box_m[0][through] + survey.spacing_m * rows,
        faces=faces,
        whole=shape[3],
        of=counts[through],
        speed=np.where(away, np.nan, drawn(demonstrated(points))),
        hatched={**hatched, "unreachable": away},
    )


def runs(cells: NDArray[np.bool_], edges: tuple[Array, Array]) -> list[Array]:
    """Return rectangles (5, 2), closed, that cover the marked cells (up, across): neighbours in a row are one."""
    found = []
    for row, marked in enumerate(cells):
        steps = np.flatnonzero(np.diff(np.concatenate([[0], marked.astype(int), [0]])))
        low, high = edges[1][row], edges[1][row + 1]
        for first, last in steps.reshape(-1, 2):
            left, right = edges[0][first], edges[0][last]
            found.append(np.array([[left, low], [right, low], [right, high], [left, high], [left, low]]))
    return found


def _edges(survey: Survey, counts: tuple[int, int, int], axis: int) -> Array:
    assert survey.box_m is not None
    return np.asarray(survey.box_m[0][axis] + survey.spacing_m * (np.arange(counts[axis] + 1) - 0.5))
