"""One random case through the program, its evidence and the second opinion; and what contradicts what is known."""

from __future__ import annotations

import signal
import tempfile
import time
from collections.abc import Iterator
from contextlib import contextmanager
from dataclasses import dataclass, field
from pathlib import Path as Folder
from types import FrameType
from unittest.mock import patch

import numpy as np
from random_case import FOLLOW, Case, case
from random_oracle import known_blow, known_follow

from reach.api import follow_commands, survey_strikes
from reach.errors import InputError
from reach.evidence.items import AGREE, DIFFER
from reach.formats import load_cell
from reach.recheck.answer import opinion
from reach.report.folder import EVIDENCE, VERDICT, digests, write_files
from reach.report.writers import COMMANDS, WRITERS, part
from reach.result import FollowResult, Result, SurveyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, broken_limits

BAD_INPUT, RAISED, TIMED_OUT = "bad input", "raised", "timed out"
BELOW_PLANTED = 0.02  # a searched bound below the planted posture's by more is counted
TORQUE_SHARE = 1e-9  # of the largest torque: between two ways to work it out


@dataclass(frozen=True)
class Outcome:
    """What became of one case.

    Attributes
    ----------
    verdict : the program's, or BAD_INPUT, RAISED, TIMED_OUT
    findings : what contradicts something, a line each
    rechecked : the second opinion's word ; differ : items that differ
    possible, impossible : whether the oracle knew the one or the other
    below_planted, planted : strikes whose searched bound stays below the planted posture's, of so many
    breaks : a stated limit passed though no step let anything give way
    """

    seed: int
    command: str
    commands: str
    style: str
    n: int
    verdict: str
    findings: tuple[str, ...] = ()
    rechecked: str = ""
    differ: int = 0
    possible: bool = False
    impossible: bool = False
    false_yes: int = 0
    false_no: int = 0
    refused_planted: int = 0
    below_planted: int = 0
    planted: int = 0
    steps: int = 0
    elastic_steps: int = 0
    fallback_steps: int = 0
    failed_steps: int = 0
    breaks: str = ""
    seconds: float = 0.0


@dataclass(eq=False)
class Found:
    """Findings gathered on the way, and counts."""

    findings: list[str] = field(default_factory=list)
    counts: dict[str, int] = field(default_factory=dict)
    words: dict[str, str] = field(default_factory=dict)

    def count(self, name: str, amount: int = 1) -> None:
        """Add to a count."""
        self.counts[name] = self.counts.get(name, 0) + amount

    def false(self, name: str, text: str) -> None:
        """A false verdict."""
        self.count(name)
        self.findings.append(f"{name.replace('_', ' ')}: {text}")


class TookTooLong(Exception):
    """A case went over its time."""


@contextmanager
def limited(seconds: float) -> Iterator[None]:
    """Raise TookTooLong in a body that takes longer, by the clock; 0 sets no limit."""

    def ring(number: int, frame: FrameType | None) -> None:
        raise TookTooLong

    before = signal.signal(signal.SIGALRM, ring)
    signal.setitimer(signal.ITIMER_REAL, seconds)
    try:
        yield
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0)
        signal.signal(signal.SIGALRM, before)


def looked_at(seed: int, command: str, seconds: float = 0.0) -> Outcome:
    """Draw a case, run it, store it, recheck it, compare it; whatever is raised becomes a finding."""
    began = time.process_time()
    with tempfile.TemporaryDirectory() as name:
        try:
            with limited(seconds):
                return _run(case(seed, Folder(name), command), began)
        except TookTooLong:
            word, text = TIMED_OUT, f"took longer than {seconds:g} s"
        except InputError as error:
            word, text = BAD_INPUT, "; ".join(str(fault) for fault in error.faults[:3])
        except Exception as error:
            word, text = RAISED, f"{type(error).__name__}: {str(error)[:300]}"
    return Outcome(seed, command, "", "", 0, word, (text,), seconds=time.process_time() - began)


def _run(drawn: Case, began: float) -> Outcome:
    cell, found = load_cell(drawn.file), Found()
    result: FollowResult | SurveyResult
    if drawn.command == FOLLOW:
        result = follow_commands(cell, advice=False)
        followed(drawn, result, found)
    else:
        # What an unknown limit would have to be decides nothing, and takes half of the time.
        with patch("reach.survey.answer.needs", return_value=()):
            result = survey_strikes(cell, advice=False)
        surveyed(drawn, result, found)
    stored(result, drawn.folder / "out")
    rechecked(drawn.folder / "out", found)
    return Outcome(
        drawn.seed,
        drawn.command,
        drawn.commands,
        drawn.style,
        drawn.n,
        result.verdict.verdict,
        tuple(found.findings),
        possible=bool(found.counts.pop("possible", 0)),
        impossible=bool(found.counts.pop("impossible", 0)),
        seconds=time.process_time() - began,
        **found.counts,
        **found.words,
    )


def followed(drawn: Case, result: FollowResult, found: Found) -> None:
    """Compare a followed log's verdict with what is known, and its torque with the case's own."""
    known, verdict, solver = known_follow(drawn), result.verdict.verdict, result.solver
    found.count("possible", bool(known.possible))
    found.count("impossible", bool(known.impossible))
    if known.impossible and verdict == DELIVERABLE:
        found.false("false_yes", known.impossible)
    if known.possible and verdict == NOT_DELIVERABLE:
        found.false("false_no", f"{known.possible}, yet {'; '.join(result.verdict.grounds)}")
    elif known.planted <= 1 and verdict == NOT_DELIVERABLE:
        found.count("refused_planted")
    for name in ("steps", "elastic_steps", "fallback_steps", "failed_steps"):
        found.count(name, getattr(solver, name))
    broken = broken_limits(result.evidence)
    if broken and not solver.elastic_steps:
        found.words["breaks"] = ", ".join(f"{use.limit} {use.utilisation:.4f}" for use in broken)
    if solver.failed_steps:
        found.findings.append(f"{solver.failed_steps} steps that no solver answered")
    motion, torque = result.evidence.motion, result.evidence.torque
    if motion is not None and torque is not None:
        own = drawn.arm.torque(motion.q, motion.v, motion.a)
        apart = float(np.abs(own - torque).max() / max(np.abs(own).max(), 1e-3))
        if not apart <= TORQUE_SHARE:
            found.findings.append(f"torque is off by {apart:.1e} of its largest")


def surveyed(drawn: Case, result: SurveyResult, found: Found) -> None:
    """Compare the verdicts on strikes with what is known of each."""
    points = result.evidence.points
    bounds = points.bound_free_m_s if drawn.free else points.bound_still_m_s
    for k, blow in enumerate(drawn.blows):
        known, verdict, bound = known_blow(drawn, k), str(points.verdict[k]), float(bounds[k])
        found.count("possible", bool(known.possible))
        found.count("impossible", bool(known.impossible))
        told = f"strike {k}, stored bound {bound:.4f} m/s, {points.reason[k]}"
        if known.impossible and verdict == DELIVERABLE:
            found.false("false_yes", f"{known.impossible}; {told}")
        if known.possible and verdict == NOT_DELIVERABLE:
            found.false("false_no", f"{known.possible}; {told}")
        if blow.posture is not None and np.isfinite(blow.bound):
            found.count("planted")
            found.count("below_planted", not bound >= blow.bound * (1 - BELOW_PLANTED) - 1e-6)


def stored(result: Result, folder: Folder) -> None:
    """Store what a second opinion reads, but no page: drawing it takes longer than the case."""
    told = part(result.command, "evidence").evidence_files(result)
    files = {f"{EVIDENCE}/{name}": content for name, content in told.items()}
    table = COMMANDS[result.command]
    files |= {table: WRITERS[result.command]["csv"](result), VERDICT: WRITERS[result.command]["json"](result)}
    last = files.pop(VERDICT)
    files[f"{EVIDENCE}/digests.json"] = digests({**files, VERDICT: last})
    write_files({folder / name: content for name, content in {**files, VERDICT: last}.items()})


def rechecked(folder: Folder, found: Found) -> None:
    """Ask for the second opinion."""
    items = opinion(folder).items
    differing = [item for item in items if item.status == DIFFER]
    found.words["rechecked"] = DIFFER if differing else AGREE
    found.count("differ", len(differing))
    for item in differing[:3]:
        bad = [check for check in item.checks if not check.agrees][:2]
        told = ", ".join(f"{c.name} {c.difference:.3g} of {c.allowed:.3g} {c.unit}" for c in bad)
        found.findings.append(f"recheck differs: {item.kind} {item.where}: {told}")
