"""What a run stored, handed out checked: no shape, type or number of it is taken on trust."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np

from reach.errors import Fault, InputError

VERDICT, CELL = "verdict.json", "evidence/cell.json"
MOST_INPUTS = 10  # files; a cell names six at the most
LONGEST_WHERE, LONGEST_WHAT = 200, 400  # characters of a fault; what a folder holds may be of any length


class BadFolder(InputError):
    """A folder that is no run's, or not as it was written; exit code 2."""

    def __init__(self, where: str, what: str, file: str = ""):
        place, why = _shown(where, LONGEST_WHERE), _shown(what, LONGEST_WHAT)
        super().__init__([Fault(_shown(file, LONGEST_WHAT) or "folder", place, why)])


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
        value = as_number(self.at(*keys))
        if not math.isfinite(value):
            raise self.refused(keys, "is no finite number")
        return value

    def between(self, low: float, high: float, *keys: str | int) -> float:
        """A number of cell.json within bounds that every cell file keeps."""
        value = self.number(*keys)
        if not low <= value <= high:
            raise self.refused(keys, f"is not from {low:g} to {high:g}")
        return value

    def vector(self, count: int, *keys: str | int) -> np.ndarray:
        """So many finite numbers of cell.json: (count,)."""
        found = self.at(*keys)
        values = [as_number(value) for value in found] if isinstance(found, list) else []
        if len(values) != count or not all(map(math.isfinite, values)):
            raise self.refused(keys, f"is not {count} finite numbers")
        return np.array(values)

    def flag(self, *keys: str | int) -> bool:
        """A truth value of cell.json."""
        found = self.at(*keys)
        if not isinstance(found, bool):
            raise self.refused(keys, "is neither true nor false")
        return found

    def word(self, *keys: str | int) -> str:
        """A text of cell.json."""
        found = self.at(*keys)
        if not isinstance(found, str):
            raise self.refused(keys, "is no text")
        return found

    def words(self, *keys: str | int) -> list[str]:
        """A list of texts of cell.json."""
        found = self.at(*keys)
        if not isinstance(found, list) or not all(isinstance(word, str) for word in found):
            raise self.refused(keys, "is no list of words")
        return found

    def table(self, *keys: str | int) -> dict[str, Any]:
        """A table of cell.json."""
        found = self.at(*keys)
        if not isinstance(found, dict):
            raise self.refused(keys, "is no table")
        return found

    def tables(self, *keys: str | int) -> list[dict[str, Any]]:
        """A list of tables of cell.json."""
        found = self.at(*keys)
        if not isinstance(found, list) or not all(isinstance(entry, dict) for entry in found):
            raise self.refused(keys, "is no list of tables")
        return found

    def inputs(self) -> dict[str, str]:
        """Digest by path of every file that the run read."""
        listed = self.tables("inputs")
        if len(listed) > MOST_INPUTS:
            raise self.refused(("inputs",), f"names more than {MOST_INPUTS} files")
        paths, digests = (
            [self.word("inputs", i, key) for i in range(len(listed))] for key in ("path", "sha256")
        )
        if len(set(paths)) < len(paths):
            raise self.refused(("inputs",), "names a file twice")
        return dict(zip(paths, digests, strict=True))

    def refused(self, keys: tuple[str | int, ...], what: str) -> BadFolder:
        """The error for what cell.json has at a place."""
        return BadFolder(".".join(map(str, keys)), what, f"{self.folder}/{CELL}")


def as_number(value: Any) -> float:
    """A number as such, nan for anything else, truth values among it; a whole one may be too large for it."""
    try:
        return float(value) if isinstance(value, int | float) and not isinstance(value, bool) else math.nan
    except OverflowError:
        return math.nan


def number_in(entry: Mapping[str, Any], key: str) -> float:
    """A number in a table, nan where it has none there."""
    return as_number(entry.get(key))


def largest(values: Any) -> float:
    """Largest size among values, 0 of none; nan where one is."""
    return float(np.abs(values).max(initial=0.0))


def _shown(text: str, most: int) -> str:
    """A text out of a folder on one line, no longer than so many characters, without what a terminal would obey."""
    cut = text if len(text) <= most else f"{text[:most]}…"
    return "".join(sign if sign.isprintable() else "?" for sign in cut)
