"""JUnit XML: a case for the verdict, one for the share of points, one a point and one a limit kind."""

from __future__ import annotations

from reach.report.cases import Suite
from reach.report.rally.numbers import verdict_counts
from reach.report.rally.wording import place
from reach.report.wording import limit_of, number, percent
from reach.result import RallyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE


def write(result: RallyResult) -> bytes:
    """Return the result as a JUnit file in UTF-8.

    A point passes where it is deliverable. None fails where the verdict is deliverable: it is skipped then, with what
    bounds it. A limit kind fails where it is required and unknown.
    """
    evidence, suite = result.evidence, Suite(result)
    points, counts = evidence.points, verdict_counts(evidence.points)
    required = 1.0 if result.cell.rally is None else result.cell.rally.required_share
    suite.add("points deliverable")
    if result.verdict.verdict != DELIVERABLE:
        total = len(points.verdict)
        share = percent(counts[DELIVERABLE] / total if total else None)
        told = (
            f"{counts[DELIVERABLE]} of {total} points deliverable ({share} %), {counts[NOT_DELIVERABLE]} not"
        )
        suite.fail(f"{told}; {number(100 * required)} % required", result.verdict.verdict)
    for row in range(len(points.verdict)):
        _point(result, suite, row)
    for kind in dict.fromkeys([*evidence.kinds, *(limit for limit, _ in evidence.unknown)]):
        suite.add(f"limit {kind}")
        suite.unknown(kind, evidence.unknown)
    return suite.written()


def _point(result: RallyResult, suite: Suite, row: int) -> None:
    points = result.evidence.points
    suite.add(place(points, row))
    verdict = str(points.verdict[row])
    if verdict == DELIVERABLE:
        return
    told = f"{verdict}: {limit_of(str(points.limit[row]), str(points.joint[row]))}"
    if result.verdict.verdict == DELIVERABLE:
        suite.skip(told)
    else:
        suite.fail(told, verdict, [points.reason[row]] if points.reason[row] else [])
