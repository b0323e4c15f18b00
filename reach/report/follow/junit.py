"""JUnit XML: a case for the verdict, one a strike and one a limit kind."""

from __future__ import annotations

from reach.report.cases import Suite
from reach.report.follow.wording import outcome
from reach.report.wording import owner, percent
from reach.result import FollowResult
from reach.verdict import broken_limits


def write(result: FollowResult) -> bytes:
    """Return the result as a JUnit file in UTF-8."""
    evidence = result.evidence
    suite = Suite(result)
    for place, strike in enumerate(evidence.strikes, start=1):
        suite.add(f"strike {place} at {strike.time_s:.3f} s")
        if not strike.delivered:
            suite.fail(outcome(strike), "strike")
    broken = broken_limits(evidence)
    for kind in dict.fromkeys(use.limit for use in evidence.uses):
        suite.add(f"limit {kind}")
        texts = [f"{owner(use.joint)} at {percent(use.utilisation)} %" for use in broken if use.limit == kind]
        if texts:
            suite.fail("; ".join(texts), "limit")
        else:
            suite.unknown(kind, evidence.unknown)
    return suite.written()
