"""Every output of a rally, on invented envelopes whose names try to break out of them."""

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

import numpy as np
import pytest
from rally_report_case import (
    CENTRE,
    KINDS,
    RALLIES,
    WHOLE,
    made_bounces,
    rally_result,
)
from test_report import NAMES, Page, listing, refuse, terminal_width

from reach.evidence.rallies import ApexEdge, Knots, OffsetEdge, RallyPoints
from reach.report import WRITERS as ALL_WRITERS
from reach.report import write_folder
from reach.report.columns import COLUMNS as TERMINAL
from reach.report.columns import table
from reach.report.document import document
from reach.report.rally.csv import COLUMNS, MORE_COLUMNS
from reach.report.rally.envelope_figure import some
from reach.report.rally.evidence import evidence_files
from reach.report.rally.numbers import best_offset, ranges, smallest_offset
from reach.report.rally.tables import stability
from reach.report.wording import plain
from reach.result import RallyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED

WRITERS = ALL_WRITERS["rally"]
WRITE_PAGE = WRITERS["html"]  # whatever takes its place in a test
FIGURES = (
    *("The envelope", "Recoverable offset", "Time and speed", "Acceleration at impact", "One cycle"),
    "Where the centre may stand",
)


@pytest.fixture(scope="module")
def result() -> RallyResult:
    return made("whole")


@cache
def made(case: str) -> RallyResult:
    """An invented result."""
    return RALLIES[case]()


@cache
def html_of(result: RallyResult) -> str:
    """Its page."""
    return str(WRITE_PAGE(result))


def as_text(content: str | bytes) -> str:
    return content.decode() if isinstance(content, bytes) else content


def joined(content: str | bytes) -> str:
    """The text without its breaks of lines."""
    return " ".join(as_text(content).split())


def drawings(result: RallyResult) -> list[bytes]:
    """The figures of the page."""
    return [base64.b64decode(s.split(",", 1)[1]) for s in Page(html_of(result)).sources]


def words_of(drawing: bytes) -> str:
    return " ".join("".join(ET.fromstring(drawing).itertext()).split())


def rows_of(result: RallyResult) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(str(WRITERS["csv"](result)), newline="")))


@pytest.mark.parametrize("case", RALLIES)
@pytest.mark.parametrize("kind", WRITERS)
def test_writers_work_alike_twice_and_write_no_control_character(kind: str, case: str) -> None:
    one = made(case)
    once = html_of(one) if kind == "html" else WRITERS[kind](one)
    if kind != "html" or case == "whole":  # drawing takes its time
        assert once == WRITERS[kind](one)
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", as_text(once))


def test_csv_has_the_columns_of_the_interface_and_reads_back(result: RallyResult) -> None:
    points, rows = result.evidence.points, rows_of(result)
    assert ",".join(COLUMNS) == (
        "centre_x_m,centre_y_m,centre_z_m,apex_m,offset_m,bearing_deg,paddle_speed_m_s,face_tilt_deg,flight_s,cycle_s,"
        "margin_s,verdict,basis,limit,joint"
    )
    assert list(rows[0]) == [*COLUMNS, *(f"q_{name}" for name in NAMES), *MORE_COLUMNS]
    assert len(rows) == len(points.verdict) == 48
    for name, values in (
        ("centre_x_m", points.centre[:, 0]),
        ("bearing_deg", np.degrees(points.bearing_rad)),
        ("face_tilt_deg", np.degrees(points.face_tilt_rad)),
        ("cycle_s", points.cycle_s),
        ("margin_s", points.margin_s),
        ("speed_bound_m_s", points.speed_bound_m_s),
        ("feasible_low_share", points.feasible_low),
        ("largest_tilt_deg", np.degrees(points.largest_tilt_rad)),
        (f"q_{NAMES[1]}", points.q[:, 1]),
        ("postures", points.postures),
        ("margin_free", points.margin_free),
    ):
        read = [float(row[name]) if row[name] else np.nan for row in rows]
        np.testing.assert_allclose(read, values, rtol=1e-8, atol=1e-12, err_msg=name)
    for name in ("verdict", "basis", "limit", "joint", "reason"):
        assert [row[name] for row in rows] == list(getattr(points, name)), name


def test_csv_is_empty_where_there_is_nothing() -> None:
    text = str(WRITERS["csv"](made("nothing held")))
    assert "nan" not in text
    row = next(csv.DictReader(io.StringIO(text)))
    assert (row["verdict"], row["basis"], row["limit"]) == (NOT_DELIVERABLE, "proved", "reach")
    assert row["cycle_s"] == row["joint"] == row[f"q_{NAMES[0]}"] == row["feasible_share"] == ""
    assert len(str(WRITERS["csv"](made("no point"))).splitlines()) == 1


def test_json_is_strict_and_has_the_figures(result: RallyResult) -> None:
    read = json.loads(str(WRITERS["json"](result)), parse_constant=refuse)
    points, f = result.evidence.points, read["figures"]
    assert read["schema"] == "strikecheck/rally/1"
    for word, field in (
        (DELIVERABLE, "deliverable"),
        (NOT_DELIVERABLE, "not_deliverable"),
        (UNDECIDED, "undecided"),
    ):
        count = sum(verdict == word for verdict in points.verdict)
        assert count > 0
        assert f[field] == count
        assert f[f"{field}_share"] == pytest.approx(count / 48)
    done = points.verdict == DELIVERABLE
    assert f["margin_least_s"] == pytest.approx(points.margin_s[done].min(), rel=1e-8)
    assert f["feasible_share_least"] == pytest.approx(points.feasible_share[done].min(), rel=1e-8)
    assert f["largest_tilt_deg_median"] == pytest.approx(np.degrees(0.02))
    assert f["recovered_offset_least_m"] is None  # the lowest apex holds no centre ahead
    assert f["recovered_offset_most_m"] == pytest.approx(0.08 + 0.2 * 0.8 - 0.03)
    assert (len(read["edges"]), len(read["offsets"]), len(read["bounces"])) == (12, 16, 4)
    assert [edge["bearing_deg"] for edge in read["edges"][:4]] == [0, 90, 180, 270]
    assert read["bounces"][0]["stable_by_itself"] and not read["bounces"][1]["stable_by_itself"]
    assert read["bounces"][1]["could_be_stable_by_itself"] and read["bounces"][3]["impact_m_s2"] is None
    assert read["impact"]["joints"][1]["velocity_jump_free"] == pytest.approx(-0.024)
    assert read["rally"]["latency_s"] == 0.02
    assert read["stopped"] is False and f["centres"] == len(read["centres"]) == 18
    keys = list(document(result))
    assert keys[:4] == ["schema", "verdict", "sentence", "without_margins"]
    assert keys[-4:] == ["notes", "cautions", "inputs", "versions"]


@pytest.mark.parametrize("case", RALLIES)
def test_every_json_is_strict(case: str) -> None:
    json.loads(str(WRITERS["json"](made(case))), parse_constant=refuse)


def test_range_is_what_every_bearing_holds() -> None:
    def edge(bearing: float, low: float | None, high: float | None) -> ApexEdge:
        return ApexEdge(0.1, bearing, low, "cycle time", "", False, high, "velocity", "j2", False)

    (found,) = ranges((edge(0.0, 0.1, 0.7), edge(1.0, 0.2, 0.9), edge(2.0, 0.15, 0.6)))
    assert found.low is not None and found.high is not None
    assert (found.low.low_m, found.low.bearing_rad) == (0.2, 1.0)
    assert (found.high.high_m, found.high.bearing_rad) == (0.6, 2.0)
    assert not found.crossed and not found.empty
    (crossed,) = ranges((edge(0.0, 0.1, 0.3), edge(1.0, 0.4, 0.9)))
    assert crossed.crossed
    (lost,) = ranges((edge(0.0, 0.1, 0.3), edge(1.0, None, None)))
    assert lost.low is None and lost.high is None and [e.bearing_rad for e in lost.empty] == [1.0]


def test_offset_is_the_least_over_the_bearings_and_none_is_less_than_zero() -> None:
    def edge(apex: float, bearing: float, largest: float | None) -> OffsetEdge:
        return OffsetEdge(apex, bearing, largest, "torque", "j1", False)

    edges = (edge(0.2, 0.0, 0.1), edge(0.2, 1.0, 0.05), edge(0.4, 0.0, 0.0), edge(0.4, 1.0, None))
    assert smallest_offset(edges, 0.2) == edges[1]
    assert smallest_offset(edges, 0.4) == edges[3]
    assert smallest_offset(edges) == edges[3]
    assert best_offset(edges) == edges[1]
    assert smallest_offset(()) is None and best_offset(()) is None


def test_stability_is_by_itself_only_inside_the_window() -> None:
    steady = made_bounces(WHOLE)
    assert [stability(bounce) for bounce in steady] == [
        "by itself",
        "feedback; braking possible",
        "feedback alone",
        "cycle not held",
    ]
    low, high = steady[0].window_m_s2
    at_edges = [replace(steady[0], impact_m_s2=x, least_m_s2=float("nan")) for x in (low, high)]
    assert {stability(bounce) for bounce in at_edges} == {"feedback alone"}


@pytest.mark.parametrize("case", RALLIES)
def test_text_is_narrow(case: str) -> None:
    text = str(WRITERS["text"](made(case)))
    assert max(terminal_width(row) for row in text.splitlines()) <= 100


def test_text_says_everything(result: RallyResult) -> None:
    text = joined(WRITERS["text"](result))
    points = result.evidence.points
    assert text.startswith(" ".join(plain(result.verdict.sentence).split()))
    margin = 1000 * points.margin_s[points.verdict == DELIVERABLE].min()
    for expected in (
        "without margins: undecided",
        "limits would have to grow by 7 %",
        f"velocity of {NAMES[1]} stops 9 points",
        "48: 28 deliverable (58.3 %)",
        f"{margin:.3g} ms of 404 ms of flight",
        "latency of 20 ms taken off",
        "210 mm at apex 800 mm",
        "least none at apex 100 mm (bearing 0°, bounded by cycle time)",
        "with drag of the air",
        "at 1 of 18 places every point is deliverable",
        "1.43 kg along the normal",
        "Apexes held at every bearing, by offset",
        "-9.87 to 0",
        "by itself",
        "feedback; braking possible",
        "cycle not held",
        "for the accepted tilt of 1°",
        "further delay",
        "a bouncier face: all points (verified by a run)",
        f"jerk: {NAMES[0]}",
        "250 mm/s",
        "held at zero",
    ):
        assert expected in text, expected


def test_drift_is_eight_times_apex_and_tilt(result: RallyResult) -> None:
    text = str(WRITERS["text"](result))
    row = next(line for line in text.splitlines() if "feedback alone" in line)
    assert f"{1000 * 8 * 0.4 * np.pi / 180:.3g}" in row.split()


def test_a_share_is_nominal_where_no_spread_is_stated() -> None:
    assert "nominal only: no spread stated" in joined(WRITERS["text"](made("one point")))
    assert "95 % interval" in joined(WRITERS["text"](made("whole")))
    assert "not known: no point is deliverable" in joined(WRITERS["text"](made("nothing held")))


def test_an_edge_that_was_not_met_is_not_given_a_limit() -> None:
    open_edge = OffsetEdge(0.3, 0.0, 0.2, "", "", True)
    one = made("one point")
    text = joined(WRITERS["text"](replace(one, evidence=replace(one.evidence, offsets=(open_edge,)))))
    assert "≥ 200 mm at apex 300 mm (bearing 0°, bounded by nothing, as far as looked)" in text


def test_html_escapes_every_name_and_fetches_nothing(result: RallyResult) -> None:
    text = html_of(result)
    page = Page(text)
    assert not {"script", "b", "i", "link", "iframe", "object"} & set(page.tags)
    assert all(source.startswith("data:image/svg+xml;base64,") for source in page.sources)
    assert not re.search(r"https?://|url\(|@import", text)
    words = "".join(page.words)
    for expected in (
        *NAMES,
        plain(result.verdict.sentence),
        "note with <i>markup</i>",
        "stopped,\\x0aby a limit",
    ):
        assert expected in words, expected
    for section in (
        *("What decides", "What would help", "The envelope", "Steady bounce", "Uncertainty", "Edges"),
        *("Impact on the arm", "Points", "How to read this", "Not checked", "What else fell short"),
    ):
        assert section in page.words, section


@pytest.mark.parametrize(
    ("case", "missing"),
    [
        ("whole", ()),
        ("many points", ()),
        ("one point", FIGURES[-1:]),
        ("one bearing", FIGURES[-1:]),
        ("nothing held", ("Time and speed", "One cycle", FIGURES[-1])),
        ("no point", FIGURES),
        ("stopped", ("Recoverable offset", *FIGURES[3:])),
    ],
)
def test_every_figure_that_has_something_to_show_is_there(case: str, missing: tuple[str, ...]) -> None:
    page = Page(html_of(made(case)))
    assert page.tags.count("img") == len(FIGURES) - len(missing)
    shown = [word for word in page.words if word in FIGURES]
    assert set(shown) >= set(FIGURES) - set(missing)


@pytest.mark.parametrize("case", RALLIES)
def test_figures_are_drawings_that_fetch_and_run_nothing(case: str) -> None:
    for drawing in drawings(made(case)):
        tree = ET.fromstring(drawing)
        assert not [element for element in tree.iter() if element.tag.rsplit("}", 1)[-1] in ("script", "a")]
        sources = [v for e in tree.iter() for k, v in e.attrib.items() if k.rsplit("}", 1)[-1] == "href"]
        assert all(source.startswith(("#", "data:image/png;base64,")) for source in sources)


def test_figures_name_what_bounds_the_edges(result: RallyResult) -> None:
    envelope, offsets, times, windows, cycle, centres = map(words_of, drawings(result))
    assert "bearing 0°" in envelope and "bearing 270°" in envelope
    assert "lowest: cycle time" in envelope and "looked no further" in envelope
    assert "none at 0°: cycle time" in offsets and "apex 800 mm" in offsets
    assert "flight less 20 ms latency" in times
    assert "stable by itself" in windows and "cycle not held" in windows
    assert "strike point" in cycle
    assert "z = 0.300 m" in centres and " 48 " in centres


def test_many_bearings_are_spread_and_the_caption_says_so() -> None:
    assert some([1.0, 2.0, 3.0, 4.0, 5.0], 3) == [1.0, 3.0, 5.0]
    assert some([1.0, 2.0], 3) == [1.0, 2.0]
    text = html_of(made("many points"))
    assert "8 of 12 bearings" in text
    assert len(text) < 2_500_000


def test_an_edge_far_off_that_was_not_met_leaves_room_to_the_points() -> None:
    one = made("one point")
    (edge,) = one.evidence.edges
    assert edge.high_m is not None and not edge.high_open
    far = replace(one, evidence=replace(one.evidence, edges=(replace(edge, high_m=40.0, high_open=True),)))
    ticks = [
        float(word) for word in re.findall(r"\b\d+\b", words_of(drawings(far)[0]).partition("apex, mm")[0])
    ]
    assert max(ticks) < 1000


def test_a_bearing_of_its_own_is_not_asked_of_the_centre() -> None:
    one = made("whole")
    points = one.evidence.points
    keep = (points.offset_m > 0) | (points.bearing_rad == 0)
    cut = {
        item.name: getattr(points, item.name)[keep]
        for item in fields(RallyPoints)
        if item.name not in ("reason", "motions")
    }
    reason = tuple(text for text, kept in zip(points.reason, keep, strict=True) if kept)
    few = replace(points, **cut, reason=reason, motions={})
    edges = tuple(edge for edge in one.evidence.edges if edge.offset_m > 0 or edge.bearing_rad == 0)
    envelope = words_of(drawings(replace(one, evidence=replace(one.evidence, points=few, edges=edges)))[0])
    assert envelope.count(f"velocity of {NAMES[1]}") == 4


def test_junit_has_a_case_for_each_point_and_limit(result: RallyResult) -> None:
    suite = ET.fromstring(WRITERS["junit"](result)).find("testsuite")
    assert suite is not None
    cases = {case.get("name"): case for case in suite.findall("testcase")}
    assert len(cases) == 2 + 48 + len(KINDS) == int(str(suite.get("tests")))
    points = result.evidence.points
    assert int(str(suite.get("failures"))) == 2 + sum(points.verdict != DELIVERABLE)
    failure = cases["apex 800 mm, offset 100 mm, bearing 180°"].find("failure")
    assert failure is not None
    assert failure.get("message") == f"not deliverable: velocity of {NAMES[1]}"
    assert failure.text == "stopped,\\x0aby a limit"
    assert cases["limit jerk"].find("skipped") is not None
    assert len(cases["apex 400 mm, offset 0 mm, bearing 0°"]) == 0


def test_junit_of_a_deliverable_rally_has_no_failure() -> None:
    suite = ET.fromstring(WRITERS["junit"](rally_result(WHOLE, DELIVERABLE))).find("testsuite")
    assert suite is not None
    assert suite.get("failures") == "0"
    assert int(str(suite.get("skipped"))) == 20 + 1  # the points not held, and jerk


def test_evidence_reads_back_to_the_last_digit(result: RallyResult) -> None:
    files, points = evidence_files(result), result.evidence.points
    assert files == evidence_files(result)
    first, second, third = files["points.npz"], files["motions.npz"], files["cell.json"]
    assert first is not None and second is not None and third is not None
    with np.load(io.BytesIO(first), allow_pickle=False) as arrays:
        wanted = {item.name for item in fields(RallyPoints)} - {"reason", "motions", "proof"}
        assert set(arrays) == wanted
        for name in wanted:
            np.testing.assert_array_equal(arrays[name], getattr(points, name), err_msg=name)
    with np.load(io.BytesIO(second), allow_pickle=False) as arrays:
        assert arrays["rows"].tolist() == sorted(points.motions)
        for row, knots in points.motions.items():
            for item in fields(Knots):
                np.testing.assert_array_equal(arrays[f"{item.name}_{row}"], getattr(knots, item.name))
        assert float(arrays["period_s"]) == result.cell.period_s
    cell = json.loads(third, parse_constant=refuse)
    assert (cell["schema"], cell["command"]) == ("strikecheck/evidence/1", "rally")
    assert cell["rally"]["centre_m"] == list(CENTRE)
    assert cell["rally"]["bearings_rad"] == list(WHOLE.bearings_rad)
    assert cell["contact"]["restitution"] == 0.85


COMPLETE = {
    *("verdict.json", "rally.csv", "report.html", "evidence/points.npz", "evidence/cell.json"),
    "evidence/digests.json",
}


def test_folder_holds_everything_and_no_motion_of_another_run(
    result: RallyResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(WRITERS, "html", html_of)  # the same page, not drawn anew
    write_folder(result, tmp_path, tmp_path / "junit.xml")
    assert listing(tmp_path) == COMPLETE | {"evidence/motions.npz", "junit.xml"}
    written = write_folder(made("nothing held"), tmp_path)
    assert listing(tmp_path) == COMPLETE | {"junit.xml"}
    assert written[-1] == tmp_path / "verdict.json"


def test_long_names_leave_every_column_readable() -> None:
    header, names = ("#what", "bounded by", "#more", "bounded by"), "acceleration of shoulder_pan_joint"
    lines = table(header, [("1234567890" * 3, names, "1234567890" * 3, names)])
    assert max(map(len, lines)) <= TERMINAL
    assert any("shoulder_pan_joint" in line[-20:] for line in lines)  # the last column has room for the joint
    assert [line.split() for line in table(("a", "b"), [("1", "two words")])] == [
        ["a", "b"],
        ["1", "two", "words"],
    ]
