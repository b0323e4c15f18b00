"""What the drawings share: their width and look, and how they become SVG.

The only module that imports the drawing library: the others take its names from here.
"""

from __future__ import annotations

import io
import re
import warnings
from collections.abc import Iterable, Iterator
from contextlib import contextmanager
from typing import NamedTuple

import matplotlib as mpl
from matplotlib import colormaps as colormaps
from matplotlib.artist import Artist as Artist
from matplotlib.axes import Axes as Axes
from matplotlib.backends.backend_svg import FigureCanvasSVG
from matplotlib.cm import ScalarMappable as ScalarMappable
from matplotlib.colors import Normalize as Normalize
from matplotlib.figure import Figure as Figure
from matplotlib.figure import SubFigure as SubFigure
from matplotlib.patches import Circle as Circle
from matplotlib.patches import PathPatch as PathPatch
from matplotlib.patches import Polygon as Polygon
from matplotlib.patches import Rectangle as Rectangle
from matplotlib.path import Path as Path

from reach.report.caption import Caption
from reach.report.looks import STYLE

WIDTH_IN = 9.8  # 940 px at 96 px an inch: the page's width


class Picture(NamedTuple):
    """A drawing and its caption."""

    caption: Caption
    svg: bytes


@contextmanager
def looks() -> Iterator[None]:
    """Draw in the report's style."""
    with mpl.rc_context(STYLE), warnings.catch_warnings():
        # The measuring font lacks some scripts; the reader's fonts, which draw the text, need not.
        warnings.filterwarnings("ignore", message=r"Glyph .* missing from")
        yield


def name_all(figure: Figure, panels: Iterable[Axes], columns: int) -> None:
    """Put one legend above the panels: what bears the same name in several of them is told once."""
    named: dict[str, Artist] = {}
    for axes in panels:
        handles, labels = axes.get_legend_handles_labels()
        for label, handle in zip(labels, handles, strict=True):
            named.setdefault(label, handle)
    if named:
        figure.legend(list(named.values()), list(named), loc="outside upper left", ncols=columns)


def svg_of(figure: Figure) -> bytes:
    """Return a finished figure as SVG, the same bytes for the same figure."""
    out = io.BytesIO()
    FigureCanvasSVG(figure)
    figure.savefig(out, format="svg", metadata={"Date": None, "Creator": None})
    return _steady_numbers(_steady_names(out.getvalue()))


def _steady_names(svg: bytes) -> bytes:
    """The picture with its clip paths numbered: the library names them by memory address."""
    names: dict[bytes, bytes] = {}
    return re.sub(
        rb"\bp[0-9a-f]{10}\b", lambda found: names.setdefault(found[0], b"clip%d" % len(names)), svg
    )


def _steady_numbers(svg: bytes) -> bytes:
    """The picture with its coordinates to a thousandth of a point.

    The library's layout is solved in an order that memory addresses give, so that its last digits differ from run to
    run. Numbers below one, which may be factors, stay as they are.
    """
    return re.sub(rb"(?<![\w.])-?[1-9]\d*\.\d{4,}(?![\w.])", lambda found: b"%.3f" % float(found[0]), svg)
