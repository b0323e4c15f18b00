"""The strikes of a survey as stored, and whether they are those that were asked for."""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.bounds import WAYS
from reach.recheck.arm.chain import Array
from reach.recheck.stored import Stored, largest
from reach.recheck.survey.swing import POINTS, Pieces

VECTORS = ("position", "normal", "direction")
NUMBERS = ("demonstrated_m_s", "bound_still_m_s", "bound_free_m_s")
TEXTS = ("verdict", "basis", "limit", "stroke")
POSTURES = ("q", "tangent", "q_still", "q_free")
HAIR = 1e-9  # of a spacing: a point that is over the box's far side by less still counts


@dataclass(frozen=True, eq=False)
class Strikes:
    """The m strikes of points.npz, what has to be finite checked: columns by name, and the pieces of the swings."""

    columns: dict[str, np.ndarray]
    pieces: Pieces

    @staticmethod
    def of(stored: Stored, joints: int) -> Strikes:
        """Read and check.

        Raises
        ------
        BadFolder
        """
        m = len(stored.finite(POINTS, "position", (None, 3)))
        columns = {name: stored.finite(POINTS, name, (m, 3)) for name in VECTORS}
        columns |= {name: stored.array(POINTS, name, (m,)) for name in NUMBERS}
        columns |= {name: stored.array(POINTS, name, (m,), "U") for name in TEXTS}
        columns |= {name: stored.array(POINTS, name, (m, joints)) for name in POSTURES}
        columns |= {f"dual_{way}": stored.array(POINTS, f"dual_{way}", (m, 6)) for way in WAYS}
        columns["required_m_s"] = stored.finite(POINTS, "required_m_s", (m,))
        return Strikes(columns, Pieces.of(stored, m))

    def __len__(self) -> int:
        return len(self.columns["verdict"])

    def where(self, row: int) -> tuple[Array, Array, Array]:
        """Position, normal and direction (3,)."""
        position, normal, direction = (self.columns[name][row] for name in VECTORS)
        return position, normal, direction

    def text(self, row: int, name: str) -> str:
        """A text of a row."""
        return str(self.columns[name][row])

    def bound(self, row: int, way: str) -> float:
        """An upper bound along the normal, m/s; nan where no posture was found."""
        return float(self.columns[f"bound_{way}_m_s"][row])


def strikes_item(stored: Stored, strikes: Strikes) -> Item:
    """Whether the strikes are those that were asked for: every face at every point of the box, or the listed ones."""
    normals, directions = (_vectors(stored, name) for name in ("normals", "directions"))
    speeds = stored.vector(len(normals), "survey", "speeds_m_s")
    if len(directions) != len(normals):
        raise stored.refused(("survey", "directions"), "is no direction a face")
    asked = stored.at("survey")
    listed = isinstance(asked, dict) and asked.get("listed") is not None
    points = _vectors(stored, "listed") if listed else _grid(stored, len(strikes))
    if listed:
        whole = len(points) == len(normals)
    else:
        whole = len(points) * len(normals) == len(strikes)
        points = np.repeat(points, len(normals), axis=0)
    if not whole or len(points) != len(strikes):
        return Item("strikes", "", (same("number of strikes", len(points), len(strikes)),))
    face = np.arange(len(strikes)) % max(len(normals), 1)
    columns = strikes.columns
    checks = [
        Check("places", largest(columns["position"] - points), allowed.PLACE_M, "m"),
        Check("required speeds", largest(columns["required_m_s"] - speeds[face]), allowed.SPEED_M_S, "m/s"),
    ]
    for name, vectors in (("normal", normals), ("direction", directions)):
        off = largest(columns[name] - vectors[face])
        length = largest(np.linalg.norm(columns[name], axis=1) - 1)
        checks.append(Check(f"{name}s", off, allowed.TURN_RAD, "rad"))
        checks.append(Check(f"{name}s, length", length, allowed.TURN_RAD, "1"))
    return Item("strikes", "", (same("number of strikes", len(points), len(strikes)), *checks))


def own_way(stored: Stored) -> str:
    """The cell's way of striking, which says which bound counts.

    Raises
    ------
    BadFolder
    """
    way = stored.at("survey", "rotation")
    if way not in WAYS:
        raise stored.refused(("survey", "rotation"), "is none that there is")
    return str(way)


def _grid(stored: Stored, most: int) -> Array:
    """Points of the box (k, 3), x slowest; no more than one beyond `most`."""
    low, high = ([stored.number("survey", "box_m", side, i) for i in range(3)] for side in (0, 1))
    spacing = stored.number("survey", "spacing_m")
    sides = [(b - a) / spacing if spacing > 0 else math.nan for a, b in zip(low, high, strict=True)]
    if not all(0 <= side < 1e9 for side in sides):
        raise stored.refused(("survey", "box_m"), "is no box with a spacing")
    counts = [int(side + HAIR) + 1 for side in sides]
    if math.prod(counts) > most:
        return np.zeros((most + 1, 3))
    k = np.indices(counts).reshape(3, -1).T
    return np.asarray(np.array(low) + spacing * k)


def _vectors(stored: Stored, key: str) -> Array:
    """Vectors (k, 3) of the survey's table."""
    found = stored.at("survey", key)
    if not isinstance(found, list):
        raise stored.refused(("survey", key), "is no list of vectors")
    rows = [stored.vector(3, "survey", key, i) for i in range(len(found))]
    return np.array(rows).reshape(-1, 3)
