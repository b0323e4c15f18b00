"""The inputs of a run read again, by code of this package alone, and what was stored of them compared with it."""

from __future__ import annotations

import csv
import os
import tomllib
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from typing import Any

from reach.evidence.items import Check, Item, same
from reach.formats.files import MAX_LOG_BYTES, MAX_TEXT_BYTES, Reading
from reach.recheck.stated.asked import cell_checks, command_checks, near, strikes_checks
from reach.recheck.stated.joints import DRIVE, FIELDS, Said, read_joints, with_limits_file
from reach.recheck.stored import BadFolder, Stored

KIND = "as stated"
STARTS = {"start_rad": 1.0, "start_deg": 0.017453292519943295, "start_m": 1.0}  # to SI units
NOT_TOLD = "the cell was made in Python: there is no file to compare it with"
ELSEWHERE = "not there: run recheck in the folder in which the command was run"
BROKEN = (
    ValueError,
    TypeError,
    KeyError,
    AttributeError,
    IndexError,
    OverflowError,
    RecursionError,
    csv.Error,
)


@dataclass(frozen=True)
class Inputs:
    """The inputs of a run: content by path of those that are there, and the paths of those that are not."""

    content: Mapping[str, bytes]
    missing: tuple[str, ...]


def items(stored: Stored) -> list[Item]:
    """What the cell file, the URDF and the limits file state, against cell.json.

    Raises
    ------
    BadFolder
        Where an input has changed since the run, or is none that a run can have read.
    """
    inputs = read_inputs(stored)
    if not inputs.content and not inputs.missing:
        return [Item(KIND, "", (), NOT_TOLD)]
    told = f"{_list_of(inputs.missing)} {ELSEWHERE}"
    found = [Item(KIND, path, (), told) for path in inputs.missing]
    cell = next(((path, table) for path, table in _tables(inputs) if _is_cell(table)), None)
    if cell is None:
        return found or [Item(KIND, "", (), "none of the inputs is a cell file")]
    path, document = cell
    try:
        return [*found, *_compared(path, document, inputs, stored)]
    except BROKEN as error:
        raise BadFolder("file", f"is no cell file that a run can have read ({error})", path) from None


def urdf_again(stored: Stored) -> bytes | None:
    """The user's own URDF, where it is there and the same as in the run.

    Raises
    ------
    BadFolder
        Where it has changed since.
    """
    path, listed = stored.word("arm", "urdf_path"), stored.inputs()
    return _verified(path, listed[path], MAX_TEXT_BYTES) if path in listed else None


def read_inputs(stored: Stored) -> Inputs:
    """Every input that cell.json lists, its digest compared.

    Raises
    ------
    BadFolder
        Where one has changed since the run.
    """
    found = {path: _verified(path, digest, MAX_LOG_BYTES) for path, digest in stored.inputs().items()}
    content = {path: data for path, data in found.items() if data is not None}
    return Inputs(content, tuple(path for path in found if path not in content))


def _verified(path: str, digest: str, most: int) -> bytes | None:
    """The bytes of a file, None where it is not there or can't be read."""
    reading = Reading()
    content = reading.read(path, most)
    if content is not None and reading.inputs[0].sha256 != digest:
        raise BadFolder("file", "changed since the run; run the command again", path)
    return content


def _tables(inputs: Inputs) -> list[tuple[str, dict[str, Any]]]:
    """Every input that is TOML."""
    found = []
    for path, content in inputs.content.items():
        if len(content) <= MAX_TEXT_BYTES:
            try:
                found.append((path, tomllib.loads(content.decode("utf-8-sig"))))
            except (ValueError, RecursionError):
                continue
    return found


def _list_of(paths: Sequence[str]) -> str:
    """Paths in words, up to "is" or "are"."""
    return f"{', '.join(paths)} {'is' if len(paths) == 1 else 'are'}"


def _is_cell(table: Mapping[str, Any]) -> bool:
    return isinstance(table.get("arm"), dict) and "urdf" in table["arm"]


def _compared(path: str, document: Mapping[str, Any], inputs: Inputs, stored: Stored) -> list[Item]:
    """Items of the joints, of the cell and of what was asked."""
    arm = document["arm"]
    urdf = _beside(path, arm["urdf"])
    limits = _beside(path, arm["limits"]) if "limits" in arm else None
    log = _log_of(path, document, stored)
    named = [name for name in (urdf, limits, log) if name is not None]
    listed = {*inputs.content, *inputs.missing}
    checks = [same("named file", name, name if name in listed else "none of the inputs") for name in named]
    checks.append(same("URDF", urdf, stored.at("arm", "urdf_path")))
    checks += [] if log is None else [same("log", log, stored.at("follow", "source"))]
    checks.append(same("tip", arm["tip"], stored.at("arm", "tip")))
    checks += cell_checks(document, stored)
    found, left = [], ""
    if urdf in inputs.content:
        chain, beside = read_joints(inputs.content[urdf], urdf, arm["tip"])
        checks += _chain_checks(chain, beside, arm, stored)
        if limits is not None and limits in inputs.content:
            chain = with_limits_file(chain, dict(_tables(inputs))[limits])
        whole = limits is None or limits in inputs.content
        found = [_joint_item(joint, stored, "" if whole else f"{limits} is {ELSEWHERE}") for joint in chain]
    else:
        left = f"{urdf} is {ELSEWHERE}"
    found.append(Item(KIND, "cell", tuple(checks), left))
    asked, left = command_checks(document, stored), ""
    if stored.command == "survey" and "strikes" in document["survey"]:
        file = _beside(path, document["survey"]["strikes"])
        asked += strikes_checks(inputs.content[file], stored) if file in inputs.content else []
        left = "" if file in inputs.content else f"{file} is {ELSEWHERE}"
    return [*found, Item(KIND, stored.command, tuple(asked), left)] if asked else found


def _log_of(path: str, document: Mapping[str, Any], stored: Stored) -> str | None:
    """The log that the cell names, None where another was handed over or none is followed."""
    if stored.command != "follow" or stored.at("follow", "source") == "arrays":
        return None
    return _beside(path, document["follow"]["commands"])


def _joint_item(joint: Said, stored: Stored, left: str) -> Item:
    """One joint: every limit and number of its drive, or the kind alone where its limits file is not there."""
    names = [told["name"] for told in stored.tables("arm", "joints")]
    if joint.name not in names:
        return Item(KIND, joint.name, (same("joint", "on the chain", "none"),))
    at = ("arm", "joints", names.index(joint.name))
    checks: list[Check] = [same("kind", joint.kind, stored.at(*at, "kind"))]
    if not left:
        checks += [_field_check(field, joint, stored.at(*at, "limits", field)) for field in FIELDS]
    return Item(KIND, joint.name, tuple(checks), left)


def _field_check(field: str, joint: Said, told: Any) -> Check:
    """One limit kind, or one number of the drive: null is unknown, a side that is null unlimited."""
    ours, name = joint.values.get(field), field.replace("_", " ")
    theirs: Any = told
    if field not in DRIVE and told is not None:
        theirs = [-float("inf") if told["lo"] is None else told["lo"]]
        theirs.append(float("inf") if told["hi"] is None else told["hi"])
    unknown = [name for name, side in (("here", ours), ("stored", theirs)) if side is None]
    if len(unknown) == 1:
        known = ours if theirs is None else theirs
        said = ("here", "stored")[theirs is not None]
        text = f"unknown {unknown[0]}, {known} {said}"
        return Check(name, float("inf"), 0.0, joint.unit(field), text)
    return near(name, ours, theirs, joint.unit(field))


def _chain_checks(
    chain: tuple[Said, ...], beside: tuple[Said, ...], arm: Mapping[str, Any], stored: Stored
) -> list[Check]:
    """The chain's joints in order, the values of those beside it, and the posture at the start."""
    names = [joint.name for joint in chain]
    found = [same("chain", names, [told["name"] for told in stored.tables("arm", "joints")])]
    locked = {**arm.get("locked_rad", {}), **arm.get("locked_m", {})}
    held = {told["name"]: told["value"] for told in stored.tables("arm", "held")}
    found.append(same("held joints", sorted(joint.name for joint in beside), sorted(held)))
    for joint in beside:
        low, high = joint.values.get("position", (0.0, 0.0))
        value = locked.get(joint.name, min(max(0.0, low), high))
        found.append(near(f"held {joint.name}", value, held.get(joint.name), joint.unit("position")))
    given = {name: value * unit for key, unit in STARTS.items() for name, value in arm.get(key, {}).items()}
    if given:
        values = [given.get(name, 0.0) for name in names]
        found.append(near("start", values, stored.at("arm", "start"), _mixed(chain)))
    fast = {**arm.get("start_velocity_rad_s", {}), **arm.get("start_velocity_m_s", {})}
    speeds = [fast.get(name, 0.0) for name in names]
    found.append(near("start velocity", speeds, stored.at("arm", "start_velocity"), f"{_mixed(chain)}/s"))
    return found


def _mixed(chain: tuple[Said, ...]) -> str:
    return "m" if all(joint.sliding for joint in chain) else "rad"


def _beside(file: str, path: str) -> str:
    return os.path.normpath(os.path.join(os.path.dirname(file), path))
