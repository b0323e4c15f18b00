"""Every output of a survey, on invented results whose names try to break out of them."""

from __future__ import annotations

import base64
import csv
import io
import json
import re
import tracemalloc
import xml.etree.ElementTree as ET
from dataclasses import fields, replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from test_report import NAMES, Page, listing, made_cell, made_motion, refuse, terminal_width

from reach.cell import Survey
from reach.evidence.points import STRAIGHT, SWING, Points, Profiles, SurveyEvidence
from reach.evidence.record import Need, Reason, Remedy
from reach.report import WRITERS as ALL_WRITERS
from reach.report import write_folder
from reach.report.document import document
from reach.report.survey.csv import COLUMNS, MORE_COLUMNS, ROWS
from reach.report.survey.evidence import evidence_files
from reach.report.survey.marks import thinned
from reach.report.survey.numbers import region, speed_of_share
from reach.report.survey.slices import runs, slices_of
from reach.report.wording import plain
from reach.result import SurveyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED, judge_survey

WRITERS = ALL_WRITERS["survey"]
WRITE_PAGE = WRITERS["html"]  # whatever takes its place in a test
FAMILIES = ("elbow up", 'elbow <down>,\n"folded"')
KINDS = ("position", "velocity", "acceleration", "jerk", "torque", "torque rate", "tool speed")
UP = (0.0, 0.0, 1.0)
TILTED = (0.0, 0.6, 0.8)
REACH_M = 0.8


def grid(low: tuple[float, ...], high: tuple[float, ...], spacing_m: float, normals: np.ndarray) -> Survey:
    """A box of points and its faces, one metre a second required."""
    return Survey(
        (low, high), spacing_m, None, normals, normals, np.full(len(normals), 1.0), required_share=0.9
    )


def places(survey: Survey) -> tuple[np.ndarray, np.ndarray]:
    """The point and the row of the face of each strike, in the order of the contract."""
    if survey.listed is not None:
        return survey.listed, np.arange(len(survey.listed))
    assert survey.box_m is not None
    axes = [
        lo + survey.spacing_m * np.arange(count)
        for lo, count in zip(survey.box_m[0], survey.counts, strict=True)
    ]
    points = np.stack(np.meshgrid(*axes, indexing="ij"), axis=-1).reshape(-1, 3)
    faces = len(survey.normals)
    return np.repeat(points, faces, axis=0), np.tile(np.arange(faces), len(points))


def made_points(survey: Survey, joints: int = len(NAMES), reach_m: float = REACH_M) -> Points:
    """Strikes that slow down away from the middle of the arm's reach, with a hole above it."""
    position, face = places(survey)
    m = len(position)
    rng = np.random.default_rng(3)
    away = np.linalg.norm(position - [0.0, 0.0, 0.3], axis=1)
    bound = 2.0 * np.clip(1 - ((away - 0.5) / 0.4) ** 2, 0.02, 1) * (1 - 0.15 * face)
    done = bound * np.clip(0.97 - 0.3 * np.abs(np.sin(9 * position[:, 1])), 0, 1)
    lost = away > reach_m
    searched = ~lost & (away < 0.28)
    none = lost | searched
    done, bound = np.where(none, np.nan, done), np.where(lost, 0.0, np.where(searched, np.nan, bound))
    required = survey.speeds_m_s[face]
    verdict = np.select(
        [none | (bound < required), done >= required], [NOT_DELIVERABLE, DELIVERABLE], UNDECIDED
    )
    basis = np.select(
        [lost, searched, verdict == DELIVERABLE], ["proved", "searched", "demonstrated"], "searched"
    )
    stops = np.array(
        [("velocity", 1, "impact"), ("torque", 0, "run-up"), ("torque rate", 2, "follow-through")]
    )
    which = rng.integers(0, 3, m)
    names = np.array(NAMES[:joints])[stops[which, 1].astype(int) % joints]
    family = np.where(position[:, 1] > 0, 0, 1)
    swing = np.where(none, "", np.where(which == 2, STRAIGHT, SWING))
    by_family = np.full((m, 2), np.nan)
    by_family[np.arange(m), family] = done
    by_family[:, 0] = np.fmax(by_family[:, 0], 0.8 * done)
    nothing = np.where(none, np.nan, 1.0)

    def some(*size: int) -> np.ndarray:
        return rng.normal(size=(m, *size)) * nothing.reshape(-1, *([1] * len(size)))

    pieces = np.where(none, 0, 4)
    total = int(pieces.sum())
    profiles = Profiles(
        np.concatenate([[0], np.cumsum(pieces)]),
        np.full(total, 0.1),
        np.ones(total),
        np.arange(total) % 4 < 2,
    )
    straight = {int(row): made_motion(joints, 0.02) for row in np.flatnonzero(swing == STRAIGHT)[:3]}
    return Points(
        position=position,
        normal=survey.normals[face],
        direction=survey.directions[face],
        required_m_s=required,
        verdict=verdict,
        basis=basis,
        demonstrated_m_s=done,
        bound_still_m_s=bound,
        bound_free_m_s=1.1 * bound,
        limit=np.where(none, "reach", stops[which, 0]),
        joint=np.where(none, "", names),
        phase=np.where(none, "", stops[which, 2]),
        family=np.where(none, "", np.array(FAMILIES)[family]),
        reason=tuple("out of reach" if x else 'stopped by a limit, "near" its bound' for x in none.tolist()),
        family_demonstrated_m_s=by_family,
        q=some(joints),
        effective_mass_kg=1.5 + 0.2 * some(),
        to_limit_share=np.abs(some()) % 1,
        approach_m_s=2.0 + 0.1 * some(),
        velocity_jump=0.01 * some(joints),
        joint_impulse=0.005 * some(joints),
        ball_impulse=0.01 + 0.0002 * np.abs(some(2)),
        postures=np.where(none, 0, 12),
        starts=np.full(m, 40),
        stroke=swing,
        tangent=some(joints),
        profiles=profiles,
        motions=straight,
        q_still=some(joints),
        q_free=some(joints),
        dual_still=some(6),
        dual_free=some(6),
        margin_free=~none & (1.1 * np.nan_to_num(done) >= required),
    )


def result_of(survey: Survey, points: Points, names: tuple[str, ...] = NAMES) -> SurveyResult:
    """A whole invented result."""
    shape = None if survey.box_m is None else (*survey.counts, len(survey.normals))
    evidence = SurveyEvidence(
        points,
        shape,
        FAMILIES,
        KINDS,
        (*(("jerk", name) for name in names), ("tool speed", None)),
        ("jerk", "tool speed", "friction"),
        np.array([[0, 0, 0.3], [0.0, 0, 0.3], [0.25, 0.05, 0.6], [0.45, 0, 0.45], [0.5, 0.0, 0.4]]),
        REACH_M,
        False,
    )
    cell = replace(made_cell(names), follow=None, survey=survey)
    text = f"torque of {names[1]} stops 9 strikes"
    return SurveyResult(
        cell=cell,
        evidence=evidence,
        verdict=judge_survey(evidence, survey.required_share, cell.accept),
        without_margins="undecided",
        reasons=(
            Reason(True, "torque", names[1], "run-up", None, None, 0.8, 1.0, "m/s", "searched", text),
            Reason(False, "reach", None, None, None, None, None, None, "", "proved", "3 out of reach"),
        ),
        needs=(Need(names[1], "torque", 90.0, float("inf"), "N·m", f"{names[1]} needs 90 N·m"),),
        remedies=(Remedy("a slower stroke", "all strikes", True), Remedy("a higher stand", "more", False)),
        headroom_share=-0.07,
        headroom_text="limits would have to grow by 7 %",
        notes=("note with <i>markup</i>",),
    )


def made_survey(survey: Survey) -> SurveyResult:
    """An invented result of a survey."""
    return result_of(survey, made_points(survey))


def small_box() -> SurveyResult:
    """Two faces at 4 by 6 by 5 points."""
    normals = np.array([UP, TILTED])
    return made_survey(grid((0.25, -0.4, 0.1), (0.7, 0.35, 0.7), 0.15, normals))


def listed() -> SurveyResult:
    """Three strikes by name of place."""
    at = np.array([[0.5, 0.1, 0.4], [0.4, -0.2, 0.3], [1.4, 0.0, 0.4]])
    normals = np.array([UP, TILTED, UP])
    return made_survey(Survey(None, 0.1, at, normals, normals, np.array([0.5, 1.0, 1.5])))


def one_point() -> SurveyResult:
    """A box of a single point, with two faces."""
    return made_survey(grid((0.5, 0.1, 0.4), (0.5, 0.1, 0.4), 0.1, np.array([UP, TILTED])))


def flat(axis: int) -> SurveyResult:
    """A box that is flat along an axis."""
    low, high = np.array([0.3, -0.3, 0.1]), np.array([0.7, 0.3, 0.6])
    high[axis] = low[axis]
    return made_survey(grid(tuple(low), tuple(high), 0.1, np.array([UP])))


def line() -> SurveyResult:
    """A box that is flat along two axes."""
    return made_survey(grid((0.3, 0.1, 0.1), (0.3, 0.1, 0.7), 0.1, np.array([UP])))


def nowhere() -> SurveyResult:
    """Every strike is farther than the links reach; there is no posture to draw, and no ball."""
    survey = grid((2.0, 0.0, 0.2), (2.4, 0.4, 0.4), 0.2, np.array([UP]))
    made = made_survey(survey)
    return replace(made, evidence=replace(made.evidence, outline=np.zeros((0, 3)), reach_m=np.nan))


CASES = {
    "small box": small_box,
    "listed": listed,
    "one point": one_point,
    "flat x": lambda: flat(0),
    "flat y": lambda: flat(1),
    "flat z": lambda: flat(2),
    "line": line,
    "nowhere": nowhere,
}


@pytest.fixture(scope="module")
def result() -> SurveyResult:
    return made("small box")


@cache
def made(case: str) -> SurveyResult:
    """An invented result."""
    return CASES[case]()


@cache
def html_of(result: SurveyResult) -> str:
    """Its page; drawing takes its time."""
    return str(WRITE_PAGE(result))


def as_text(content: str | bytes) -> str:
    return content.decode() if isinstance(content, bytes) else content


def drawings(result: SurveyResult) -> list[bytes]:
    """The figures of the page."""
    return [base64.b64decode(s.split(",", 1)[1]) for s in Page(html_of(result)).sources]


def words_of(drawing: bytes) -> str:
    return " ".join("".join(ET.fromstring(drawing).itertext()).split())


def rows_of(result: SurveyResult) -> list[dict[str, str]]:
    return list(csv.DictReader(io.StringIO(str(WRITERS["csv"](result)))))


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("kind", WRITERS)
def test_writers_work_alike_twice_and_write_no_control_character(kind: str, case: str) -> None:
    one = made(case)
    once = html_of(one) if kind == "html" else WRITERS[kind](one)
    if kind != "html" or case == "small box":  # drawing takes its time
        assert once == WRITERS[kind](one)
    # A cell of CSV holds a name as it is, a line's end in it too.
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", as_text(once))


def test_csv_has_the_columns_of_the_interface_and_reads_back(result: SurveyResult) -> None:
    points, rows = result.evidence.points, rows_of(result)
    assert ",".join(COLUMNS) == (
        "x_m,y_m,z_m,nx,ny,nz,paddle_speed_m_s,verdict,basis,demonstrated_m_s,bound_still_m_s,bound_free_m_s,"
        "limit,joint,phase,family"
    )
    assert list(rows[0]) == [*COLUMNS, *(f"q_{name}" for name in NAMES), *MORE_COLUMNS]
    assert len(rows) == len(points.verdict)
    for name, values in (
        ("x_m", points.position[:, 0]),
        ("nz", points.normal[:, 2]),
        ("demonstrated_m_s", points.demonstrated_m_s),
        ("bound_still_m_s", points.bound_still_m_s),
        (f"q_{NAMES[2]}", points.q[:, 2]),
        ("ball_impulse_locked_n_s", points.ball_impulse[:, 1]),
        ("velocity_jump_free_max_rad_s", np.abs(points.velocity_jump).max(axis=1)),
        ("postures", points.postures),
    ):
        read = [float(row[name]) if row[name] else np.nan for row in rows]
        np.testing.assert_allclose(read, values, rtol=1e-8, atol=1e-12, err_msg=name)
    for name in ("verdict", "basis", "limit", "joint", "phase", "family", "stroke", "reason"):
        assert [row[name] for row in rows] == list(getattr(points, name)), name


def test_csv_is_empty_where_there_is_nothing() -> None:
    text = str(WRITERS["csv"](made("nowhere")))
    assert "nan" not in text
    row = next(csv.DictReader(io.StringIO(text)))
    assert (row["verdict"], row["basis"], row["limit"]) == (NOT_DELIVERABLE, "proved", "reach")
    assert row["demonstrated_m_s"] == row["joint"] == row[f"q_{NAMES[0]}"] == row["stroke"] == ""
    assert row["bound_still_m_s"] == "0"


def many(spacing_m: float) -> SurveyResult:
    """One face at many points."""
    return made_survey(grid((0.2, -0.5, 0.0), (0.8, 0.5, 0.8), spacing_m, np.array([UP])))


def test_csv_of_many_strikes_holds_every_row() -> None:
    made = many(0.0266)
    text = str(WRITERS["csv"](made))
    count = len(made.evidence.points.verdict)
    assert count > 6 * ROWS and count % ROWS  # formatted part by part, the last one not full
    assert sum(1 for _ in csv.reader(io.StringIO(text))) == count + 1
    last = next(csv.DictReader([text.partition("\n")[0], text.splitlines()[-1]]))
    np.testing.assert_allclose(
        [float(last[f"{axis}_m"]) for axis in "xyz"], made.evidence.points.position[-1], rtol=1e-8
    )


def test_csv_takes_little_memory_beside_its_text() -> None:
    made = many(0.03)
    tracemalloc.start()
    text = str(WRITERS["csv"](made))
    peak = tracemalloc.get_traced_memory()[1]
    tracemalloc.stop()
    assert len(text) > 3e6
    assert peak < 4 * len(text) + 30e6


def test_json_is_strict_and_has_the_figures(result: SurveyResult) -> None:
    read = json.loads(str(WRITERS["json"](result)), parse_constant=refuse)
    assert read["schema"] == "strikecheck/survey/1"
    assert (read["verdict"], read["sentence"]) == (result.verdict.verdict, result.verdict.sentence)
    points, f = result.evidence.points, read["figures"]
    for word, field in (
        (DELIVERABLE, "deliverable"),
        (NOT_DELIVERABLE, "not_deliverable"),
        (UNDECIDED, "undecided"),
    ):
        count = sum(verdict == word for verdict in points.verdict)
        assert count > 0
        assert f[field] == count
        assert f[f"{field}_share"] == pytest.approx(count / 240)
    away = [limit == "reach" for limit in points.limit]
    assert f["unreachable"] == f["unreachable_proved"] + f["unreachable_searched"] == sum(away) > 0
    assert f["deliverable_of_reachable_share"] == pytest.approx(f["deliverable"] / (240 - sum(away)))
    jump = np.nanmax(np.abs(points.velocity_jump))
    assert f["velocity_jump_free_max_rad_s"] == pytest.approx(jump, rel=1e-8)
    assert max(joint["velocity_jump_free_max"] for joint in read["impact"]) == pytest.approx(jump, rel=1e-8)
    assert [s["strikes_share"] for s in f["speed_for_share"]] == [1.0, 0.95, 0.9, 0.5]
    assert read["unknown"][-1] == {"limit": "tool speed", "joint": None}
    assert "position" not in read and len(str(WRITERS["json"](result))) < 20_000
    assert set(read) >= {
        "reasons",
        "not_checked",
        "needs",
        "remedies",
        "headroom_share",
        "inputs",
        "versions",
        "notes",
    }


def test_every_verdict_json_has_the_same_head_and_foot(result: SurveyResult) -> None:
    keys = list(document(result))
    assert keys[:4] == ["schema", "verdict", "sentence", "without_margins"]
    assert keys[-4:] == ["notes", "cautions", "inputs", "versions"]


def test_limits_are_counted_by_what_they_stop(result: SurveyResult) -> None:
    points = result.evidence.points
    counted = document(result)["limits_worst"]
    assert sum(row["all"] for row in counted) == len(points.verdict)
    assert sum(row["not_deliverable"] for row in counted) == sum(points.verdict == NOT_DELIVERABLE)
    assert [row["not_deliverable"] for row in counted] == sorted(
        (row["not_deliverable"] for row in counted), reverse=True
    )
    torque = next(row for row in counted if row["limit"] == "torque")
    mine = (points.limit == "torque") & (points.joint == torque["joint"])
    assert torque["all"] == mine.sum()
    assert torque["undecided"] == (mine & (points.verdict == UNDECIDED)).sum()


def test_speed_of_a_share_of_the_strikes() -> None:
    speeds = np.array([0.0, 3.0, 1.0, 2.0])
    assert [speed_of_share(speeds, share) for share in (1.0, 0.75, 0.5, 0.25)] == [0.0, 1.0, 2.0, 3.0]
    assert speed_of_share(np.arange(1.0, 101.0), 0.95) == 6.0  # 95 of 100 have 6 or more
    assert np.isnan(speed_of_share(np.zeros(0), 0.5))


def test_unreachable_strikes_count_as_speed_zero() -> None:
    figures = document(made("nowhere"))["figures"]
    assert [s["demonstrated_m_s"] for s in figures["speed_for_share"]] == [0.0] * 4
    assert figures["demonstrated_median_m_s"] is None
    assert figures["ball_impulse_max_n_s"] is None


def test_region_is_the_box_where_all_is_delivered(result: SurveyResult) -> None:
    points = result.evidence.points
    everywhere = replace(points, verdict=np.full(len(points.verdict), DELIVERABLE))
    whole = region(replace(result, evidence=replace(result.evidence, points=everywhere)))
    assert whole is not None
    assert (whole.unit, whole.dimensions) == ("m³", 3)
    assert whole.every_face == whole.whole == pytest.approx(0.45 * 0.75 * 0.6)
    one = points.verdict.reshape(4, 6, 5, 2).copy()
    one[...] = NOT_DELIVERABLE
    one[0, 0, 0, 0] = one[1, 1, 1, 1] = DELIVERABLE
    part = region(
        replace(result, evidence=replace(result.evidence, points=replace(points, verdict=one.ravel())))
    )
    assert part is not None
    assert part.every_face == 0.0
    assert part.some_face == pytest.approx(0.15**3 * (1 + 1 / 8))  # one inside, one in a corner
    area = region(made("flat y"))
    assert area is not None
    assert (area.unit, area.whole) == ("m²", pytest.approx(0.4 * 0.5))
    assert region(made("listed")) is None and region(made("one point")) is None


@pytest.mark.parametrize("case", CASES)
def test_text_is_narrow(case: str) -> None:
    text = str(WRITERS["text"](made(case)))
    assert max(terminal_width(row) for row in text.splitlines()) <= 100


def test_text_says_everything(result: SurveyResult) -> None:
    text = str(WRITERS["text"](result))
    joined = " ".join(text.split())
    assert joined.startswith(" ".join(plain(result.verdict.sentence).split()))
    for expected in (
        "without margins: undecided",
        "limits would have to grow by 7 %",
        "95 % of the strikes",
        "region delivered",
        "elbow <down>,\\x0a",
        "a slower stroke: all strikes (verified by a run)",
        "torque rate",
        "jerk: a b",
        "250 mm/s",
        "held at zero",
    ):
        assert expected in joined, expected


def test_listed_strikes_are_told_one_by_one() -> None:
    one = made("listed")
    assert "0.500, 0.100, 0.400" in str(WRITERS["text"](one))
    page = Page(html_of(one))
    words = " ".join(page.words)
    assert words.count("1.400") == 1 and "(0, 0.6, 0.8)" in words
    assert page.tags.count("img") == 3  # no slices
    assert page.tags.count("img") == Page(html_of(made("one point"))).tags.count("img")


def test_html_escapes_every_name_and_fetches_nothing(result: SurveyResult) -> None:
    text = html_of(result)
    page = Page(text)
    assert not {"script", "b", "i", "link", "iframe", "object"} & set(page.tags)
    assert all(source.startswith("data:image/svg+xml;base64,") for source in page.sources)
    assert page.tags.count("img") == len(page.sources) == 4
    assert not re.search(r"https?://|url\(|@import", text)
    words = "".join(page.words)
    for expected in (
        *NAMES,
        *map(plain, FAMILIES),
        plain(result.verdict.sentence),
        "note with <i>markup</i>",
    ):
        assert expected in words, expected
    for section in (
        "What decides",
        "What would help",
        "How to read this",
        "Impact on the arm",
        "Not checked",
    ):
        assert section in page.words


@pytest.mark.parametrize("case", CASES)
def test_figures_are_drawings_that_fetch_and_run_nothing(case: str) -> None:
    for drawing in drawings(made(case)):
        tree = ET.fromstring(drawing)
        assert not [element for element in tree.iter() if element.tag.rsplit("}", 1)[-1] in ("script", "a")]
        sources = [v for e in tree.iter() for k, v in e.attrib.items() if k.rsplit("}", 1)[-1] == "href"]
        assert all(source.startswith(("#", "data:image/png;base64,")) for source in sources)


def test_slices_tell_the_speed_in_large_cells(result: SurveyResult) -> None:
    words = words_of(drawings(result)[0])
    assert "face normal (0, 0, 1)" in words and "face normal (0, 0.6, 0.8)" in words
    assert "z = 0.100 m" in words and "z = 0.700 m" in words
    assert "line: required 1" in words
    cut = slices_of(result)
    assert cut is not None
    speeds = cut.speed[np.isfinite(cut.speed)]
    assert len(re.findall(r"\b\d\.\d\d\b", words)) >= len(speeds) > 100
    grid_of = result.evidence.points.demonstrated_m_s.reshape(4, 6, 5, 2)
    np.testing.assert_array_equal(cut.speed[1, 2], grid_of[:, :, 2, 1].T)


@pytest.mark.parametrize(
    ("case", "axes"), [("flat x", "yz"), ("flat y", "xz"), ("flat z", "xy"), ("line", "xz")]
)
def test_a_flat_box_is_drawn_in_its_plane(case: str, axes: str) -> None:
    cut = slices_of(made(case))
    assert cut is not None
    assert ("xyz"[cut.across] + "xyz"[cut.up], len(cut.places_m)) == (axes, 1)


def test_many_points_make_a_small_page_that_says_what_it_leaves_out() -> None:
    normals = np.array([[0, np.sin(a), np.cos(a)] for a in (0.0, 0.2, 0.4, 0.6, 0.8)])
    made = made_survey(grid((0.2, -0.5, 0.0), (0.8, 0.5, 0.8), 0.03, normals))
    text = str(WRITERS["html"](made))
    assert len(text) < 2_500_000
    assert "3 of 27 slices across z, 4 of 5 faces" in text
    assert "each panel is one image" in text


def test_neighbours_in_a_row_share_a_hatch() -> None:
    edges = (np.arange(5.0), np.arange(3.0))
    cells = np.array([[True, True, False, True], [False, False, False, False]])
    corners = [(r[0].tolist(), r[2].tolist()) for r in runs(cells, edges)]
    assert corners == [([0, 0], [2, 1]), ([3, 0], [4, 1])]


def test_marks_that_would_cover_each_other_are_drawn_once() -> None:
    spots = np.array([[0.01, 0.01], [0.02, 0.03], [0.51, 0.01]])
    np.testing.assert_array_equal(thinned(spots, np.full(2, 0.1)), spots[[0, 2]])


def test_junit_has_a_case_for_each_family_and_limit(result: SurveyResult) -> None:
    suite = ET.fromstring(WRITERS["junit"](result)).find("testsuite")
    assert suite is not None
    cases = {case.get("name"): case for case in suite.findall("testcase")}
    kinds = {f"limit {kind}" for kind in (*KINDS, "reach")}
    assert (
        set(cases)
        == {"verdict", "strikes deliverable", *(f"family {plain(name)}" for name in FAMILIES)} | kinds
    )
    failure = cases["strikes deliverable"].find("failure")
    assert failure is not None
    assert "of 240 strikes deliverable" in str(failure.get("message"))
    assert "90 % required" in str(failure.get("message"))
    assert cases["limit jerk"].find("skipped") is not None
    assert len(cases["limit position"]) == 0
    torque = cases["limit torque"].find("failure")
    assert torque is not None and NAMES[0] in str(torque.text)
    assert suite.get("tests") == str(len(cases))


def test_junit_of_a_deliverable_survey_has_no_failure(result: SurveyResult) -> None:
    cell = result.cell
    assert cell.survey is not None
    easy = replace(cell, survey=replace(cell.survey, required_share=0.1))
    verdict = judge_survey(result.evidence, 0.1, cell.accept)
    suite = ET.fromstring(WRITERS["junit"](replace(result, cell=easy, verdict=verdict))).find("testsuite")
    assert suite is not None
    assert suite.get("failures") == "0"
    skipped = suite.find("testcase[@name='limit torque']/skipped")
    assert skipped is not None and "of 240 strikes" in str(skipped.get("message"))


def test_evidence_reads_back_to_the_last_digit(result: SurveyResult) -> None:
    files, points = evidence_files(result), result.evidence.points
    assert files == evidence_files(result)
    assert (
        files["points.npz"] is not None
        and files["motions.npz"] is not None
        and files["cell.json"] is not None
    )
    with np.load(io.BytesIO(files["points.npz"]), allow_pickle=False) as arrays:
        wanted = {item.name for item in fields(Points)} - {"reason", "profiles", "motions"}
        assert set(arrays) == wanted | {f"profile_{item.name}" for item in fields(Profiles)}
        for name in wanted:
            np.testing.assert_array_equal(arrays[name], getattr(points, name), err_msg=name)
        np.testing.assert_array_equal(arrays["profile_first"], points.profiles.first)
    with np.load(io.BytesIO(files["motions.npz"]), allow_pickle=False) as arrays:
        assert arrays["rows"].tolist() == sorted(points.motions)
        row, motion = next(iter(points.motions.items()))
        np.testing.assert_array_equal(arrays[f"q_{row}"], motion.q)
        np.testing.assert_array_equal(arrays[f"a_{row}"], motion.a)
        assert float(arrays["period_s"]) == motion.period_s
    cell = json.loads(files["cell.json"], parse_constant=refuse)
    assert cell["schema"] == "strikecheck/evidence/1"
    assert cell["command"] == "survey"
    assert cell["margins"]["torque_share"] == result.cell.margins.torque_share
    assert cell["survey"]["box_m"] == [[0.25, -0.4, 0.1], [0.7, 0.35, 0.7]]
    assert cell["survey"]["normals"] == [list(UP), list(TILTED)]
    assert cell["shape"] == [4, 6, 5, 2]
    assert cell["arm"]["model_xml"] == result.cell.arm.model_xml


COMPLETE = {
    *("verdict.json", "survey.csv", "report.html", "evidence/points.npz", "evidence/cell.json"),
    "evidence/digests.json",
}


def test_folder_holds_everything_and_no_strokes_of_another_run(
    result: SurveyResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(WRITERS, "html", html_of)  # the same page, not drawn anew
    write_folder(result, tmp_path, tmp_path / "junit.xml")
    assert listing(tmp_path) == COMPLETE | {"evidence/motions.npz", "junit.xml"}
    written = write_folder(made("nowhere"), tmp_path)
    assert listing(tmp_path) == COMPLETE | {"junit.xml"}
    assert written[-1] == tmp_path / "verdict.json"
