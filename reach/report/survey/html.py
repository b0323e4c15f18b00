"""report.html of a survey: one file that needs no network and no script."""

from __future__ import annotations

import math

from reach.report import sections
from reach.report.page import bullets, page, paragraph, section, table
from reach.report.survey.document import cautions
from reach.report.survey.numbers import families, hits, most
from reach.report.survey.pictures import pictures
from reach.report.survey.wording import (
    FAMILIES_HEADER,
    HITS_HEADER,
    READING,
    STOPS_HEADER,
    STRIKES_HEADER,
    family_row,
    figure_rows,
    hit_row,
    stops_rows,
    strike_rows,
)
from reach.result import SurveyResult

STRIKES = 60  # of a list shown


def write(result: SurveyResult) -> str:
    """Return the report as one HTML page."""
    unknown = result.evidence.unknown
    return page(
        f"{result.verdict.verdict}: {result.cell.path}",
        (
            sections.heading("Where can this arm strike, and how fast?", result),
            sections.verdict_box(result),
            sections.deciding(result),
            sections.advice(result, unknown),
            section("Where and how fast", table(("what", "value"), figure_rows(result))),
            _strikes(result),
            sections.figures(pictures(result), "There is no strike to draw."),
            section("How to read this", bullets(READING)),
            section("What stops strikes from being faster", _stops(result), sections.unknown_list(unknown)),
            section("Posture families", _families(result)),
            section("Impact on the arm", _impact(result)),
            sections.other_reasons(result),
            sections.foot(result, cautions(result)),
        ),
    )


def _strikes(result: SurveyResult) -> str:
    """The strikes one by one, where they are listed or all at one point."""
    shape = result.evidence.shape
    if shape is not None and max(shape[:3]) > 1:
        return ""
    rows = strike_rows(result, STRIKES)
    left = len(result.evidence.points.verdict) - len(rows)
    more = f"Those that matter most for the verdict; survey.csv has the other {left} too." if left > 0 else ""
    return section("Strikes", table(STRIKES_HEADER, rows), paragraph(more))


def _stops(result: SurveyResult) -> str:
    return table(STOPS_HEADER, stops_rows(result)) + paragraph(
        "How many strikes each limit keeps from being faster: of those not deliverable, of those undecided, of all."
    )


def _families(result: SurveyResult) -> str:
    rows = [family_row(family) for family in families(result)]
    text = "A family is a way of bending the arm. It delivers alone what it does at the required speed without others."
    return table(FAMILIES_HEADER, rows) + paragraph(text) if rows else ""


def _impact(result: SurveyResult) -> str:
    found = hits(result)
    if math.isnan(most(result.evidence.points.ball_impulse)):
        return paragraph("Not known: the cell gives no ball, or no contact.")
    text = (
        "The worst of one hit over all strikes, in two models: joints that are free to give take the velocity jump, "
        "joints that are locked take the impulse. A real joint is between."
    )
    return table(HITS_HEADER, [hit_row(hit) for hit in found]) + paragraph(text)
