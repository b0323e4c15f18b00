"""TOML text to plain tables, with syntax errors told by line."""

from __future__ import annotations

import re
import tomllib
from typing import Any

from reach.errors import FaultList

_AT = re.compile(r"\s*\(at (?:line (?P<line>\d+), column (?P<column>\d+)|end of document)\)\s*$")


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
    except ValueError as error:
        faults.add("file", f"is not usable TOML: {error}; correct that value")
    return None
