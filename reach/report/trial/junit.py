"""JUnit XML: a case for the verdict and one a start."""

from __future__ import annotations

from reach.report.cases import Suite
from reach.report.trial.wording import start_text
from reach.report.wording import limit_of
from reach.result import TrialResult
from reach.verdict import DELIVERABLE


def write(result: TrialResult) -> bytes:
    """Return the result as a JUnit file in UTF-8.

    A start passes where the ball is recovered. None fails where the verdict is deliverable: it is skipped then, with
    how it ended; so is a start that was not tried.
    """
    evidence, suite = result.evidence, Suite(result)
    for place, run in enumerate(evidence.runs, start=1):
        suite.add(start_text(place, run))
        if run.recovered:
            continue
        if result.verdict.verdict == DELIVERABLE:
            suite.skip(run.text)
        else:
            stop = [f"held back by {limit_of(run.limit, run.joint)}"] if run.limit else []
            suite.fail(run.text, run.outcome, [*stop, *run.broken])
    for place in range(len(evidence.runs) + 1, evidence.asked + 1):
        suite.add(f"start {place}")
        suite.skip(evidence.blocked or "not tried")
    return suite.written()
