"""Ten thousand random cases, by name: python -m pytest -m campaign tests/test_random_campaign.py"""

from __future__ import annotations

import importlib.util
import os
import sys
from pathlib import Path
from types import ModuleType

import pytest

CASES, SEED = 10_000, 2026
BENCH = Path(__file__).parent / "bench" / "campaign.py"


def bench() -> ModuleType:
    """The long run, which is no package's."""
    spec = importlib.util.spec_from_file_location("campaign", BENCH)
    assert spec is not None and spec.loader is not None
    module = importlib.util.module_from_spec(spec)
    sys.modules["campaign"] = module  # so that worker processes find its functions by name
    spec.loader.exec_module(module)
    return module


@pytest.mark.campaign
def test_no_false_verdict_in_ten_thousand_random_cases() -> None:
    run = bench()
    outcomes = run.campaign(run.asked(SEED, 0, CASES), os.cpu_count() or 1)
    print(run.table(outcomes))
    assert len(outcomes) == CASES
    assert not [f"{one.command} {one.seed}: {text}" for one in outcomes for text in one.findings]


def test_a_few_cases_give_a_table_and_no_case_is_lost(tmp_path: Path) -> None:
    """Cases kept from an earlier run are not run again; the table counts them all."""
    run = bench()
    keep, out = tmp_path / "kept.jsonl", tmp_path / "table.md"
    run.main(["--cases", "3", "--seed", "5", "--workers", "1", "--keep", str(keep)])
    run.main(["--cases", "5", "--seed", "5", "--workers", "1", "--keep", str(keep), "--out", str(out)])
    assert len(keep.read_text(encoding="utf-8").splitlines()) == 5
    assert "| all | 5 |" in out.read_text(encoding="utf-8")
