"""`trial` on the command line: exit codes, streams, files, the same bytes each time, a law that may not run."""

from __future__ import annotations

import csv
import json
from collections.abc import Callable
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from cli_case import without_drawings
from survey_case import die
from test_cli import Done, call, document, files_in, spawn
from trial_case import G, write_gantry

import reach.trial.answer as answer_module
from reach.report.trial.csv import BOUNCE_COLUMNS, START_COLUMNS

ONE = ("--workers", "1")
TRIAL = """centre_m = [0, 0, 0.5]
apex_m = 0.1
bounces = 6
recovered = { by_bounce = 3, then_for = 3 }
starts = { offsets_m = [0.02], bearings_deg = [0, 120] }
"""
NEVER = 'raise SystemExit("this file has run")\n'
OWN = """from reach.trial.laws.mirror import Mirror
class Mine(Mirror):
    gains = Mirror.gains | {"after": 100.0}
    def __init__(self, setup):
        super().__init__(setup)
        self.after = setup.gains["after"]
    def twist(self, seen):
        if seen.contacts >= self.after:
            raise RuntimeError("that was enough")
        return super().twist(seen)
"""


def cell(folder: Path, trial: str = "", law: str = "", own: dict[str, Any] | None = None) -> Path:
    """The gantry's cell with a trial on disk; `law` is the text of law.py."""
    path = write_gantry(folder, f"[trial]\n{trial}{TRIAL}", **(own or {}))
    if law:
        (folder / "law.py").write_text(law, encoding="utf-8")
    return path


@pytest.fixture(autouse=True)
def undrawn(monkeypatch: pytest.MonkeyPatch) -> None:
    """Pages without drawings; `recovered` and the process of its own have them."""
    without_drawings(monkeypatch, "trial")


# Verdicts


@pytest.fixture(scope="module")
def recovered(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Done]:
    """A mirror law that recovers both starts."""
    folder = tmp_path_factory.mktemp("recovered")
    return folder, call("trial", cell(folder), "--out", folder / "o", "--junit", folder / "junit.xml", *ONE)


def test_deliverable(recovered: tuple[Path, Done]) -> None:
    folder, done = recovered
    assert done.code == 0, done.err
    told = document(folder / "o")
    assert (told["schema"], told["verdict"]) == ("strikecheck/trial/1", "deliverable")
    assert "2 of 2 starts recovered" in told["sentence"] and "2 of 2 starts recovered" in done.out
    assert told["recovered_share"] == 1.0
    assert {"reasons", "not_checked", "needs", "remedies", "inputs", "versions", "without_margins"} <= set(
        told
    )


def test_the_folder_holds_everything(recovered: tuple[Path, Done]) -> None:
    folder, done = recovered
    written = files_in(folder / "o")
    assert {"verdict.json", "trial.csv", "report.html", "evidence"} <= written
    assert any(name.startswith("evidence/") for name in written)
    assert (folder / "junit.xml").exists()
    told = done.out.splitlines()[-1]
    assert all(str(folder / "o" / name) in told for name in ("verdict.json", "trial.csv", "report.html"))


def test_a_row_a_bounce(recovered: tuple[Path, Done]) -> None:
    folder, _ = recovered
    with (folder / "o" / "trial.csv").open(encoding="utf-8", newline="") as stream:
        header, *rows = list(csv.reader(stream))
    assert header == [*START_COLUMNS, *BOUNCE_COLUMNS]
    named = [dict(zip(header, row, strict=True)) for row in rows]
    assert [(row["start"], row["bounce"]) for row in named] == [
        (s, str(b)) for s in "12" for b in range(1, 7)
    ]
    first, other = named[0], named[6]
    assert (float(first["start_x_m"]), float(first["start_y_m"])) == (0.02, 0.0)
    assert float(other["start_x_m"]) == pytest.approx(-0.01) and float(other["start_y_m"]) == pytest.approx(
        0.0173205
    )
    assert {row["outcome"] for row in named} == {"held"}
    flight_s = 2 * np.sqrt(2 * 0.1 / G)
    assert float(first["t_s"]) == pytest.approx(flight_s, abs=1e-3)
    for row in named:
        out = float(row["ball_out_z_m_s"])
        assert float(row["apex_m"]) == pytest.approx(
            out**2 / (2 * G) + float(row["ball_z_m"]) - 0.5, abs=1e-6
        )


def test_progress_goes_to_standard_error(recovered: tuple[Path, Done]) -> None:
    _, done = recovered
    assert "trial, starts: 2 of 2 parts" in done.err and "parts" not in done.out


def test_json_alone_on_standard_output(tmp_path: Path) -> None:
    path = cell(tmp_path, "gains = { mirror = 0.0, energy = 0.0 }\n")
    done = spawn("trial", path, "--json", "--no-advice", *ONE, cwd=tmp_path)
    assert done.code == 1, done.err
    told = json.loads(done.out)
    assert (told["schema"], told["verdict"], told["recovered_share"]) == (
        "strikecheck/trial/1",
        "not deliverable",
        0,
    )
    assert told == document(tmp_path / "out" / "trial")
    assert "died on the paddle: 2 starts" in told["reasons"][0]["text"] and told["reasons"][0]["decides"]


def test_an_unknown_limit_that_is_required_leaves_it_open(tmp_path: Path) -> None:
    path = cell(tmp_path, own={"y": {"torque_rate": None}})
    done = call("trial", path, "--out", tmp_path / "o", *ONE)
    assert done.code == 3 and "torque rate unknown for y" in document(tmp_path / "o")["sentence"]


def test_a_centre_out_of_reach(tmp_path: Path) -> None:
    path = cell(tmp_path)
    path.write_text(path.read_text(encoding="utf-8").replace("[0, 0, 0.5]", "[9, 0, 0.5]"), encoding="utf-8")
    done = call("trial", path, "--out", tmp_path / "o", *ONE)
    assert done.code == 1
    told = document(tmp_path / "o")
    assert told["verdict"] == "not deliverable" and [one["limit"] for one in told["reasons"]] == ["reach"]
    header, *rows = (tmp_path / "o" / "trial.csv").read_text(encoding="utf-8").splitlines()
    assert header.startswith("start,") and rows == []


def test_a_seed_makes_the_same_bytes_on_one_worker_and_on_two(tmp_path: Path) -> None:
    """Of a law of the user's, with noise and random starts."""
    sensor = "sensor = { position_noise_m = 0.002, velocity_noise_m_s = 0.02 }\n"
    path = cell(tmp_path, f'law = "law.py:Mine"\n{sensor}', OWN)
    text = path.read_text(encoding="utf-8").replace("[0, 120]", "[0], random = 1")
    path.write_text(text, encoding="utf-8")

    def run(*options: str) -> tuple[bytes, ...]:
        done = call("trial", path, "--out", tmp_path / "o", "--quiet", "--allow-code", *options)
        assert done.code in (0, 1) and done.out == done.err == ""
        return tuple((tmp_path / "o" / name).read_bytes() for name in ("verdict.json", "trial.csv"))

    once = run(*ONE)
    assert run("--workers", "2") == once
    assert run(*ONE, "--seed", "1")[1] != once[1]


# Bad input


@pytest.mark.parametrize(
    ("trial", "words"),
    [
        ('law = "law.py:Mine"\n', ["trial.law", "runs only with --allow-code"]),
        ("gains = { mirorr = 1.0 }\n", ["trial.gains.mirorr", 'did you mean "mirror"']),
        ('law = "mirrors"\n', ["trial.law", 'did you mean "mirror"']),
        ('law = "other.py:Mine"\n', ["other.py"]),
    ],
    ids=["code", "gain", "law", "no file"],
)
def test_a_bad_law_is_a_line_and_nothing_is_written_or_run(
    trial: str, words: list[str], tmp_path: Path
) -> None:
    path = cell(tmp_path, trial, NEVER)
    before = files_in(tmp_path)
    done = call("trial", path, "--out", tmp_path / "o", *ONE)
    assert (done.code, done.out) == (2, "")
    (line,) = done.err.splitlines()
    assert all(word in line for word in words)
    assert files_in(tmp_path) == before


def test_a_cell_without_a_trial(tmp_path: Path) -> None:
    path = write_gantry(tmp_path)
    before = files_in(tmp_path)
    done = call("trial", path, "--out", tmp_path / "o")
    assert (done.code, done.out) == (2, "")
    (line,) = done.err.splitlines()
    assert line.startswith(f"{path}: trial: ") and files_in(tmp_path) == before


# A law of the user's


@pytest.mark.parametrize(("gains", "code"), [("", 0), ("gains = { after = 1 }\n", 1)])
def test_a_law_of_the_users_runs_when_that_is_allowed(gains: str, code: int, tmp_path: Path) -> None:
    path = cell(tmp_path, f'law = "law.py:Mine"\n{gains}', OWN)
    done = call("trial", path, "--out", tmp_path / "o", "--allow-code", "--no-advice", *ONE)
    assert done.code == code, done.err
    told = document(tmp_path / "o")
    assert any(item["path"].endswith("law.py") for item in told["inputs"])
    if code:
        text = told["reasons"][0]["text"]
        assert "law failed: 2 starts" in text and "RuntimeError: that was enough (law.py line 9)" in text
        with (tmp_path / "o" / "trial.csv").open(encoding="utf-8", newline="") as stream:
            assert [row["bounce"] for row in csv.DictReader(stream)] == ["1"] * 2


def test_a_law_that_fails_after_three_good_bounces_does_not_keep_the_ball_up(tmp_path: Path) -> None:
    path = cell(tmp_path, 'law = "law.py:Mine"\ngains = { after = 3 }\n', OWN)
    assert call("trial", path, "--out", tmp_path / "o", "--allow-code", "--no-advice", *ONE).code == 1


def test_a_gain_that_the_users_law_has_not(tmp_path: Path) -> None:
    path = cell(tmp_path, 'law = "law.py:Mine"\ngains = { aftr = 3 }\n', OWN)
    before = files_in(tmp_path)
    done = call("trial", path, "--out", tmp_path / "o", "--allow-code", *ONE)
    assert (done.code, done.out) == (2, "")
    assert 'did you mean "after"' in done.err and files_in(tmp_path) == before


def test_what_a_law_prints_is_not_mixed_into_the_json(tmp_path: Path) -> None:
    path = cell(tmp_path, 'law = "law.py:Mine"\n', OWN + "print('loaded')\n")
    done = call("trial", path, "--out", tmp_path / "o", "--allow-code", "--json", *ONE)
    json.loads(done.out)
    assert done.err.count("loaded") == 1


@pytest.mark.parametrize("workers", ["1", pytest.param("2", marks=pytest.mark.campaign)])
def test_what_a_law_prints_as_it_is_asked_is_not_mixed_in_either(workers: str, tmp_path: Path) -> None:
    """With two workers it goes the way of their own streams, which only a process of its own shows."""
    loud = OWN.replace("def twist(self, seen):", "def twist(self, seen):\n        print('asked')")
    path = cell(tmp_path, 'law = "law.py:Mine"\n', loud)
    given = ("trial", path, "--allow-code", "--json", "--out", tmp_path / "o", "--workers", workers)
    done = call(*given) if workers == "1" else spawn(*given)
    json.loads(done.out)
    assert "asked" in done.err


def test_a_law_file_runs_once_with_one_worker(tmp_path: Path) -> None:
    """The starts that are lost are tried again with changes; that does not load it anew."""
    counts = OWN + "with open(__file__ + '.count', 'a') as stream:\n    stream.write('x')\n"
    path = cell(tmp_path, 'law = "law.py:Mine"\ngains = { after = 1 }\n', counts)
    assert call("trial", path, "--out", tmp_path / "o", "--allow-code", *ONE).code == 1
    assert (tmp_path / "law.py.count").read_text(encoding="utf-8") == "x"


# Its own failures


def test_a_lost_worker_writes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(answer_module, "_play", die)
    path = cell(tmp_path)
    before = files_in(tmp_path)
    done = call("trial", path, "--out", tmp_path / "o", "--workers", "2")
    assert (done.code, done.out) == (4, "")
    assert "a worker process died" in done.err and "Traceback" not in done.err
    assert files_in(tmp_path) == before


def test_an_interrupt_writes_what_is_done(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(answer_module, "_play", once(answer_module._play))
    done = call("trial", cell(tmp_path), "--out", tmp_path / "o", *ONE)
    assert done.code == 3
    told = document(tmp_path / "o")
    assert told["stopped"] is True and "stopped" in told["sentence"]
    assert told["verdict"] == "undecided" and told["recovered_share"] == 1.0
    assert (tmp_path / "o" / "report.html").exists()


def once(real: Callable[..., Any]) -> Callable[..., Any]:
    """A task that is done once and then interrupted."""
    calls: list[int] = []

    def task(*given: Any) -> Any:
        if calls:
            raise KeyboardInterrupt
        calls.append(1)
        return real(*given)

    return task
