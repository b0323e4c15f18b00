"""Every output, on an invented result whose names try to break out of it."""

from __future__ import annotations

import base64
import csv
import html
import io
import itertools
import json
import os
import re
import subprocess
import sys
import unicodedata
import xml.etree.ElementTree as ET
from dataclasses import replace
from functools import cache
from html.parser import HTMLParser
from pathlib import Path
from typing import Literal

import numpy as np
import pytest
from cli_case import without_drawings

import reach
from reach.cell import ArmSpec, Bound, Cell, CommandLog, Follow, Input, Joint, JointLimits, Paddle, Pose
from reach.errors import OutputError
from reach.evidence.motion import Motion
from reach.evidence.record import (
    BaseLoad,
    Evidence,
    Need,
    Reason,
    Remedy,
    SolverCount,
    Strike,
    Track,
    Use,
)
from reach.report import WRITERS as ALL_WRITERS
from reach.report import write_files, write_folder
from reach.report.alike import once
from reach.report.columns import width, wrap
from reach.report.document import document, versions
from reach.report.follow.csv import quaternions
from reach.report.follow.evidence import evidence_files
from reach.report.follow.series import keep, keep_way, shares
from reach.report.follow.wording import demand_note, tilt_meaning
from reach.report.page import table
from reach.report.wording import all_notes, number, plain, span
from reach.result import FollowResult
from reach.verdict import judge

NAMES = ("a b", '<b>"x"&\'', "关节$1_{}^")
WRITERS = ALL_WRITERS["follow"]
WRITE_PAGE = WRITERS["html"]  # whatever takes its place in a test
PERIOD_S = 0.001
KINDS = (  # name, unit, stated limit, share kept; all invented
    ("position", "rad", 2.9, 0.999),
    ("velocity", "rad/s", 2.6, 0.98),
    ("acceleration", "rad/s²", 18.0, 0.98),
    ("jerk", "rad/s³", 4000.0, 0.95),
    ("torque", "N·m", 87.0, 0.90),
    ("torque rate", "N·m/s", 1000.0, 0.95),
    ("duty", "N·m", 30.0, 0.95),
)
SHORTFALL = Reason(
    decides=False,
    limit="velocity",
    joint=None,
    phase=None,
    time_s=None,
    until_s=None,
    value=float("nan"),
    bound=None,
    unit="rad/s",
    basis="searched",
    text="x" * 150,
)


def rotations(axis: np.ndarray, angle: np.ndarray) -> np.ndarray:
    """Rotation matrices (m, 3, 3) about one axis."""
    x, y, z = axis / np.linalg.norm(axis)
    cross = np.array([[0, -z, y], [z, 0, -x], [-y, x, 0]])
    s, c = np.sin(angle)[:, None, None], np.cos(angle)[:, None, None]
    return np.eye(3) + s * cross + (1 - c) * cross @ cross


def made_motion(joints: int, seconds: float) -> Motion:
    """A smooth invented motion."""
    t = np.arange(round(seconds / PERIOD_S) + 1) * PERIOD_S
    rate = 2 * np.pi * np.arange(1, joints + 1) / 3.0
    q = 0.4 * np.sin(t[:, None] * rate) + 0.2
    v = np.gradient(q, PERIOD_S, axis=0)
    a = np.gradient(v, PERIOD_S, axis=0)
    return Motion(0.0, PERIOD_S, q, v, a)


def made_uses(motion: Motion, torque: np.ndarray, names: tuple[str, ...]) -> tuple[Use, ...]:
    """Every limit of every joint; jerk unknown, the first joint's position unlimited."""
    jerk = np.gradient(motion.a, PERIOD_S, axis=0)
    rate = np.gradient(torque, PERIOD_S, axis=0)
    duty = np.broadcast_to(np.sqrt(np.mean(torque**2, axis=0)), torque.shape)
    uses = []
    for (kind, unit, limit, kept), values in zip(
        KINDS, (motion.q, motion.v, motion.a, jerk, torque, rate, duty), strict=True
    ):
        for i, name in enumerate(names):
            hi = {("jerk", i): None, ("position", 0): np.inf, ("torque", 1): 38.0}.get((kind, i), limit)
            row = int(np.argmax(np.abs(values[:, i])))
            peak = float(values[row, i])
            uses.append(
                Use(
                    kind,
                    name,
                    unit,
                    None if hi is None else -hi,
                    hi,
                    None if hi is None else -kept * hi,
                    None if hi is None else kept * hi,
                    "unknown" if hi is None else "invented <table>",
                    peak,
                    None if kind == "duty" else float(motion.t_s[row]),
                    None if hi is None else abs(peak) / hi,
                    1.4 * peak,
                    values[:, i],
                )
            )
    return tuple(uses)


def made_track(motion: Motion) -> Track:
    """A paddle that bobs and falls a little short."""
    t = motion.t_s
    wanted = np.column_stack([0.5 + 0.03 * np.sin(t), 0.04 * np.cos(0.7 * t), 0.4 + 0.06 * np.sin(6 * t)])
    wanted_twist = np.column_stack([np.gradient(wanted, PERIOD_S, axis=0), np.zeros((len(t), 3))])
    short = 0.04 * np.clip(np.sin(t - 1), 0, None)[:, None]
    twist = wanted_twist * (1 - short)
    position = wanted[0] + np.vstack([np.zeros(3), np.cumsum(twist[:-1, :3], axis=0) * PERIOD_S])
    tilt = np.radians(0.4 + 0.4 * np.sin(t))
    return Track(
        t,
        wanted_twist[:, 2],
        twist[:, 2],
        np.linalg.norm((twist - wanted_twist)[:, :3], axis=1),
        np.linalg.norm(position - wanted, axis=1),
        tilt,
        position,
        wanted,
        rotations(np.array([1.0, 2.0, 0.5]), 9 * t),
        twist,
        wanted_twist,
        t < t[-1] - 0.2,
    )


def made_strikes(track: Track, count: int = 2) -> tuple[Strike, ...]:
    """Strikes on the rising paddle; every second one is missed."""
    strikes = []
    for k in range(count):
        time = round(2 * np.pi / 6 * (k + 1), 3)
        row = int(np.argmin(np.abs(track.t_s - time)))
        commanded = float(track.commanded_normal[row])
        missed = k % 2 == 1
        share = 0.93 if missed else 0.995
        strikes.append(
            Strike(
                time,
                True,
                commanded,
                share * commanded,
                share,
                0.011,
                0.6,
                0.0021,
                ("speed along the normal 7.0 % off, 3 % allowed",) if missed else (),
                "torque" if missed else None,
                NAMES[1] if missed else None,
                next_contact_shift_m=0.012 + 0.001 * k,
                shift_per_degree_m=0.02 + 0.001 * k,
            )
        )
    return tuple(strikes)


def made_cell(names: tuple[str, ...]) -> Cell:
    """A cell with those joints."""
    limits = JointLimits(
        velocity=Bound(-2.6, 2.6, "invented"),
        position=Bound(-np.inf, np.inf, "continuous"),
        torque=Bound(-87.0, 87.0, "invented"),
    )
    joints = tuple(Joint(name, "revolute", limits) for name in names)
    log = CommandLog(np.array([0.0, 1.0]), np.zeros((2, 6)))
    return Cell(
        "cell.toml",
        ArmSpec("arm.urdf", '<robot name="arm"/>', "tip", joints),
        Paddle(Pose(), 0.25, "disc", radius_m=0.085),
        follow=Follow("world", "strike", log),
        inputs=(Input("cell <1>\udcff.toml", "ab" * 32), Input("arm.urdf", "cd" * 32)),
        notes=("joint x\x1b[31m held at zero",),
    )


def made_result(names: tuple[str, ...] = NAMES, seconds: float = 3.0, strikes: int = 2) -> FollowResult:
    """A whole invented result: one of two strikes missed, one torque limit broken, jerk unknown."""
    cell = made_cell(names)
    motion = made_motion(len(names), seconds)
    torque = 40 * np.sin(3 * motion.t_s[:, None] + np.arange(len(names))) + 0.3 * motion.a
    track = made_track(motion)
    uses = made_uses(motion, torque, names)
    evidence = Evidence(
        motion,
        torque,
        np.sqrt(np.mean(torque**2, axis=0)),
        uses,
        track,
        made_strikes(track, strikes),
        BaseLoad(512.25, 301.5),
        False,
        (),
        True,
        (*(("jerk", name) for name in names), ("tool speed", None)),
        ("jerk", "tool speed", "friction", "reflected inertia"),
        (),
        0,
    )
    reason = f"torque of {names[1]} stops it from 1.900 s to 2.100 s"
    return FollowResult(
        cell=cell,
        reading="twist in world axes, of the strike point, held between samples",
        evidence=evidence,
        verdict=judge(evidence, cell.accept),
        without_margins="not deliverable",
        without_pose_gain="undecided",
        reasons=(
            Reason(True, "torque", names[1], "impact", 1.9, 2.1, 88.0, 87.0, "N·m", "demonstrated", reason),
            replace(SHORTFALL, joint=names[0]),
        ),
        needs=(Need(names[1], "torque", 90.0, float("inf"), "N·m", f"{names[1]} needs 90 N·m"),),
        remedies=(
            Remedy(f"lighter paddle at {names[1]}", "2 of 2 strikes", True),
            Remedy("slower", "1 of 2", False),
        ),
        headroom_share=-0.07,
        headroom_text="limits would have to grow by 7 %",
        solver=SolverCount("daqp", "piqp", len(motion.q), 12, 0, 1),
        notes=("note with <i>markup</i>",),
    )


def without_motion() -> FollowResult:
    """The same cell, where no start posture was found."""
    result = made_result()
    uses = tuple(
        replace(use, peak=float("nan"), time_s=float("nan"), utilisation=None, series=np.empty(0))
        for use in result.evidence.uses
    )
    evidence = replace(
        result.evidence,
        motion=None,
        torque=None,
        rms_torque=None,
        uses=uses,
        track=None,
        strikes=(),
        base_load=None,
        blocked=(
            Reason(
                True,
                "reach",
                None,
                None,
                None,
                None,
                None,
                None,
                "",
                "proved",
                "start pose out of reach by 0.2 m",
            ),
        ),
    )
    return replace(result, evidence=evidence, verdict=judge(evidence, result.cell.accept))


@pytest.fixture(scope="module")
def result() -> FollowResult:
    return made_result()


@cache
def html_of(result: FollowResult) -> str:
    """Its page; drawing takes its time."""
    return str(WRITE_PAGE(result))


@pytest.fixture
def undrawn(monkeypatch: pytest.MonkeyPatch) -> None:
    """Pages without drawings, where their words alone matter."""
    without_drawings(monkeypatch, "follow")


def refuse(constant: str) -> None:
    raise AssertionError(f"{constant} is not strict JSON")


def terminal_width(line: str) -> int:
    return sum(2 if unicodedata.east_asian_width(c) in "WF" else 1 for c in line)


class Page(HTMLParser):
    """Collects the tags, attributes and words of a page."""

    def __init__(self, text: str):
        super().__init__()
        self.tags: list[str] = []
        self.sources: list[str] = []
        self.words: list[str] = []
        self.feed(text)

    def handle_starttag(self, tag: str, attrs: list[tuple[str, str | None]]) -> None:
        self.tags.append(tag)
        self.sources += [value or "" for name, value in attrs if name in ("src", "href")]

    def handle_data(self, data: str) -> None:
        self.words.append(data)


@pytest.mark.parametrize("kind", WRITERS)
def test_writers_give_the_same_bytes_again_and_no_control_character(kind: str, result: FollowResult) -> None:
    once = html_of(result) if kind == "html" else WRITERS[kind](result)
    assert once == WRITERS[kind](result)
    text = once.decode() if isinstance(once, bytes) else once
    assert "关节" in text
    assert not re.search(r"[\x00-\x09\x0b-\x1f\x7f-\x9f]", text)


@pytest.mark.parametrize("kind", WRITERS)
def test_writers_work_without_a_motion(kind: str) -> None:
    content = WRITERS[kind](without_motion())
    text = content.decode() if isinstance(content, bytes) else content
    text.encode()
    assert ("start pose out of reach" in text) is (kind != "csv")


def test_import_loads_no_drawing_library() -> None:
    code = (
        "import sys, reach.report.json\n"
        "from reach.report.follow import csv, evidence, junit, text\n"
        "from reach.report.survey import csv, evidence, junit, text\n"
        "loaded = {name.split('.')[0] for name in sys.modules}\n"
        "print(sorted(loaded & {'matplotlib', 'pinocchio', 'qpsolvers', 'scipy'}))"
    )
    run = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert run.stdout.strip() == "[]"


def test_json_is_strict_and_complete(result: FollowResult) -> None:
    read = json.loads(WRITERS["json"](result), parse_constant=refuse)
    assert read["schema"] == "strikecheck/follow/1"
    assert read["verdict"] == "not deliverable"
    assert read["sentence"] == result.verdict.sentence
    for field in ("without_margins", "not_checked", "remedies", "headroom_share", "inputs", "solver"):
        assert read[field]
    assert read["base_load"] == {"force_peak_n": 512.25, "moment_peak_nm": 301.5}
    assert list(read["reasons"][0]) == [
        *("decides", "limit", "joint", "phase", "time_s", "until_s"),
        *("value", "bound", "unit", "basis", "text"),
    ]
    assert read["reasons"][1]["value"] is None
    assert read["needs"][0] == {
        "joint": NAMES[1],
        "limit": "torque",
        "necessary": 90.0,
        "sufficient": None,
        "unit": "N·m",
        "text": f"{NAMES[1]} needs 90 N·m",
    }
    fields = {"joint", "limit", "bound", "source", "demand_peak", "delivered_peak", "utilisation", "time_s"}
    assert all(fields <= set(limit) for limit in read["limits"])
    bounds = {(limit["limit"], limit["joint"]): limit["bound"] for limit in read["limits"]}
    assert bounds["position", NAMES[0]] == [None, None]
    assert bounds["jerk", NAMES[0]] is None
    assert bounds["torque", NAMES[2]] == [-87.0, 87.0]
    assert [strike["delivered"] for strike in read["strikes"]] == [True, False]
    assert read["inputs"][0]["path"] == "cell <1>\\udcff.toml"
    assert set(read["versions"]) >= {"strikecheck", "pinocchio", "qpsolvers", "numpy", "python"}
    assert versions()["numpy"] == np.__version__
    assert versions()["strikecheck"] == reach.__version__
    assert [limit["time_s"] for limit in read["limits"] if limit["limit"] == "duty"] == [None] * 3


def test_tracking_is_over_the_command_alone(result: FollowResult) -> None:
    track = result.evidence.track
    assert track is not None
    spoiled = replace(track, velocity_error=np.where(track.during, track.velocity_error, 1e3))
    read = document(replace(result, evidence=replace(result.evidence, track=spoiled)))["tracking"]
    error = track.velocity_error[track.during]
    assert read["velocity_rms_m_s"] == pytest.approx(np.sqrt(np.mean(error**2)), rel=1e-8)
    assert read["velocity_peak_m_s"] == pytest.approx(error.max(), rel=1e-8)
    assert read["tilt_peak_deg"] == pytest.approx(0.8, abs=0.001)


def test_numbers_keep_nine_digits_and_instants_their_milliseconds(result: FollowResult) -> None:
    late = replace(result.reasons[0], time_s=1_700_000_000.123, value=1 / 3)
    read = document(replace(result, reasons=(late,)))["reasons"][0]
    assert read["time_s"] == 1_700_000_000.123
    assert read["value"] == 0.333333333


def test_csv_reads_back(result: FollowResult) -> None:
    rows = list(csv.reader(io.StringIO(str(WRITERS["csv"](result)))))
    motion, track = result.evidence.motion, result.evidence.track
    assert motion is not None and track is not None
    names = [f"{kind}_{name}" for kind in ("q", "v", "a", "tau") for name in NAMES]
    assert rows[0][: 1 + len(names)] == ["t_s", *names]
    assert rows[0][1 + len(names) :] == [
        *("px_m", "py_m", "pz_m", "qw", "qx", "qy", "qz"),
        *("vx_m_s", "vy_m_s", "vz_m_s", "wx_rad_s", "wy_rad_s", "wz_rad_s"),
    ]
    read = np.array(rows[1:], dtype=float)
    assert len(read) == len(motion.q)
    np.testing.assert_allclose(read[:, 1:4], motion.q, rtol=1e-8, atol=1e-12)
    np.testing.assert_allclose(read[:, 10:13], result.evidence.torque, rtol=1e-8, atol=1e-12)
    np.testing.assert_allclose(read[:, -6:], track.twist, rtol=1e-8, atol=1e-12)


def test_csv_without_motion_is_a_header() -> None:
    assert str(WRITERS["csv"](without_motion())).count("\n") == 1


def test_quaternions_are_exact_and_never_jump() -> None:
    angle = np.linspace(-3, 12, 400)
    axis = np.array([1.0, 2.0, 0.5]) / np.linalg.norm([1.0, 2.0, 0.5])
    found = quaternions(rotations(axis, angle))
    exact = np.column_stack([np.cos(angle / 2), np.sin(angle / 2)[:, None] * axis])
    np.testing.assert_allclose(found, exact, atol=1e-12)
    half_turns = np.array([np.diag([1.0, -1, -1]), np.diag([-1.0, 1, -1]), np.diag([-1.0, -1, 1])])
    np.testing.assert_allclose(np.abs(quaternions(half_turns)), np.eye(4)[1:], atol=1e-12)


def test_html_escapes_every_name_and_fetches_nothing(result: FollowResult) -> None:
    text = html_of(result)
    page = Page(text)
    assert not {"script", "b", "i", "link", "iframe", "object"} & set(page.tags)
    assert all(source.startswith("data:image/svg+xml;base64,") for source in page.sources)
    assert len(page.sources) == page.tags.count("img") >= 4
    assert not re.search(r"https?://|url\(|@import", text)
    assert "default-src 'none'; img-src data:; style-src 'unsafe-inline'" in text
    words = "".join(page.words)
    for expected in (*NAMES, plain(result.verdict.sentence), "note with <i>markup</i>", "ab" * 32):
        assert expected in words


def test_figures_are_drawings_that_fetch_and_run_nothing(result: FollowResult) -> None:
    drawings = [base64.b64decode(s.split(",", 1)[1]) for s in Page(html_of(result)).sources]
    for drawing in drawings:
        tree = ET.fromstring(drawing)
        assert tree.tag.endswith("svg")
        assert not [element for element in tree.iter() if element.tag.rsplit("}", 1)[-1] in ("script", "a")]
    words = "".join("".join(ET.fromstring(drawing).itertext()) for drawing in drawings)
    for name in NAMES:
        assert name in words


def tool_use(series: np.ndarray) -> Use:
    """A tool cap that the motion breaks by far, with no room at all the other way."""
    return Use("tool speed", None, "m/s", 0.0, 0.1, 0.0, 0.098, "invented", 0.36, 1.0, 3.6, 0.4, series)


def test_html_draws_odd_results(result: FollowResult) -> None:
    evidence = result.evidence
    motion, track = evidence.motion, evidence.track
    assert motion is not None and track is not None
    late = 1_700_000_000.0
    odd = replace(
        evidence,
        motion=replace(motion, start_s=late),
        track=replace(track, t_s=track.t_s + late, position_error=100 * track.position_error),
        strikes=(),
        uses=(*evidence.uses, tool_use(track.delivered_normal)),
    )
    page = Page(str(WRITERS["html"](replace(result, evidence=odd))))
    words = ["".join(ET.fromstring(base64.b64decode(s.split(",", 1)[1])).itertext()) for s in page.sources]
    assert sum("time after 1700000000.000 s" in text for text in words) == 3
    assert sum("! 360 (400)" in text for text in words) == 1
    assert any("tool" in text.split() and "! 360 %" in text for text in words)


def test_html_stays_small() -> None:
    long = made_result(tuple(f"joint_{i}" for i in range(7)), seconds=10.0, strikes=9)
    assert len(str(WRITERS["html"](long)).encode()) < 3_000_000


def test_text_is_narrow_and_says_everything(result: FollowResult) -> None:
    text = str(WRITERS["text"](result))
    assert max(terminal_width(line) for line in text.splitlines()) <= 100
    joined = " ".join(text.split())
    assert joined.startswith(" ".join(plain(result.verdict.sentence).split()))
    for expected in (
        "without margins: not deliverable",
        "without pose feedback: undecided",
        "limits would have to grow by 7 %",
        "missed: speed along the normal 7.0 % off",
        "A tilt error of 1° moves the next contact by 20 to 21 mm.",
        "2 of 2 strikes (verified by a run) 2. slower: 1 of 2 (not verified)",
        "250 mm/s",
        "held at zero",
    ):
        assert expected in joined


def with_needs(result: FollowResult) -> FollowResult:
    """Torque fails on every joint, jerk is unknown and nobody requires it."""
    alike = [
        Need(
            name,
            "torque",
            80.0 + i,
            90.0 + i,
            "N·m",
            f"{name}: {90 + i} N·m (now 87) do if all {i} grow alike",
        )
        for i, name in enumerate(NAMES)
    ]
    spare = [
        Need(name, "jerk", None, 99.0, "rad/s³", f"{name} takes 99 rad/s³: not required") for name in NAMES
    ]
    return replace(result, needs=(*spare, *alike))


@pytest.mark.usefixtures("undrawn")
def test_needs_are_columns_and_say_once_what_they_share(result: FollowResult) -> None:
    text = str(WRITERS["text"](with_needs(result)))
    lines = [line.split() for line in text.splitlines()]
    start = lines.index(["limit", "joint", "now", "necessary", "sufficient", "unit"])
    assert lines[start + 1] == ["torque", "a", "b", "87", "80", "90", "N·m"]
    assert lines[start + 3][-5:] == [NAMES[2], "87", "82", "92", "N·m"]
    assert text.count("grow alike") == text.count("(and 2 more like it)") == 1
    assert text.count("jerk: not required, so not searched; peaks in verdict.json") == 1
    page = str(WRITERS["html"](with_needs(result)))
    assert page.count("grow alike") == 1
    assert (
        page.index("grow alike") < page.index("<summary>jerk: not required") < page.index("takes 99 rad/s³")
    )
    assert text.index("sufficient  unit") < text.index("jerk: not required")


def test_texts_that_differ_in_names_and_numbers_are_told_once() -> None:
    notes = [f"a.urdf: line {k}, joint j{k}: what it moves (l{k}, m) weighs {k}.5e-3 kg" for k in range(3)]
    notes += [
        "a.urdf: line 4, joint elbow: what it moves (x) is heavy",
        "j1 is held",
        "j12 is held",
        "j1x is held",
    ]
    assert once(notes, ["j1", "j12"]) == [
        f"{notes[0]} (and 2 more like it)",
        notes[3],
        "j1 is held (and 1 more like it)",
        "j1x is held",
    ]


@pytest.mark.usefixtures("undrawn")
def test_notes_are_each_told_once_and_few_in_the_text(result: FollowResult) -> None:
    read = tuple(f"{'ab'[k % 2] * (k + 1)} is odd" for k in range(20))
    noted = replace(result, notes=("replayed", *read), cell=replace(result.cell, notes=read))
    assert all_notes(noted) == ("replayed", *read)
    assert document(noted)["notes"] == ["replayed", *read]
    text = str(WRITERS["text"](noted))
    assert "… and 13 more in verdict.json" in text
    assert "  - replayed" in text
    page = str(WRITERS["html"](noted))
    assert all(page.count(f"<li>{note}</li>") == 1 for note in all_notes(noted))


@pytest.mark.usefixtures("undrawn")
@pytest.mark.parametrize(
    ("interpolation", "sample_s", "words"),
    [
        ("linear", 0.004, "one every 4 ms, where the controller has 1 ms. The commanded acceleration jumps"),
        (
            "hold",
            0.004,
            "The commanded velocity jumps there, so the acceleration, jerk, torque and torque rate",
        ),
        ("linear", 0.001, ""),
    ],
)
def test_values_asked_for_by_a_coarse_log_are_explained(
    interpolation: Literal["linear", "hold"], sample_s: float, words: str, result: FollowResult
) -> None:
    log = CommandLog(np.arange(5) * sample_s, np.zeros((5, 6)))
    follow = Follow("world", "strike", log, interpolation=interpolation)
    read = replace(result, cell=replace(result.cell, follow=follow))
    assert words in demand_note(read)
    for kind in ("text", "html"):
        told = html.unescape(" ".join(str(WRITERS[kind](read)).split()))
        assert words in told
        assert ("counts the step at each sample" in told) is bool(words)


def test_times_and_numbers_in_words(result: FollowResult) -> None:
    reason = result.reasons[0]
    assert span(reason) == "1.900 to 2.100"
    assert span(replace(reason, until_s=None)) == span(replace(reason, until_s=1.9)) == "1.900"
    assert span(replace(reason, time_s=None, until_s=None)) == "–"
    assert [number(x) for x in (-21910.4, 9999.6, 1.2e8, -0.0)] == ["-21910", "1e+04", "1.2e+08", "0"]


def test_text_cuts_a_long_list_of_strikes() -> None:
    result = made_result(seconds=45.0, strikes=40)
    strikes = tuple(replace(s, faults=(), limit=None) for s in result.evidence.strikes)
    text = str(WRITERS["text"](replace(result, evidence=replace(result.evidence, strikes=strikes))))
    assert "… and 37 more delivered" in text


@pytest.mark.usefixtures("undrawn")
@pytest.mark.parametrize(("factor", "words"), [(1.0, "motion exceeds it, with 36"), (0.1, "stays within it")])
def test_cautions_know_the_reduced_speed(factor: float, words: str, result: FollowResult) -> None:
    track = result.evidence.track
    assert track is not None
    slower = replace(track, twist=factor * track.twist)
    slow = replace(result, evidence=replace(result.evidence, track=slower))
    for kind in ("text", "json", "html"):
        assert words in " ".join(str(WRITERS[kind](slow)).split())


def test_junit_has_a_case_for_everything(result: FollowResult) -> None:
    suite = ET.fromstring(WRITERS["junit"](result)).find("testsuite")
    assert suite is not None
    cases = {case.get("name"): case for case in suite.findall("testcase")}
    kinds = {f"limit {kind}" for kind, *_ in KINDS}
    assert set(cases) == {"verdict", "strike 1 at 1.047 s", "strike 2 at 2.094 s"} | kinds
    failed = {name for name, case in cases.items() if case.find("failure") is not None}
    assert failed == {"verdict", "strike 2 at 2.094 s", "limit torque"}
    failure = cases["strike 2 at 2.094 s"].find("failure")
    assert failure is not None
    assert NAMES[1] in (failure.get("message") or "")
    assert cases["limit jerk"].find("skipped") is not None
    assert suite.get("failures") == str(len(failed))
    assert suite.get("tests") == str(len(cases))


def test_evidence_reads_back_to_the_last_digit(result: FollowResult) -> None:
    files = evidence_files(result)
    motion = result.evidence.motion
    assert motion is not None and files["motion.npz"] is not None and files["cell.json"] is not None
    with np.load(io.BytesIO(files["motion.npz"]), allow_pickle=False) as arrays:
        assert float(arrays["period_s"]) == motion.period_s
        np.testing.assert_array_equal(arrays["q"], motion.q)
        np.testing.assert_array_equal(arrays["a"], motion.a)
        np.testing.assert_array_equal(arrays["t_s"], motion.t_s)
        np.testing.assert_array_equal(arrays["torque"], result.evidence.torque)
    cell = json.loads(files["cell.json"], parse_constant=refuse)
    assert cell["schema"] == "strikecheck/evidence/1"
    assert cell["arm"]["model_xml"] == result.cell.arm.model_xml
    assert [joint["name"] for joint in cell["arm"]["joints"]] == list(NAMES)
    assert cell["arm"]["joints"][0]["limits"]["position"] == {"lo": None, "hi": None, "source": "continuous"}
    assert cell["arm"]["joints"][0]["limits"]["torque_rate"] is None
    assert cell["arm"]["gravity_m_s2"] == [0.0, 0.0, -9.80665]
    assert cell["accept"]["strike_tilt_error_rad"] == result.cell.accept.strike_tilt_error_rad
    assert [strike["commanded_m_s"] for strike in cell["strikes"]] == [
        strike.commanded_m_s for strike in result.evidence.strikes
    ]


def listing(folder: Path) -> set[str]:
    return {str(path.relative_to(folder)) for path in folder.rglob("*") if path.is_file()}


COMPLETE = {
    *("verdict.json", "motion.csv", "report.html", "evidence/motion.npz", "evidence/cell.json"),
    *("evidence/log.npz", "evidence/digests.json"),
}


def test_folder_holds_everything_and_no_motion_of_another_run(
    result: FollowResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    monkeypatch.setitem(WRITERS, "html", html_of)  # the same page, not drawn anew
    out = tmp_path / "a" / "b"
    written = write_folder(result, out)
    assert listing(out) == COMPLETE == {str(path.relative_to(out)) for path in written}
    assert (out / "verdict.json").read_text(encoding="utf-8") == WRITERS["json"](result)
    write_folder(without_motion(), out)
    assert listing(out) == COMPLETE - {"evidence/motion.npz"}


@pytest.fixture
def quick_page(monkeypatch: pytest.MonkeyPatch) -> None:
    """No drawing, where the page's content does not matter."""
    monkeypatch.setitem(WRITERS, "html", lambda result: "<!DOCTYPE html>")


@pytest.mark.usefixtures("quick_page")
def test_folder_that_fails_while_writing_leaves_nothing(
    result: FollowResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    def full(handle: int) -> None:
        raise OSError(28, "No space left on device")

    monkeypatch.setattr(os, "fsync", full)
    with pytest.raises(OutputError, match=r"evidence.*No space left on device") as caught:
        write_folder(result, tmp_path / "out")
    assert caught.value.exit_code == 4
    assert list(tmp_path.iterdir()) == []


@pytest.mark.usefixtures("quick_page")
def test_folder_that_fails_while_moving_holds_the_older_run_whole(
    result: FollowResult, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    write_folder(result, tmp_path)
    before = {name: (tmp_path / name).read_bytes() for name in COMPLETE}
    move = os.replace

    def fails(source: Path, target: Path) -> None:
        if Path(target).name == "report.html":
            raise PermissionError(13, "Permission denied")
        move(source, target)

    monkeypatch.setattr(os, "replace", fails)
    with pytest.raises(OutputError, match=r"report\.html: can't be written: Permission denied"):
        write_folder(without_motion(), tmp_path)
    assert listing(tmp_path) == COMPLETE
    assert {name: (tmp_path / name).read_bytes() for name in COMPLETE} == before


@pytest.mark.usefixtures("quick_page")
def test_folder_in_the_place_of_a_file(result: FollowResult, tmp_path: Path) -> None:
    taken = tmp_path / "taken"
    taken.write_text("mine")
    for out in (taken, taken / "deeper"):
        with pytest.raises(OutputError, match=r"taken.*can't be written: [Nn]ot a directory"):
            write_folder(result, out)
    assert taken.read_text() == "mine"
    assert list(tmp_path.iterdir()) == [taken]


def test_one_file_is_kept_until_the_new_one_is_whole(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    path = tmp_path / "x.xml"
    write_files({path: "old"})

    def fails(source: Path, target: Path) -> None:
        raise OSError(5, "Input/output error")

    monkeypatch.setattr(os, "replace", fails)
    with pytest.raises(OutputError, match="Input/output error"):
        write_files({path: "new"})
    assert path.read_text() == "old"
    assert list(tmp_path.iterdir()) == [path]


def test_plain_keeps_names_apart_and_tame() -> None:
    assert plain("a\x1b[0m\n\ud800\u202e\ufffe") == "a\\x1b[0m\\x0a\\ud800\\u202e\\ufffe"
    assert plain("关节 é 🤖") == "关节 é 🤖"


def test_wrap_counts_wide_characters_and_cuts_long_words() -> None:
    lines = wrap("关" * 120 + " tail", "- ")
    assert [width(line) for line in lines] == [100, 100, 51]
    assert "".join(line[2:] for line in lines) == "关" * 120 + " tail"


def test_tilt_meaning_needs_an_apex(result: FollowResult) -> None:
    strikes = tuple(replace(strike, shift_per_degree_m=None) for strike in result.evidence.strikes)
    assert tilt_meaning(replace(result, evidence=replace(result.evidence, strikes=strikes))) is None


def test_thinned_series_keep_every_extreme() -> None:
    values = np.random.default_rng(1).normal(size=(54321, 2))
    values[12345, 0] = 40.0
    values[54320, 1] = -50.0
    rows = keep(values, 2000)
    assert len(rows) <= 2000
    assert {0, 12345, 54320} <= set(rows.tolist())
    assert np.all(np.diff(rows) > 0)
    assert keep(values[:100], 2000).tolist() == list(range(100))


def test_drawn_way_stays_near_the_real_one() -> None:
    angle = np.linspace(0, 20, 5001)
    way = np.column_stack([0.1 * np.cos(angle), 0.06 * np.sin(1.7 * angle)])
    way[2500:2600] = way[2500]  # stands still for a while
    rows = keep_way(way, 0.0002)
    assert {0, 5000} <= set(rows.tolist())
    assert len(rows) < 600
    for first, last in itertools.pairwise(rows):
        line = np.linspace(way[first], way[last], 400)
        away = np.linalg.norm(way[first : last + 1, None] - line, axis=2).min(axis=1)
        assert away.max() < 0.0002 + np.linalg.norm(way[last] - way[first]) / 800
    assert len(keep_way(way, 0.0002, 50)) <= 50


def test_shares_are_of_the_side_in_use(result: FollowResult) -> None:
    series = np.array([-1.0, 1.0, 0.0])
    use = replace(result.evidence.uses[0], limit="velocity", lo=-2.0, hi=4.0, series=series)
    np.testing.assert_allclose(shares(use), [0.5, 0.25, 0.0])
    np.testing.assert_allclose(shares(replace(use, limit="position")), [2 / 3, 0.0, 1 / 3])
    np.testing.assert_allclose(shares(replace(use, lo=-np.inf, hi=np.inf)), 0.0)


def test_long_words_in_a_table_may_break_and_stay_whole() -> None:
    name = "<j>\n" + "x" * 60
    markup = table(("joint", "#value"), [(name, "1")])
    assert markup.count("<wbr>") == 2
    assert "".join(Page(markup).words).split("value")[1].strip() == f"{plain(name)}1"
