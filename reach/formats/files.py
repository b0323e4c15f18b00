"""Bounded reading of input files: size looked at before the bytes, and a SHA-256 of what was read."""

from __future__ import annotations

import hashlib
import os
import stat

from reach.cell import Input
from reach.errors import Fault

MAX_TEXT_BYTES = 20_000_000  # cell, limits and robot files; the largest published ones stay under 1 MB
MAX_LOG_BYTES = 100_000_000  # command logs; an hour at 200 Hz stays below


class Reading:
    """What one load has gathered so far, over all its files.

    Attributes
    ----------
    faults : list of Fault
    inputs : list of Input
    notes : list of str
    """

    def __init__(self) -> None:
        self.faults: list[Fault] = []
        self.inputs: list[Input] = []
        self.notes: list[str] = []

    def read(self, path: str, max_bytes: int, named_by: str = "") -> bytes | None:
        """Return the bytes of a regular file, or None after noting why it can't be read.

        Parameters
        ----------
        path : str
            Also the name under which faults are shown.
        max_bytes : int
            A longer file is refused before it is opened.
        named_by : str
            Where the path was written, for the message.
        """
        content, problem = _read(path, max_bytes)
        if content is None:
            told = f" (named by {named_by})" if named_by else ""
            self.faults.append(Fault(path, "file", problem + told))
            return None
        self.inputs.append(Input(path, hashlib.sha256(content).hexdigest()))
        return content

    def read_text(self, path: str, max_bytes: int, named_by: str = "") -> str | None:
        """Like `read`, decoded from UTF-8; a byte order mark at the start is dropped."""
        content = self.read(path, max_bytes, named_by)
        if content is None:
            return None
        text, problem = decode(content)
        if text is None:
            self.faults.append(Fault(path, *problem))
        return text


def decode(content: bytes) -> tuple[str | None, tuple[str, str]]:
    """Decode UTF-8 text, or say (where, what) is wrong with it."""
    if b"\0" in content:
        line = content.count(b"\n", 0, content.index(b"\0")) + 1
        return None, (f"line {line}", "holds a zero byte, so it is not text; name a plain UTF-8 text file")
    try:
        return content.decode("utf-8-sig"), ("", "")
    except UnicodeDecodeError as error:
        line = content.count(b"\n", 0, error.start) + 1
        return None, (f"line {line}", "is not UTF-8 text; save the file with UTF-8 encoding")


def beside(file: str, path: str) -> str:
    """Path of a file named inside `file`: relative to its folder unless absolute."""
    return os.path.normpath(os.path.join(os.path.dirname(file), path))


def _read(path: str, max_bytes: int) -> tuple[bytes | None, str]:
    try:
        status = os.stat(path)
        if stat.S_ISDIR(status.st_mode):
            return None, "is a directory; name a file"
        if not stat.S_ISREG(status.st_mode):
            return None, "is not a regular file; name a file on disk"
        if status.st_size > max_bytes:
            return None, (
                f"is {status.st_size / 1e6:.1f} MB, more than the {max_bytes / 1e6:.0f} MB read here; "
                "check the name or cut the file down"
            )
        with open(path, "rb") as stream:
            content = stream.read(max_bytes + 1)
    except FileNotFoundError:
        return None, "not found; check the path, which is relative to the file that names it"
    except PermissionError:
        return None, "may not be read; change its permissions"
    except (OSError, ValueError) as error:
        reason = error.strerror if isinstance(error, OSError) and error.strerror else str(error)
        return None, f"can't be read: {reason.lower()}; check the path"
    if len(content) > max_bytes:
        return None, f"grew beyond {max_bytes / 1e6:.0f} MB while being read; try again with a finished file"
    return content, ""
