"""Every output of a second opinion, on hand-made items, some of whose texts try to break out of them."""

from __future__ import annotations

import base64
import csv
import io
import json
import math
import re
import xml.etree.ElementTree as ET
from collections.abc import Sequence
from functools import cache
from pathlib import Path

import pytest
from test_report import Page, listing, refuse, terminal_width

from reach.cell import Input
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Check, Item, decided, same
from reach.report import COMMANDS, write_folder
from reach.report import WRITERS as ALL_WRITERS
from reach.report.document import document
from reach.report.recheck.csv import COLUMNS
from reach.report.recheck.evidence import evidence_files
from reach.report.recheck.numbers import differing, first_of, kinds, left_out, made, off, per_check, worst
from reach.report.recheck.wording import EXTRA, INSTALL, check_text, item_text, size
from reach.report.wording import plain
from reach.result import RecheckResult
from reach.verdict import judge_recheck

WRITERS = ALL_WRITERS["recheck"]
NO_ENGINE = f"the second engine is not installed; {INSTALL}"
EVIL = "<script>alert(1)</script>\"&'\x1b[31m\x9b\x00\u202e关节"
INF, NAN = math.inf, math.nan


def speed(difference: float, allowed: float = 1e-9) -> Check:
    return Check("speed", difference, allowed, "m/s")


def strike(number: int, difference: float = 2e-12) -> Item:
    """The motion of a strike, looked at again."""
    place = Check("place", 3.1e-15 * number, 1e-9, "m")
    return Item("motion", f"strike {number}", (place, speed(difference)))


def limits(number: int, velocity: float = 0.0, kind: str = "limits") -> Item:
    checks = (
        Check("velocity", velocity, 2.6e-6, "rad/s", "j3" if velocity else ""),
        Check("jerk", 0.0, 4e-3, "rad/s³"),
        Check("tool speed", 0.0, 1.7e-6, "m/s"),
    )
    return Item(kind, f"strike {number}", checks)


def torque(number: int, difference: float | None = 1.2e-9) -> Item:
    """The torque of a strike; without a second engine where `difference` is None."""
    if difference is None:
        return Item("torque", f"strike {number}", (), NO_ENGINE)
    return Item("torque", f"strike {number}", (Check("torque", difference, 8.7e-5, "N·m"),))


def made_of(
    items: Sequence[Item], engine: str | None = "MuJoCo 3.2.0", stored: str = "deliverable"
) -> RecheckResult:
    return RecheckResult(
        folder="out/survey",
        of="survey",
        stored=stored,
        items=tuple(items),
        verdict=judge_recheck(items, "survey", stored),
        engine=engine,
        files=(
            Input("out/survey/verdict.json", "ab" * 32),
            Input("out/survey/evidence/points.npz", "cd" * 32),
        ),
        notes=(
            "undecided strikes rest on a search that found nothing; a second opinion can't search everywhere",
            "demonstrated speeds are checked as they were done; faster ones may exist",
        ),
        versions={"strikecheck": "0.1.0", "pinocchio": "4.1.0", "gone": None},
    )


FRONT = (
    Item("as stated", "bench7.urdf", (same("joints", "j1, j2", "j1, j2"), Check("masses", 0.0, 1e-12, "kg"))),
    Item("as stated", "bench7.limits.toml", (Check("limits", 0.0, 1e-12, ""),)),
)
VERDICT_ITEM = Item("verdict", "", (same("verdict", "deliverable", "deliverable"),))
WRONG_VERDICT = Item("verdict", "", (same("verdict", "not deliverable", "deliverable"),))
SOUND = [*FRONT, *(f(k) for k in range(1, 9) for f in (strike, limits, torque)), VERDICT_ITEM]


def hostile() -> RecheckResult:
    """Texts that try to break out, and differences that are no number."""
    items = [
        Item(EVIL, EVIL, (Check(EVIL, 2.0, 1.0, EVIL, EVIL), Check(EVIL + "2", 0.5, 1.0, EVIL))),
        Item("motion", "strike 1", (speed(NAN), speed(INF), Check("place", 1.0, 0.0, "m"))),
        Item("motion", "strike 2", (speed(1.0, NAN), speed(INF, INF), speed(1e-300), speed(1e300))),
        Item("left " + EVIL, "x", (), EVIL),
        Item("bare", ""),
        Item("long", "w" * 5000, (Check("n" * 5000, 3.0, 1e-3, "u" * 500, "t" * 5000),), "why " * 2000),
    ]
    result = made_of(items, None, EVIL)
    odd = {
        "folder": f"out/{EVIL}",
        "of": EVIL,
        "notes": (EVIL, "n" * 9000),
        "versions": {EVIL: EVIL, "strikecheck": None},
        "files": (Input(f"out/{EVIL}", EVIL), Input("lone \udc80 surrogate", "")),
    }
    return RecheckResult(**{**vars(result), **odd})


CASES = {
    "agrees": lambda: made_of(SOUND),
    "differs": lambda: made_of([*SOUND[:-1], strike(9, 2.5e-3), limits(9, 0.31), WRONG_VERDICT]),
    "not checkable": lambda: made_of(
        [
            *FRONT,
            *(f(k) for k in range(1, 9) for f in (strike, limits)),
            *(torque(k, None) for k in range(1, 9)),
        ],
        None,
    ),
    "hostile": hostile,
    "none": lambda: made_of(()),
    "many": lambda: made_of(
        [f(k) for k in range(1, 1001) for f in (strike, lambda k: limits(k, 1e-3 * (k % 2)), torque)]
    ),
}
VERDICTS = {
    **{"agrees": AGREE, "differs": DIFFER, "not checkable": NOT_CHECKABLE},
    **{"hostile": DIFFER, "none": NOT_CHECKABLE, "many": DIFFER},
}


@cache
def made_case(case: str) -> RecheckResult:
    return CASES[case]()


@cache
def written(kind: str, case: str) -> str:
    """An output of a case, as text."""
    content = WRITERS[kind](made_case(case))
    return content.decode() if isinstance(content, bytes) else content


def joined(text: str) -> str:
    """The text without its breaks of lines."""
    return " ".join(text.split())


def read(case: str) -> dict:
    return json.loads(written("json", case), parse_constant=refuse)


def drawing(case: str) -> ET.Element:
    (source,) = Page(written("html", case)).sources
    return ET.fromstring(base64.b64decode(source.split(",", 1)[1]))


def words(case: str) -> list[str]:
    """The texts of the figure."""
    return [text.strip() for text in drawing(case).itertext() if text.strip()]


@pytest.mark.parametrize("case", CASES)
def test_the_cases_are_what_their_names_say(case: str) -> None:
    result = made_case(case)
    assert decided(result.items) == result.verdict.verdict == VERDICTS[case]


@pytest.mark.parametrize("case", CASES)
@pytest.mark.parametrize("kind", WRITERS)
def test_writers_work_alike_twice_and_write_no_control_character(kind: str, case: str) -> None:
    once = written(kind, case)
    if case != "many" and (kind != "html" or case == "hostile"):  # drawing takes its time
        again = WRITERS[kind](made_case(case))
        assert once == (again.decode() if isinstance(again, bytes) else again)
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f\u202a-\u202e\ud800-\udfff]", once)


def test_a_difference_comes_before_agreement_and_what_is_no_number_before_both() -> None:
    item = Item("motion", "x", (speed(1e-10), speed(5.0), Check("nan", NAN, 1.0, "m"), speed(2e-10)))
    found = made([item])
    assert worst(found) == found[2]
    assert [check.difference for check in off(item)[1:]] == [5.0]
    assert worst(made([Item("a", "", (speed(3e-10), speed(4e-10), speed(1e-10)))])).check == speed(4e-10)
    unlimited = Check("free", INF, INF, "m")  # within what is allowed, so no difference
    assert worst(made([Item("a", "", (unlimited, speed(1e-10)))])).check == speed(1e-10)
    assert worst([]) is None


def test_kinds_keep_their_order_and_count_every_item() -> None:
    found = kinds(made_case("differs").items)
    assert [kind.kind for kind in found] == ["as stated", "motion", "limits", "torque", "verdict"]
    assert [(kind.items, kind.agree, kind.differ, kind.not_checkable) for kind in found] == [
        *((2, 2, 0, 0), (9, 8, 1, 0), (9, 8, 1, 0), (8, 8, 0, 0), (1, 0, 1, 0))
    ]
    motion, limited = found[1].worst, found[2].worst
    assert motion is not None and (motion.item.where, motion.check.difference) == ("strike 9", 2.5e-3)
    assert limited is not None and limited.check.name == "velocity"


def test_the_worst_of_each_comparison_stands_with_its_kind() -> None:
    items = [
        strike(1),
        limits(1),
        strike(2, 4e-3),
        limits(2, kind="torque"),
        Item("motion", "z", (Check("late", 0, 1, ""),)),
    ]
    found = per_check(items)
    assert [(one.item.kind, one.check.name) for one in found] == [
        *(("motion", "place"), ("motion", "speed"), ("motion", "late")),
        *((kind, name) for kind in ("limits", "torque") for name in ("velocity", "jerk", "tool speed")),
    ]
    assert found[1].item.where == "strike 2"
    assert [one.check.name for one in first_of(found, 2)] == ["place", "speed"]


def test_differing_items_are_told_kind_by_kind_in_turn_and_the_worst_first() -> None:
    items = [strike(1, 1e-3), strike(2, 3e-3), strike(3), strike(4, 2e-3), limits(1, 0.1), limits(2, 0.2)]
    told = [(item.kind, item.where) for item in differing(items)]
    assert told == [
        *(("motion", "strike 2"), ("limits", "strike 2"), ("motion", "strike 4"), ("limits", "strike 1")),
        ("motion", "strike 1"),
    ]


def test_what_was_left_out_is_told_once_a_reason() -> None:
    items = [
        *(torque(k, None) for k in range(1, 6)),
        Item("bound", "x"),
        Item("bound", "y", (speed(1.0),), "half"),
    ]
    assert left_out(items) == [
        *(("torque", 5, NO_ENGINE), ("bound", 1, "nothing was compared"), ("bound", 1, "half"))
    ]


def test_differences_in_words() -> None:
    assert check_text(speed(0.3)) == "speed differs by 0.3 m/s, 1e-09 m/s allowed"
    assert check_text(speed(NAN)) == "speed difference is no number, 1e-09 m/s allowed"
    assert check_text(Check("velocity", 0.31, 1e-6, "rad/s", "j3")) == (
        "velocity (j3) differs by 0.31 rad/s, 1e-06 rad/s allowed"
    )
    assert check_text(same("joint", "a", "b")) == "joint: a here, b stored"
    assert item_text(WRONG_VERDICT) == "verdict: not deliverable here, deliverable stored"
    assert (size(same("joint", "a", "b")), size(same("joint", "a", "a"))) == ("not equal", "equal")
    assert (size(speed(INF)), size(speed(NAN))) == ("infinite", "no number")
    many = Item("motion", "x", tuple(speed(float(k)) for k in range(1, 8)))
    assert item_text(many).startswith("motion, x: speed differs by 7 m/s")
    assert item_text(many).endswith("; and 3 more")


@pytest.mark.parametrize("case", CASES)
def test_json_is_strict_and_has_every_item_in_full(case: str) -> None:
    found, result = read(case), made_case(case)
    assert found["schema"] == "strikecheck/recheck/1"
    assert found["verdict"] == VERDICTS[case]
    assert [(one["kind"], one["where"], one["status"], one["left_out"]) for one in found["items"]] == [
        (plain(item.kind), plain(item.where), item.status, plain(item.left_out)) for item in result.items
    ]
    checks = [check for item in result.items for check in item.checks]
    stored = [check for item in found["items"] for check in item["checks"]]
    for check, one in zip(checks, stored, strict=True):
        assert (one["name"], one["unit"], one["agrees"]) == (
            plain(check.name),
            plain(check.unit),
            check.agrees,
        )
        for key in ("difference", "allowed"):
            value = getattr(check, key)
            if math.isfinite(value):
                assert one[key] == pytest.approx(value, rel=1e-8, abs=0)
            else:
                word = "no number" if math.isnan(value) else "infinite"
                assert one[key] is None and f"{key} is {word}" in one["text"]
    assert found["counts"]["items"] == len(result.items) == sum(kind["items"] for kind in found["kinds"])


def test_json_tells_the_question_and_what_it_rests_on() -> None:
    found = read("differs")
    assert list(found) == [
        *("schema", "verdict", "sentence", "folder", "of", "stored_verdict", "engine", "counts", "kinds"),
        *("not_checked", "notes", "cautions", "inputs", "versions", "versions_stored", "items"),
    ]
    assert (found["folder"], found["of"], found["stored_verdict"]) == ("out/survey", "survey", "deliverable")
    assert found["counts"] == {"items": 29, "agree": 26, "differ": 3, "not_checkable": 0}
    assert found["engine"] == "MuJoCo 3.2.0" and found["not_checked"] == []
    assert found["versions_stored"] == {"strikecheck": "0.1.0", "pinocchio": "4.1.0", "gone": None}
    assert found["inputs"][1] == {"path": "out/survey/evidence/points.npz", "sha256": "cd" * 32}
    (limited,) = (kind for kind in found["kinds"] if kind["kind"] == "limits")
    assert limited["worst"] == {
        **{"where": "strike 9", "name": "velocity", "difference": 0.31, "allowed": 2.6e-6, "unit": "rad/s"},
        **{"agrees": False, "text": "j3"},
    }
    (left,) = read("not checkable")["not_checked"]
    assert left == f"torque, 8 items: {NO_ENGINE}"
    assert document(made_case("none"))["kinds"] == []


def test_csv_has_a_row_a_comparison_that_reads_back() -> None:
    rows = list(csv.DictReader(io.StringIO(written("csv", "differs"))))
    assert tuple(rows[0]) == COLUMNS
    checks = [(item, check) for item in made_case("differs").items for check in item.checks]
    assert len(rows) == len(checks)
    for row, (item, check) in zip(rows, checks, strict=True):
        assert (row["kind"], row["where"], row["status"]) == (item.kind, item.where, item.status)
        assert (row["check"], row["unit"], row["left_out"]) == (check.name, check.unit, "")
        assert float(row["difference"]) == pytest.approx(check.difference, rel=1e-8, abs=0)
        assert float(row["allowed"]) == pytest.approx(check.allowed, rel=1e-8, abs=0)


def test_csv_of_what_has_no_number_or_no_comparison() -> None:
    rows = list(csv.DictReader(io.StringIO(written("csv", "hostile"))))
    assert rows[0]["kind"] == plain(EVIL)
    assert [(row["difference"], row["allowed"]) for row in rows if row["kind"] == "motion"] == [
        *(("nan", "1e-09"), ("inf", "1e-09"), ("1", "0")),
        *(("1", "nan"), ("inf", "inf"), ("1e-300", "1e-09"), ("1e+300", "1e-09")),
    ]
    (bare,) = (row for row in rows if row["kind"] == "bare")
    assert (bare["status"], bare["check"], bare["difference"]) == (NOT_CHECKABLE, "", "")
    assert bare["left_out"] == "nothing was compared"
    assert written("csv", "none").splitlines() == [",".join(COLUMNS)]


@pytest.mark.parametrize("case", CASES)
def test_text_is_narrow_and_begins_with_the_verdict(case: str) -> None:
    text = written("text", case)
    assert joined(text).startswith(joined(plain(made_case(case).verdict.sentence)))
    assert max(map(terminal_width, text.splitlines())) <= 100


def test_text_says_what_differs_and_by_how_much() -> None:
    text = joined(written("text", "differs"))
    for expected in (
        "motion, strike 9: speed differs by 0.0025 m/s, 1e-09 m/s allowed",
        "limits, strike 9: velocity (j3) differs by 0.31 rad/s, 2.6e-06 rad/s allowed",
        "verdict: not deliverable here, deliverable stored",
        "motion 9 8 1 0 0.0025 1e-09 m/s speed, strike 9",
        "second engine MuJoCo 3.2.0",
        "undecided strikes rest on a search that found nothing",
    ):
        assert expected in text
    assert "What was left out" not in text


def test_text_of_many_differences_tells_some_and_how_many_more() -> None:
    text = written("text", "many")
    assert text.count("velocity (j3) differs") == 12
    assert "… and 488 more in recheck.csv" in text
    assert text.count("\n") < 50


def test_how_to_get_the_second_engine_is_told_once() -> None:
    told = written("text", "not checkable")
    assert joined(told).count(EXTRA) == 1 and f"torque, 8 items: {NO_ENGINE}" in joined(told)
    assert joined(written("text", "hostile")).count(INSTALL) == 1
    assert EXTRA not in written("text", "agrees")


def test_text_stays_readable_with_long_names() -> None:
    name = "left_arm_shoulder_lateral_rotation_actuator_joint"
    item = Item("torque", f"strike 1234 of {name}", (Check("torque rate", 12.5, 1e-3, "N·m/s", name),))
    text = str(WRITERS["text"](made_of([item])))
    assert joined(text).count(name) >= 2
    assert max(map(terminal_width, text.splitlines())) <= 100


@pytest.mark.parametrize("case", CASES)
def test_html_escapes_every_text_and_fetches_nothing(case: str) -> None:
    text = written("html", case)
    page = Page(text)
    assert not {"script", "b", "i", "link", "iframe", "object"} & set(page.tags)
    assert page.sources == [one for one in page.sources if one.startswith("data:image/svg+xml;base64,")]
    assert len(page.sources) == page.tags.count("img") == (case != "none")
    assert not re.search(r"https?://|url\(|@import", text)
    assert plain(made_case(case).verdict.sentence) in "".join(page.words)


def test_html_has_every_section_and_the_digests() -> None:
    page = "".join(Page(written("html", "differs")).words)
    for expected in (
        *("By kind", "What differs", "Figures", "Notes", "How to read this", "Files", "Versions", "Caution"),
        *("ab" * 32, "cd" * 32, "not deliverable here, deliverable stored", "MuJoCo 3.2.0", "gone"),
    ):
        assert expected in re.sub(r"\s+", " ", page)
    assert 'class="verdict bad"' in written("html", "differs")
    assert 'class="verdict good"' in written("html", "agrees")
    assert 'class="verdict open"' in written("html", "not checkable")
    assert INSTALL in "".join(Page(written("html", "not checkable")).words)


def test_html_of_many_items_stays_small_and_says_what_it_leaves_out() -> None:
    text = written("html", "many")
    assert len(text.encode()) < 100_000
    assert "500 items differ in 500 comparisons" in text and "recheck.csv has the other 440 too" in text


@pytest.mark.parametrize("case", [case for case in CASES if case != "none"])
def test_the_figure_fetches_and_runs_nothing(case: str) -> None:
    tree = drawing(case)
    assert tree.tag.endswith("svg")
    assert not [element for element in tree.iter() if element.tag.rsplit("}", 1)[-1] in ("script", "a")]


def test_the_figure_tells_agreement_from_difference_without_colour() -> None:
    assert {"equal", "agrees", "differs", "allowed"} <= set(words("differs"))
    assert "differs" not in words("agrees")
    assert {"motion: speed", "0.0025 of 1e-09 m/s", "verdict", "not equal"} <= set(words("differs"))
    (cross,) = shapes("differs") - shapes("agrees")
    assert "C" not in cross  # straight lines, where a dot is of curves
    assert any("C" in shape for shape in shapes("agrees"))


def shapes(case: str) -> set[str]:
    """The paths of the marks of a figure."""
    defined = (tree for tree in drawing(case).iter() if tree.tag.endswith("defs"))
    return {path.get("d", "") for tree in defined for path in tree if path.get("id", "").startswith("m")}


def test_junit_has_a_case_an_item() -> None:
    suite = ET.fromstring(written("junit", "differs")).find("testsuite")
    assert suite is not None
    cases = suite.findall("testcase")
    items = made_case("differs").items
    assert [(case.get("classname"), case.get("name")) for case in cases] == [
        (f"strikecheck.recheck.{item.kind}", item.where or "the whole") for item in items
    ]
    assert [case.find("failure") is not None for case in cases] == [item.status == DIFFER for item in items]
    assert (suite.get("tests"), suite.get("failures"), suite.get("skipped")) == ("29", "3", "0")
    failure = cases[-1].find("failure")
    assert (
        failure is not None and failure.get("message") == "verdict: not deliverable here, deliverable stored"
    )


def test_junit_skips_what_was_not_checkable() -> None:
    suite = ET.fromstring(written("junit", "not checkable")).find("testsuite")
    assert suite is not None
    told = [skipped.get("message") for skipped in suite.findall("testcase/skipped")]
    assert told == [NO_ENGINE] * 8 and suite.get("failures") == "0"
    (only,) = ET.fromstring(written("junit", "none")).findall("testsuite/testcase")
    assert only.find("skipped") is not None


def test_folder_holds_everything_and_no_evidence(tmp_path: Path) -> None:
    result = made_case("differs")
    assert evidence_files(result) == {}
    listed = {"verdict.json", COMMANDS["recheck"], "report.html"}
    found = write_folder(result, tmp_path / "out", tmp_path / "junit.xml")
    assert listing(tmp_path / "out") == listed
    assert found[-1].name == "verdict.json" and (tmp_path / "junit.xml").exists()
