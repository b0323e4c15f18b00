"""Whether a mass and its inertia can belong to a solid body, and the slip that usually explains why not."""

from __future__ import annotations

import math
from collections.abc import Sequence

import numpy as np

from reach.cell import Array

ROUNDING = 1e-6  # relative excess in the triangle inequality that goes without a word
PRINTED_DIGITS = 0.01  # relative excess that published files show from rounding: noted, not refused
FAR_GYRATION_M = 2.0  # radius of gyration no link or paddle of an arm has; kg mm² read as kg m² gives it
FAR_COM_M = 10.0  # centre of mass further from its link's origin than any arm is long
NEAR_GYRATION_M = 1e-4  # and one that is too small for a solid of more than a few grams


def matrix(six: Sequence[float]) -> Array:
    """Symmetric (3, 3) matrix from xx, yy, zz, xy, xz, yz."""
    xx, yy, zz, xy, xz, yz = six
    return np.array([[xx, xy, xz], [xy, yy, yz], [xz, yz, zz]], dtype=float)


def judge(mass_kg: float, inertia: Array) -> tuple[str, str]:
    """Return (fault, note) about a mass and its inertia about its own centre; empty where there is none.

    Parameters
    ----------
    mass_kg : float
    inertia : (3, 3) kg·m²

    Notes
    -----
    Principal moments are sums of m x², m y², m z², so none is negative and each two add up to at least
    the third (the triangle inequality).
    """
    if mass_kg < 0:
        return f"mass {mass_kg:g} kg is negative; correct its sign", ""
    low, middle, high = (float(value) for value in np.linalg.eigvalsh(inertia))
    moments = f"principal moments {low:.6g}, {middle:.6g}, {high:.6g} kg m²"
    if mass_kg == 0:
        if np.any(inertia != 0):
            return f"mass is 0 but the inertia is not ({moments}); give the mass", ""
        return "", ""
    if low < -ROUNDING * max(abs(low), abs(high)):
        return (
            f"{moments}: a solid has no negative one; check signs and products of inertia "
            "(a row and a column swapped?)"
        ), ""
    gyration = math.sqrt(max(high, 0.0) / mass_kg)
    if gyration > FAR_GYRATION_M:
        return (
            f"{moments} with {mass_kg:g} kg mean a radius of gyration of {gyration:.4g} m; {_slip(gyration)}"
        ), ""
    excess = high - low - middle
    if excess > PRINTED_DIGITS * high:
        return (
            f"{moments} break the triangle inequality I1 + I2 >= I3 by {100 * excess / high:.3g} %; no solid "
            "has such moments, look for a lost digit or a swapped axis"
        ), ""
    if excess > ROUNDING * high:
        return (
            "",
            f"{moments} break the triangle inequality by {100 * excess / high:.2g} %: taken as rounding",
        )
    if gyration < NEAR_GYRATION_M and mass_kg > 0.01:
        return "", (
            f"{moments} with {mass_kg:g} kg are those of a point; "
            "if that is not meant, give the real inertia, which only makes torque larger"
        )
    return "", ""


def _slip(gyration: float) -> str:
    if gyration > 3e4:
        return "inertia in g mm² instead of kg m² (x 1e9)? Convert it"
    if gyration > 20:
        return "inertia in kg mm² instead of kg m² (x 1e6)? Convert it"
    return "a decimal point lost, inertia x 1e3, or mass in another unit? Correct it"
