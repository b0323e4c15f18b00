"""WRITERS lists the outputs of each command: WRITERS[command][kind] turns a result into text or bytes.

To add a command: a package of its name here and a line in COMMANDS. The package holds

1. `text`, `csv`, `html` and `junit`, each with `write(result) -> str | bytes`;
2. `document`, whose `document(result)` is the plain data of verdict.json;
3. `evidence`, whose `evidence_files(result)` is the content of each file of evidence/ by its name.

To add a kind: a file of its name in each of those packages, or here where it is the same for all, and a line in KINDS.
"""

from __future__ import annotations

import importlib
from collections.abc import Callable
from types import ModuleType

from reach.result import Answer

Writer = Callable[[Answer], str | bytes]

# Each command, and the file that its table of numbers goes to.
COMMANDS = {
    "follow": "motion.csv",
    "survey": "survey.csv",
    "rally": "rally.csv",
    "trial": "trial.csv",
    "recheck": "recheck.csv",
}

KINDS = (
    "text",
    "json",
    "csv",
    "html",
    "junit",
)
ALIKE = ("json",)  # kinds that are written alike for every command


def part(command: str, name: str) -> ModuleType:
    """Return a module of a command's package here."""
    return importlib.import_module(f"reach.report.{command}.{name}")


def _late(command: str, kind: str) -> Writer:
    """Return a writer that loads its module when it is first called."""

    def write(result: Answer) -> str | bytes:
        module = importlib.import_module(f"reach.report.{kind}") if kind in ALIKE else part(command, kind)
        written: str | bytes = module.write(result)
        return written

    return write


WRITERS: dict[str, dict[str, Writer]] = {
    command: {kind: _late(command, kind) for kind in KINDS} for command in COMMANDS
}
