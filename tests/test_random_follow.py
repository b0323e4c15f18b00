"""Random logs on random arms: no false verdict, no failed step, and a second opinion that agrees."""

from __future__ import annotations

from functools import cache
from pathlib import Path

import numpy as np
import pytest
from random_case import FOLLOW, case
from random_run import Found, Outcome, looked_at, rechecked

import reach

SEEDS = range(30_000, 30_080)
BLOCK = 10


@cache
def outcome(seed: int) -> Outcome:
    """What becomes of a log, looked at once."""
    return looked_at(seed, FOLLOW)


@pytest.mark.parametrize("first", SEEDS[::BLOCK])
def test_no_random_log_gets_a_false_verdict(first: int) -> None:
    """Neither against what the oracle knows, nor against the second opinion; nothing raised, no step failed."""
    seeds = range(first, first + BLOCK)
    findings = [f"seed {seed}: {finding}" for seed in seeds for finding in outcome(seed).findings]
    assert not findings


def test_the_oracle_knows_something_of_many_logs() -> None:
    """Of the seeds above an eighth and more are known to be possible, some to be impossible: the test can fail."""
    known = [outcome(seed) for seed in SEEDS]
    assert sum(one.possible for one in known) >= len(known) / 8
    assert any(one.impossible for one in known)


def test_the_same_seed_draws_the_same_files(tmp_path: Path) -> None:
    names = ("arm.urdf", "arm.limits.toml", "cell.toml", "commands.csv")
    for part in ("one", "other"):
        (tmp_path / part).mkdir()
        case(SEEDS[0], tmp_path / part)
    for name in names:
        assert (tmp_path / "one" / name).read_bytes() == (tmp_path / "other" / name).read_bytes()


def test_whole_results_of_a_random_log_can_be_rechecked(tmp_path: Path) -> None:
    """With every file that a run writes, the page included."""
    result = reach.follow_commands(reach.load_cell(case(SEEDS[0], tmp_path).file), advice=False)
    reach.write_results(result, tmp_path / "out")
    found = Found()
    rechecked(tmp_path / "out", found)
    assert not found.findings


@pytest.mark.parametrize("seed", SEEDS[::30])
def test_the_generators_own_kinematics_hold(seed: int, tmp_path: Path) -> None:
    """Its Jacobian is the change of its own placement: central differences of 1e-6 rad, errors of 1e-9 m."""
    arm = case(seed, tmp_path).arm
    q, step = np.random.default_rng(seed).uniform(-1, 1, (1, arm.n)), 1e-6
    jacobian, turn, _ = (x[0] for x in arm.jacobian(q))
    for i in range(arm.n):
        ahead, behind = (arm.jacobian(q + sign * step * np.eye(arm.n)[i])[1:] for sign in (1, -1))
        assert (ahead[1][0] - behind[1][0]) / (2 * step) == pytest.approx(jacobian[:3, i], abs=1e-8)
        skew = (ahead[0][0] - behind[0][0]) @ turn.T / (2 * step)
        assert [skew[2, 1], skew[0, 2], skew[1, 0]] == pytest.approx(jacobian[3:, i], abs=1e-8)
