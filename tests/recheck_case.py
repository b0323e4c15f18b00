"""Folders of results for tests of the second opinion: written by a real run, then forged with digests to match."""

from __future__ import annotations

import hashlib
import json
import shutil
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np

from reach.evidence.items import DIFFER, Item
from reach.recheck.answer import opinion
from reach.report.folder import DIGESTS, EVIDENCE, VERDICT, digests, write_files
from reach.report.stored import archive
from reach.report.writers import WRITERS, part
from reach.result import Result

Change = Callable[[dict[str, dict[str, np.ndarray]], dict[str, Any], dict[str, Any]], None]
"""Takes the arrays of each archive, cell.json and verdict.json, to be changed in place."""


def forged(folder: Path, out: Path, change: Change) -> Path:
    """A copy of a folder with its evidence changed and the digests made to match."""
    shutil.copytree(folder, out)
    evidence = out / "evidence"
    names = sorted(path.name for path in evidence.glob("*.npz"))
    arrays = {name: dict(np.load(evidence / name, allow_pickle=False)) for name in names}
    cell, verdict = (
        json.loads(path.read_text("utf-8")) for path in (evidence / "cell.json", out / "verdict.json")
    )
    change(arrays, cell, verdict)
    for name, content in arrays.items():
        (evidence / name).write_bytes(archive(**content))
    (evidence / "cell.json").write_text(json.dumps(cell), "utf-8")
    (out / "verdict.json").write_text(json.dumps(verdict), "utf-8")
    redigest(out)
    return out


def evidence_only(result: Result, folder: Path) -> Path:
    """Write what the second opinion reads, without table and report; returns the folder."""
    stored = part(result.command, "evidence").evidence_files(result)
    files = {f"{EVIDENCE}/{name}": content for name, content in stored.items()}
    verdict = WRITERS[result.command]["json"](result)
    files[f"{EVIDENCE}/{DIGESTS}"] = digests({**files, VERDICT: verdict})
    write_files({folder / name: content for name, content in {**files, VERDICT: verdict}.items()})
    return folder


def redigest(folder: Path) -> None:
    """Write digests that match what is in a folder now."""
    place = folder / "evidence" / "digests.json"
    content = json.loads(place.read_text("utf-8"))
    for entry in content["files"]:
        entry["sha256"] = hashlib.sha256((folder / entry["path"]).read_bytes()).hexdigest()
    place.write_text(json.dumps(content), "utf-8")


def differing(folder: Path) -> list[Item]:
    """Items that differ in a folder."""
    return [item for item in opinion(folder).items if item.status == DIFFER]


def named(items: list[Item]) -> set[tuple[str, str, str]]:
    """Kind, place and check of every difference."""
    return {
        (item.kind, item.where, check.name) for item in items for check in item.checks if not check.agrees
    }
