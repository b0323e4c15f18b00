"""What stands under each figure of trials, and what is read out to who can't see it."""

from __future__ import annotations

from reach.evidence.trials import Run
from reach.report.caption import Caption
from reach.report.trial.wording import recovered, start_text
from reach.report.wording import percent, plural
from reach.result import TrialResult


def of_heights(good: int | None, lost: int | None) -> Caption:
    """Caption of heights over time; `good` and `lost` are the trials drawn, from 0."""
    parts = []
    if good is not None:
        parts.append(f"start {good + 1}, recovered, that took a middling number of bounces to settle")
    if lost is not None:
        parts.append(f"start {lost + 1}, the first that is not recovered")
    text = (
        f"Ball and strike point over time, in height above the centre, with each contact: {'; '.join(parts)}."
    )
    return Caption("Heights over time", text, "trial.csv has every contact.")


def of_bounces(result: TrialResult, drawn: int, clipped: bool) -> Caption:
    """Caption of apex and offset over the bounces."""
    text = (
        "Each line is a trial, whole where recovered, dashed and ending in a cross where not. The shaded band is what "
        "counts as recovered, from the bounce at its left edge at the latest."
    )
    if drawn < len(result.evidence.runs):
        text += f" {drawn} of {len(result.evidence.runs)} trials, those not recovered first."
    if clipped:
        text += " A cross at the top: it ends above."
    return Caption("Apex and offset over the bounces", text, f"Recovered: {recovered(result)}.")


def of_starts(result: TrialResult) -> Caption:
    """Caption of the starts, recovered and lost, and of how trials ended."""
    text = (
        "Left: where the ball starts, from the centre, seen from above; an arrow is its lateral velocity. The dotted "
        f"circle is what counts as near the centre. Right: how the trials ended, "
        f"{percent(result.evidence.recovered_share)} % of them recovered."
    )
    return Caption("Starts recovered and lost", text, f"Recovered: {recovered(result)}.")


def of_uses(place: int, run: Run, left_out: int) -> Caption:
    """Caption of the limits used in one trial."""
    text = (
        f"The largest share of each stated limit that the motion used, in {start_text(place + 1, run)}, the trial that "
        "used most of one. Hatched beyond 100 %: the limit is broken."
    )
    if left_out:
        text += f" {plural(left_out, 'limit')} used less, left out."
    uses = ", ".join(run.broken) or "none"
    return Caption("Use of the limits, worst trial", text, f"Broken: {uses}.")
