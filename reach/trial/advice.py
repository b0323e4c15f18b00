"""What would help a law: one change at a time, tried from some of the starts."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass, replace
from typing import Any

import numpy as np

from reach.cell import Cell, Sensor, Vec3
from reach.evidence.record import Remedy
from reach.evidence.trials import TrialEvidence
from reach.rally.advice import LIMITS_TRIED
from reach.survey.remedies import RAISED
from reach.survey.rounds import Rounds
from reach.trial.bout import Ground, play
from reach.trial.laws import LAWS, gains_of, law_class
from reach.trial.starts import Start
from reach.variants import FIELDS, one_limit_scaled

SAMPLE = 6  # starts that a change is tried from, of those lost first
APEXES = (1.5, 0.7)  # times the wanted apex
CALMER = 0.5  # times each gain of the law


@dataclass(frozen=True)
class Change:
    """A changed cell and the words for it."""

    words: str
    cell: Cell


def changes(cell: Cell, evidence: TrialEvidence) -> list[Change]:
    """What could be changed, the law's side first."""
    trial = cell.trial
    assert trial is not None
    found = []
    for name in LAWS:
        if trial.law_file is not None or name != trial.law:
            words = f'the law "{name}" with its own gains'
            found.append(Change(words, _with(cell, law=name, law_file=None, gains=())))
    for name, value in gains_of(law_class(trial, cell.path), trial, cell.path).items():
        gains = {**dict(trial.gains), name: CALMER * value}
        found.append(
            Change(
                f"{name} = {CALMER * value:.4g} instead of {value:.4g}",
                _with(cell, gains=tuple(gains.items())),
            )
        )
    if trial.sensor != Sensor():
        found.append(Change("a sensor without latency and noise", _with(cell, sensor=Sensor())))
    for times in APEXES:
        apex = times * trial.apex_m
        error = trial.recovered.apex_error_m * times
        asked = replace(trial.recovered, apex_error_m=error)
        found.append(Change(f"an apex of {1000 * apex:.0f} mm", _with(cell, apex_m=apex, recovered=asked)))
    pairs = dict.fromkeys((run.limit, run.joint) for run in evidence.runs if not run.recovered and run.limit)
    for limit, joint in list(pairs)[:LIMITS_TRIED]:
        if limit in FIELDS or limit == "tool speed":
            of = f" of {joint}" if joint else ""
            changed = one_limit_scaled(cell, limit, joint or None, RAISED)
            found.append(Change(f"{100 * (RAISED - 1):.0f} % more {limit}{of}", changed))
    return found


def _with(cell: Cell, **changed: Any) -> Cell:
    assert cell.trial is not None
    return replace(cell, trial=replace(cell.trial, **changed))


def remedies(
    cell: Cell, evidence: TrialEvidence, starts: Sequence[Start], run: Rounds, seed: int
) -> tuple[tuple[Remedy, ...], tuple[str, ...]]:
    """Changes by how many of some lost starts they recover, and those that recover none."""
    lost = _spread([k for k, one in enumerate(evidence.runs) if not one.recovered])
    if not lost or evidence.ready is None:
        return (), ()
    asked = changes(cell, evidence)
    place = evidence.centre, tuple(evidence.ready.tolist()), seed
    tasks = [(change.cell, *place, starts[k], k) for change in asked for k in lost]
    answers = run.over("trial, remedies", recovers, tasks)
    found, in_vain = [], []
    for i, change in enumerate(asked):
        some = answers[i * len(lost) : (i + 1) * len(lost)]
        good = sum(answer is True for answer in some)
        if good:
            found.append((good, change.words))
        elif None not in some:
            in_vain.append(change.words)
    told = sorted(found, key=lambda pair: -pair[0])
    of = f"of {len(lost)} lost starts tried again are recovered"
    return tuple(Remedy(words, f"{good} {of}", True) for good, words in told), tuple(in_vain)


def _spread(rows: list[int]) -> list[int]:
    """At most SAMPLE of some rows, evenly spread."""
    if len(rows) <= SAMPLE:
        return rows
    return [rows[int(k)] for k in np.linspace(0, len(rows) - 1, SAMPLE).round()]


def recovers(
    cell: Cell, centre: Vec3, posture: tuple[float, ...], seed: int, start: Start, number: int
) -> bool:
    """Whether a changed cell's law recovers a start."""
    ground = Ground.of(cell, centre, np.array(posture), seed)
    return play(ground, start, number, keep_motion=False).recovered
