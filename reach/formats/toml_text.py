"""TOML text to plain tables, with syntax errors told by line."""

from __future__ import annotations

import re
import tomllib
from typing import Any

from reach.errors import FaultList

_AT = re.compile(r"\s*\(at (?:line (?P<line>\d+), column (?P<column>\d+)|end of document)\)\s*$")
_LONG_NUMBER = re.compile(r"[\d_]{4000,}")  # whole numbers beyond some 4300 digits are not converted


def parse_toml(text: str, faults: FaultList) -> dict[str, Any] | None:
    """Return the document's tables, or None after noting the syntax error."""
    try:
        return tomllib.loads(text)
    except tomllib.TOMLDecodeError as error:
        said = str(error)
        place = _AT.search(said)
        where = "end of file"
        if place is not None and place["line"]:
            where = f"line {place['line']}, column {place['column']}"
        reason = _AT.sub("", said)
        faults.add(where, f"is not valid TOML: {reason[:1].lower()}{reason[1:]}; correct it there")
    except RecursionError:
        faults.add("file", "is not usable TOML: it nests too deep; flatten it")
    except ValueError:  # the parser lets only this one of the language through: a decimal number too long
        found = _LONG_NUMBER.search(text)
        where = "file" if found is None else f"line {text.count(chr(10), 0, found.start()) + 1}"
        faults.add(where, "holds a number with too many digits; shorten it")
    return None
