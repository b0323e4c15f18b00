"""How much all limits but position could shrink together with the verdict still deliverable."""

from __future__ import annotations

from collections.abc import Sequence

from reach.advice.search import Runner, least_that_holds
from reach.cell import Cell
from reach.variants import FIELDS, scaled_limits

# Factors on every limit but position that are tried, rising; the answer is refined to RESOLUTION of the factor.
SHRINK = (0.1, 0.2, 0.35, 0.5, 0.65, 0.8, 0.9, 1.0)
GROW = (1.25, 1.6, 2.0, 2.5, 3.2, 4.0, 6.0, 10.0)
RESOLUTION = 0.02


def cell_has_unknown(cell: Cell) -> bool:
    """Whether a required limit of some joint is not stated."""
    fields = [FIELDS[limit] for limit in cell.accept.require if limit in FIELDS]
    return any(getattr(joint.limits, field) is None for joint in cell.arm.joints for field in fields)


def headroom(cell: Cell, runs: Runner, passes_as_is: bool) -> tuple[float | None, str]:
    """The share by which all limits together could shrink beyond the margins, and the same in words.

    Found by scan and re-run, since a greedy step need not be monotone in its limits; negative where they must
    grow, None where not even ten times the limits would do. Unknown limits stay unlimited.
    """
    runs.say("headroom: all limits together")

    def passes(factors: Sequence[float]) -> list[bool]:
        return runs.passes([scaled_limits(cell, f) for f in factors])

    scan = SHRINK if passes_as_is else GROW
    least, failed = least_that_holds(passes, scan, RESOLUTION, below=None if passes_as_is else 1.0)
    if least is None and passes_as_is:
        least = 1.0  # it passes as it is, but not steadily a little above
    if least is None:
        return None, f"not deliverable even with {scan[-1]:g} times every limit but position"
    share = 1.0 - least
    if share > 0:
        text = f"still deliverable with every limit but position {100 * share:.0f} % lower"
    elif share < 0:
        text = f"every limit but position would have to be {-100 * share:.0f} % higher"
    else:
        text = "no limit to spare: a few per cent less of every limit but position and it fails"
    if cell_has_unknown(cell):
        text += ", unknown ones taken as unlimited"
    if failed is not None:
        text += f" (a planner need not be monotone: at {failed:.3g} times the limits it failed again)"
    return share, text
