"""The verdict on many things by the share of them that is deliverable."""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import replace

from reach.evidence.items import Check, same
from reach.recheck.stored import CELL, VERDICT, Stored

DELIVERABLE, NOT_DELIVERABLE, UNDECIDED = "deliverable", "not deliverable", "undecided"


def word_of(total: int, done: int, lost: int, required_share: float) -> str:
    """The verdict on so many things of which some are deliverable and some surely not; of none it is a refusal."""
    needed = math.ceil(required_share * total - 1e-9)
    if done >= needed and total:
        return DELIVERABLE
    return UNDECIDED if total and total - lost >= needed else NOT_DELIVERABLE


def claimed(stored: Stored, word: str, figures: Mapping[str, object]) -> list[Check]:
    """A verdict against what both files of a run claim, and counts against the figures of verdict.json."""
    given = stored.verdict.get("figures")
    given = given if isinstance(given, dict) else {}
    checks = [same(name.replace("_", " "), value, given.get(name)) for name, value in figures.items()]
    return [*checks, *verdict_checks(stored, word)]


def verdict_checks(stored: Stored, word: str) -> list[Check]:
    """A verdict against what both files of a run claim, and against the sentence that says it."""
    sentence = stored.verdict.get("sentence", word)
    begins = isinstance(sentence, str) and sentence.startswith(word)
    claims = (
        (VERDICT, stored.verdict.get("verdict")),
        (CELL, stored.at("verdict")),
        ("the sentence", word if begins else sentence),
    )
    return [
        replace(same("verdict", word, said), text="" if said == word else f"{word} here, {said} in {place}")
        for place, said in claims
    ]
