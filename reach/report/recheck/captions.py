"""What stands under the figure of a second opinion, and what is read out to who can't see it."""

from __future__ import annotations

from collections.abc import Sequence

from reach.report.caption import Caption
from reach.report.recheck.numbers import Found, worst
from reach.report.recheck.wording import check_text, item_name
from reach.report.wording import plural


def of_shares(found: Sequence[Found], left_out: int) -> Caption:
    """Caption of the worst difference of each comparison; `left_out` are not drawn."""
    text = (
        "The worst difference of each comparison, as a share of what is allowed. A dot, left of the line, is rounding; "
        "a cross, right of it, a difference. At the left edge both sides are equal; at the right edge a difference has "
        "no share: it is of words or no number, or none is allowed."
    )
    if left_out:
        text += f" {plural(left_out, 'comparison')} with no larger share left out; recheck.csv has all."
    one = worst(found)
    gist = "" if one is None else f"Largest: {item_name(one.item)}: {check_text(one.check)}."
    return Caption("Differences against what is allowed", text, gist)
