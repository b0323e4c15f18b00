"""The command line: exit codes, what goes to which stream, what is written, and one line for every bad input."""

from __future__ import annotations

import contextlib
import csv
import io
import json
import os
import re
import subprocess
import sys
import xml.etree.ElementTree as ET
from collections.abc import Callable
from html.parser import HTMLParser
from pathlib import Path
from typing import Any, NamedTuple

import numpy as np
import pytest
from cli_case import (
    FAST_M_S,
    HEADER,
    LIMITS,
    REST,
    SLOW_M_S,
    START,
    URDF,
    log_text,
    without_drawings,
    without_key,
    write_case,
)

from reach import __version__
from reach.cell import Array
from reach.cli import main
from reach.errors import SolverFailure
from reach.qp.backends import Solver
from reach.qp.problem import QpProblem

TOP = Path(__file__).parents[1]
NO_ADVICE = ("--no-advice", "--workers", "1")


class Done(NamedTuple):
    """How a command ended."""

    code: int
    out: str
    err: str


def call(*arguments: str | Path) -> Done:
    """Run a command in this process."""
    out, err = io.StringIO(), io.StringIO()
    with contextlib.redirect_stdout(out), contextlib.redirect_stderr(err):
        try:
            code = main([str(argument) for argument in arguments])
        except SystemExit as end:
            code = end.code if isinstance(end.code, int) else 0 if end.code is None else 1
    return Done(code, out.getvalue(), err.getvalue())


def spawn(*arguments: str | Path, cwd: Path = TOP, **environment: str) -> Done:
    """Run a command in a process of its own, by `python -m reach`."""
    command = [sys.executable, "-m", "reach", *map(str, arguments)]
    own = {**os.environ, "PYTHONPATH": str(TOP), "PYTHONIOENCODING": "utf-8", **environment}
    done = subprocess.run(command, capture_output=True, cwd=cwd, env=own, timeout=300)
    return Done(done.returncode, done.stdout.decode(), done.stderr.decode())


@pytest.fixture
def undrawn(monkeypatch: pytest.MonkeyPatch) -> None:
    """Pages without drawings, where they are not looked at."""
    without_drawings(monkeypatch, "follow")


def document(folder: Path) -> dict[str, Any]:
    """The verdict that a run left in a folder."""
    return dict(json.loads((folder / "verdict.json").read_text(encoding="utf-8")))


def files_in(folder: Path) -> set[str]:
    """Names of all files and folders below a folder."""
    return {str(path.relative_to(folder)) for path in folder.rglob("*")}


# The command itself


def test_version() -> None:
    assert spawn("--version") == Done(0, f"strikecheck {__version__}\n", "")


@pytest.mark.parametrize("arguments", [["--help"], ["follow", "--help"]])
def test_help_tells_the_exit_codes(arguments: list[str]) -> None:
    done = call(*arguments)
    assert (done.code, done.err) == (0, "")
    for words in ("0  deliverable", "1  not deliverable", "2  bad input", "3  undecided", "4  the program"):
        assert words in done.out


def test_help_lists_the_commands() -> None:
    done = call("--help")
    assert re.search(r"^ +describe ", done.out, re.M) and re.search(r"^ +follow ", done.out, re.M)


@pytest.mark.parametrize(
    "arguments",
    [
        [],
        ["fly"],
        ["follow"],
        ["describe"],
        ["follow", "cell.toml", "--nonsense"],
        ["follow", "cell.toml", "--workers", "0"],
        ["follow", "cell.toml", "--workers", "many"],
    ],
    ids=" ".join,
)
def test_a_wrong_command_is_bad_input(arguments: list[str]) -> None:
    done = call(*arguments)
    assert (done.code, done.out) == (2, "")
    assert "usage: strikecheck" in done.err and "Traceback" not in done.err


def test_unknown_command_in_its_own_process() -> None:
    done = spawn("fly")
    assert (done.code, done.out) == (2, "")
    assert "fly" in done.err and "follow" in done.err


# describe


def test_describe_tells_each_limit_with_its_source(tmp_path: Path) -> None:
    cell = write_case(tmp_path, limits=without_key(LIMITS, "j2", "torque_rate_nm_s"))
    before = files_in(tmp_path)
    done = call("describe", cell)
    assert (done.code, done.err) == (0, "")
    assert files_in(tmp_path) == before
    block = done.out.partition("\nLimits ")[2].partition("\n\n")[0].splitlines()[1:]
    told = dict(line.strip().split(": ", 1) for line in block)
    kinds = ("position", "velocity", "acceleration", "jerk", "torque", "torque rate", "duty")
    assert set(told) == {f"{kind} of {joint}" for kind in kinds for joint in ("j1", "j2")} | {"tool speed"}
    unknown = {name for name, text in told.items() if text == "unknown"}
    assert unknown == {"torque rate of j2", "tool speed"}
    for name, text in told.items():
        assert name in unknown or text.endswith((", URDF", ", invented for this project")), (name, text)
    assert told["velocity of j1"].startswith("±4 rad/s")
    gap = next(line for line in done.out.splitlines() if line.startswith("Unchecked"))
    assert "torque rate" in gap and "clearance" in gap


def test_describe_needs_no_command_log(tmp_path: Path) -> None:
    cell = write_case(tmp_path, rest="")
    done = call("describe", cell)
    assert done.code == 0 and "no [follow] table" in done.out


def test_a_terminal_without_the_signs_still_gets_the_text(tmp_path: Path) -> None:
    done = spawn("describe", write_case(tmp_path), PYTHONIOENCODING="ascii")
    assert (done.code, done.err) == (0, "")
    assert "velocity of j1" in done.out


# follow: the verdicts


@pytest.fixture(scope="module")
def delivered(tmp_path_factory: pytest.TempPathFactory) -> tuple[Path, Done]:
    """A strike that is delivered, all outputs asked for."""
    folder = tmp_path_factory.mktemp("delivered")
    cell = write_case(folder)
    done = call("follow", cell, "--out", folder / "new" / "out", "--junit", folder / "junit.xml", *NO_ADVICE)
    return folder, done


def test_deliverable(delivered: tuple[Path, Done]) -> None:
    folder, done = delivered
    assert done.code == 0
    assert document(folder / "new" / "out")["verdict"] == "deliverable"
    assert done.out.startswith("deliverable on 7 of 8 limits: 1 of 1 strikes delivered")
    assert "following the log" in done.err


def test_the_folder_holds_everything(delivered: tuple[Path, Done]) -> None:
    folder, done = delivered
    written = files_in(folder / "new" / "out")
    assert {"verdict.json", "motion.csv", "report.html", "evidence"} <= written
    assert any(name.startswith("evidence" + os.sep) for name in written)
    told = done.out.splitlines()[-1]
    assert all(str(folder / "new" / "out" / n) in told for n in ("verdict.json", "motion.csv", "report.html"))


def test_the_motion_has_a_row_each_period(delivered: tuple[Path, Done]) -> None:
    folder, _ = delivered
    with (folder / "new" / "out" / "motion.csv").open(encoding="utf-8", newline="") as stream:
        header, *rows = list(csv.reader(stream))
    joints = ("q_j1", "q_j2", "v_j1", "v_j2", "a_j1", "a_j2", "tau_j1", "tau_j2")
    assert header == ["t_s", *joints, "px_m", "py_m", "pz_m", "qw", "qx", "qy", "qz", *HEADER.split(",")[1:]]
    assert [float(x) for x in rows[0][:3]] == [0.0, START["j1"], START["j2"]]
    times = [float(row[0]) for row in rows]
    assert times[-1] >= 0.3
    assert times == pytest.approx([0.002 * i for i in range(len(rows))], abs=1e-9)


def test_junit_parses(delivered: tuple[Path, Done]) -> None:
    root = ET.parse(delivered[0] / "junit.xml").getroot()
    cases = root.findall(".//testcase")
    assert {case.get("name") for case in cases} >= {"verdict", "strike 1 at 0.150 s", "limit torque"}
    assert not root.findall(".//failure")


def test_not_deliverable_and_json_alone_on_standard_output(tmp_path: Path) -> None:
    cell = write_case(tmp_path, FAST_M_S)
    junit = tmp_path / "results" / "junit.xml"
    done = spawn("follow", cell, "--json", "--junit", junit, *NO_ADVICE, cwd=tmp_path)
    assert done.code == 1
    told = json.loads(done.out)
    assert (told["schema"], told["verdict"]) == ("strikecheck/follow/1", "not deliverable")
    assert told == document(tmp_path / "out" / "follow")
    assert [strike["delivered"] for strike in told["strikes"]] == [False]
    first = told["reasons"][0]
    assert first["decides"] and first["time_s"] <= 0.15 <= first["until_s"]
    assert first["text"].startswith("strike at 0.150 s")
    failures = {case.get("name") for case in ET.parse(junit).findall(".//testcase[failure]")}
    assert failures >= {"verdict", "strike 1 at 0.150 s"}
    assert "Traceback" not in done.err


@pytest.mark.usefixtures("undrawn")
def test_unknown_limit_is_undecided_and_its_need_holds(tmp_path: Path) -> None:
    unknown = without_key(LIMITS, "j1", "torque_rate_nm_s")
    cell = write_case(tmp_path / "a", limits=unknown)
    done = call("follow", cell, "--out", tmp_path / "a" / "o", "--workers", "1")
    assert done.code == 3
    told = document(tmp_path / "a" / "o")
    assert told["verdict"] == "undecided" and "torque rate unknown for j1" in told["sentence"]
    assert {"limit": "torque rate", "joint": "j1"} in told["unknown"]
    assert "torque rate" in told["not_checked"]
    (need,) = [item for item in told["needs"] if item["limit"] == "torque rate"]
    assert (need["joint"], need["unit"]) == ("j1", "N·m/s")
    assert need["text"] in " ".join(done.out.split()) or need["text"] in done.out
    assert 0 < need["necessary"] <= need["sufficient"]
    for name, value, code in (("b", need["sufficient"], 0), ("c", 0.8 * need["necessary"], 1)):
        stated = unknown.replace("[joints.j1]", f"[joints.j1]\ntorque_rate_nm_s = {value!r}")
        again = write_case(tmp_path / name, limits=stated)
        assert call("follow", again, "--out", tmp_path / name / "o", "--quiet", *NO_ADVICE).code == code


@pytest.mark.usefixtures("undrawn")
def test_guessed_contacts_are_undecided_until_accepted_and_quiet_says_nothing(tmp_path: Path) -> None:
    rows = [line.rsplit(",", 1)[0] for line in log_text(SLOW_M_S).splitlines()]
    log = "\n".join(rows) + "\n"
    cell = write_case(tmp_path / "a", log=log)
    assert call("follow", cell, "--out", tmp_path / "a" / "o", "--quiet", *NO_ADVICE) == Done(3, "", "")
    cell = write_case(tmp_path / "b", log=log, rest=REST + 'strikes = "guessed-ok"\n')
    assert call("follow", cell, "--out", tmp_path / "b" / "o", "--quiet", *NO_ADVICE) == Done(0, "", "")


@pytest.mark.usefixtures("undrawn")
def test_a_log_that_begins_elsewhere_is_a_verdict(tmp_path: Path) -> None:
    log = log_text(SLOW_M_S, pose="0.5,0.3,0.5,1,0,0,0")
    done = call("follow", write_case(tmp_path, log=log), "--out", tmp_path / "o", *NO_ADVICE)
    assert done.code == 1
    told = document(tmp_path / "o")
    assert told["verdict"] == "not deliverable"
    (reason,) = [item for item in told["reasons"] if item["limit"] == "reach"]
    assert reason["decides"] and "first pose" in reason["text"]


def test_a_first_pose_out_of_reach_is_a_verdict_without_a_motion(tmp_path: Path) -> None:
    cell = write_case(tmp_path, log=log_text(SLOW_M_S, pose="5,0,0.5,1,0,0,0"))
    text = cell.read_text(encoding="utf-8")
    cell.write_text(re.sub(r"start_rad = .*", 'start = "auto"', text), encoding="utf-8")
    done = call("follow", cell, "--out", tmp_path / "o", "--workers", "1")
    assert done.code == 1, done.err
    told = document(tmp_path / "o")
    assert [item["limit"] for item in told["reasons"] if item["decides"]] == ["reach"]
    assert (tmp_path / "o" / "report.html").exists()


# Odd names

ODD = {"j1": 'shoulder <b>"one"</b> & co', "j2": "肘, 'deux' é"}


class Texts(HTMLParser):
    """Gathers the tags and the text of a page."""

    def __init__(self) -> None:
        super().__init__()
        self.tags: set[str] = set()
        self.text = ""

    def handle_starttag(self, tag: str, attrs: object) -> None:
        self.tags.add(tag)

    def handle_data(self, data: str) -> None:
        self.text += data


def test_odd_names_survive(tmp_path: Path) -> None:
    urdf, limits = URDF, without_key(LIMITS, "j1", "torque_rate_nm_s")
    for name, odd in ODD.items():
        quoted = odd.replace("&", "&amp;").replace("<", "&lt;").replace('"', "&quot;")
        urdf = urdf.replace(f'<joint name="{name}"', f'<joint name="{quoted}"')
        limits = limits.replace(f"[joints.{name}]", f"[joints.{json.dumps(odd, ensure_ascii=False)}]")
    start = {json.dumps(ODD[name], ensure_ascii=False): value for name, value in START.items()}
    cell = write_case(tmp_path, urdf=urdf, limits=limits, start=start)
    junit = tmp_path / "junit.xml"
    done = call("follow", cell, "--out", tmp_path / "o", "--junit", junit, *NO_ADVICE)
    assert done.code == 3, done.err
    told = document(tmp_path / "o")
    assert {item["joint"] for item in told["limits"]} >= set(ODD.values())
    with (tmp_path / "o" / "motion.csv").open(encoding="utf-8", newline="") as stream:
        header = next(csv.reader(stream))
    assert header[1:3] == [f"q_{odd}" for odd in ODD.values()]
    page = (tmp_path / "o" / "report.html").read_text(encoding="utf-8")
    texts = Texts()
    texts.feed(page)
    assert "b" not in texts.tags
    assert "<b>" not in page
    assert all(odd in texts.text for odd in ODD.values())
    assert ODD["j1"] in "".join(case.get("message", "") for case in ET.parse(junit).iter())
    assert call("describe", cell).code == 0


# Failures of its own


def test_an_out_path_that_is_a_file(tmp_path: Path) -> None:
    cell = write_case(tmp_path)
    (tmp_path / "taken").write_text("mine", encoding="utf-8")
    before = files_in(tmp_path)
    done = call("follow", cell, "--out", tmp_path / "taken", "--quiet", *NO_ADVICE)
    assert (done.code, done.out) == (2, "")
    assert len(done.err.splitlines()) == 1
    assert str(tmp_path / "taken") in done.err and "is a file" in done.err
    assert files_in(tmp_path) == before
    assert (tmp_path / "taken").read_text(encoding="utf-8") == "mine"


def test_a_junit_file_replaces_no_input_and_no_result(tmp_path: Path) -> None:
    cell = write_case(tmp_path)
    before = files_in(tmp_path)
    out = tmp_path / "out"
    for target in (cell, out / "verdict.json", tmp_path, ""):
        done = call("follow", cell, "--out", out, "--junit", target, "--quiet", *NO_ADVICE)
        assert (done.code, done.out) == (2, "")
        assert "--junit" in done.err and len(done.err.splitlines()) == 1
        assert files_in(tmp_path) == before


@pytest.mark.parametrize(
    ("error", "words"),
    [
        (SolverFailure("no solver gave a usable answer at 0.120 s"), ("no solver gave",)),
        (ZeroDivisionError("made by the test"), ("fault of its own", "report this", "ZeroDivisionError")),
        (KeyboardInterrupt(), ("stopped",)),
    ],
    ids=lambda value: type(value).__name__ if isinstance(value, BaseException) else "",
)
def test_failures(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, error: BaseException, words: tuple[str, ...]
) -> None:
    def fail(*_: object, **__: object) -> None:
        raise error

    monkeypatch.setattr("reach.api.follow_answer", fail)
    done = call("follow", write_case(tmp_path), "--out", tmp_path / "o", *NO_ADVICE)
    assert (done.code, done.out) == (4, "")
    assert all(word in done.err for word in words)
    assert ("Traceback" in done.err) == ("ZeroDivisionError" in words)
    assert not (tmp_path / "o").exists()


@pytest.mark.usefixtures("undrawn")
def test_steps_that_no_solver_answers(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    def no_number(_: Solver, problem: QpProblem, name: str) -> tuple[Array, Array, Array]:
        return tuple(np.full(len(part), np.nan) for part in (problem.q, problem.h, problem.q))

    monkeypatch.setattr(Solver, "attempt", no_number)
    done = call("follow", write_case(tmp_path), "--out", tmp_path / "o", *NO_ADVICE)
    assert done.code == 4, done.err
    told = document(tmp_path / "o")
    assert told["verdict"] == "undecided" and told["solver"]["failed_steps"] > 0
    assert "no solver answered" in done.out.partition("\n\n")[0]


# Bad input


class Bad(NamedTuple):
    """A way to spoil a sound case: `old` in `file` becomes `new` (None: the whole file does).

    `place` and `words` must stand in the fault, which names the file `at`, by default the spoilt one.
    """

    file: str
    old: str | None
    new: str
    place: str
    words: tuple[str, ...]
    at: str = ""


LINK1 = '<inertia ixx="0.00064" ixy="0" ixz="0" iyy="0.05032" iyz="0" izz="0.05032"/>'
J1_LIMIT = '<limit lower="-2.6" upper="2.6" effort="60" velocity="4"/>'
BOMB = """<!DOCTYPE robot [<!ENTITY a "aaaaaaaaaa"><!ENTITY b "&a;&a;&a;&a;&a;&a;&a;&a;&a;&a;">
<!ENTITY c "&b;&b;&b;&b;&b;&b;&b;&b;&b;&b;">]><robot name="&c;"/>"""
ROW = "0.05,0.0,0.0,0.0375,0.0,0.0,0.0,0\n"

BAD = {
    "not XML": Bad("arm.urdf", None, "no XML at all", "line 1", ("not well-formed",)),
    "broken XML": Bad("arm.urdf", "</robot>", "", "line", ("not well-formed",)),
    "entity bomb": Bad("arm.urdf", None, BOMB, "line 1", ("document type",)),
    "DOCTYPE": Bad("arm.urdf", "<robot", "<!DOCTYPE robot>\n<robot", "line", ("document type",)),
    "xacro": Bad("arm.urdf", "<robot name", "<xacro:x/><robot name", "line", ("xacro", "expand")),
    "xacro value": Bad("arm.urdf", 'effort="60"', 'effort="${e}"', "line", ("xacro", "expand")),
    "no path": Bad("cell.toml", 'tip = "flange"', 'tip = "base"', "arm.tip", ("no joint moves it",)),
    "two trees": Bad("arm.urdf", "</robot>", '<link name="loose"/></robot>', "link loose", ("2 root links",)),
    "unknown tip": Bad("cell.toml", '"flange"', '"flnge"', "arm.tip", ('did you mean "flange"',)),
    "unknown start joint": Bad("cell.toml", "j2 = -0.8", "jj2 = -0.8", "arm.start_rad.jj2", ('"j2"',)),
    "unknown joint": Bad("limits.toml", "[joints.j2]", "[joints.jj2]", "joints.jj2", ('"j2"',)),
    "lower above upper": Bad(
        "arm.urdf", J1_LIMIT, J1_LIMIT.replace("-2.6", "2.7"), "joint j1", ("above upper",)
    ),
    "negative velocity": Bad("arm.urdf", 'velocity="4"', 'velocity="-4"', "joint j1", ("negative",)),
    "negative limit": Bad(
        "limits.toml", "velocity_rad_s = 4.0", "velocity_rad_s = -4.0", "joints.j1.velocity_rad_s", ()
    ),
    "zero inertia": Bad(
        "arm.urdf",
        f'<mass value="2.4"/>\n      {LINK1}',
        f'<mass value="0"/>\n      {re.sub("0[.][0-9]+", "0", LINK1)}',
        "joint j1",
        ("link1", "no inertia"),
    ),
    "negative inertia": Bad("arm.urdf", LINK1, LINK1.replace("0.00064", "-0.00064"), "link1", ("negative",)),
    "negative mass": Bad("arm.urdf", 'value="2.4"', 'value="-2.4"', "link1", ("negative",)),
    "impossible inertia": Bad(
        "arm.urdf", LINK1, LINK1.replace('izz="0.05032"', 'izz="0.5032"'), "link1", ("triangle",)
    ),
    "mimic": Bad(
        "arm.urdf", J1_LIMIT, f'{J1_LIMIT}<mimic joint="j2"/>', "joint j1", ("mimics", "not supported")
    ),
    "not TOML": Bad("cell.toml", "[arm]", "[arm", "line 1", ("not valid TOML",)),
    "unknown key": Bad("cell.toml", "radius_m = 0.05", "raduis_m = 0.05", "paddle.raduis_m", ('"radius_m"',)),
    "unknown table": Bad("cell.toml", "[control]", "[controll]", "controll", ('"control"',)),
    "wrong type": Bad("cell.toml", "radius_m = 0.05", 'radius_m = "0.05"', "paddle.radius_m", ("number",)),
    "not a number": Bad("cell.toml", "radius_m = 0.05", "radius_m = nan", "paddle.radius_m", ("finite",)),
    "infinity": Bad("cell.toml", "mass_kg = 0.1", "mass_kg = inf", "paddle.mass_kg", ("finite",)),
    "negative radius": Bad("cell.toml", "radius_m = 0.05", "radius_m = -1", "paddle.radius_m", ("above 0",)),
    "negative period": Bad(
        "cell.toml", "period_s = 0.002", "period_s = -0.002", "control.period_s", ("at least 1e-05",)
    ),
    "no frame": Bad("cell.toml", 'frame = "world"\n', "", "follow.frame", ('"world"', "no default")),
    "no point": Bad("cell.toml", 'point = "strike"\n', "", "follow.point", ('"strike"', "no default")),
    "no follow": Bad("cell.toml", REST[REST.index("[follow]") :], "", "follow", ("[follow]",)),
    "start outside": Bad("cell.toml", "j1 = 0.8", "j1 = 2.8", "arm.start_rad.j1", ("outside", "2.6")),
    "start incomplete": Bad("cell.toml", ", j2 = -0.8", "", "arm.start_rad.j2", ("missing",)),
    "no URDF": Bad("cell.toml", "'arm.urdf'", "'arm2.urdf'", "file", ("not found",), "arm2.urdf"),
    "no limits": Bad("cell.toml", "'limits.toml'", "'l.toml'", "file", ("not found",), "l.toml"),
    "no log": Bad("cell.toml", '"log.csv"', '"l.csv"', "file", ("not found",), "l.csv"),
    "another kind of log": Bad("cell.toml", '"log.csv"', '"log.bag"', "follow.commands", (".csv",)),
    "no column": Bad("log.csv", "vy_m_s", "vyy", "line 1", ("vy_m_s", "missing")),
    "text in a number": Bad(
        "log.csv", ROW, ROW.replace("0.0375", "fast"), "line 7, column vz_m_s", ("fast",)
    ),
    "NaN in the log": Bad("log.csv", ROW, ROW.replace("0.0375", "nan"), "line 7, column vz_m_s", ("finite",)),
    "time repeated": Bad("log.csv", ROW, ROW + ROW, "line 8, column t_s", ("again", "mend")),
    "time backward": Bad("log.csv", ROW, ROW + "0.045" + ROW[4:], "line 8, column t_s", ("back", "mend")),
    "no rows": Bad("log.csv", None, HEADER + "\n", "whole log", ("no rows",)),
    "one row": Bad("log.csv", None, f"{HEADER}\n0,0,0,0,0,0,0\n", "whole log", ("one row",)),
    "empty log": Bad("log.csv", None, "", "line 1", ("no header",)),
    "gap": Bad(
        "log.csv", None, f"{HEADER}\n0,0,0,0,0,0,0\n0.2,0,0,0,0,0,0\n", "line 3", ("gap", "max_gap_s")
    ),
    "mm/s": Bad("log.csv", ROW, ROW.replace("0.0375", "150.0"), "line 7", ("mm/s",)),
    "deg/s": Bad("log.csv", ROW, ROW.replace("0.0,0.0,0.0,0\n", "0.0,0.0,150.0,0\n"), "line 7", ("deg/s",)),
}


def expect_bad_input(done: Done, path: Path, place: str, words: tuple[str, ...]) -> None:
    """Exit 2, nothing on standard output, one line for each fault, one of them as expected."""
    assert (done.code, done.out) == (2, ""), done
    lines = done.err.splitlines()
    assert lines and "Traceback" not in done.err
    for line in lines:
        assert re.fullmatch(r"[^:]+: [^:]+: \S.*", line), line
    assert any(
        line.startswith(f"{path}: ") and place in line.split(": ")[1] and all(word in line for word in words)
        for line in lines
    ), done.err


@pytest.mark.parametrize("name", BAD)
def test_bad_input_has_one_line_and_leaves_nothing(tmp_path: Path, name: str) -> None:
    bad = BAD[name]
    cell = write_case(tmp_path)
    path = tmp_path / bad.file
    text = path.read_text(encoding="utf-8")
    assert bad.old is None or bad.old in text
    path.write_text(bad.new if bad.old is None else text.replace(bad.old, bad.new, 1), encoding="utf-8")
    before = files_in(tmp_path)
    done = call("follow", cell, "--out", tmp_path / "o", "--junit", tmp_path / "j.xml")
    expect_bad_input(done, tmp_path / (bad.at or bad.file), bad.place, bad.words)
    assert files_in(tmp_path) == before


def removed(path: Path) -> None:
    """Take a file away."""
    path.unlink()


def made_folder(path: Path) -> None:
    """Put a folder in a file's place."""
    path.unlink()
    path.mkdir()


def blown_up(path: Path) -> None:
    """Let a file have 200 MB, without writing them."""
    with path.open("r+b") as stream:
        stream.truncate(200_000_000)


def made_binary(path: Path) -> None:
    """Put bytes in a file that are no text."""
    path.write_bytes(b"\x7fELF\x00\xff\xfe" * 20)


@pytest.mark.parametrize(
    ("spoil", "words"),
    [
        (removed, ("not found",)),
        (made_folder, ("directory",)),
        (blown_up, ("200.0 MB", "more than")),
        (made_binary, ()),
    ],
    ids=["removed", "made_folder", "blown_up", "made_binary"],
)
@pytest.mark.parametrize("file", ["cell.toml", "arm.urdf", "limits.toml", "log.csv"])
def test_files_that_are_none(
    tmp_path: Path, file: str, spoil: Callable[[Path], None], words: tuple[str, ...]
) -> None:
    cell = write_case(tmp_path)
    spoil(tmp_path / file)
    before = files_in(tmp_path)
    done = call("follow", cell, "--out", tmp_path / "o")
    expect_bad_input(done, tmp_path / file, "", words)
    assert files_in(tmp_path) == before


def test_all_faults_at_once_in_a_process_of_its_own(tmp_path: Path) -> None:
    cell = write_case(
        tmp_path,
        urdf=URDF.replace('velocity="4"', 'velocity="-4"'),
        limits=LIMITS.replace("jerk_rad_s3 = 6000.0", 'jerk_rad_s3 = "6000"'),
        log=log_text(SLOW_M_S).replace(ROW, ROW.replace("0.0375", "fast")),
        rest=REST.replace("period_s = 0.002", "period_s = nan"),
    )
    done = spawn("follow", cell, cwd=tmp_path)
    files = [line.split(": ")[0] for line in done.err.splitlines()]
    assert files == [str(tmp_path / name) for name in ("arm.urdf", "cell.toml", "limits.toml", "log.csv")]
    expect_bad_input(done, cell, "control.period_s", ("finite",))
    assert not (tmp_path / "out").exists()


def test_describe_tells_bad_input_too(tmp_path: Path) -> None:
    cell = write_case(tmp_path, urdf="no XML")
    expect_bad_input(call("describe", cell), tmp_path / "arm.urdf", "line 1", ("not well-formed",))


def test_keys_are_printed(capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(["--keys"])
    assert ended.value.code == 0
    shown = capsys.readouterr().out
    assert all(key in shown for key in ("arm.start_rad", "follow.frame", "torque_rate_nm_s", "qw"))
