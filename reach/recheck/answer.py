"""The second opinion on a folder of results."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass
from os import PathLike, fspath

import numpy as np

from reach.evidence.items import Item
from reach.recheck.arm.ground import ground
from reach.recheck.folder import read_folder
from reach.recheck.follow import whole as follow
from reach.recheck.rally import whole as rally
from reach.recheck.stated import whole as stated
from reach.recheck.survey import whole as survey
from reach.recheck.trial import whole as trial

NOT_DECIDED = "what stops or would help, needs, headroom and verdicts without margins are not decided anew"
CHECKERS = {"follow": follow, "survey": survey, "rally": rally, "trial": trial}


@dataclass(frozen=True)
class Opinion:
    """What was looked at, and what came out.

    Attributes
    ----------
    command, verdict : that wrote the folder, and its verdict
    items : a claim each
    notes : on what rests on a search
    engine : name and version of the second engine, None without one
    files : (path, digest) of what was read
    versions : of what wrote the folder
    """

    command: str
    verdict: str
    items: tuple[Item, ...]
    notes: tuple[str, ...]
    engine: str | None
    files: tuple[tuple[str, str], ...]
    versions: dict[str, str | None]


def opinion(folder: str | PathLike[str], progress: Callable[[str], None] | None = None) -> Opinion:
    """Read a folder and decide anew what a run claims there.

    Raises
    ------
    InputError
        The folder is no run's, or a file has changed since.
    """
    stored = read_folder(fspath(folder))
    checker = CHECKERS[stored.command]
    with np.errstate(all="ignore"):  # what overflows is no number, and differs
        second = ground(stored)  # first: it checks what the inputs are compared with
        found = [*stated.items(stored), *checker.items(stored, second, progress or _silent)]
    versions = stored.verdict.get("versions")
    return Opinion(
        command=stored.command,
        verdict=str(stored.verdict.get("verdict")),
        items=tuple(found),
        notes=(*checker.notes(stored), NOT_DECIDED),
        engine=None if second.engine is None else second.engine.name,
        files=stored.files,
        versions={str(k): str(v) for k, v in versions.items()} if isinstance(versions, dict) else {},
    )


def _silent(text: str) -> None:
    """No progress asked for."""
