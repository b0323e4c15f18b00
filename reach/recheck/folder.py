"""A run's folder, read: the same bytes as were written, from files of the folder alone."""

from __future__ import annotations

from pathlib import Path
from typing import Any

from reach.errors import Fault, InputError
from reach.formats.files import Reading
from reach.recheck.stored import CELL, VERDICT, BadFolder, Stored
from reach.recheck.unpack import arrays, parsed

DIGESTS = "evidence/digests.json"
SCHEMA, DIGESTS_SCHEMA = "strikecheck/evidence/1", "strikecheck/digests/1"
COMMANDS = ("follow", "survey", "rally", "trial")
ARCHIVES = tuple(f"evidence/{name}.npz" for name in ("log", "motion", "points", "motions", "proofs", "runs"))
MAX_BYTES = 2_000_000_000  # of one file; 40 trials of a minute at 1 kHz have 1 GB
MAX_JSON_BYTES = 100_000_000  # of one JSON file, which takes ten times as much to hold
MOST_FILES = 50  # a run writes ten at the most


def read_folder(folder: str) -> Stored:
    """Read what a run stored, every file as it was written.

    Raises
    ------
    InputError
        Naming what is missing, damaged or changed.
    """
    top = Path(folder)
    if "\0" in folder or not top.is_dir():
        raise BadFolder("folder", "not found; name the folder that a command wrote (--out)", folder)
    if not (top / VERDICT).is_file():
        raise BadFolder(VERDICT, "is not there: the run did not end, or it is no folder of results", folder)
    if not (top / CELL).is_file() and _is_second_opinion(folder):
        raise BadFolder(
            VERDICT, "is a second opinion's; name the folder that the command itself wrote", folder
        )
    if not (top / DIGESTS).is_file():
        told = "is not there: evidence/ belongs to the results; run the command again, or bring it back"
        raise BadFolder(DIGESTS, told, folder)
    reading = Reading()
    digests = _digests(folder, _json(folder, DIGESTS, reading))
    contents, changed = {}, []
    gone = [name for name in digests if not (top / name).exists()]
    if gone:
        told = "is not there, and was when it was written; run the command again"
        raise InputError(Fault(f"{folder}/{name}", "file", told) for name in gone)
    for name, digest in digests.items():
        content = reading.read(f"{folder}/{name}", MAX_JSON_BYTES if name in (VERDICT, CELL) else MAX_BYTES)
        if content is not None and reading.inputs[-1].sha256 != digest:
            changed.append(
                Fault(f"{folder}/{name}", "file", "changed since it was written; run the command again")
            )
        elif content is not None and name in (VERDICT, CELL, *ARCHIVES):
            contents[name] = content
    if reading.faults or changed:
        raise InputError([*reading.faults, *changed])
    cell, verdict = (parsed(contents.pop(name), f"{folder}/{name}") for name in (CELL, VERDICT))
    if cell.get("schema") != SCHEMA or cell.get("command") not in COMMANDS:
        raise BadFolder("schema", f"is not {SCHEMA} of a command with a verdict", f"{folder}/{CELL}")
    found = {}
    for name in list(contents):
        found[name.removeprefix("evidence/")] = arrays(contents.pop(name), f"{folder}/{name}")
    files = tuple((source.path, source.sha256) for source in reading.inputs)
    return Stored(folder, cell["command"], cell, verdict, found, files)


def _digests(folder: str, content: dict[str, Any]) -> dict[str, str]:
    """Digest by name of every file of the run, the names all inside the folder."""
    place = f"{folder}/{DIGESTS}"
    listed = content.get("files")
    if content.get("schema") != DIGESTS_SCHEMA or not isinstance(listed, list) or len(listed) > MOST_FILES:
        raise BadFolder("schema", f"is not {DIGESTS_SCHEMA}", place)
    found: dict[str, str] = {}
    for entry in listed:
        name, digest = (entry.get(key) if isinstance(entry, dict) else None for key in ("path", "sha256"))
        if not isinstance(name, str) or not isinstance(digest, str):
            raise BadFolder("files", "has an entry without path and sha256", place)
        parts = name.removeprefix("evidence/").split("/")
        if len(parts) != 1 or parts[0] in ("", ".", "..") or not name.isprintable():
            raise BadFolder("files", f"names {name[:80]!r}, which lies elsewhere", place)
        if name in found:
            raise BadFolder("files", f"names {name[:80]!r} twice", place)
        found[name] = digest
    for name in (VERDICT, CELL):
        if name not in found:
            raise BadFolder("files", f"does not list {name}", place)
    return found


def _json(folder: str, name: str, reading: Reading) -> dict[str, Any]:
    content = reading.read(f"{folder}/{name}", MAX_JSON_BYTES)
    if content is None:
        raise InputError(reading.faults)
    return parsed(content, f"{folder}/{name}")


def _is_second_opinion(folder: str) -> bool:
    """Whether a folder without evidence holds what recheck wrote."""
    content = Reading().read(f"{folder}/{VERDICT}", MAX_JSON_BYTES)
    return content is not None and str(parsed(content, folder).get("schema")).startswith(
        "strikecheck/recheck/"
    )
