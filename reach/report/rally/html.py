"""report.html of an envelope: one file that needs no network and no script."""

from __future__ import annotations

from reach.report import sections
from reach.report.page import bullets, details, page, paragraph, section, table
from reach.report.rally import tables, wording
from reach.report.rally.document import cautions
from reach.report.rally.numbers import apex_rows, ranges
from reach.report.rally.pictures import pictures
from reach.result import RallyResult
from reach.verdict import NOT_DELIVERABLE

ROWS = 60  # of a table of points, edges or places


def write(result: RallyResult) -> str:
    """Return the report as one HTML page."""
    unknown = result.evidence.unknown
    rows = [row for row in wording.figure_rows(result) if row[1]]
    return page(
        f"{result.verdict.verdict}: {result.cell.path}",
        (
            sections.heading("How large is the juggling envelope?", result),
            sections.verdict_box(result),
            sections.deciding(result),
            sections.advice(result, unknown),
            section("The envelope", table(("what", "value"), rows), _ranges(result), _apexes(result)),
            sections.figures(pictures(result), "There is no point to draw."),
            section("How to read this", bullets(wording.READING)),
            section("Steady bounce", _bounces(result)),
            section("Uncertainty", _uncertainty(result)),
            section("Edges", _edges(result), sections.unknown_list(unknown)),
            section("Where the centre may stand", _centres(result)),
            section("Impact on the arm", _impact(result)),
            section("Points", _points(result)),
            sections.other_reasons(result),
            sections.foot(result, cautions(result)),
        ),
    )


def _ranges(result: RallyResult) -> str:
    rows = [tables.range_row(found) for found in ranges(result.evidence.edges)]
    text = "Apexes held at every bearing, by offset, with the bearing where each end is met first."
    return paragraph(text) + table(tables.RANGES_HEADER, rows) if rows else ""


def _apexes(result: RallyResult) -> str:
    rows = [tables.apex_row(result.evidence.points, found) for found in apex_rows(result.evidence)]
    text = (
        "Time and offset by apex: cycle and margin are of the point with the least margin, the offset is the least "
        "over the bearings."
    )
    return paragraph(text) + table(tables.APEXES_HEADER, rows) if rows else ""


def _bounces(result: RallyResult) -> str:
    bounces = result.evidence.bounces
    if not bounces:
        return ""
    parts = (
        table(tables.BOUNCES_HEADER, [tables.bounce_row(bounce) for bounce in bounces]),
        paragraph(f"{wording.bounces_meaning(result)}."),
        table(tables.MORE_BOUNCES_HEADER, [tables.more_bounce_row(bounce) for bounce in bounces]),
        paragraph(
            "least: the strongest braking at impact with which the cycle keeps every limit, no further than the "
            "window; tolerated: what the accepted speed error allows over the strike window; apex error: for the "
            "accepted error of place, a bounce; face left: the face's half width less the accepted error of place and "
            "the drift. An error of the restitution e changes the paddle speed that is needed by "
            "du/u = 2 de / (1 − e²)."
        ),
    )
    return "".join(parts)


def _uncertainty(result: RallyResult) -> str:
    evidence = result.evidence
    text = paragraph(f"{wording.uncertainty(result)}.")
    shares = tables.share_rows(evidence.points, ROWS)
    borne = tables.tolerance_rows(evidence.points)
    if borne:
        borne_text = "Errors that a deliverable point bears, each alone: median and least over these points."
        text += paragraph(borne_text) + table(tables.TOLERANCES_HEADER, borne)
    more = "rally.csv has every point's." if len(shares) == ROWS else ""
    return text + details(
        "share of each point", table(tables.SHARES_HEADER, shares) + paragraph(more)
    ) * bool(shares)


def _edges(result: RallyResult) -> str:
    evidence = result.evidence
    apexes = _some(tables.EDGES_HEADER, [tables.edge_row(edge) for edge in evidence.edges])
    offsets = _some(tables.OFFSETS_HEADER, [tables.offset_row(edge) for edge in evidence.offsets])
    return details("lowest and highest apex at each offset and bearing", apexes) + details(
        "largest offset at each apex and bearing", offsets
    )


def _some(header: tuple[str, ...], rows: list[tables.Row]) -> str:
    left = len(rows) - ROWS
    return table(header, rows[:ROWS]) + paragraph(
        f"verdict.json has the other {left} too." if left > 0 else ""
    )


def _centres(result: RallyResult) -> str:
    centres = result.evidence.centres
    if not centres:
        return ""
    rows = _some(tables.CENTRES_HEADER, [tables.centre_row(centre) for centre in centres])
    return paragraph(f"{wording.standing(centres)}.") + details("each place", rows)


def _impact(result: RallyResult) -> str:
    rows = tables.hit_rows(result)
    if not rows:
        return paragraph(
            "Not known: no posture strikes at the centre, or the cell gives no ball or no contact."
        )
    text = (
        "The hardest hit at the centre, as a range of two models: joints that are free to give take the velocity "
        "jump, joints that are locked take the impulse. A real joint is between."
    )
    return table(tables.HITS_HEADER, rows) + paragraph(text)


def _points(result: RallyResult) -> str:
    points = result.evidence.points
    rows = tables.point_rows(points, ROWS)
    left = len(points.verdict) - len(rows)
    more = f"Those that matter most for the verdict; rally.csv has the other {left} too." if left > 0 else ""
    marked = [row[5] == NOT_DELIVERABLE for row in rows]
    return table(tables.POINTS_HEADER, rows, marked) + paragraph(more)
