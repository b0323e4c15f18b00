"""Random strikes on random arms: no false verdict, and a second opinion that agrees."""

from __future__ import annotations

from pathlib import Path

import pytest
from random_case import SURVEY, case
from random_oracle import known_blow
from random_run import looked_at

SEEDS = range(40_000, 40_024)
BLOCK = 4


@pytest.mark.parametrize("first", SEEDS[::BLOCK])
def test_no_random_strike_gets_a_false_verdict(first: int) -> None:
    """Neither against planted postures and crude proofs, nor against the second opinion; nothing raised."""
    findings = [
        f"seed {seed}: {finding}"
        for seed in range(first, first + BLOCK)
        for finding in looked_at(seed, SURVEY).findings
    ]
    assert not findings


def test_the_oracle_knows_something_of_many_strikes(tmp_path: Path) -> None:
    """Of the seeds above a fifth and more are known to be allowed by their posture, some to be impossible."""
    known = [known_blow(drawn, 0) for drawn in (case(seed, tmp_path, SURVEY) for seed in SEEDS)]
    assert sum(bool(one.possible) for one in known) >= len(known) / 5
    assert any(one.impossible for one in known)
