"""The verdict on evidence. Pure: knows no robot, runs nothing."""

from __future__ import annotations

import math
from collections.abc import Iterable, Sequence
from dataclasses import dataclass
from typing import Protocol

from reach.cell import Accept
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Item, counts, decided
from reach.evidence.points import SurveyEvidence, Texts
from reach.evidence.rallies import RallyEvidence
from reach.evidence.record import Evidence, Use
from reach.evidence.trials import TrialEvidence

ROUNDING = 1e-6  # of a limit: a use above 1 by less is rounding

DELIVERABLE = "deliverable"
NOT_DELIVERABLE = "not deliverable"
UNDECIDED = "undecided"

EXIT_CODES = {DELIVERABLE: 0, NOT_DELIVERABLE: 1, UNDECIDED: 3, AGREE: 0, DIFFER: 1, NOT_CHECKABLE: 3}


@dataclass(frozen=True)
class Verdict:
    """The verdict, its sentence with what was not checked inside, and the grounds it rests on, in words."""

    verdict: str
    sentence: str
    grounds: tuple[str, ...]

    @property
    def exit_code(self) -> int:
        """What the command line returns."""
        return EXIT_CODES[self.verdict]


def broken_limits(evidence: Evidence) -> list[Use]:
    """Uses above their stated limit."""
    return [u for u in evidence.uses if u.utilisation is not None and not u.utilisation <= 1 + ROUNDING]


def judge(evidence: Evidence, accept: Accept) -> Verdict:
    """Judge a followed log.

    Not deliverable: too many strikes missed (with no strike: judged throughout), a stated limit broken, no
    motion at all, or no stand at the end. Undecided: a required limit unknown, contacts only guessed, or a step
    that no solver answered. Deliverable otherwise.
    """
    failures = _failures(evidence, accept)
    doubts = _doubts(evidence, accept)
    if failures:
        verdict, grounds = NOT_DELIVERABLE, failures
        if evidence.failed_steps:
            verdict, grounds = UNDECIDED, doubts
    elif doubts:
        verdict, grounds = UNDECIDED, doubts
    else:
        verdict, grounds = DELIVERABLE, _merits(evidence)
    return Verdict(verdict, _sentence(verdict, grounds, evidence), tuple(grounds))


def strikes_needed(evidence: Evidence, accept: Accept) -> int:
    """How many strikes must be delivered."""
    return math.ceil(accept.strikes_share * len(evidence.strikes) - 1e-9)


def _failures(evidence: Evidence, accept: Accept) -> list[str]:
    found = [f"{reason.limit}: {reason.text}" for reason in evidence.blocked]
    for use in broken_limits(evidence):
        assert use.utilisation is not None
        where = f" of {use.joint}" if use.joint else ""
        when = "" if use.time_s is None else f" at {use.time_s:.3f} s"
        found.append(f"{use.limit}{where} at {100 * use.utilisation:.1f} % of its limit{when}")
    if evidence.motion is None:
        return found or ["there is no motion"]
    hit = sum(strike.delivered for strike in evidence.strikes)
    if evidence.strikes and accept.at == "strikes" and hit < strikes_needed(evidence, accept):
        found.append(f"{len(evidence.strikes) - hit} of {len(evidence.strikes)} strikes not delivered")
    found.extend(evidence.throughout_faults)
    if not evidence.stopped:
        found.append("the arm does not come to a stand after the command's end")
    return found


def _doubts(evidence: Evidence, accept: Accept) -> list[str]:
    found = []
    if evidence.failed_steps:
        found.append(f"{evidence.failed_steps} steps that no solver answered")
    found += unknown_required(evidence.unknown, accept)
    if evidence.guessed:
        found.append('contacts guessed from the command\'s peaks; accept them with strikes = "guessed-ok"')
    return found


def _merits(evidence: Evidence) -> list[str]:
    if evidence.strikes:
        hit = sum(strike.delivered for strike in evidence.strikes)
        return [f"{hit} of {len(evidence.strikes)} strikes delivered"]
    return ["tracked throughout"]


def unknown_required(unknown: Iterable[tuple[str, str | None]], accept: Accept) -> list[str]:
    """What must be known for a "deliverable" and is not, in words."""
    found = []
    for limit in accept.require:
        joints = [joint for name, joint in unknown if name == limit]
        if joints:
            named = ", ".join(str(joint) for joint in joints if joint)
            found.append(f"{limit} unknown" + (f" for {named}" if named else ""))
    return found


def judge_survey(evidence: SurveyEvidence, required_share: float, accept: Accept) -> Verdict:
    """Judge a survey by the share of its strikes that are deliverable."""
    return judge_share(evidence.points.verdict, "strikes", required_share, accept, evidence)


class Whole(Protocol):
    """What evidence of many items says of the whole: limit kinds, what nobody stated, what was left out."""

    @property
    def kinds(self) -> tuple[str, ...]:
        """Names of the limit kinds."""

    @property
    def unknown(self) -> tuple[tuple[str, str | None], ...]:
        """(limit, joint) pairs that nobody stated."""

    @property
    def not_checked(self) -> tuple[str, ...]:
        """Names of what was not checked at all."""

    @property
    def stopped(self) -> bool:
        """Whether the run was stopped before all items were looked at."""


def judge_share(
    verdicts: Texts,
    items: str,
    required_share: float,
    accept: Accept,
    evidence: Whole,
    done_word: str = DELIVERABLE,
) -> Verdict:
    """Judge items by the share of them that are deliverable.

    Not deliverable: so many are not that the share can't be reached. Undecided: those left open, for an unknown limit
    too, could still reach it.

    Parameters
    ----------
    verdicts : (m,) of the items
    items : what they are, in words; done_word : what a deliverable one is called
    """
    total = len(verdicts)
    done, lost = (int((verdicts == word).sum()) for word in (DELIVERABLE, NOT_DELIVERABLE))
    needed = math.ceil(required_share * total - 1e-9)
    if done >= needed and total:
        verdict = DELIVERABLE
    elif total - lost < needed or not total:
        verdict = NOT_DELIVERABLE
    else:
        verdict = UNDECIDED
    grounds = [f"{done} of {total} {items} {done_word}, {lost} not, {total - done - lost} undecided"]
    grounds.append(f"required {100 * required_share:g} %")
    if verdict == UNDECIDED:
        grounds += unknown_required(evidence.unknown, accept)
    if evidence.stopped:
        grounds.append("stopped before all were looked at")
    sentence = _worded(verdict, grounds, evidence.kinds, evidence.unknown, evidence.not_checked)
    return Verdict(verdict, sentence, tuple(grounds))


def judge_rally(evidence: RallyEvidence, required_share: float, accept: Accept) -> Verdict:
    """Judge an envelope by the share of its points that are deliverable."""
    return judge_share(evidence.points.verdict, "points", required_share, accept, evidence)


def judge_trials(verdicts: Texts, required_share: float, accept: Accept, evidence: TrialEvidence) -> Verdict:
    """Judge a law by the share of its starts that it recovers; `verdicts` (m,) has one for each start asked for.

    Not deliverable too where no trial could be made.
    """
    if evidence.blocked:
        sentence = _worded(
            NOT_DELIVERABLE, [evidence.blocked], evidence.kinds, evidence.unknown, evidence.not_checked
        )
        return Verdict(NOT_DELIVERABLE, sentence, (evidence.blocked,))
    return judge_share(verdicts, "starts", required_share, accept, evidence, "recovered")


def judge_recheck(items: Sequence[Item], command: str, stored: str) -> Verdict:
    """Judge a second opinion: it differs where one item does, and agrees where all do.

    Parameters
    ----------
    command, stored : that wrote the folder, and its verdict
    """
    word, found = decided(items), counts(items)
    grounds = [f"{found[AGREE]} of {len(items)} items agree"]
    if found[DIFFER]:
        grounds.append(f"{found[DIFFER]} differ")
    if found[NOT_CHECKABLE]:
        grounds.append(f"{found[NOT_CHECKABLE]} could not be checked")
    return Verdict(word, f"{word}: {command} says {stored}; {', '.join(grounds)}", tuple(grounds))


def _sentence(verdict: str, grounds: list[str], evidence: Evidence) -> str:
    kinds = list(dict.fromkeys(use.limit for use in evidence.uses))
    return _worded(verdict, grounds, kinds, evidence.unknown, evidence.not_checked)


def _worded(
    verdict: str,
    grounds: list[str],
    kinds: Iterable[str],
    unknown: Iterable[tuple[str, str | None]],
    not_checked: Iterable[str],
) -> str:
    """The verdict in words, with how many kinds of limit were checked and what was not."""
    kinds, lacking = list(kinds), {limit for limit, _ in unknown}
    checked = [kind for kind in kinds if kind not in lacking]
    if verdict == DELIVERABLE:
        text = f"{verdict} on {len(checked)} of {len(kinds)} limits: {'; '.join(grounds)}"
    else:
        text = f"{verdict}: {'; '.join(grounds)}"
        text += f"; {len(checked)} of {len(kinds)} limits checked" if kinds else ""
    left = list(not_checked)
    if left:
        text += f"; not checked: {', '.join(left)}"
    return text
