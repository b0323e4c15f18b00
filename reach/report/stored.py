"""What the commands' evidence is stored in: archives of arrays, and the question in full."""

from __future__ import annotations

import io
import zipfile
from collections.abc import Mapping
from dataclasses import asdict
from typing import Any

import numpy as np

from reach.cell import Cell
from reach.report.document import strict
from reach.report.json import json_text
from reach.result import Result

SCHEMA = "strikecheck/evidence/1"


def archive(**arrays: np.ndarray) -> bytes:
    """Return arrays as a compressed .npz, the same bytes for the same arrays.

    Raises
    ------
    ValueError
        For an array that could be stored by pickling alone.
    """
    out = io.BytesIO()
    with zipfile.ZipFile(out, "w") as packed:
        for name, array in arrays.items():
            member = zipfile.ZipInfo(f"{name}.npy")  # dated 1980, whenever it is written
            member.compress_type = zipfile.ZIP_DEFLATED
            with packed.open(member, "w", force_zip64=True) as file:
                np.lib.format.write_array(file, np.asarray(array), allow_pickle=False)
    return out.getvalue()


def cell_file(result: Result, own: Mapping[str, Any]) -> bytes:
    """Return the arm, its stated limits, the paddle and what counts as delivered, to full precision.

    A limit that is null is unknown; a side of a limit that is null is known to be unlimited. `own` is what one command
    alone has.
    """
    cell = result.cell
    content = {
        "schema": SCHEMA,
        "command": result.command,
        "verdict": result.verdict.verdict,
        "period_s": cell.period_s,
        "arm": asdict(cell.arm),
        "paddle": asdict(cell.paddle),
        "tool": None if cell.tool is None else asdict(cell.tool),
        "ball": None if cell.ball is None else asdict(cell.ball),
        "contact": None if cell.contact is None else asdict(cell.contact),
        "margins": asdict(cell.margins),
        "accept": asdict(cell.accept),
        **own,
        "inputs": [asdict(source) for source in cell.inputs],
    }
    return json_text(strict(content, digits=None)).encode()


def ball_and_contact(cell: Cell) -> dict[str, Any]:
    """Return what the ball does by, as plain data; None for what the cell does not have."""
    return {
        name: None if value is None else asdict(value)
        for name, value in (("ball", cell.ball), ("contact", cell.contact))
    }
