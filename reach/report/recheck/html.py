"""report.html of a second opinion: one file that needs no network and no script."""

from __future__ import annotations

from collections.abc import Sequence

from reach.report import sections
from reach.report.alike import once
from reach.report.page import bullets, esc, page, paragraph, section, table
from reach.report.recheck import wording
from reach.report.recheck.document import now
from reach.report.recheck.numbers import differing, kinds, left_out
from reach.report.recheck.pictures import pictures
from reach.report.wording import plural
from reach.result import RecheckResult

ROWS = 60  # of a table


def write(result: RecheckResult) -> str:
    """Return the report as one HTML page."""
    verdict = result.verdict
    lines = [f"{name}: {text}" for name, text in wording.about(result)[1:]]
    caution = f'<div class="caution">{bullets(wording.cautions())}</div>'
    return page(
        f"{verdict.verdict}: {result.folder}",
        (
            f"<h1>{esc('Does a second opinion agree with these results?')} {esc(result.folder)}</h1>",
            sections.framed(verdict, lines),
            section("By kind", _kinds(result)),
            sections.figures(pictures(result), "Nothing was compared, so there is nothing to draw."),
            section("What differs", _differing(result)),
            section("What was left out", _left_out(result)),
            section("Notes", _notes(result)),
            section("How to read this", bullets(wording.READING)),
            section("Files", _capped(("file", "SHA-256"), [(f.path, f.sha256) for f in result.files])),
            section(
                "Versions", _capped(wording.VERSIONS_HEADER, wording.version_rows(result.versions, now()))
            ),
            section("Caution", caution),
        ),
    )


def _kinds(result: RecheckResult) -> str:
    found = kinds(result.items)
    marked = [kind.differ > 0 for kind in found]
    return _capped(wording.KINDS_HEADER, [wording.kind_row(kind) for kind in found], marked)


def _differing(result: RecheckResult) -> str:
    items = differing(result.items)
    if not items:
        return paragraph("Nothing of what could be compared." if result.items else "")
    rows = [row for item in items for row in wording.differing_rows(item)]
    more = ""
    if len(rows) > ROWS:
        more = (
            f"{plural(len(items), 'item')} differ in {plural(len(rows), 'comparison')}, of which the first "
            f"{ROWS} are here, the worst of each kind first; recheck.csv has the other {len(rows) - ROWS} too."
        )
    return table(wording.DIFFERING_HEADER, rows[:ROWS]) + paragraph(more)


def _left_out(result: RecheckResult) -> str:
    rows = [wording.left_row(left) for left in left_out(result.items)]
    return _capped(wording.LEFT_HEADER, rows) + paragraph(wording.install_hint(result))


def _notes(result: RecheckResult) -> str:
    notes = [wording.told(note) for note in once(result.notes)]
    return bullets(notes[:ROWS]) + paragraph(_more(len(notes)))


def _capped(header: Sequence[str], rows: Sequence[Sequence[str]], marked: Sequence[bool] = ()) -> str:
    return table(header, rows[:ROWS], marked[:ROWS]) + paragraph(_more(len(rows)))


def _more(count: int) -> str:
    return f"verdict.json has the other {count - ROWS} too." if count > ROWS else ""
