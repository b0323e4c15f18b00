"""JSON and archives of arrays, unpacked with bounds: nothing is unpickled, and no more memory taken than is filled."""

from __future__ import annotations

import io
import json
import math
import re
import struct
import zipfile
import zlib
from typing import Any

import numpy as np

from reach.recheck.stored import BadFolder

MAX_DEPTH = 60  # of a JSON file; ours nest 8 deep
MAX_UNPACKED = 2_000_000_000  # bytes of one archive; 40 trials of a minute at 1 kHz have 1 GB
PACKED_BY = (zipfile.ZIP_STORED, zipfile.ZIP_DEFLATED)
ENCRYPTED = 1  # bit of a member's flags
ENDING = ".npy"
MAGIC = b"\x93NUMPY\x01\x00"  # of version 1.0, which any array of plain numbers or texts is written in
HEADER = re.compile(
    rb"\{'descr': '([<>|][fiubU]\d{1,6})', 'fortran_order': (True|False), 'shape': \(([\d, ]{0,200})\), \} *\n"
)
BROKEN = (  # what the library's reader of archives raises, NotImplementedError for a packing that it does not know
    *(ValueError, TypeError, OSError, EOFError, NotImplementedError),
    *(struct.error, zipfile.BadZipFile, zlib.error),
)


def parsed(content: bytes, path: str) -> dict[str, Any]:
    """The object that a JSON file holds; every number in it is finite.

    Raises
    ------
    BadFolder
        Where it holds none, or nests too deep.
    """
    try:
        found = json.loads(content, parse_constant=_finite, parse_float=_finite)
    except (ValueError, RecursionError) as error:
        raise BadFolder("file", f"is no JSON that can be read ({error})", path) from None
    if not isinstance(found, dict):
        raise BadFolder("file", "is no JSON object", path)
    level: list[Any] = [found]
    for _ in range(MAX_DEPTH):
        inside = (part.values() if isinstance(part, dict) else part for part in level)
        level = [value for values in inside for value in values if isinstance(value, dict | list)]
    if level:
        raise BadFolder("file", f"nests deeper than {MAX_DEPTH}", path)
    return found


def arrays(content: bytes, path: str) -> dict[str, np.ndarray]:
    """Arrays of an archive by name.

    Raises
    ------
    BadFolder
        Where it is none that a run writes.
    """
    try:
        with zipfile.ZipFile(io.BytesIO(content)) as packed:
            members = packed.infolist()
            if sum(member.file_size for member in members) > MAX_UNPACKED:
                raise ValueError(f"it unpacks to more than {MAX_UNPACKED / 1e9:.0f} GB")
            if len({member.filename for member in members}) < len(members):
                raise ValueError("it has a name twice")
            return {member.filename.removesuffix(ENDING): _array(packed, member) for member in members}
    except BROKEN as error:
        raise BadFolder("file", f"is no archive of arrays ({error})", path) from None


def _array(packed: zipfile.ZipFile, member: zipfile.ZipInfo) -> np.ndarray:
    """One array, as numpy writes it; what it declares is compared with what is there before memory is taken for it."""
    name = member.filename
    plain = member.compress_type in PACKED_BY and not member.flag_bits & ENCRYPTED
    if not plain or not name.endswith(ENDING):
        raise ValueError(f"{name[:80]!r} is no array that a run writes")
    with packed.open(member) as stream:
        told = stream.read(len(MAGIC) + 2)
        told += stream.read(int.from_bytes(told[-2:], "little"))
        found = HEADER.fullmatch(told[len(MAGIC) + 2 :])
        if not told.startswith(MAGIC) or found is None:
            raise ValueError(f"{name[:80]!r} does not begin as an array does")
        kind, turned, sides = (part.decode() for part in found.groups())
        shape, dtype = tuple(int(side) for side in sides.split(",") if side.strip()), np.dtype(kind)
        size = math.prod(shape) * dtype.itemsize
        if dtype.itemsize == 0 or size != member.file_size - len(told):
            raise ValueError(f"{name[:80]!r} does not hold what it declares")
        content = stream.read()
    return np.ndarray(shape, dtype, content, order="F" if turned == "True" else "C")


def _finite(text: str) -> float:
    """A number of a JSON file; NaN and Infinity, which Python reads there, are none."""
    value = float(text)
    if not math.isfinite(value):
        raise ValueError(f"{text[:40]} is no finite number")
    return value
