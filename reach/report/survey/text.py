"""The terminal summary of a survey: plain text, no line wider than 100 columns."""

from __future__ import annotations

from reach.report import summary
from reach.report.columns import shorten, table, width, wrap
from reach.report.summary import NAME_COLUMNS, bullets
from reach.report.survey.document import cautions
from reach.report.survey.numbers import families
from reach.report.survey.wording import (
    FAMILIES_HEADER,
    STOPS_HEADER,
    family_row,
    figure_rows,
    stops_rows,
    strike_rows,
)
from reach.result import SurveyResult

WORST_LIMITS = 8
BEST_FAMILIES = 8
STRIKES = 12  # of a list shown
STRIKE_COLUMNS = ("at m", "face normal", "required", "shown", "bound", "verdict", "stopped by")


def write(result: SurveyResult) -> str:
    """Return the summary; the verdict's sentence comes first."""
    unknown = result.evidence.unknown
    return summary.written(
        result,
        (
            ("", summary.standing(result)),
            ("Where and how fast", _figures(result)),
            ("Strikes", _strikes(result)),
            summary.deciding(result),
            summary.other_reasons(result),
            ("What stops strikes from being faster", _stops(result)),
            ("Posture families", _families(result)),
            summary.remedies(result),
            summary.needed(result, unknown),
            summary.unknown_list(unknown),
            summary.notes(result),
            ("Caution", bullets(cautions(result))),
        ),
    )


def _figures(result: SurveyResult) -> list[str]:
    rows = figure_rows(result)
    columns = max(width(name) for name, _ in rows)
    return [line for name, text in rows for line in wrap(text, f"  {name}{' ' * (columns - width(name))}  ")]


def _strikes(result: SurveyResult) -> list[str]:
    """The strikes one by one where they are listed."""
    if result.evidence.shape is not None:
        return []
    rows = [
        (", ".join(row[:3]), row[3], *row[4:8], shorten(row[9], 2 * NAME_COLUMNS))
        for row in strike_rows(result, STRIKES)
    ]
    left = len(result.evidence.points.verdict) - len(rows)
    return table(STRIKE_COLUMNS, rows) + ([f"  … and {left} more in survey.csv"] if left > 0 else [])


def _stops(result: SurveyResult) -> list[str]:
    rows = stops_rows(result)
    shown = [(limit, shorten(joint, NAME_COLUMNS), *rest) for limit, joint, *rest in rows[:WORST_LIMITS]]
    left = len(rows) - len(shown)
    more = [f"  … and {left} more in verdict.json"] if left > 0 else []
    return table(_plain(STOPS_HEADER), shown, left=3) + more if rows else []


def _families(result: SurveyResult) -> list[str]:
    rows = [family_row(family) for family in families(result)]
    shown = [(shorten(name, 2 * NAME_COLUMNS), *rest) for name, *rest in rows[:BEST_FAMILIES]]
    left = len(rows) - len(shown)
    more = [f"  … and {left} more in verdict.json"] if left > 0 else []
    return table(_plain(FAMILIES_HEADER), shown, left=1) + more if rows else []


def _plain(header: tuple[str, ...]) -> tuple[str, ...]:
    """A header without the page's marks of columns that hold numbers."""
    return tuple(name.removeprefix("#") for name in header)
