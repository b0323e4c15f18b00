"""Ten thousand random cases against false verdicts: whole cells, the second opinion, and an oracle apart.

Run by name: python tests/bench/campaign.py --cases 10000 --seed 2026 --workers 2 [--first N] [--out FILE] [--keep FILE]

Every fifth case is a survey, the others follow a log. --first begins at that case of the same run; --keep appends
each case's outcome to a file as it comes in and leaves out, at a later start, those that stand there already.
A finding is printed at once with its seed; the table comes at the end.
"""

from __future__ import annotations

import argparse
import dataclasses
import json
import multiprocessing
import os
import sys
import warnings
from collections.abc import Callable, Iterable, Iterator
from pathlib import Path

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

sys.path.insert(0, str(Path(__file__).resolve().parents[1]))

from random_case import FOLLOW, SURVEY  # noqa: E402
from random_run import BAD_INPUT, RAISED, TIMED_OUT, Outcome, looked_at  # noqa: E402

from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE  # noqa: E402
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED  # noqa: E402

SURVEY_EVERY = 5
CASE_SECONDS = 120.0  # by the clock, on cores that others share
CHUNK = 8  # cases that a worker takes at a time
TASKS = 50  # chunks after which a worker is replaced, so that none grows

Asked = tuple[int, str]  # seed, command


def asked(seed: int, first: int, cases: int) -> list[Asked]:
    """Seed and command of each case of a run."""
    some = range(first, first + cases)
    return [(seed * 1_000_000 + k, SURVEY if k % SURVEY_EVERY == SURVEY_EVERY - 1 else FOLLOW) for k in some]


def one(case: Asked) -> Outcome:
    """Look at one case, any warning an error."""
    warnings.simplefilter("error")
    return looked_at(*case, seconds=CASE_SECONDS)


def campaign(
    cases: list[Asked], workers: int, told: Callable[[Outcome], None] = lambda outcome: None
) -> list[Outcome]:
    """Look at cases on worker processes, in their order.

    Parameters
    ----------
    told : called with each outcome as it comes in
    """
    outcomes = []
    for outcome in _outcomes(cases, workers):
        told(outcome)
        outcomes.append(outcome)
    return outcomes


def _outcomes(cases: list[Asked], workers: int) -> Iterator[Outcome]:
    if workers <= 1:
        yield from map(one, cases)
        return
    with multiprocessing.get_context("spawn").Pool(workers, maxtasksperchild=TASKS) as pool:
        yield from pool.imap(one, cases, CHUNK)


def table(outcomes: Iterable[Outcome]) -> str:
    """The table in Markdown: all cases, then by command, style of the commands and number of joints."""
    all_of = list(outcomes)
    columns: list[tuple[str, list[Outcome]]] = [("all", all_of)]
    for command in (FOLLOW, SURVEY):
        own = [outcome for outcome in all_of if outcome.command == command]
        columns.append((command, own))
        columns += [(f"{command}, {style}", part(own, "commands", style)) for style in kinds(own, "commands")]
    columns += [(f"{n} joints", part(all_of, "n", n)) for n in kinds(all_of, "n") if n]
    rows = [(head, [figure(own) for _, own in columns]) for head, figure in FIGURES]
    heads = [name for name, own in columns]
    lines = ["| | " + " | ".join(head for head, _ in rows) + " |", "|---" * (len(rows) + 1) + "|"]
    for i, name in enumerate(heads):
        lines.append(f"| {name} | " + " | ".join(values[i] for _, values in rows) + " |")
    return "\n".join(lines) + "\n"


def part(outcomes: list[Outcome], name: str, value: object) -> list[Outcome]:
    """Outcomes of one kind."""
    return [outcome for outcome in outcomes if getattr(outcome, name) == value]


def kinds(outcomes: list[Outcome], name: str) -> list[object]:
    """The kinds that there are, in order."""
    return sorted({getattr(outcome, name) for outcome in outcomes} - {""})


def share(amount: float, whole: float) -> str:
    """An amount as a share of a whole."""
    return f"{100 * amount / whole:.1f} %" if whole else "-"


def total(name: str) -> Callable[[list[Outcome]], str]:
    """A column that adds up."""
    return lambda own: str(sum(getattr(outcome, name) for outcome in own))


def equal(name: str, value: str) -> Callable[[list[Outcome]], str]:
    """A column that counts."""
    return lambda own: str(len(part(own, name, value)))


FIGURES: tuple[tuple[str, Callable[[list[Outcome]], str]], ...] = (
    ("cases", lambda own: str(len(own))),
    ("deliverable", equal("verdict", DELIVERABLE)),
    ("not", equal("verdict", NOT_DELIVERABLE)),
    ("undecided", equal("verdict", UNDECIDED)),
    ("undecided share", lambda own: share(len(part(own, "verdict", UNDECIDED)), len(own))),
    ("bad input", equal("verdict", BAD_INPUT)),
    ("raised", equal("verdict", RAISED)),
    ("timed out", equal("verdict", TIMED_OUT)),
    ("recheck agrees", equal("rechecked", AGREE)),
    ("differs", equal("rechecked", DIFFER)),
    ("not checkable", equal("rechecked", NOT_CHECKABLE)),
    ("known impossible", total("impossible")),
    ("false deliverable", total("false_yes")),
    ("known possible", total("possible")),
    ("false not deliverable", total("false_no")),
    ("planted has room, refused", total("refused_planted")),
    ("steps", total("steps")),
    ("elastic cases", lambda own: str(sum(outcome.elastic_steps > 0 for outcome in own))),
    ("elastic steps", total("elastic_steps")),
    ("fall-backs", total("fallback_steps")),
    ("failed steps", total("failed_steps")),
    ("limit passed, nothing gave way", lambda own: str(sum(bool(outcome.breaks) for outcome in own))),
    ("strikes planted", total("planted")),
    ("bound below planted", total("below_planted")),
    ("CPU s a case", lambda own: f"{sum(o.seconds for o in own) / max(len(own), 1):.2f}"),
)


def kept(path: Path | None) -> dict[Asked, Outcome]:
    """Outcomes of an earlier run by seed and command."""
    if path is None or not path.exists():
        return {}
    lines = path.read_text(encoding="utf-8").splitlines()
    read = [json.loads(line) for line in lines if line.endswith("}")]
    found = [Outcome(**{**one, "findings": tuple(one["findings"])}) for one in read]
    return {(outcome.seed, outcome.command): outcome for outcome in found}


def main(arguments: list[str] | None = None) -> int:
    """Run by name."""
    parser = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawTextHelpFormatter)
    for name, default in (("cases", 10_000), ("seed", 2026), ("workers", 2), ("first", 0)):
        parser.add_argument(f"--{name}", type=int, default=default)
    for name in ("out", "keep"):
        parser.add_argument(f"--{name}", type=Path)
    given = parser.parse_args(arguments)
    cases = asked(given.seed, given.first, given.cases)
    before = kept(given.keep)
    done = {case: before[case] for case in cases if case in before}

    def told(outcome: Outcome) -> None:
        done[outcome.seed, outcome.command] = outcome
        for finding in outcome.findings:
            print(f"{outcome.command} {outcome.seed}: {finding}", flush=True)
        if given.keep is not None:
            with given.keep.open("a", encoding="utf-8") as file:
                file.write(json.dumps(dataclasses.asdict(outcome)) + "\n")

    campaign([case for case in cases if case not in done], given.workers, told)
    shown = table(done[case] for case in cases)
    print(shown)
    if given.out is not None:
        given.out.write_text(shown, encoding="utf-8")
    return int(any(outcome.findings for outcome in done.values()))


if __name__ == "__main__":
    sys.exit(main())
