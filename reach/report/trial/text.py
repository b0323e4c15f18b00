"""The terminal summary of trials: plain text, no line wider than 100 columns."""

from __future__ import annotations

from reach.report import summary
from reach.report.summary import bullets, listed, pairs
from reach.report.trial.document import cautions
from reach.report.trial.numbers import endings, known, losses, worst_run
from reach.report.trial.wording import (
    ENDINGS_HEADER,
    LOSSES_HEADER,
    USES_HEADER,
    ending_row,
    figure_rows,
    loss_row,
    start_text,
    use_row,
)
from reach.result import TrialResult

WORST_LIMITS = 5
LOST = 5  # trials told one by one


def write(result: TrialResult) -> str:
    """Return the summary; the verdict's sentence comes first."""
    evidence = result.evidence
    return summary.written(
        result,
        (
            ("", summary.standing(result)),
            summary.deciding(result),
            ("The trials", pairs(figure_rows(result))),
            (
                "How they ended",
                listed(ENDINGS_HEADER, [ending_row(end) for end in endings(evidence)], 8, left=1),
            ),
            ("What held the arm back where lost", _losses(result)),
            ("Lost", _lost(result)),
            ("Limits used most, in the worst trial", _uses(result)),
            summary.other_reasons(result),
            summary.remedies(result),
            summary.needed(result, evidence.unknown),
            summary.unknown_list(evidence.unknown),
            summary.notes(result),
            ("Caution", bullets(cautions(result))),
        ),
    )


def _losses(result: TrialResult) -> list[str]:
    return listed(LOSSES_HEADER, [loss_row(loss) for loss in losses(result.evidence)], WORST_LIMITS, left=2)


def _lost(result: TrialResult) -> list[str]:
    """The first of the trials not recovered, each in a sentence."""
    texts = [
        f"{start_text(place, run)}: {run.text}"
        for place, run in enumerate(result.evidence.runs, start=1)
        if not run.recovered
    ]
    left = len(texts) - LOST
    return bullets(texts[:LOST]) + ([f"  … and {left} more in verdict.json"] if left > 0 else [])


def _uses(result: TrialResult) -> list[str]:
    runs = result.evidence.runs
    place = worst_run(runs)
    rows = [] if place is None else [use_row(use) for use in known(runs[place])[:WORST_LIMITS]]
    return listed(USES_HEADER, rows, WORST_LIMITS, left=2)
