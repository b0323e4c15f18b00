"""Points of a box at a spacing: its corners the right way round, their count, and a spacing that makes few enough."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Vec3
from reach.errors import FaultList
from reach.formats.magnitude import LARGEST

Box = tuple[Vec3, Vec3]


def check_box(where: str, box: Box, faults: FaultList) -> bool:
    """Whether the first corner is the low one along every axis."""
    reversed_ = [(axis, low, high) for axis, low, high in zip("xyz", *box, strict=True) if low > high]
    for axis, low, high in reversed_:
        faults.add(where, f"{axis} goes from {low:g} down to {high:g}; swap them")
    return not reversed_


def counts(box: Box, spacing_m: float) -> tuple[int, int, int]:
    """Points along x, y and z, counted as `cell.Survey.counts` does."""
    x, y, z = (int((high - low) / spacing_m + 1e-9) + 1 for low, high in zip(*box, strict=True))
    return x, y, z


def fitting_spacing(box: Box, spacing_m: float, most: int) -> float | None:
    """About the least spacing in m above one, to three digits, that makes no more than `most` points."""
    if most < 1:
        return None
    low = spacing_m
    high = max(low, max(b - a for a, b in zip(*box, strict=True))) * 1.01
    while high > 1.001 * low:
        middle = (low * high) ** 0.5
        if math.prod(counts(box, middle)) > most:
            low = middle
        else:
            high = middle
    step = 10.0 ** (np.floor(np.log10(high)) - 2)
    return float(np.ceil(high / step) * step)


def shown_count(number: int) -> str:
    """A count as a user would read it."""
    return f"{number:.3g}" if number >= LARGEST else str(number)
