"""Sizes that a number of any input can have and still mean something, whatever its unit."""

from __future__ import annotations

LARGEST = 1e9
DUST = 1e-12  # rounding leaves such remains of zero in files that programs write
LEAST_POSITIVE = 1e-9  # of what must be above zero, such as a mass
LEAST_LIMIT = 1e-6  # of a limit that is not zero: a joint that slow or weak stands still
LARGEST_DRIVE = 1e6  # armature, damping and dry friction of a joint, in SI units
LARGEST_STAMP_S = 1e10  # seconds since 1970 are 1.8e9; above, stamps are in ms or finer


def misfit(number: float, least: float, most: float = LARGEST) -> str:
    """What is wrong with the size of a number that is neither 0 nor from `least` to `most`; else empty."""
    if number == 0 or least <= abs(number) <= most:
        return ""
    return (
        f"is {number:g}, out of any range that means something; give 0 or a size from {least:g} to {most:g}"
    )


def without_dust(number: float) -> float:
    """The number, or 0 in place of the rest that rounding left of a zero."""
    return 0.0 if abs(number) < DUST else number
