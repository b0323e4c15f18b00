"""The strikes of a survey, one a row."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from reach.cell import Array, Survey


@dataclass(frozen=True, eq=False)
class Strikes:
    """m strikes: position (m, 3), normal (m, 3), direction (m, 3), required speed along the normal (m,)."""

    position: Array
    normal: Array
    direction: Array
    required_m_s: Array

    def __len__(self) -> int:
        return len(self.position)

    def take(self, rows: slice | NDArray[np.int64]) -> Strikes:
        """Some of the strikes."""
        return Strikes(
            *(part[rows] for part in (self.position, self.normal, self.direction, self.required_m_s))
        )


def strikes(survey: Survey) -> Strikes:
    """Every face at every point of the box, x slowest, then y, z and face; or the listed ones."""
    if survey.listed is not None:
        return Strikes(survey.listed, survey.normals, survey.directions, survey.speeds_m_s)
    assert survey.box_m is not None
    axes = [
        low + survey.spacing_m * np.arange(k) for low, k in zip(survey.box_m[0], survey.counts, strict=True)
    ]
    points = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    faces, count = len(survey.normals), len(points)
    return Strikes(
        np.repeat(points, faces, axis=0),
        np.tile(survey.normals, (count, 1)),
        np.tile(survey.directions, (count, 1)),
        np.tile(survey.speeds_m_s, count),
    )
