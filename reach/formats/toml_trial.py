"""The [trial] table: a law of control, the starts it is tried from and what counts as recovered, made into a Trial."""

from __future__ import annotations

import keyword
import math
import os
from collections.abc import Mapping
from typing import Any, get_args

from reach.cell import ArmSpec, LawName, Rally, Recovered, Sensor, Starts, Trial
from reach.errors import FaultList, nearest
from reach.formats.files import MAX_TEXT_BYTES, Reading, beside
from reach.formats.kinds import shown
from reach.formats.schema import FASTEST_SENSOR_HZ, MOST_STARTS
from reach.formats.toml_rally import FULL_TURN_DEG, each_once, faulty, in_words

LAWS: tuple[str, ...] = get_args(LawName)
SLOWEST_SENSOR_HZ = 1.0

_OWN_LAW = '"file.py:Name", a Python file beside the cell file and a class in it'


def read_trial(
    trial: Mapping[str, Any],
    document: Mapping[str, Any],
    rally: Rally | None,
    arm: ArmSpec | None,
    faults: FaultList,
    reading: Reading,
) -> Trial | None:
    """Read the trial that a checked [trial] table describes. A law's file is read and never run.

    Parameters
    ----------
    trial : the table as the schema read it
    document : the cell file as parsed, with that table
    rally : whose centre stands in for the trial's; None where there is none, or one with faults
    arm : None where it has faults
    faults : those of the cell file
    reading : gathers the law's file and the notes

    Returns
    -------
    Trial, or None after noting why there is none.
    """
    law = _law(trial["law"], faults, reading)
    starts = _starts(trial["starts"], faults, reading.notes)
    rate_hz = trial["sensor"].get("rate_hz", 0.0)
    if 0 < rate_hz < SLOWEST_SENSOR_HZ:
        told = (
            f"it must be 0, for the ball's true state, or from {SLOWEST_SENSOR_HZ:g} to {FASTEST_SENSOR_HZ:g}"
        )
        faults.add("trial.sensor.rate_hz", f"is {rate_hz:g}; {told}")
    recovered = Recovered(**trial["recovered"])
    _check_bounces(trial["bounces"], recovered, faults)
    _check_centre(document, arm, faults)
    if law is None:
        return None
    name, file = law
    return Trial(
        law=name,
        law_file=file,
        gains=tuple(trial["gains"].items()),
        centre_m=rally.centre_m if trial["centre_m"] is None and rally is not None else trial["centre_m"],
        apex_m=trial["apex_m"],
        bounces=trial["bounces"],
        starts=starts,
        sensor=Sensor(**trial["sensor"]),
        required_share=trial["required_share"],
        recovered=recovered,
    )


def _law(law: str, faults: FaultList, reading: Reading) -> tuple[str, str | None] | None:
    """Name of the law and its file, if one is named; the file's digest joins the inputs."""
    if law in LAWS:
        return law, None
    named, colon, name = law.rpartition(":")
    if not colon:
        close = nearest(law, LAWS)
        hint = close if "did you mean" in close else ""
        choices = ", ".join(f'"{known}"' for known in LAWS)
        faults.add("trial.law", f"is {shown(law)}; it must be one of {choices}, or {_OWN_LAW}{hint}")
        return None
    wrong = []
    if os.path.splitext(named)[1] != ".py":
        wrong.append(f"{shown(named)} before the colon is no Python file")
    if os.path.isabs(named):
        wrong.append(f"{shown(named)} is an absolute path")
    if not name.isidentifier() or keyword.iskeyword(name):
        wrong.append(f"{shown(name)} after the colon is no name of a class")
    for told in wrong:
        faults.add("trial.law", f"{told}; give {_OWN_LAW}")
    if wrong:
        return None
    path = beside(faults.file, named)
    if reading.read_text(path, MAX_TEXT_BYTES, f"trial.law in {faults.file}") is None:
        return None
    return name, path


def _starts(table: Mapping[str, Any], faults: FaultList, notes: list[str]) -> Starts:
    """How trials begin, each offset, bearing and speed once."""
    if not table:
        return Starts()
    at = "trial.starts"
    lists = {
        "offsets": each_once(f"{at}.offsets_m", table["offsets_m"], faults.file, notes),
        "bearings": each_once(f"{at}.bearings_deg", table["bearings_deg"], faults.file, notes, FULL_TURN_DEG),
        "speeds": each_once(f"{at}.lateral_m_s", table["lateral_m_s"], faults.file, notes),
    }
    count = math.prod(map(len, lists.values())) + table["random"]
    if count > MOST_STARTS:
        told = f"{in_words(lists)} and {table['random']} at random"
        faults.add(at, f"{told} make {count} starts, more than {MOST_STARTS}; list fewer, or lower random")
    return Starts(
        offsets_m=lists["offsets"],
        bearings_rad=tuple(map(math.radians, lists["bearings"])),
        lateral_m_s=lists["speeds"],
        random=table["random"],
    )


def _check_bounces(bounces: int, recovered: Recovered, faults: FaultList) -> None:
    """There are bounces enough to see a recovery."""
    where = "trial.recovered"
    by, more = recovered.by_bounce, recovered.then_for
    if by + more > bounces and not faulty(faults, "trial.bounces", where):
        told = f"by_bounce = {by} and then_for = {more} take {by + more} bounces"
        faults.add(where, f"{told}, more than trial.bounces = {bounces}; lower them, or raise that")


def _check_centre(document: Mapping[str, Any], arm: ArmSpec | None, faults: FaultList) -> None:
    """Something says where the ball is to be struck."""
    said = "rally" in document or "centre_m" in document["trial"]
    if not said and arm is not None and arm.start is None:
        told = "missing; give the ball's centre at contact, or a start posture in [arm], above whose strike point it is"
        faults.add("trial.centre_m", told)
