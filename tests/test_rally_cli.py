"""`rally` on the command line: exit codes, streams, files, the same bytes each time, one line for every bad input."""

from __future__ import annotations

import csv
import json
import re
import xml.etree.ElementTree as ET
from pathlib import Path
from typing import Any

import pytest
from cli_case import without_drawings
from rally_case import Own, write_gantry
from survey_case import die
from test_cli import Done, call, document, files_in

import reach.rally.envelope as envelope_module

QUICK = ("--no-advice", "--workers", "1")
COLUMNS = [
    *("centre_x_m", "centre_y_m", "centre_z_m", "apex_m", "offset_m", "bearing_deg", "paddle_speed_m_s"),
    *("face_tilt_deg", "flight_s", "cycle_s", "margin_s", "verdict", "basis", "limit", "joint"),
]  # as the interface has them
RALLY = "[rally]\ncentre_m = [0, 0, 0.5]\n"
ONE = RALLY + "apexes_m = [0.2]\n"
TWO = RALLY + "apexes_m = [0.2, 0.4]\n"


@pytest.fixture(autouse=True)
def quick(monkeypatch: pytest.MonkeyPatch) -> None:
    """Largest offsets at the cell's own bearings alone, and pages without drawings; `delivered` has them."""
    monkeypatch.setattr(envelope_module, "TURNS", 1)
    without_drawings(monkeypatch, "rally")


def written(folder: Path, rally: str = ONE, own: Own = None, rest: str = "") -> Path:
    """The gantry's cell with a rally of one bearing on disk; `rest` are further tables."""
    return write_gantry(folder, own, rally + "bearings_deg = [0]\n" + rest)


def rows_of(folder: Path) -> list[dict[str, str]]:
    with (folder / "rally.csv").open(encoding="utf-8", newline="") as stream:
        return list(csv.DictReader(stream))


# Verdicts


@pytest.fixture(scope="module")
def delivered(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Done]:
    """Four points, all outputs asked for."""
    folder = tmp_path_factory.mktemp("rally")
    cell = written(folder, TWO + "offsets_m = [0, 0.05]\n")
    with pytest.MonkeyPatch.context() as patch:
        patch.setattr(envelope_module, "TURNS", 1)
        done = call("rally", cell, "--out", folder / "new" / "out", "--junit", folder / "junit.xml", *QUICK)
    return folder, done


def test_deliverable(delivered: tuple[Path, Done]) -> None:
    folder, done = delivered
    assert done.code == 0, done.err
    told = document(folder / "new" / "out")
    assert (told["schema"], told["verdict"]) == ("strikecheck/rally/1", "deliverable")
    assert told["figures"]["points"] == told["figures"]["deliverable"] == 4
    assert told["sentence"] in " ".join(done.out.split()) or told["sentence"].split(";")[0] in done.out
    assert set(told) >= {
        *("reasons", "not_checked", "needs", "remedies", "headroom_share", "inputs", "versions"),
        *("without_margins", "edges", "offsets", "centres", "bounces"),
    }
    assert told["without_margins"] == "deliverable"


def test_the_folder_holds_everything(delivered: tuple[Path, Done]) -> None:
    folder, done = delivered
    assert {"verdict.json", "rally.csv", "report.html", "evidence"} <= files_in(folder / "new" / "out")
    told = done.out.splitlines()[-1]
    assert all(str(folder / "new" / "out" / n) in told for n in ("verdict.json", "rally.csv", "report.html"))


def test_a_row_a_point(delivered: tuple[Path, Done]) -> None:
    folder, _ = delivered
    with (folder / "new" / "out" / "rally.csv").open(encoding="utf-8", newline="") as stream:
        header = next(csv.reader(stream))
    assert header[: len(COLUMNS)] == COLUMNS
    rows = rows_of(folder / "new" / "out")
    places = [(float(row["apex_m"]), float(row["offset_m"])) for row in rows]
    assert places == [(0.2, 0.0), (0.2, 0.05), (0.4, 0.0), (0.4, 0.05)]
    for row in rows:
        assert (row["verdict"], row["basis"]) == ("deliverable", "demonstrated")
        assert float(row["flight_s"]) - float(row["cycle_s"]) == pytest.approx(
            float(row["margin_s"]), abs=1e-9
        )


def test_progress_goes_to_standard_error_with_the_time_left(delivered: tuple[Path, Done]) -> None:
    _, done = delivered
    for part in ("stances", "points", "apexes", "offsets"):
        assert re.search(rf"^rally, {part}: 1 of 1 parts, about \d+ s left$", done.err, re.M)
    assert "parts" not in done.out


def test_junit_parses(delivered: tuple[Path, Done]) -> None:
    cases = ET.parse(delivered[0] / "junit.xml").getroot().findall(".//testcase")
    assert "verdict" in {case.get("name") for case in cases}


def test_not_deliverable_and_json_alone_on_standard_output(tmp_path: Path) -> None:
    cell = written(tmp_path, own={"z": {"velocity": 0.2}})
    done = call("rally", cell, "--json", "--out", tmp_path / "o", *QUICK)
    assert done.code == 1, done.err
    told = json.loads(done.out, parse_constant=lambda word: pytest.fail(f"{word} is no JSON"))
    assert (told["schema"], told["verdict"]) == ("strikecheck/rally/1", "not deliverable")
    assert told == document(tmp_path / "o")
    assert (told["reasons"][0]["limit"], told["reasons"][0]["joint"]) == ("velocity", "z")
    assert "Traceback" not in done.err


def test_out_of_reach_is_not_deliverable(tmp_path: Path) -> None:
    cell = written(tmp_path, "[rally]\ncentre_m = [4, 4, 4]\napexes_m = [0.2]\n")
    done = call("rally", cell, "--out", tmp_path / "o", *QUICK)
    assert done.code == 1, done.err
    told = document(tmp_path / "o")
    assert (told["reasons"][0]["limit"], told["reasons"][0]["basis"]) == ("reach", "proved")
    (row,) = rows_of(tmp_path / "o")
    assert row["paddle_speed_m_s"] == row["cycle_s"] == row["q_x"] == ""


def test_an_unknown_limit_is_undecided_and_quiet_says_nothing(tmp_path: Path) -> None:
    cell = written(tmp_path, own={"z": {"torque_rate": None}})
    assert call("rally", cell, "--out", tmp_path / "o", "--quiet", *QUICK) == Done(3, "", "")
    told = document(tmp_path / "o")
    assert told["verdict"] == "undecided" and "torque rate unknown for z" in told["sentence"]
    (need,) = [item for item in told["needs"] if item["limit"] == "torque rate"]
    assert need["joint"] == "z" and need["sufficient"] > 0
    assert {row["verdict"] for row in rows_of(tmp_path / "o")} == {"undecided"}


def test_the_same_bytes_for_any_number_of_workers_and_the_same_seed(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setattr(envelope_module, "CHUNK", 1)
    cell = written(
        tmp_path, ONE + "offsets_m = [0, 0.03]\nvelocity_spread_m_s = 0.3\ncases = 2\nlatency_s = 0.01\n"
    )
    found = []
    for name, workers in (("a", "1"), ("b", "2")):
        done = call(
            *("rally", cell, "--out", tmp_path / name, "--seed", "3", "--workers", workers, "--no-advice")
        )
        assert done.code == 0, done.err
        found.append([(tmp_path / name / file).read_bytes() for file in ("verdict.json", "rally.csv")])
    assert found[0] == found[1]


def test_a_paddle_that_loses_nothing_and_no_window_is_still_json(tmp_path: Path) -> None:
    """What would be infinite there must not end up in a file."""
    cell = written(tmp_path, rest="[accept]\nstrike_window_s = 0.0\n")
    text = cell.read_text(encoding="utf-8").replace("restitution = 0.7", "restitution = 1.0")
    cell.write_text(text, encoding="utf-8")
    done = call("rally", cell, "--out", tmp_path / "o", *QUICK)
    assert done.code == 0, done.err
    for file in ("verdict.json", "rally.csv"):
        words = (tmp_path / "o" / file).read_text(encoding="utf-8")
        assert not re.search(r"\b(nan|inf|infinity)\b", words, re.I)


# Bad inputs


@pytest.mark.parametrize(
    ("rally", "words"),
    [
        ("[rally]\napexes_m = [0.2]\n", ["rally.centre_m"]),
        (RALLY + "apexes_m = []\n", ["rally.apexes_m"]),
        (RALLY + "apexes_m = [0.0]\n", ["rally.apexes_m"]),
        (TWO + "recover_within_bounces = 0\n", ["rally.recover_within_bounces"]),
        (TWO + "latency_s = -0.01\n", ["rally.latency_s"]),
        (TWO + "bearing_deg = [0]\n", ["bearing_deg", "bearings_deg"]),
    ],
    ids=["no centre", "no apex", "apex of nothing", "no bounce", "seen before it flies", "unknown key"],
)
def test_a_bad_rally_is_a_line_and_nothing_is_written(rally: str, words: list[str], tmp_path: Path) -> None:
    cell = write_gantry(tmp_path, rest=rally)
    before = files_in(tmp_path)
    done = call("rally", cell, "--out", tmp_path / "o", *QUICK)
    assert (done.code, done.out) == (2, "")
    (line,) = done.err.splitlines()
    assert line.startswith(str(tmp_path)) and all(word in line for word in words)
    assert files_in(tmp_path) == before


def test_a_cell_without_a_rally(tmp_path: Path) -> None:
    cell = write_gantry(tmp_path)
    before = files_in(tmp_path)
    done = call("rally", cell, "--out", tmp_path / "o")
    assert (done.code, done.out) == (2, "")
    (line,) = done.err.splitlines()
    assert line.startswith(f"{cell}: rally: ") and files_in(tmp_path) == before


# Its own failures


def test_a_lost_worker_writes_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    monkeypatch.setattr(envelope_module, "_score", die)
    cell = written(tmp_path)
    before = files_in(tmp_path)
    done = call("rally", cell, "--out", tmp_path / "o", "--workers", "2", "--no-advice")
    assert (done.code, done.out) == (4, "")
    assert "a worker process died" in done.err and "Traceback" not in done.err
    assert files_in(tmp_path) == before


@pytest.mark.parametrize("part", ["_score", "_judge", "_apexes", "_offsets", "_off"])
def test_an_interrupt_writes_what_is_done(part: str, tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    real = getattr(envelope_module, part)
    calls: list[int] = []

    def work(*given: Any) -> Any:
        if calls:
            raise KeyboardInterrupt
        calls.append(1)
        return real(*given)

    monkeypatch.setattr(envelope_module, part, work)
    monkeypatch.setattr(envelope_module, "CHUNK", 1)
    done = call("rally", written(tmp_path, TWO + "offsets_m = [0, 0.05]\n"), "--out", tmp_path / "o", *QUICK)
    assert done.code in (0, 3), done.err
    told = document(tmp_path / "o")
    assert told["stopped"] is True and "stopped" in told["sentence"]
    expected = {"_score": 0, "_judge": 1}.get(part, 4)
    assert told["figures"]["deliverable"] == expected
    assert done.code == (0 if expected == 4 else 3)
