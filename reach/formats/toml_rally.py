"""The [rally] table: apexes, offsets and bearings of the flights to keep up, made into one Rally."""

from __future__ import annotations

import math
from collections.abc import Container, Mapping, Sequence
from typing import Any

from reach.cell import Rally
from reach.errors import FaultList
from reach.formats.grid import check_box, counts, fitting_spacing, shown_count
from reach.formats.schema import MOST_CENTRES, MOST_FLIGHTS

FULL_TURN_DEG = 360.0
SAME_DEG = 9  # decimals to which two bearings are compared

_AS_WRITTEN = (
    "centre_m",
    "lateral_m_s",
    "recover_within_bounces",
    "latency_s",
    "required_share",
    "centres_box_m",
    "centres_spacing_m",
    "contact_offset_spread_m",
    "velocity_spread_m_s",
    "cases",
)


def read_rally(
    rally: Mapping[str, Any], written: Container[str], faults: FaultList, notes: list[str]
) -> Rally | None:
    """Read the rally that a checked [rally] table describes.

    Parameters
    ----------
    rally : the table as the schema read it
    written : the table as written, to tell what was given from what is a default
    faults : those of the cell file
    notes : gathers what repeats

    Returns
    -------
    Rally, or None after noting why there is none.
    """
    lists = {
        "apexes": each_once("rally.apexes_m", rally["apexes_m"] or (), faults.file, notes),
        "offsets": each_once("rally.offsets_m", rally["offsets_m"], faults.file, notes),
        "bearings": each_once("rally.bearings_deg", rally["bearings_deg"], faults.file, notes, FULL_TURN_DEG),
    }
    flights = math.prod(map(len, lists.values()))
    if flights > MOST_FLIGHTS:
        told = f"{in_words(lists)} make {flights} flights, more than {MOST_FLIGHTS}; list fewer"
        longest = max(lists, key=lambda name: len(lists[name]))
        faults.add(f"rally.{longest}_{'deg' if longest == 'bearings' else 'm'}", told)
    _check_centres(rally, written, faults)
    if rally["centre_m"] is None or rally["apexes_m"] is None:
        return None
    return Rally(
        apexes_m=lists["apexes"],
        offsets_m=lists["offsets"],
        bearings_rad=tuple(map(math.radians, lists["bearings"])),
        **{key: rally[key] for key in _AS_WRITTEN},
    )


def _check_centres(rally: Mapping[str, Any], written: Container[str], faults: FaultList) -> None:
    """The box of centres has its corners the right way round, and not too many points."""
    where, box, spacing_m = "rally.centres_spacing_m", rally["centres_box_m"], rally["centres_spacing_m"]
    if "centres_box_m" not in written and "centres_spacing_m" in written:
        faults.add(where, "needs centres_box_m, two corners [[x, y, z], [x, y, z]]; give it, or drop this")
    if box is None or not check_box("rally.centres_box_m", box, faults) or faulty(faults, where):
        return
    along = counts(box, spacing_m)
    if math.prod(along) > MOST_CENTRES:
        told = f"makes {shown_count(math.prod(along))} centres, {' x '.join(map(shown_count, along))}"
        fitting = fitting_spacing(box, spacing_m, MOST_CENTRES)
        faults.add(where, f"{told}, more than {MOST_CENTRES}; centres_spacing_m = {fitting:g} would fit")


def faulty(faults: FaultList, *places: str) -> bool:
    """Whether a fault was noted at one of the places or below it, so that its value is a mere default."""
    return any(
        fault.where == at or fault.where.startswith(f"{at}.") for fault in faults.faults for at in places
    )


def in_words(lists: Mapping[str, Sequence[float]]) -> str:
    """How many there are of each: "3 apexes x 2 offsets"."""
    return " x ".join(
        f"{len(values)} {name if len(values) > 1 else name[:-1]}" for name, values in lists.items()
    )


def each_once(
    where: str, values: Sequence[float], file: str, notes: list[str], turn: float | None = None
) -> tuple[float, ...]:
    """The values in their order without repetitions, of which a note is taken.

    Parameters
    ----------
    where, file : of the values, for the note
    values : as written
    notes : gathers the note
    turn : a full turn of angles, which count as the same by whole ones; None for other values
    """
    first: dict[float, float] = {}
    for value in values:
        first.setdefault(value if turn is None else round(value % turn, SAME_DEG) % turn, value)
    repeated = len(values) - len(first)
    if repeated:
        notes.append(f"{file}: {where}: {repeated} of {len(values)} repeat another and count once")
    return tuple(first.values())
