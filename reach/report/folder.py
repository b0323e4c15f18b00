"""Results into a folder: every file whole or not at all."""

from __future__ import annotations

import contextlib
import hashlib
import os
import re
import secrets
import signal
import stat
import sys
import threading
from collections.abc import Iterable, Iterator, Mapping
from pathlib import Path

from reach.errors import FaultList, OutputError
from reach.report.json import json_text
from reach.report.writers import COMMANDS, WRITERS, part
from reach.result import Answer

if sys.platform != "win32":
    import fcntl

PAGE, VERDICT, EVIDENCE = "report.html", "verdict.json", "evidence"
DIGESTS, DIGESTS_SCHEMA = "digests.json", "strikecheck/digests/1"
PART = re.compile(r"\.[0-9a-f]{16}\.part")  # names of files on their way
ENDS = ("SIGINT", "SIGTERM", "SIGHUP")  # what ends a run from outside


def write_folder(result: Answer, out_dir: Path, junit: Path | None = None) -> list[Path]:
    """Write verdict.json, the command's table, report.html and evidence/ into a folder, which is made where needed.

    Returns
    -------
    list of Path
        The files written, verdict.json last.

    Raises
    ------
    OutputError
        When the folder or a file can't be written; no half file and no temporary file is left, an older run's
        files stay, and no verdict is beside the files of another run.
    """
    writers = WRITERS[result.command]
    stored: Mapping[str, bytes | None] = part(result.command, "evidence").evidence_files(result)
    files: dict[str, str | bytes | None] = {f"{EVIDENCE}/{name}": content for name, content in stored.items()}
    # The verdict comes last, so a folder that has one is complete.
    shown = {
        name: writers[kind](result)
        for name, kind in ((COMMANDS[result.command], "csv"), (PAGE, "html"), (VERDICT, "json"))
    }
    if stored:
        files[f"{EVIDENCE}/{DIGESTS}"] = digests({**files, **shown})
    contents = {out_dir / name: content for name, content in files.items()}
    if junit is not None:
        contents[junit] = writers["junit"](result)
    contents.update((out_dir / name, content) for name, content in shown.items())
    return write_files(contents)


def digests(files: Mapping[str, str | bytes | None]) -> str:
    """Return digests.json: SHA-256 of each file of a run by its name in the folder, so that a change is noticed."""
    listed = [
        {"path": name, "sha256": hashlib.sha256(as_bytes(content)).hexdigest()}
        for name, content in files.items()
        if content is not None
    ]
    return json_text({"schema": DIGESTS_SCHEMA, "files": listed})


def check_targets(out_dir: Path, junit: str | None, inputs: Iterable[str], kept: Path | None = None) -> None:
    """Refuse places where results can't or must not go, before anything is run.

    Parameters
    ----------
    kept : a folder of results that is looked at and must stay as it is

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
    elif kept is not None and out_dir.resolve() == kept.resolve():
        faults.add("--out", f"{out_dir} holds the results that are looked at; name another folder")
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
    away before the others are moved, so that it stands for the whole set. Where a move fails, what was there before
    is put back; where even that fails, the last file stays away.

    Raises
    ------
    OutputError
        Naming the path and the reason.
    """
    made: list[Path] = []
    parts: list[Path] = []
    done = False
    with contextlib.ExitStack() as open_files:
        try:
            ready = {}
            for path in contents:
                with _named(path):
                    _make_folder(path.parent, made)
            for folder in {path.parent for path in contents}:
                _clear_left(folder)
            for path, content in contents.items():
                if content is not None:
                    with _named(path):
                        ready[path] = _write_beside(path.parent, as_bytes(content), parts, open_files)
            if sys.platform == "win32":
                open_files.close()  # an open file can't be moved there
            with _whole():
                _move(contents, ready, parts)
                done = True
        finally:
            with _whole():
                _clear(parts, [] if done else made)
    return list(ready)


def as_bytes(content: str | bytes) -> bytes:
    """Return text as UTF-8, bytes as they are."""
    return content.encode() if isinstance(content, str) else content


def _move(contents: Mapping[Path, str | bytes | None], ready: Mapping[Path, Path], parts: list[Path]) -> None:
    """Move what was written beside into its places, what is not wanted away; all of it or none."""
    kept = {path: _second_name(path, parts) for path in contents if os.path.lexists(path)}
    last = list(contents)[1:][-1:]
    changed: list[Path] = []
    try:
        for path in [*last, *(path for path, content in contents.items() if content is None)]:
            with _named(path):
                path.unlink(missing_ok=True)
            changed.append(path)
        for path, beside in ready.items():
            with _named(path):
                os.replace(beside, path)
            changed.append(path)
    except BaseException:
        with contextlib.suppress(OSError):  # the first of `contents` to stay away is the last one
            for path in reversed(changed):
                _put_back(path, kept)
        raise


def _put_back(path: Path, kept: Mapping[Path, Path | None]) -> None:
    """Let a place have what it had: `kept` has a second name of it where it had a file."""
    if path not in kept:
        path.unlink(missing_ok=True)
        return
    before = kept[path]
    if before is None:
        raise FileNotFoundError(path)
    os.replace(before, path)


def _second_name(path: Path, parts: list[Path]) -> Path | None:
    """Give a file a second name, None where the file system can't."""
    beside = _part_name(path.parent)
    parts.append(beside)
    try:
        os.link(path, beside)
    except OSError:
        return None
    return beside


def _part_name(folder: Path) -> Path:
    return folder / f".{secrets.token_hex(8)}.part"


def _write_beside(folder: Path, content: bytes, parts: list[Path], open_files: contextlib.ExitStack) -> Path:
    """Write a file of a name of its own, noted in `parts` before it is there, and left open so that it stays locked."""
    while True:
        beside = _part_name(folder)
        parts.append(beside)
        file = open_files.enter_context(open(beside, "xb", buffering=0))
        if _locked(file.fileno()):
            break
    left = memoryview(content)
    while left:
        left = left[file.write(left) :]
    os.fsync(file.fileno())
    return beside


def _locked(file: int) -> bool:
    """Lock a new file; False where another run took it for one that was left."""
    if sys.platform == "win32":
        return True
    try:
        fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
    except BlockingIOError:
        return False
    except OSError:  # no locks here, for nobody
        return True
    return os.fstat(file).st_nlink > 0


def _clear_left(folder: Path) -> None:
    """Remove what a run left that was killed while it wrote. The system unlocks its files; a live run's are locked."""
    if sys.platform == "win32":
        return
    for name in os.listdir(folder) if os.access(folder, os.R_OK) else ():
        if not PART.fullmatch(name):
            continue
        path = folder / name
        with contextlib.suppress(OSError):
            file = os.open(path, os.O_RDWR | os.O_NOFOLLOW | os.O_NONBLOCK)
            try:
                if stat.S_ISREG(os.fstat(file).st_mode):
                    fcntl.flock(file, fcntl.LOCK_EX | fcntl.LOCK_NB)
                    path.unlink()
            finally:
                os.close(file)


def _make_folder(folder: Path, made: list[Path]) -> None:
    missing = [parent for parent in (folder, *folder.parents) if not parent.exists()]
    for parent in reversed(missing):
        made.append(parent)
        parent.mkdir(exist_ok=True)
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


@contextlib.contextmanager
def _whole() -> Iterator[None]:
    """Let what asks this process to end wait for a moment; outside the main thread nothing is told of it anyway."""
    if threading.current_thread() is not threading.main_thread():
        yield
        return
    waiting: list[int] = []
    names = [name for name in ENDS if hasattr(signal, name)]
    numbers = [getattr(signal, name) for name in names]
    before = {number: signal.getsignal(number) for number in numbers}
    own = [number for number in numbers if callable(before[number])]
    for number in own:
        signal.signal(number, lambda number, _: waiting.append(number))
    try:
        yield
    finally:
        for number in own:
            signal.signal(number, before[number])
    for number in waiting:
        signal.raise_signal(number)
