"""The terminal summary of an envelope: plain text, no line wider than 100 columns."""

from __future__ import annotations

from reach.report import summary
from reach.report.columns import wrap
from reach.report.rally.document import cautions
from reach.report.rally.numbers import apex_rows, ranges
from reach.report.rally.tables import (
    APEXES_HEADER,
    BOUNCES_HEADER,
    RANGES_HEADER,
    TOLERANCES_HEADER,
    apex_row,
    bounce_row,
    range_row,
    tolerance_rows,
)
from reach.report.rally.wording import bounces_meaning, figure_rows
from reach.report.summary import bullets, listed, pairs
from reach.result import RallyResult

ROWS = 8  # of a table


def write(result: RallyResult) -> str:
    """Return the summary; the verdict's sentence comes first."""
    evidence = result.evidence
    return summary.written(
        result,
        (
            ("", summary.standing(result)),
            summary.deciding(result),
            ("The envelope", pairs(figure_rows(result))),
            ("Apexes held at every bearing, by offset", _ranges(result)),
            ("Time and offset, by apex", _apexes(result)),
            ("Steady bounce", _bounces(result)),
            ("Errors that a deliverable point bears, each alone", _tolerances(result)),
            summary.other_reasons(result),
            summary.remedies(result),
            summary.needed(result, evidence.unknown),
            summary.unknown_list(evidence.unknown),
            summary.notes(result),
            ("Caution", bullets(cautions(result))),
        ),
    )


def _ranges(result: RallyResult) -> list[str]:
    return listed(RANGES_HEADER, [range_row(found) for found in ranges(result.evidence.edges)], ROWS)


def _apexes(result: RallyResult) -> list[str]:
    rows = [apex_row(result.evidence.points, found) for found in apex_rows(result.evidence)]
    meaning = "cycle and margin: of the point with the least margin; offset: the least over the bearings"
    return listed(APEXES_HEADER, rows, ROWS) + (wrap(meaning, "  ") if rows else [])


def _bounces(result: RallyResult) -> list[str]:
    rows = [bounce_row(bounce) for bounce in result.evidence.bounces]
    return listed(BOUNCES_HEADER, rows, ROWS) + (wrap(bounces_meaning(result), "  ") if rows else [])


def _tolerances(result: RallyResult) -> list[str]:
    return listed(TOLERANCES_HEADER, tolerance_rows(result.evidence.points), ROWS, left=1)
