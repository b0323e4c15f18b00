"""Results into a folder: every file whole or not at all."""

from __future__ import annotations

import contextlib
import os
import secrets
from collections.abc import Iterable, Iterator, Mapping
from pathlib import Path

from reach.errors import FaultList, OutputError
from reach.report.writers import COMMANDS, WRITERS, part
from reach.result import Result

PAGE, VERDICT, EVIDENCE = "report.html", "verdict.json", "evidence"


def write_folder(result: Result, out_dir: Path, junit: Path | None = None) -> list[Path]:
    """Write verdict.json, the command's table, report.html and evidence/ into a folder, which is made where needed.

    Returns
    -------
    list of Path
        The files written, verdict.json last.

    Raises
    ------
    OutputError
        When the folder or a file can't be written; no half file and no temporary file is left, and no
        verdict beside the files of another run.
    """
    writers = WRITERS[result.command]
    stored: Mapping[str, bytes | None] = part(result.command, "evidence").evidence_files(result)
    contents: dict[Path, str | bytes | None] = {
        out_dir / EVIDENCE / name: content for name, content in stored.items()
    }
    if junit is not None:
        contents[junit] = writers["junit"](result)
    # The verdict comes last, so a folder that has one is complete.
    for name, kind in ((COMMANDS[result.command], "csv"), (PAGE, "html"), (VERDICT, "json")):
        contents[out_dir / name] = writers[kind](result)
    return write_files(contents)


def check_targets(out_dir: Path, junit: str | None, inputs: Iterable[str]) -> None:
    """Refuse places where results can't or must not go, before anything is run.

    Raises
    ------
    InputError
        A JUnit file that has no name, is no regular file, or is one of the inputs or the results; a folder that is
        a file, or that can't be written to.
    """
    faults = FaultList("command line")
    place = next((p for p in (out_dir, *out_dir.absolute().parents) if p.exists()), Path("."))
    if not place.is_dir():
        faults.add("--out", f"{place} is a file; name a folder")
    elif not os.access(place, os.W_OK | os.X_OK):
        faults.add("--out", f"{place} can't be written to; name another folder")
    if junit is not None:
        target = Path(junit)
        results = [out_dir / name for name in (*COMMANDS.values(), PAGE, VERDICT)]
        taken = [*(Path(path) for path in inputs), *results]
        if not target.name:
            faults.add("--junit", "it has no file name; name a file")
        elif target.exists() and not target.is_file():
            faults.add("--junit", f"{junit} is no regular file; name another")
        elif target.resolve() in {path.resolve() for path in taken}:
            faults.add("--junit", f"{junit} is an input or a result of this run; name another file")
    faults.raise_if_any()


def write_files(contents: Mapping[Path, str | bytes | None]) -> list[Path]:
    """Write files whole or not at all, in their order; a file whose content is None is removed.

    All are first written in full beside their places and only then moved there. Of several, the last is taken
    away before the others are moved, so that it stands for the whole set.

    Raises
    ------
    OutputError
        Naming the path and the reason.
    """
    ready: dict[Path, Path] = {}
    made: list[Path] = []
    done = False
    try:
        for path, content in contents.items():
            with _named(path):
                _make_folder(path.parent, made)
                if content is not None:
                    ready[path] = _write_beside(path, as_bytes(content))
        unwanted = [path for path, content in contents.items() if content is None]
        for path in unwanted + list(contents)[1:][-1:]:
            with _named(path):
                path.unlink(missing_ok=True)
        for path, beside in ready.items():
            with _named(path):
                os.replace(beside, path)
        done = True
    finally:
        if not done:
            _clear(ready.values(), made)
    return list(ready)


def as_bytes(content: str | bytes) -> bytes:
    """Return text as UTF-8, bytes as they are."""
    return content.encode() if isinstance(content, str) else content


def _write_beside(path: Path, content: bytes) -> Path:
    beside = path.with_name(f".{secrets.token_hex(8)}.part")
    try:
        with open(beside, "xb") as file:
            file.write(content)
            file.flush()
            os.fsync(file.fileno())
    except BaseException:
        beside.unlink(missing_ok=True)
        raise
    return beside


def _make_folder(folder: Path, made: list[Path]) -> None:
    missing = [parent for parent in (folder, *folder.parents) if not parent.exists()]
    for parent in reversed(missing):
        parent.mkdir(exist_ok=True)
        made.append(parent)
    if not folder.is_dir():
        raise NotADirectoryError(None, "not a directory", str(folder))


def _clear(files: Iterable[Path], made: list[Path]) -> None:
    for path in files:
        with contextlib.suppress(OSError):
            path.unlink(missing_ok=True)
    for folder in reversed(made):
        with contextlib.suppress(OSError):
            folder.rmdir()


@contextlib.contextmanager
def _named(path: Path) -> Iterator[None]:
    """Turn the operating system's refusal into an OutputError that names the path."""
    try:
        yield
    except OSError as error:
        raise OutputError(f"{path}: can't be written: {error.strerror or error}") from error
