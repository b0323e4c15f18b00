"""Faults and failures, each with the exit code that the command line returns for it."""

from __future__ import annotations

import difflib
from collections.abc import Iterable
from dataclasses import dataclass

LONGEST_NAME = 100  # characters that are compared for a near miss


@dataclass(frozen=True, order=True)
class Fault:
    """One thing wrong with an input: the file, the place in it, what is wrong and what to do."""

    file: str
    where: str
    what: str

    def __str__(self) -> str:
        return f"{self.file}: {self.where}: {self.what}"


class ReachError(Exception):
    """Base of every error this package raises on purpose.

    Attributes
    ----------
    exit_code : int
        What the command line returns when the error ends a run.
    """

    exit_code = 4


class InputError(ReachError):
    """An input can't be used; carries every fault found, not the first alone.

    Attributes
    ----------
    faults : tuple of Fault
    """

    exit_code = 2

    def __init__(self, faults: Iterable[Fault]):
        self.faults = tuple(faults)
        super().__init__("\n".join(str(fault) for fault in self.faults))


class SolverFailure(ReachError):
    """No quadratic-programming solver gave a usable answer to a problem that has one."""


class SolverHung(SolverFailure):
    """A solver did not come back."""


class WorkerLost(ReachError):
    """A process that ran part of a search died."""


class OutputError(ReachError):
    """Results can't be written where they were asked for."""


class Stopped(BaseException):
    """The operating system asks this process to end; no `except Exception` on the way holds it up."""


class FaultList:
    """Collects faults of one file, so that all of them reach the user at once."""

    def __init__(self, file: str):
        self.file = file
        self.faults: list[Fault] = []

    def add(self, where: str, what: str) -> None:
        """Note one fault at `where`; `what` says what is wrong and what to do."""
        self.faults.append(Fault(self.file, where, what))

    def raise_if_any(self) -> None:
        """Raise InputError when at least one fault was noted."""
        if self.faults:
            raise InputError(self.faults)


def nearest(name: str, known: Iterable[str]) -> str:
    """Say which known names come close to `name`: '; did you mean "a" or "b"?', or the known ones."""
    names = list(known)
    short = [n for n in names if len(n) <= LONGEST_NAME]
    close = difflib.get_close_matches(name[:LONGEST_NAME], short, n=2, cutoff=0.5)
    if close:
        return "; did you mean " + " or ".join(f'"{c}"' for c in close) + "?"
    if not names:
        return ""
    shown = ", ".join(f'"{n}"' for n in names[:12])
    return f"; known here: {shown}" + (", …" if len(names) > 12 else "")
