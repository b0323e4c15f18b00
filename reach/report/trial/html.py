"""report.html of trials: one file that needs no network and no script."""

from __future__ import annotations

from reach.report import sections
from reach.report.page import bullets, details, page, paragraph, section, table
from reach.report.trial import wording
from reach.report.trial.document import cautions
from reach.report.trial.numbers import endings, known, losses, worst_run
from reach.report.trial.pictures import pictures
from reach.result import TrialResult

TRIALS = 60  # of the table
USES = 20


def write(result: TrialResult) -> str:
    """Return the report as one HTML page."""
    unknown = result.evidence.unknown
    rows = [row for row in wording.figure_rows(result) if row[1]]
    return page(
        f"{result.verdict.verdict}: {result.cell.path}",
        (
            sections.heading("Does this law keep the ball up?", result),
            sections.verdict_box(result),
            sections.deciding(result),
            sections.advice(result, unknown),
            section("The trials", table(("what", "value"), rows)),
            section("How they ended", _endings(result)),
            sections.figures(pictures(result), "There is no trial to draw."),
            section("How to read this", bullets(wording.READING)),
            section("Limits used most", _uses(result), sections.unknown_list(unknown)),
            section("Trial by trial", _runs(result)),
            sections.other_reasons(result),
            sections.foot(result, cautions(result)),
        ),
    )


def _endings(result: TrialResult) -> str:
    evidence = result.evidence
    if evidence.blocked:
        return paragraph(f"There is no trial: {evidence.blocked}")
    ended = table(wording.ENDINGS_HEADER, [wording.ending_row(end) for end in endings(evidence)])
    lost = table(wording.LOSSES_HEADER, [wording.loss_row(loss) for loss in losses(evidence)])
    return ended + (
        paragraph("What held the arm back in the last flight of a lost trial:") + lost if lost else ""
    )


def _uses(result: TrialResult) -> str:
    runs = result.evidence.runs
    place = worst_run(runs)
    if place is None:
        return ""
    rows = [wording.use_row(use) for use in known(runs[place])[:USES]]
    return paragraph(
        f"Of the trial that used most of a limit, {wording.start_text(place + 1, runs[place])}."
    ) + table(wording.USES_HEADER, rows)


def _runs(result: TrialResult) -> str:
    """The trials, those not recovered first."""
    runs = list(enumerate(result.evidence.runs, start=1))
    shown = sorted(runs, key=lambda pair: pair[1].recovered)[:TRIALS]
    rows = [wording.run_row(place, run) for place, run in shown]
    left = len(runs) - len(shown)
    more = f"Those not recovered first; verdict.json has the other {left} too." if left > 0 else ""
    content = table(wording.RUNS_HEADER, rows, [not run.recovered for _, run in shown]) + paragraph(more)
    return details(
        f"all {len(runs)} trials" if left <= 0 else f"{len(shown)} of {len(runs)} trials", content
    ) * bool(rows)
