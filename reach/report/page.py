"""Pieces of an HTML page: everything that comes in as text is escaped here."""

from __future__ import annotations

import base64
import html
import re
from collections.abc import Iterable, Sequence

from reach.report.wording import plain

LONG_WORD = re.compile(r"\S{24}(?=\S)")  # of a table: may be broken after so many characters

POLICY = "default-src 'none'; img-src data:; style-src 'unsafe-inline'"

CSS = """
:root { color-scheme: light; }
body { margin: 0 auto; padding: 1.5rem; max-width: 59rem; background: #fff; color: #222;
  font: 15px/1.5 system-ui, "Segoe UI", "DejaVu Sans", "Noto Sans", sans-serif; overflow-wrap: break-word; }
h1 { font-size: 1.15rem; font-weight: 600; margin: 0 0 1rem; }
h2 { font-size: 1.1rem; font-weight: 600; margin: 2rem 0 .5rem; padding-bottom: .2rem;
  border-bottom: 1px solid #ccc; }
h3 { font-size: 1rem; font-weight: 600; margin: 1.4rem 0 .3rem; }
p { margin: .4rem 0; }
ul, ol { margin: .4rem 0; padding-left: 1.4rem; }
.verdict { padding: .8rem 1.1rem; border: 4px solid #222; background: #f7f7f5; }
.verdict strong { display: block; font-size: 1.6rem; line-height: 1.3; }
.verdict.good { border-style: solid; border-color: #00694e; }
.verdict.bad { border-style: double; border-width: 8px; border-color: #a33f00; }
.verdict.open { border-style: dashed; border-color: #555; }
.scroll { overflow-x: auto; }
table { border-collapse: collapse; width: 100%; font-size: .87rem; font-variant-numeric: tabular-nums; }
th, td { padding: .22rem .5rem; text-align: left; vertical-align: top; border-bottom: 1px solid #e2e2e2; }
th { font-weight: 600; border-bottom: 2px solid #999; vertical-align: bottom; }
td.n, th.n { text-align: right; }
td.n { white-space: nowrap; }
tr.marked td { background: #fdf1e8; }
figure { margin: 1rem 0 1.6rem; }
figure img { display: block; width: 100%; height: auto; }
figcaption { font-size: .9rem; color: #444; }
details { margin: .4rem 0; }
summary { cursor: pointer; color: #444; }
.caution { border-left: 6px solid #222; padding-left: 1rem; }
@media print { body { max-width: none; padding: 0; font-size: 10pt; } figure, tr { break-inside: avoid; }
  h2, h3 { break-after: avoid; } thead { display: table-header-group; }
  .scroll { overflow: visible; } table { font-size: 8pt; } th, td { padding: .15rem .3rem; }
  details::details-content { content-visibility: visible; block-size: auto; } }
"""


def esc(text: str) -> str:
    """Return text as it may stand in an element or a quoted attribute."""
    return html.escape(plain(text), quote=True)


def page(title: str, parts: Iterable[str]) -> str:
    """Return a whole page; `parts` are HTML already."""
    return (
        '<!DOCTYPE html>\n<html lang="en">\n<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{POLICY}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{esc(title)}</title>\n<style>{CSS}</style>\n</head>\n<body>\n"
        + "\n".join(part for part in parts if part)
        + "\n</body>\n</html>\n"
    )


def section(heading: str, *parts: str) -> str:
    """Return a section, or nothing where all its parts are empty; `parts` are HTML already."""
    content = "\n".join(part for part in parts if part)
    return f"<section>\n<h2>{esc(heading)}</h2>\n{content}\n</section>" if content else ""


def paragraph(text: str) -> str:
    """Return a paragraph of plain text."""
    return f"<p>{esc(text)}</p>" if text else ""


def bullets(texts: Iterable[str], tag: str = "ul") -> str:
    """Return a list of plain texts, numbered with the tag "ol"."""
    items = "".join(f"<li>{esc(text)}</li>\n" for text in texts if text)
    return f"<{tag}>\n{items}</{tag}>" if items else ""


def table(header: Sequence[str], rows: Sequence[Sequence[str]], marked: Sequence[bool] = ()) -> str:
    """Return a table of plain texts, or nothing without rows.

    A column whose heading begins with "#" holds numbers; rows `marked` stand out.
    """
    if not rows:
        return ""
    numeric = [' class="n"' if name.startswith("#") else "" for name in header]
    names = [name.removeprefix("#") for name in header]
    head = "".join(f"<th{c}>{esc(name)}</th>" for c, name in zip(numeric, names, strict=True))
    lines = []
    for place, row in enumerate(rows):
        cells = "".join(f"<td{c}>{_breakable(cell)}</td>" for c, cell in zip(numeric, row, strict=True))
        lines.append(f"<tr{' class=marked' if place < len(marked) and marked[place] else ''}>{cells}</tr>")
    body = "\n".join(lines)
    rows_html = f"<thead><tr>{head}</tr></thead>\n<tbody>\n{body}\n</tbody>"
    return f'<div class="scroll"><table>\n{rows_html}</table></div>'


def details(summary: str, content: str) -> str:
    """Return HTML content that opens on demand, or nothing without content."""
    return f"<details>\n<summary>{esc(summary)}</summary>\n{content}\n</details>" if content else ""


def _breakable(text: str) -> str:
    """Return text escaped, with places to break in words too long for a column."""
    return "<wbr>".join(esc(part) for part in LONG_WORD.sub("\\g<0>\n", plain(text)).split("\n"))


def picture(title: str, caption: str, alt: str, svg: bytes) -> str:
    """Return a figure whose drawing is inside the page."""
    data = base64.b64encode(svg).decode("ascii")
    return (
        f"<figure>\n<h3>{esc(title)}</h3>\n"
        f'<img alt="{esc(f"{title}. {alt}")}" src="data:image/svg+xml;base64,{data}">\n'
        f"<figcaption>{esc(caption)}</figcaption>\n</figure>"
    )
