"""Files of strikes as CSV: a point, a face, a speed and, where it is not the normal, a direction on every line."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array
from reach.errors import FaultList
from reach.formats.capped import ByKind
from reach.formats.fixed import read_only
from reach.formats.magnitude import LARGEST, LEAST_LIMIT
from reach.formats.schema import FASTEST_PADDLE_M_S, WORLD_M
from reach.formats.table_csv import Columns, NumberTable, read_table

POINT = ("x_m", "y_m", "z_m")
NORMAL = ("nx", "ny", "nz")
SPEED = "paddle_speed_m_s"
DIRECTION = ("dx", "dy", "dz")
COLUMNS = Columns((*POINT, *NORMAL, SPEED), together=(("direction", DIRECTION),))

LEAST_LENGTH = 1e-9  # of a vector that gives a direction
LEAST_ALONG = 1e-6  # part of a strike's direction along the normal


@dataclass(frozen=True, eq=False)
class Strikes:
    """Faces and how they are to strike, a row each; read-only.

    Attributes
    ----------
    points : (k, 3) m, or None where every face goes to every point of a box
    normals, directions : (k, 3) unit vectors, world axes
    speeds_m_s : (k,) along the normal
    """

    points: Array | None
    normals: Array
    directions: Array
    speeds_m_s: Array


def read_strikes(content: bytes, file: str) -> Strikes:
    """Read a file of strikes.

    Parameters
    ----------
    content : bytes
        See `read_table`.
    file : str
        Shown in faults.

    Raises
    ------
    InputError
        With every fault found.
    """
    faults = FaultList(file)
    table = read_table(content, COLUMNS, faults)
    if not len(table.values):
        faults.add(COLUMNS.whole, "has no rows; give a strike a line")
    kinds = ByKind(faults, COLUMNS.whole)
    _check_numbers(table, kinds)
    with np.errstate(over="ignore", invalid="ignore"):  # numbers that are faults already
        normals = _units(table, NORMAL, kinds)
        directions = _units(table, DIRECTION, kinds) if DIRECTION[0] in table.names else normals
        along = np.einsum("ij,ij->i", normals, directions)
    for row in np.flatnonzero(along < LEAST_ALONG).tolist():
        told = "the direction does not go out of the face; turn it to have a positive part along the normal"
        kinds.add("directions not out of the face", table.place(row, DIRECTION[0]), told)
    kinds.close()
    faults.raise_if_any()
    speeds = table.columns((SPEED,))[:, 0]
    return Strikes(*map(read_only, (table.columns(POINT), normals, directions, speeds)))


def _check_numbers(table: NumberTable, kinds: ByKind) -> None:
    """Every number is finite, and of a size that means something in its column."""
    finite = np.isfinite(table.values)
    kinds.add_each("not finite", ~finite, table.values, table.place, table.names, "give a finite number")
    vectors = tuple(name for name in (*NORMAL, *DIRECTION) if name in table.names)
    for names, least, most, hint in (
        (POINT, -np.inf, WORLD_M, f"at most {WORLD_M:g} either way (metres; is this in mm?)"),
        (vectors, -np.inf, LARGEST, f"at most {LARGEST:g} either way"),
        (
            (SPEED,),
            LEAST_LIMIT,
            FASTEST_PADDLE_M_S,
            f"at least {LEAST_LIMIT:g} and at most {FASTEST_PADDLE_M_S:g} (m/s; is this in mm/s?)",
        ),
    ):
        values = table.columns(names)
        bad = np.isfinite(values) & ((np.abs(values) > most) | (values < least))
        kinds.add_each("out of range", bad, values, table.place, names, f"it must be {hint}")


def _units(table: NumberTable, names: tuple[str, ...], kinds: ByKind) -> Array:
    """Vectors (k, 3) scaled to length one; one of no length is a fault, and of no length or an endless one nan."""
    vectors = table.columns(names)
    lengths = np.linalg.norm(vectors, axis=1)
    what = "normal" if names == NORMAL else "direction"
    for row in np.flatnonzero(lengths < LEAST_LENGTH).tolist():
        kinds.add(f"{what} is zero", table.place(row, names[0]), f"the {what} is zero; give a direction")
    sound = (lengths >= LEAST_LENGTH) & np.isfinite(lengths)
    return np.asarray(vectors / np.where(sound, lengths, np.nan)[:, None])
