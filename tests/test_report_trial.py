"""Every output of trials, on invented runs whose names try to break out of them."""

from __future__ import annotations

import base64
import csv
import io
import json
import re
import xml.etree.ElementTree as ET
from dataclasses import fields, replace
from functools import cache
from pathlib import Path
from typing import get_args

import numpy as np
import pytest
from rally_report_case import CENTRE, TRIALS, made_run, trial_result
from test_report import NAMES, Page, listing, refuse, terminal_width

from reach.cell import Recovered, Sensor
from reach.evidence.trials import Contacts, Outcome
from reach.report import WRITERS as ALL_WRITERS
from reach.report import write_folder
from reach.report.document import document
from reach.report.trial.csv import BOUNCE_COLUMNS, START_COLUMNS
from reach.report.trial.evidence import evidence_files
from reach.report.trial.numbers import first_lost, peak_speed, typical, worst_run
from reach.report.trial.wording import MEANINGS, meaning, sensor, start_text
from reach.report.wording import plain
from reach.result import TrialResult
from reach.verdict import DELIVERABLE

WRITERS = ALL_WRITERS["trial"]
FIGURES = (
    "Starts recovered and lost",
    "Apex and offset over the bounces",
    "Heights over time",
    "Use of the limits, worst trial",
)


@pytest.fixture(scope="module")
def result() -> TrialResult:
    return made("whole")


@cache
def made(case: str) -> TrialResult:
    """An invented result."""
    return TRIALS[case]()


@cache
def html_of(result: TrialResult) -> str:
    """Its page."""
    return str(WRITERS["html"](result))


def as_text(content: str | bytes) -> str:
    return content.decode() if isinstance(content, bytes) else content


def joined(content: str | bytes) -> str:
    """The text without its breaks of lines."""
    return " ".join(as_text(content).split())


def drawings(result: TrialResult) -> list[bytes]:
    """The figures of the page."""
    return [base64.b64decode(s.split(",", 1)[1]) for s in Page(html_of(result)).sources]


def words_of(drawing: bytes) -> str:
    return " ".join("".join(ET.fromstring(drawing).itertext()).split())


def rows_of(result: TrialResult) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(str(WRITERS["csv"](result)))))


@pytest.mark.parametrize("case", TRIALS)
@pytest.mark.parametrize("kind", WRITERS)
def test_writers_work_alike_twice_and_write_no_control_character(kind: str, case: str) -> None:
    one = made(case)
    once = WRITERS[kind](one)
    if kind != "html" or case == "whole":  # drawing takes its time
        assert once == WRITERS[kind](one)
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", as_text(once))


def test_csv_has_a_row_a_bounce_that_reads_back(result: TrialResult) -> None:
    rows, runs = rows_of(result), result.evidence.runs
    assert list(rows[0]) == [*START_COLUMNS, *BOUNCE_COLUMNS]
    assert len(set(rows[0])) == len(START_COLUMNS) + len(BOUNCE_COLUMNS)
    assert len(rows) == sum(run.bounces for run in runs)
    mine = [row for row in rows if row["start"] == "7"]
    run = runs[6]
    assert [row["bounce"] for row in mine] == [str(k) for k in range(1, run.bounces + 1)]
    assert {(row["outcome"], row["recovered"]) for row in mine} == {("missed past the edge", "0")}
    contacts = run.contacts
    for name, values in (
        ("start_x_m", np.full(run.bounces, run.offset[0])),
        ("lateral_x_m_s", np.full(run.bounces, run.lateral[0])),
        ("t_s", contacts.t_s),
        ("ball_y_m", contacts.ball[:, 1]),
        ("face_x_m", contacts.face[:, 0]),
        ("ball_in_z_m_s", contacts.ball_in[:, 2]),
        ("ball_out_z_m_s", contacts.ball_out[:, 2]),
        ("spin_out_y_m_s", contacts.spin_out[:, 1]),
        ("paddle_m_s", contacts.paddle_m_s),
        ("face_tilt_deg", np.degrees(contacts.tilt_rad)),
        ("face_bearing_deg", np.degrees(contacts.tilt_bearing_rad)),
        ("apex_m", contacts.apex_m),
        ("offset_m", contacts.offset_m),
    ):
        np.testing.assert_allclose(
            [float(row[name]) for row in mine], values, rtol=1e-8, atol=1e-12, err_msg=name
        )


def test_csv_of_a_start_without_a_bounce_has_one_row() -> None:
    (row,) = rows_of(made("lost at once"))
    assert (row["start"], row["outcome"], row["recovered"]) == ("1", "limit", "0")
    assert {row[name] for name in BOUNCE_COLUMNS} == {""}
    assert rows_of(made("blocked")) == []


def test_json_is_strict_and_has_every_outcome(result: TrialResult) -> None:
    read = json.loads(str(WRITERS["json"](result)), parse_constant=refuse)
    runs = result.evidence.runs
    assert read["schema"] == "strikecheck/trial/1"
    assert read["recovered_share"] == 5 / 8
    assert (read["recovered_low_share"], read["recovered_high_share"]) == (0.425, 0.825)
    assert read["law"] == "mirror" and read["gains"] == {"lift <k>": 0.12, "centring": 1.5}
    assert [row["outcome"] for row in read["outcome"]] == [run.outcome for run in runs]
    assert [row["recovered_at"] for row in read["outcome"]] == [run.recovered_at for run in runs]
    last = read["outcome"][7]
    assert (last["start"], last["limit"], last["joint"], last["bounces"]) == (8, "torque", NAMES[1], 12)
    assert last["oscillation_m"] is None and last["broken"] == [f"torque of {NAMES[2]}"]
    assert read["outcomes"][0] == {"outcome": "held", "trials": 6, "recovered": 5}
    assert read["lost_by"] == [{"limit": "torque", "joint": NAMES[1], "trials": 3}]
    f = read["figures"]
    assert (f["starts"], f["tried"], f["recovered"]) == (8, 8, 5)
    assert (f["bounces_median"], f["bounces_least"]) == (50, 7)
    assert f["use_most"] == pytest.approx(1.3 * 0.9)
    assert read["trial"]["sensor"]["rate_hz"] == 100
    keys = list(document(result))
    assert keys[:4] == ["schema", "verdict", "sentence", "without_margins"]
    assert keys[-4:] == ["notes", "cautions", "inputs", "versions"]


@pytest.mark.parametrize("case", TRIALS)
def test_every_json_is_strict(case: str) -> None:
    read = json.loads(str(WRITERS["json"](made(case))), parse_constant=refuse)
    assert set(read) >= {"outcome", "recovered_share", "recovered_low_share", "recovered_high_share"}


def test_every_outcome_is_explained() -> None:
    assert set(MEANINGS) == set(get_args(Outcome))


def test_what_counts_and_what_is_seen_in_words() -> None:
    assert meaning(Recovered(), 0.3) == (
        "contacts within 20 mm of the centre and apexes within 30 mm of 300 mm, from bounce 10 at the latest, and for "
        "20 bounces on; and the ball kept up to the last one asked for"
    )
    assert sensor(Sensor()) == "at every control period, at once, its true state"
    assert sensor(Sensor(60.0, 0.015, 0.004, 0.05)) == (
        "at 60 Hz, 15 ms late, noise of 4 mm and 0.05 m/s (standard deviation of each axis)"
    )


def test_trials_are_chosen_by_what_they_show() -> None:
    runs = tuple(
        replace(made_run((0.05, 0.0), (0.0, 0.0), "held", at is not None, 30, 0.7), recovered_at=at)
        for at in (9, None, 2, 4, None)
    )
    assert typical(runs) == 3
    assert first_lost(runs) == 1
    assert worst_run(runs) == 1  # the first of those that break a limit
    assert typical(()) is None and first_lost(runs[2:4]) is None and worst_run(()) is None


def test_peak_speed_is_of_the_paddle_itself(result: TrialResult) -> None:
    runs = result.evidence.runs
    assert peak_speed(()) is None
    # The trace bobs by 30 mm at 9 rad/s; the contacts of the trial that runs away are faster.
    fastest = max(float(run.contacts.paddle_m_s.max()) for run in runs)
    assert peak_speed(runs) == pytest.approx(max(0.27, fastest), rel=0.01)
    assert peak_speed((replace(runs[0], contacts=made("lost at once").evidence.runs[0].contacts),)) == (
        pytest.approx(0.27, rel=0.01)
    )


@pytest.mark.parametrize("case", TRIALS)
def test_text_is_narrow(case: str) -> None:
    text = str(WRITERS["text"](made(case)))
    assert max(terminal_width(row) for row in text.splitlines()) <= 100


def test_text_says_everything(result: TrialResult) -> None:
    text = joined(WRITERS["text"](result))
    assert text.startswith(" ".join(plain(result.verdict.sentence).split()))
    for expected in (
        "mirror, lift <k> = 0.12, centring = 1.5",
        "5 of 8 starts (62.5 %, 95 % interval 42.5 to 82.5)",
        "contacts within 20 mm of the centre",
        "at 100 Hz, 20 ms late, noise of 2 mm",
        "median 50, least 7, of 50 asked for",
        "from bounce 5 (median)",
        "4 mm root mean square (median)",
        f"117.0 % of torque of {NAMES[2]} (start 6)",
        "the ball went down outside the face's edge",
        "start 8: 80 mm off at 270°, lateral 0.1 m/s toward 270°: ran away after 12 bounces, <odd> & \\x1b text",
        "What held the arm back where lost",
        f"jerk: {NAMES[0]}",
        "a softer law: more starts (not verified)",
        "250 mm/s",
        "held at zero",
    ):
        assert expected in text, expected


def test_start_is_told_from_the_centre_and_by_its_lateral_velocity() -> None:
    still = made_run((0.0, 0.0), (0.0, 0.0), "held", True, 3, 0.7)
    assert start_text(1, still) == "start 1: at the centre, lateral 0 m/s"
    moving = replace(still, offset=np.array([-0.06, 0.08]), lateral=np.array([0.0, -0.2]))
    assert start_text(2, moving) == "start 2: 100 mm off at 127°, lateral 0.2 m/s toward 270°"


def test_text_without_a_run_says_why_and_what_was_left() -> None:
    assert "none of 4 starts tried: no posture holds the paddle" in joined(WRITERS["text"](made("blocked")))
    assert "1 of 2 starts (50.0 %, 95 % interval 30.0 to 70.0); 4 not tried" in joined(
        WRITERS["text"](made("stopped"))
    )


def test_html_escapes_every_name_and_fetches_nothing(result: TrialResult) -> None:
    text = html_of(result)
    page = Page(text)
    assert not {"script", "b", "i", "k", "odd", "link", "iframe", "object"} & set(page.tags)
    assert all(source.startswith("data:image/svg+xml;base64,") for source in page.sources)
    assert not re.search(r"https?://|url\(|@import", text)
    words = "".join(page.words)
    for expected in (*NAMES[1:], plain(result.verdict.sentence), "note with <i>markup</i>", "lift <k>"):
        assert expected in words, expected
    for section in (
        *("What decides", "What would help", "The trials", "How they ended", "How to read this"),
        *("Limits used most", "Trial by trial", "Not checked"),
    ):
        assert section in page.words, section


@pytest.mark.parametrize(
    ("case", "missing"),
    [("whole", ()), ("many", ()), ("stopped", ()), ("lost at once", FIGURES[1:]), ("blocked", FIGURES)],
)
def test_every_figure_that_has_something_to_show_is_there(case: str, missing: tuple[str, ...]) -> None:
    page = Page(html_of(made(case)))
    assert page.tags.count("img") == len(FIGURES) - len(missing)
    assert {word for word in page.words if word in FIGURES} == set(FIGURES) - set(missing)


@pytest.mark.parametrize("case", TRIALS)
def test_figures_are_drawings_that_fetch_and_run_nothing(case: str) -> None:
    for drawing in drawings(made(case)):
        tree = ET.fromstring(drawing)
        assert not [element for element in tree.iter() if element.tag.rsplit("}", 1)[-1] in ("script", "a")]
        sources = [v for e in tree.iter() for k, v in e.attrib.items() if k.rsplit("}", 1)[-1] == "href"]
        assert all(source.startswith(("#", "data:image/png;base64,")) for source in sources)


def test_figures_tell_the_lost_from_the_recovered(result: TrialResult) -> None:
    starts, bounces, heights, uses = map(words_of, drawings(result))
    assert "some of those here recovered" in starts and "6, 5 recovered" in starts
    assert "not recovered" in bounces and "counts as recovered" in bounces
    assert "start 6: held" in heights
    assert "! 117 %" in uses


def test_many_trials_make_a_small_page() -> None:
    text = html_of(made("many"))
    assert len(text) < 2_500_000
    assert "150 of 200 trials" in text
    assert "verdict.json has the other 140 too" in text


def test_junit_has_a_case_a_start(result: TrialResult) -> None:
    suite = ET.fromstring(WRITERS["junit"](result)).find("testsuite")
    assert suite is not None
    cases = suite.findall("testcase")
    assert len(cases) == 1 + 8 == int(str(suite.get("tests")))
    assert suite.get("failures") == "4"  # the verdict and three starts
    failure = cases[7].find("failure")
    assert failure is not None
    assert failure.get("type") == "missed past the edge"
    assert f"held back by torque of {NAMES[1]}" in str(failure.text)


def test_junit_skips_what_was_not_tried_and_fails_nothing_where_deliverable() -> None:
    stopped = ET.fromstring(WRITERS["junit"](made("stopped"))).find("testsuite")
    blocked = ET.fromstring(WRITERS["junit"](made("blocked"))).find("testsuite")
    many = ET.fromstring(WRITERS["junit"](made("many"))).find("testsuite")
    assert stopped is not None and blocked is not None and many is not None
    assert (stopped.get("tests"), stopped.get("skipped")) == ("7", "4")
    assert (blocked.get("tests"), blocked.get("skipped")) == ("5", "4")
    assert (many.get("failures"), many.get("skipped")) == ("0", "8")


def test_evidence_reads_back_to_the_last_digit(result: TrialResult) -> None:
    files, runs = evidence_files(result), result.evidence.runs
    assert files == evidence_files(result)
    stored, told = files["runs.npz"], files["cell.json"]
    assert stored is not None and told is not None
    with np.load(io.BytesIO(stored), allow_pickle=False) as arrays:
        assert arrays["outcome"].tolist() == [run.outcome for run in runs]
        np.testing.assert_array_equal(arrays["recovered"], result.evidence.recovered)
        assert arrays["moved"].all()
        assert len(set(arrays)) == 5 + len(runs) * (5 + len(fields(Contacts)))
        for k, run in enumerate(runs):
            np.testing.assert_array_equal(arrays["offset"][k], run.offset)
            assert run.motion is not None
            for name in ("q", "v", "a"):
                np.testing.assert_array_equal(arrays[f"{name}_{k}"], getattr(run.motion, name))
            for item in fields(Contacts):
                np.testing.assert_array_equal(arrays[f"{item.name}_{k}"], getattr(run.contacts, item.name))
            assert float(arrays[f"period_s_{k}"]) == run.motion.period_s
    cell = json.loads(told, parse_constant=refuse)
    assert (cell["command"], cell["law"], cell["centre_m"]) == ("trial", "mirror", list(CENTRE))
    assert cell["ready"] == [0.1, -0.6, 1.2]
    assert cell["trial"]["recovered"]["then_for"] == 20


def test_a_motion_that_was_not_kept_is_left_out(result: TrialResult) -> None:
    runs = tuple(replace(run, motion=None) if k else run for k, run in enumerate(result.evidence.runs))
    stored = evidence_files(trial_result(runs, 8))["runs.npz"]
    assert stored is not None
    with np.load(io.BytesIO(stored), allow_pickle=False) as arrays:
        assert arrays["moved"].tolist() == [True] + [False] * 7
        assert "q_0" in arrays and "q_1" not in arrays and "t_s_1" in arrays


def test_folder_holds_everything_and_no_runs_of_another_run(result: TrialResult, tmp_path: Path) -> None:
    complete = {"verdict.json", "trial.csv", "report.html", "evidence/cell.json", "evidence/digests.json"}
    write_folder(result, tmp_path, tmp_path / "junit.xml")
    assert listing(tmp_path) == complete | {"evidence/runs.npz", "junit.xml"}
    written = write_folder(made("blocked"), tmp_path)
    assert listing(tmp_path) == complete | {"junit.xml"}
    assert written[-1] == tmp_path / "verdict.json"


def test_a_trial_that_ends_with_nan_is_still_drawn() -> None:
    run = made_run((0.08, 0.0), (0.0, 0.0), "ran away", False, 6, 1.3)
    odd = replace(
        run,
        contacts=replace(run.contacts, apex_m=np.where(np.arange(6) > 3, np.nan, run.contacts.apex_m - 0.3)),
        trace=replace(run.trace, ball=np.where(run.trace.t_s[:, None] > 2, np.nan, run.trace.ball)),
    )
    page = Page(html_of(trial_result((odd,), 1, DELIVERABLE)))
    assert page.tags.count("img") == len(FIGURES)
