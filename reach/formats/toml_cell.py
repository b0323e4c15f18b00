"""A cell file and all it names, made into one checked Cell; every fault of every file comes at once."""

from __future__ import annotations

import math
import os
import re
import unicodedata
from collections.abc import Mapping
from typing import Any, Literal

from reach.cell import (
    Accept,
    ArmSpec,
    Ball,
    Cell,
    Contact,
    Drive,
    Follow,
    Margins,
    Paddle,
    Part,
    Rally,
    SolverSpec,
    Tool,
    Trial,
)
from reach.errors import Fault, FaultList, InputError, nearest
from reach.formats.bouncing import check_bouncing
from reach.formats.capped import cut_short
from reach.formats.cross_checks import check_accept, check_ball, check_contact, check_paddle, check_room
from reach.formats.files import MAX_LOG_BYTES, MAX_TEXT_BYTES, Reading, beside
from reach.formats.log_time import check_span
from reach.formats.presets import BALLS
from reach.formats.readers import READERS
from reach.formats.schema import ACCEPT, CELL, CONTROL, MARGINS, SOLVER
from reach.formats.toml_arm import pose_of, read_arm
from reach.formats.toml_rally import read_rally
from reach.formats.toml_survey import read_survey
from reach.formats.toml_text import parse_toml
from reach.formats.toml_trial import read_trial

Need = Literal["follow", "survey", "rally", "trial"]

LONGEST_MESSAGE = 800  # characters; a fault is to fit a screen
_NEEDED = {
    "follow": "name the command log and how to read it",
    "survey": "say where and how to strike",
    "rally": "say where the ball is to be kept up, and how high",
    "trial": "say which law is to keep the ball up, and from which starts",
}
_ESCAPED = ("Cc", "Cf", "Zl", "Zp")  # control, format (such as bidi overrides), line and paragraph ends


def load_cell(path: str | os.PathLike[str], need: Need | None = None) -> Cell:
    """Read a cell file with its URDF, limits file, command log, file of strikes and law.

    Parameters
    ----------
    path : str or path
    need : the table, named as its command, without which the cell is a fault

    Returns
    -------
    Cell
        Checked, in SI units and radians.

    Raises
    ------
    InputError
        With the faults of all files, ordered by file and place.
    """
    name = os.fspath(path)
    reading = Reading()
    faults = FaultList(name)
    text = reading.read_text(name, MAX_TEXT_BYTES)
    document = None if text is None else parse_toml(text, faults)
    cell = None if document is None else _cell(document, need, faults, reading)
    found = [*reading.faults, *faults.faults]
    if found or cell is None:
        plain = dict.fromkeys(Fault(*map(_one_line, (f.file, f.where, f.what))) for f in cut_short(found))
        raise InputError(sorted(plain, key=_in_order))
    return cell


def _one_line(text: str) -> str:
    """The text with characters that steer a terminal (a file may hold any) escaped, and cut to a screen."""
    if text.isascii() and text.isprintable():
        escaped = text
    else:
        escaped = "".join(map(_plain, text[: LONGEST_MESSAGE + 1]))
    return escaped if len(escaped) <= LONGEST_MESSAGE else escaped[:LONGEST_MESSAGE] + "…"


def _plain(character: str) -> str:
    if unicodedata.category(character) not in _ESCAPED:
        return character
    code = ord(character)
    return f"\\u{code:04x}" if code < 0x10000 else f"\\U{code:08x}"


def _in_order(fault: Fault) -> tuple[str, list[tuple[int, str]], str]:
    """Sort key by file, then place with its numbers read as numbers."""
    parts = re.findall(r"\d+|\D+", fault.where)
    return fault.file, [(int(p), "") if p.isdecimal() else (-1, p) for p in parts], fault.what


def _cell(document: Mapping[str, Any], need: str | None, faults: FaultList, reading: Reading) -> Cell | None:
    read = CELL.read(document, "", faults)
    quiet = FaultList(faults.file)
    given = {key: table if isinstance(table, dict) else {} for key, table in document.items()}
    margins = Margins(**(read["margins"] or MARGINS.read({}, "", quiet)))
    accept = _accept(read["accept"] or ACCEPT.read({}, "", quiet))
    arm = paddle = None
    if read["arm"]:
        torque_counts = "torque" in accept.require or "torque rate" in accept.require
        needs_start = "follow" in document or need == "follow"
        arm = read_arm(read["arm"], given["arm"], torque_counts, needs_start, faults, reading)
    if read["paddle"]:
        check_paddle(read["paddle"], given["paddle"], faults, reading.notes)
    ball = _ball(read["ball"], given["ball"], faults) if read["ball"] else None
    contact = _contact(read["contact"], given["contact"], faults) if read["contact"] else None
    if read["accept"]:
        check_accept(read["accept"], faults)
    if need is not None and need not in document:
        faults.add(need, f"missing; {_NEEDED[need]} in a table [{need}]")
    follow = _follow(read["follow"], faults, reading) if read["follow"] else None
    period_s = (read["control"] or CONTROL.read({}, "", quiet))["period_s"]
    if follow is not None:
        check_span(follow.commands, period_s, faults)
    survey = None
    if isinstance(document.get("survey"), dict):
        has_contact = "contact" in document
        survey = read_survey(read["survey"], given["survey"], contact, has_contact, faults, reading)
    rally, trial = _bounced(document, need, read, ball, accept, arm, faults, reading)
    if "start" in given.get("arm", {}) and not _log_may_be_posed(follow, "follow" in document):
        faults.add("arm.start", '"auto" needs a command log with pose columns; give start_rad instead')
    if arm is not None:
        check_room(arm.joints, margins, faults)
    if faults.faults or reading.faults or arm is None:
        return None
    paddle = _paddle(read["paddle"])
    return Cell(
        path=faults.file,
        arm=arm,
        paddle=paddle,
        period_s=period_s,
        tool=Tool(**read["tool"]) if read["tool"] else None,
        ball=ball,
        contact=contact,
        drive=Drive(**read["drive"]) if read["drive"] is not None else None,
        solver=SolverSpec(**(read["solver"] or SOLVER.read({}, "", quiet))),
        margins=margins,
        accept=accept,
        follow=follow,
        survey=survey,
        rally=rally,
        trial=trial,
        inputs=tuple(reading.inputs),
        notes=tuple(map(_one_line, reading.notes)),
    )


def _bounced(
    document: Mapping[str, Any],
    need: str | None,
    read: Mapping[str, Any],
    ball: Ball | None,
    accept: Accept,
    arm: ArmSpec | None,
    faults: FaultList,
    reading: Reading,
) -> tuple[Rally | None, Trial | None]:
    """Rally and trial, each None where there is none or a fault of it was noted."""
    asking = [name for name in ("rally", "trial") if name in document or need == name]
    if asking:
        check_bouncing(asking, document, read, ball, accept, faults, reading.notes)
    rally = trial = None
    if isinstance(document.get("rally"), dict):
        rally = read_rally(read["rally"], document["rally"], faults, reading.notes)
    if isinstance(document.get("trial"), dict):
        trial = read_trial(read["trial"], document, rally, arm, faults, reading)
    return rally, trial


def _accept(table: Mapping[str, Any]) -> Accept:
    values = dict(table)
    values["strike_tilt_error_rad"] = math.radians(values.pop("strike_tilt_error_deg"))
    return Accept(**values)


def _paddle(table: Mapping[str, Any]) -> Paddle:
    values = dict(table)
    parts = tuple(Part(**part) for part in values.pop("part"))
    return Paddle(mount=pose_of(values.pop("mount")), parts=parts, **values)


def _ball(table: Mapping[str, Any], given: Mapping[str, Any], faults: FaultList) -> Ball | None:
    """The ball by its preset, by its values, or by a preset with some values of the cell's own."""
    check_ball(table, given, faults)
    preset = BALLS.get(table["preset"] or "")
    values = {key: value for key, value in table.items() if key != "preset"}
    if preset is None:
        return Ball(**values) if None not in values.values() else None
    own = [key for key in ("mass_kg", "radius_m") if key in given]
    for key in ("mass_kg", "radius_m"):
        values[key] = getattr(preset, key) if values[key] is None else values[key]
    source = preset.source + (f"; {', '.join(own)} from the cell" if own else "")
    return Ball(**values, source=source)


def _contact(table: Mapping[str, Any], given: Mapping[str, Any], faults: FaultList) -> Contact | None:
    """Ball and face, None where a fault of theirs was noted."""
    check_contact(table, given, faults)
    sound = not any(fault.where.partition(".")[0] == "contact" for fault in faults.faults)
    return Contact(**table) if sound else None


def _follow(table: Mapping[str, Any], faults: FaultList, reading: Reading) -> Follow | None:
    """The log, read by the reader of its suffix, and how to follow it."""
    values = dict(table)
    named = values.pop("commands")
    if not named:
        return None
    path = beside(faults.file, named)
    suffix = os.path.splitext(path)[1].lower()
    reader = READERS.get(suffix)
    if reader is None:
        faults.add("follow.commands", f'no reader for "{suffix}" files{nearest(suffix, READERS)}')
        return None
    content = reading.read(path, MAX_LOG_BYTES, f"follow.commands in {faults.file}")
    if content is None:
        return None
    try:
        commands = reader(content, path, values["max_gap_s"], values["time_faults"])
    except InputError as error:
        reading.faults.extend(error.faults)
        return None
    reading.notes.extend(f"{path}: {mend}" for mend in commands.mends)
    return Follow(commands=commands, **values)


def _log_may_be_posed(follow: Follow | None, has_table: bool) -> bool:
    """Whether the log has poses; a log that could not be read has its own fault already."""
    if follow is None:
        return has_table
    return follow.commands.pose is not None
