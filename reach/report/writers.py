"""WRITERS lists the outputs: a kind is a file of its name here, with a `write`, and a line in KINDS."""

from __future__ import annotations

import importlib
from collections.abc import Callable

from reach.result import FollowResult

Writer = Callable[[FollowResult], str | bytes]

KINDS = (
    "text",
    "json",
    "csv",
    "html",
    "junit",
)


def _late(kind: str) -> Writer:
    """Return a writer that loads its module when it is first called."""

    def write(result: FollowResult) -> str | bytes:
        written: str | bytes = importlib.import_module(f"reach.report.{kind}").write(result)
        return written

    return write


WRITERS: dict[str, Writer] = {kind: _late(kind) for kind in KINDS}
