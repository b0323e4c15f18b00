"""`survey` on the command line: exit codes, streams, files, the same bytes each time, one line for every bad input."""

from __future__ import annotations

import csv
import json
import re
import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from builders import ROBOTS
from cli_case import LIMITS, without_drawings, without_key, write_case
from survey_case import die, faces_of, listed
from test_cli import Done, call, document, files_in, spawn

import reach.survey.sweep as sweep_module
from reach.cell import Array
from reach.formats import load_cell
from reach.report.survey.csv import COLUMNS
from reach.strike.setting import Setting

EXAMPLE = Path(__file__).parents[1] / "examples" / "wear_bench" / "cell.toml"
QUICK = ("--no-advice", "--workers", "1")
Q = [[0.1, 0.9], [0.5, -0.8], [0.3, 1.1]]  # of the two-link arm, away from its folds
SURVEY = '[accept]\nstrike_window_s = 0.001\n[survey]\nstrikes = "strikes.csv"\nrotation = "free"\n'
HEADER = "x_m,y_m,z_m,nx,ny,nz,paddle_speed_m_s"


def strikes_text(folder: Path, speeds_m_s: list[float]) -> str:
    """A file of strikes that postures of the two-link arm make."""
    cell = load_cell(write_case(folder / "bare", rest=""))
    q: Array = np.array(Q)
    one = np.array([[0.0, 0.0, 1.0]])
    place, face = faces_of(Setting.of(listed(cell, one, one, 1.0)), q)
    rows = [
        ",".join(repr(float(x)) for x in (*p, *n, speed))
        for p, n, speed in zip(place, face, speeds_m_s, strict=True)
    ]
    return "\n".join([HEADER, *rows]) + "\n"


def links(folder: Path, speeds_m_s: list[float], limits: str = LIMITS, rest: str = SURVEY) -> Path:
    """The two-link arm's cell with strikes listed, on disk."""
    cell = write_case(folder, limits=limits, rest=rest)
    (folder / "strikes.csv").write_text(strikes_text(folder, speeds_m_s), encoding="utf-8")
    return cell


def bench(folder: Path, survey: str) -> Path:
    """The example's cell without its log, with another [survey], on disk."""
    text = EXAMPLE.read_text(encoding="utf-8")
    text = text[: text.index("[follow]")] + "[survey]\n" + survey
    path = folder / "cell.toml"
    path.write_text(text.replace("../../robots", ROBOTS.as_posix()), encoding="utf-8")
    return path


@pytest.fixture(autouse=True)
def undrawn(monkeypatch: pytest.MonkeyPatch) -> None:
    """Pages without drawings; `delivered` and the process of its own have them."""
    without_drawings(monkeypatch, "survey")


# Verdicts


@pytest.fixture(scope="module")
def delivered(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Done]:
    """The example with a coarse grid, all outputs asked for."""
    folder = tmp_path_factory.mktemp("delivered")
    cell = bench(
        folder,
        "box_m = [[0.45, -0.2, 0.4], [0.65, 0.2, 0.4]]\nspacing_m = 0.2\nnormals = [[0, 0, 1]]\n"
        "paddle_speed_m_s = 0.6\nrun_up_m = 0.3\nrequired_share = 0.8\n",
    )
    return folder, call(
        "survey", cell, "--out", folder / "new" / "out", "--junit", folder / "junit.xml", *QUICK
    )


def test_deliverable(delivered: tuple[Path, Done]) -> None:
    folder, done = delivered
    assert done.code == 0, done.err
    told = document(folder / "new" / "out")
    assert (told["schema"], told["verdict"]) == ("strikecheck/survey/1", "deliverable")
    assert told["figures"]["strikes"] == 6
    assert told["sentence"] in " ".join(done.out.split()) or told["sentence"].split(";")[0] in done.out
    assert set(told) >= {
        "reasons",
        "not_checked",
        "needs",
        "remedies",
        "headroom_share",
        "inputs",
        "versions",
    }


def test_the_folder_holds_everything(delivered: tuple[Path, Done]) -> None:
    folder, done = delivered
    written = files_in(folder / "new" / "out")
    assert {"verdict.json", "survey.csv", "report.html", "evidence"} <= written
    assert any(name.startswith("evidence/") for name in written)
    told = done.out.splitlines()[-1]
    assert all(str(folder / "new" / "out" / n) in told for n in ("verdict.json", "survey.csv", "report.html"))


def test_a_row_a_strike(delivered: tuple[Path, Done]) -> None:
    folder, _ = delivered
    with (folder / "new" / "out" / "survey.csv").open(encoding="utf-8", newline="") as stream:
        header, *rows = list(csv.reader(stream))
    assert header[: len(COLUMNS)] == list(COLUMNS)
    assert header[len(COLUMNS) : len(COLUMNS) + 7] == [f"q_j{i}" for i in range(1, 8)]
    assert len(rows) == 6
    named = [dict(zip(header, row, strict=True)) for row in rows]
    places = [tuple(round(float(row[f"{axis}_m"]), 9) for axis in "xyz") for row in named]
    assert places == [(x, y, 0.4) for x in (0.45, 0.65) for y in (-0.2, 0.0, 0.2)]
    told = document(folder / "new" / "out")["figures"]
    assert [row["verdict"] for row in named].count("deliverable") == told["deliverable"]
    for row in named:
        if row["verdict"] == "deliverable":
            assert 0.6 <= float(row["demonstrated_m_s"]) <= float(row["bound_still_m_s"]) * 1.000001
            assert float(row["bound_still_m_s"]) <= 1.7  # the tool's cap


def test_progress_goes_to_standard_error_with_the_time_left(delivered: tuple[Path, Done]) -> None:
    _, done = delivered
    assert re.search(r"^survey, postures: 1 of 1 parts, about \d+ s left$", done.err, re.M)
    assert re.search(r"^survey, strikes: 1 of 1 parts, about \d+ s left$", done.err, re.M)
    assert "parts" not in done.out


def test_junit_parses(delivered: tuple[Path, Done]) -> None:
    cases = ET.parse(delivered[0] / "junit.xml").getroot().findall(".//testcase")
    assert "verdict" in {case.get("name") for case in cases}


def test_not_deliverable_and_json_alone_on_standard_output(tmp_path: Path) -> None:
    cell = links(tmp_path, [0.3, 0.3, 5.0])
    junit = tmp_path / "results" / "junit.xml"
    done = spawn("survey", cell, "--json", "--junit", junit, *QUICK, cwd=tmp_path)
    assert done.code == 1, done.err
    told = json.loads(done.out)
    assert (told["schema"], told["verdict"]) == ("strikecheck/survey/1", "not deliverable")
    assert told == document(tmp_path / "out" / "survey")
    assert told["figures"]["not_deliverable"] == 1 and told["headroom_share"] is None
    assert (told["reasons"][0]["limit"], told["reasons"][0]["joint"]) == ("velocity", "j2")
    assert ET.parse(junit).findall(".//testcase[failure]")
    assert "Traceback" not in done.err


def test_an_unknown_limit_is_undecided_and_quiet_says_nothing(tmp_path: Path) -> None:
    cell = links(tmp_path, [0.3] * 3, without_key(LIMITS, "j1", "torque_rate_nm_s"))
    assert call("survey", cell, "--out", tmp_path / "o", "--quiet", *QUICK) == Done(3, "", "")
    told = document(tmp_path / "o")
    assert told["verdict"] == "undecided" and "torque rate unknown for j1" in told["sentence"]
    (need,) = [item for item in told["needs"] if item["limit"] == "torque rate"]
    assert need["joint"] == "j1" and need["sufficient"] > 0
    with (tmp_path / "o" / "survey.csv").open(encoding="utf-8", newline="") as stream:
        rows = list(csv.DictReader(stream))
    assert {row["verdict"] for row in rows} == {"undecided"}
    assert all("torque rate unknown" in row["reason"] for row in rows)


def test_the_same_bytes_for_any_number_of_workers_and_advice_by_default(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(sweep_module, "CHUNK", 2)
    cell = links(tmp_path, [0.3, 1.2, 2.6])
    found = []
    for name, workers in (("a", "1"), ("b", "2")):
        done = call("survey", cell, "--out", tmp_path / name, "--seed", "3", "--workers", workers)
        assert done.code == 1, done.err
        found.append((tmp_path / name / "verdict.json").read_bytes())
    assert found[0] == found[1]
    told = json.loads(found[0])
    assert told["headroom_share"] == pytest.approx(-0.2)
    assert (
        told["remedies"][0]["change"].startswith("velocity of j2 raised") and told["remedies"][0]["verified"]
    )
    assert "headroom" in done.err


# Bad inputs


BOX = "box_m = [[0.4, -0.2, 0.4], [0.6, 0.2, 0.4]]\n"
FACE = "normals = [[0, 0, 1]]\n"
SPEED = "paddle_speed_m_s = 0.6\n"


@pytest.mark.parametrize(
    ("survey", "words"),
    [
        (
            "box_m = [[0.6, -0.2, 0.4], [0.4, 0.2, 0.4]]\n" + FACE + SPEED,
            ["survey.box_m", "x goes from 0.6 down to 0.4"],
        ),
        (
            BOX + FACE + SPEED + "spacing_m = 0.01\nmax_points = 100\n",
            ["survey.spacing_m", "861 strikes", "21 x 41 x 1"],
        ),
        (BOX + "normals = [[0, 0, 0]]\n" + SPEED, ["survey.normals[0]", "is zero"]),
        (BOX + FACE + "paddle_speed_m_s = 0.0\n", ["survey.paddle_speed_m_s"]),
        (BOX + FACE + "paddle_speed_m_s = -0.6\n", ["survey.paddle_speed_m_s"]),
        (
            BOX + "ball_in_m_s = [0, 0, 3]\nball_out_m_s = [0, 0, 4]\n",
            ["survey.ball_in_m_s", "does not come toward the face"],
        ),
        ('strikes = "strikes.csv"\n', ["strikes.csv", "nz"]),
    ],
    ids=["inverted box", "too many", "zero normal", "no speed", "backward", "ball away", "missing column"],
)
def test_a_bad_survey_is_a_line_and_nothing_is_written(survey: str, words: list[str], tmp_path: Path) -> None:
    cell = bench(tmp_path, survey)
    (tmp_path / "strikes.csv").write_text(
        "x_m,y_m,z_m,nx,ny,paddle_speed_m_s\n0.5,0,0.4,0,0,1\n", encoding="utf-8"
    )
    before = files_in(tmp_path)
    done = call("survey", cell, "--out", tmp_path / "o", *QUICK)
    assert (done.code, done.out) == (2, "")
    (line,) = done.err.splitlines()
    assert line.startswith(str(tmp_path)) and all(word in line for word in words)
    assert files_in(tmp_path) == before


def test_all_faults_at_once(tmp_path: Path) -> None:
    cell = bench(
        tmp_path,
        "box_m = [[0.6, -0.2, 0.4], [0.4, 0.2, 0.4]]\nnormals = [[0, 0, 0]]\npaddle_speed_m_s = -1.0\n",
    )
    done = call("survey", cell, "--out", tmp_path / "o")
    assert (done.code, done.out) == (2, "")
    assert len(done.err.splitlines()) == 3
    for word in ("survey.box_m", "survey.normals[0]", "survey.paddle_speed_m_s"):
        assert word in done.err


def test_a_cell_without_a_survey(tmp_path: Path) -> None:
    cell = write_case(tmp_path)
    before = files_in(tmp_path)
    done = call("survey", cell, "--out", tmp_path / "o")
    assert (done.code, done.out) == (2, "")
    (line,) = done.err.splitlines()
    assert line.startswith(f"{cell}: survey: ") and files_in(tmp_path) == before


# Its own failures


def test_a_lost_worker_writes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(sweep_module, "_search", die)
    monkeypatch.setattr(sweep_module, "CHUNK", 1)
    cell = links(tmp_path, [0.3] * 3)
    before = files_in(tmp_path)
    done = call("survey", cell, "--out", tmp_path / "o", "--workers", "2", "--no-advice")
    assert (done.code, done.out) == (4, "")
    assert "a worker process died" in done.err and "Traceback" not in done.err
    assert files_in(tmp_path) == before


def test_an_interrupt_writes_what_is_done(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    real = sweep_module._judge
    calls: list[int] = []

    def work(*given: Any) -> Any:
        if calls:
            raise KeyboardInterrupt
        calls.append(1)
        return real(*given)

    monkeypatch.setattr(sweep_module, "_judge", work)
    monkeypatch.setattr(sweep_module, "CHUNK", 1)
    done = call("survey", links(tmp_path, [0.3] * 3), "--out", tmp_path / "o", *QUICK)
    assert done.code == 3
    told = document(tmp_path / "o")
    assert told["stopped"] is True and told["figures"]["deliverable"] == 1
    assert "stopped" in told["sentence"]
