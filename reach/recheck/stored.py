"""What a run stored, read back: hostile until checked, and the same bytes as were written."""

from __future__ import annotations

import io
import json
import math
import zipfile
from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from typing import Any

import numpy as np

from reach.errors import Fault, InputError
from reach.formats.files import Reading

VERDICT, CELL, DIGESTS = "verdict.json", "evidence/cell.json", "evidence/digests.json"
SCHEMA, DIGESTS_SCHEMA = "strikecheck/evidence/1", "strikecheck/digests/1"
COMMANDS = ("follow", "survey", "rally", "trial")
ARCHIVES = ("log.npz", "motion.npz", "points.npz", "motions.npz", "proofs.npz", "runs.npz")  # of evidence/
MAX_BYTES = 2_000_000_000  # of one file; 40 trials of a minute at 1 kHz have 40 MB
MAX_UNPACKED = 8_000_000_000  # of one archive
MAX_DEPTH = 60  # of a JSON file; ours nest 8 deep


class BadFolder(InputError):
    """A folder that is no run's, or not as it was written; exit code 2."""

    def __init__(self, where: str, what: str, file: str = ""):
        super().__init__([Fault(file or "folder", where, what)])


@dataclass(frozen=True, eq=False)
class Stored:
    """The files of one run.

    Attributes
    ----------
    folder : as named
    command : that wrote it
    cell, verdict : cell.json and verdict.json
    arrays : of each archive, by the file's name
    files : (path, digest found) of every file read
    """

    folder: str
    command: str
    cell: dict[str, Any]
    verdict: dict[str, Any]
    arrays: Mapping[str, Mapping[str, np.ndarray]]
    files: tuple[tuple[str, str], ...]

    def has(self, file: str, name: str) -> bool:
        """Whether an archive has an array."""
        return name in self.arrays.get(file, {})

    def array(self, file: str, name: str, shape: tuple[int | None, ...], kind: str = "f") -> np.ndarray:
        """An array of an archive, checked.

        Parameters
        ----------
        shape : lengths, None for any
        kind : "f" numbers, "i" whole ones, "b" truth values, "U" texts

        Raises
        ------
        BadFolder
            Where it is missing, or of another shape or kind.
        """
        found = self.arrays.get(file, {}).get(name)
        place = f"{self.folder}/evidence/{file}"
        if found is None:
            raise BadFolder(name, "is missing; run the command again", place)
        fits = found.ndim == len(shape) and all(
            want in (None, have) for want, have in zip(shape, found.shape, strict=True)
        )
        kinds = {"f": "fiu", "i": "iu", "b": "b", "U": "U"}[kind]
        if not fits or found.dtype.kind not in kinds:
            raise BadFolder(name, f"has shape {found.shape} and type {found.dtype}, which it can't", place)
        return found.astype(np.float64) if kind == "f" else found

    def finite(self, file: str, name: str, shape: tuple[int | None, ...]) -> np.ndarray:
        """Like `array`, of numbers that are all finite."""
        found = self.array(file, name, shape)
        if not np.isfinite(found).all():
            raise BadFolder(name, "holds what is no finite number", f"{self.folder}/evidence/{file}")
        return found

    def at(self, *keys: str | int) -> Any:
        """What cell.json has at a place.

        Raises
        ------
        BadFolder
            Where it has nothing there.
        """
        found: Any = self.cell
        for key in keys:
            try:
                found = found[key]
            except (KeyError, IndexError, TypeError):
                where = ".".join(map(str, keys))
                raise BadFolder(where, "is missing; run the command again", f"{self.folder}/{CELL}") from None
        return found

    def entries(self, key: str) -> list[dict[str, Any]]:
        """A list of tables of verdict.json."""
        found = self.verdict.get(key)
        if not isinstance(found, list) or not all(isinstance(entry, dict) for entry in found):
            raise BadFolder(key, "is no list of tables", f"{self.folder}/{VERDICT}")
        return found

    def number(self, *keys: str | int) -> float:
        """A finite number at a place of cell.json."""
        found = self.at(*keys)
        value = math.nan if isinstance(found, bool) else as_number(found)
        if not math.isfinite(value):
            raise BadFolder(".".join(map(str, keys)), "is no finite number", f"{self.folder}/{CELL}")
        return value


def read_folder(folder: str) -> Stored:
    """Read what a run stored, every file as it was written.

    Raises
    ------
    InputError
        Naming what is missing, damaged or changed, and inputs that have changed since.
    """
    top = Path(folder)
    if not top.is_dir():
        raise BadFolder("folder", "not found; name the folder that a command wrote (--out)", folder)
    if not (top / VERDICT).is_file():
        raise BadFolder(VERDICT, "is not there: the run did not end, or it is no folder of results", folder)
    reading = Reading()
    digests = _digests(folder, _json(folder, DIGESTS, reading))
    contents = {name: reading.read(f"{folder}/{name}", MAX_BYTES) for name in digests}
    _raise(reading)
    changed = []
    for source in reading.inputs[1:]:
        name = source.path.removeprefix(f"{folder}/")
        if digests[name] != source.sha256:
            changed.append(Fault(source.path, "file", "changed since it was written; run the command again"))
    if changed:
        raise InputError(changed)
    cell, verdict = (_parsed(folder, name, contents.get(name)) for name in (CELL, VERDICT))
    if cell.get("schema") != SCHEMA or cell.get("command") not in COMMANDS:
        raise BadFolder("schema", f"is not {SCHEMA} of a command with a verdict", f"{folder}/{CELL}")
    arrays = {}
    for name in ARCHIVES:
        content = contents.get(f"evidence/{name}")
        if content is not None:
            arrays[name] = _unpacked(f"{folder}/evidence/{name}", content)
    files = tuple((source.path, source.sha256) for source in reading.inputs)
    return Stored(folder, cell["command"], cell, verdict, arrays, files)


def _digests(folder: str, content: dict[str, Any]) -> dict[str, str]:
    """Digest by name of every file of the run, the names all inside the folder."""
    place = f"{folder}/{DIGESTS}"
    listed = content.get("files")
    if content.get("schema") != DIGESTS_SCHEMA or not isinstance(listed, list):
        raise BadFolder("schema", f"is not {DIGESTS_SCHEMA}", place)
    found = {}
    for entry in listed:
        name, digest = (entry.get(key) if isinstance(entry, dict) else None for key in ("path", "sha256"))
        if not isinstance(name, str) or not isinstance(digest, str):
            raise BadFolder("files", "has an entry without path and sha256", place)
        parts = name.removeprefix("evidence/").split("/")
        if len(parts) != 1 or parts[0] in ("", ".", "..") or "\0" in name:
            raise BadFolder("files", f"names {name[:80]!r}, which lies elsewhere", place)
        found[name] = digest
    for name in (VERDICT, CELL):
        if name not in found:
            raise BadFolder("files", f"does not list {name}", place)
    return found


def _json(folder: str, name: str, reading: Reading) -> dict[str, Any]:
    content = reading.read(f"{folder}/{name}", MAX_BYTES)
    _raise(reading)
    return _parsed(folder, name, content)


def _parsed(folder: str, name: str, content: bytes | None) -> dict[str, Any]:
    try:
        found = json.loads(content or b"")
    except (ValueError, RecursionError) as error:
        raise BadFolder("file", f"is no JSON that can be read ({error})", f"{folder}/{name}") from None
    if not isinstance(found, dict):
        raise BadFolder("file", "is no JSON object", f"{folder}/{name}")
    return found


def _unpacked(path: str, content: bytes) -> dict[str, np.ndarray]:
    """Arrays of an archive; nothing in it is unpickled."""
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as packed:
            if sum(item.file_size for item in packed.infolist()) > MAX_UNPACKED:
                raise BadFolder("file", f"unpacks to more than {MAX_UNPACKED / 1e9:.0f} GB", path)
        with np.load(io.BytesIO(content), allow_pickle=False) as archive:
            return {name: archive[name] for name in archive.files}
    except (ValueError, OSError, EOFError, KeyError, zipfile.BadZipFile, NotImplementedError) as error:
        raise BadFolder("file", f"is no archive of arrays ({error})", path) from None


def _raise(reading: Reading) -> None:
    if reading.faults:
        raise InputError(reading.faults)


def as_number(value: Any) -> float:
    """A number as such, nan for anything else; a whole one may be too large for it."""
    try:
        return float(value) if isinstance(value, int | float) else math.nan
    except OverflowError:
        return math.nan


def number_in(entry: Mapping[str, Any], key: str) -> float:
    """A number in a table, nan where it has none there."""
    return as_number(entry.get(key))


def largest(values: Any) -> float:
    """Largest size among values, 0 of none; nan where one is."""
    return float(np.abs(values).max(initial=0.0))
