"""JUnit XML: a case for the verdict, one for the share of strikes, one a posture family and one a limit kind."""

from __future__ import annotations

from collections.abc import Iterable

from reach.report.cases import Suite
from reach.report.survey.numbers import families, verdict_counts, worst_limits
from reach.report.survey.wording import stopper
from reach.report.wording import number, percent
from reach.result import SurveyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE


def write(result: SurveyResult) -> bytes:
    """Return the result as a JUnit file in UTF-8.

    A family passes where it delivers the required share alone; a limit kind where it stops no strike that is not
    deliverable. Neither fails where the verdict is deliverable: it is skipped then, with the share.
    """
    evidence, suite = result.evidence, Suite(result)
    required = 1.0 if result.cell.survey is None else result.cell.survey.required_share
    total, counts = len(evidence.points.verdict), verdict_counts(evidence.points)
    asked = f"{number(100 * required)} % required"
    suite.add("strikes deliverable")
    if result.verdict.verdict != DELIVERABLE:
        share = percent(counts[DELIVERABLE] / total if total else None)
        told = (
            f"{counts[DELIVERABLE]} of {total} strikes deliverable ({share} %), {counts[NOT_DELIVERABLE]} not"
        )
        suite.fail(f"{told}; {asked}", result.verdict.verdict)
    for family in families(result):
        suite.add(f"family {family.name}")
        if family.delivered < required * total - 1e-9:
            told = (
                f"delivers {family.delivered} of {total} strikes alone ({percent(family.share)} %); {asked}"
            )
            _short(result, suite, told, "family")
    stops = worst_limits(evidence.points)
    kinds = [*evidence.kinds, *(count.limit for count in stops if count.not_deliverable)]
    for kind in dict.fromkeys(kinds):
        suite.add(f"limit {kind}")
        mine = [count for count in stops if count.limit == kind and count.not_deliverable]
        if mine:
            texts = [f"{stopper(count)}: {count.not_deliverable} of {total} strikes" for count in mine]
            stopped = sum(count.not_deliverable for count in mine)
            told = f"stops {stopped} of {total} strikes ({percent(stopped / total)} %)"
            _short(result, suite, told, "limit", texts)
        else:
            suite.unknown(kind, evidence.unknown)
    return suite.written()


def _short(result: SurveyResult, suite: Suite, told: str, kind: str, more: Iterable[str] = ()) -> None:
    """Let the last case say what falls short of all strikes."""
    if result.verdict.verdict == DELIVERABLE:
        suite.skip(told)
    else:
        suite.fail(told, kind, more)
