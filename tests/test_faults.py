"""Faults made on purpose: each ends in its exit code, one clear line, and nothing half-written."""

from __future__ import annotations

import hashlib
import json
import multiprocessing
import os
import resource
import signal
import subprocess
import sys
import time
from collections.abc import Callable, Iterator
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
import qpsolvers
import test_rally_cli
import test_survey_cli
import test_trial_cli
from cli_case import SLOW_M_S, write_case
from test_cli import NO_ADVICE, TOP, Done, call, document

import reach.qp.watch as watch_module
from reach.api import follow_commands
from reach.errors import OutputError
from reach.formats import load_cell
from reach.report import WRITERS, write_files, write_folder
from reach.report.folder import PART
from reach.result import FollowResult

LOST = "a worker process died (out of memory?); run again with --workers 1\n"
KILLED = -signal.SIGKILL


def contents(folder: Path) -> dict[str, bytes]:
    """All files below a folder by name, hidden ones too."""
    return {
        path.relative_to(folder).as_posix(): path.read_bytes() for path in folder.rglob("*") if path.is_file()
    }


def until(true: Callable[[], bool], longest_s: float = 60.0) -> bool:
    """Wait until something holds; False where it never does."""
    end = time.monotonic() + longest_s
    while time.monotonic() < end:
        if true():
            return True
        time.sleep(0.02)
    return true()


def alive(process: int) -> bool:
    """Whether a process runs; one that has ended and waits to be asked for it does not."""
    try:
        return Path(f"/proc/{process}/stat").read_text().rpartition(")")[2].split()[0] != "Z"
    except (FileNotFoundError, ProcessLookupError):
        return False


# Digests


def test_every_file_of_a_run_has_its_digest(tmp_path: Path) -> None:
    out, junit = tmp_path / "out", tmp_path / "junit.xml"
    done = call("follow", write_case(tmp_path), "--out", out, "--junit", junit, *NO_ADVICE)
    assert done.code == 0, done.err
    files = contents(out)
    told = json.loads(files.pop("evidence/digests.json"))
    assert told["schema"] == "strikecheck/digests/1"
    found = {entry["path"]: entry["sha256"] for entry in told["files"]}
    assert found == {name: hashlib.sha256(content).hexdigest() for name, content in files.items()}
    assert set(found) >= {
        "evidence/motion.npz",
        "evidence/cell.json",
        "motion.csv",
        "report.html",
        "verdict.json",
    }
    assert len(told["files"]) == len(found)


# Solvers that answer wrongly

Solve = Callable[..., qpsolvers.Solution]
SOLVE: Solve = qpsolvers.solve_problem


def not_a_number(answer: qpsolvers.Solution) -> qpsolvers.Solution:
    """An answer of nan that claims to be one."""
    answer.x = np.full(len(answer.x), np.nan)
    return answer


def outside(answer: qpsolvers.Solution) -> qpsolvers.Solution:
    """A point beyond every upper bound that claims to be found."""
    answer.x = answer.problem.ub + 1.0
    return answer


def wrong_sign(answer: qpsolvers.Solution) -> qpsolvers.Solution:
    """The right point with multipliers of the wrong sign."""
    answer.z, answer.z_box = -answer.z - 1.0, -answer.z_box
    return answer


def not_best(answer: qpsolvers.Solution) -> qpsolvers.Solution:
    """A point that keeps every row and is not the best, with the right one's multipliers."""
    answer.x = 0.5 * (answer.x + np.clip(0.0, answer.problem.lb, answer.problem.ub)) - 1e-3
    return answer


def none_found(answer: qpsolvers.Solution) -> qpsolvers.Solution:
    """No point where there is one."""
    answer.found = False
    return answer


def raises(_: qpsolvers.Solution) -> qpsolvers.Solution:
    """No answer at all."""
    raise RuntimeError("a solver's own fault, made by the test")


SAME_RAD = 1e-8  # a joint that is set by one solver's answers, whichever way they were come by
WRONG = (not_a_number, outside, wrong_sign, not_best, none_found, raises)


def answering(
    patch: pytest.MonkeyPatch, wrong: Callable[..., Any], names: tuple[str, ...], each: int = 1
) -> None:
    """Let every `each`-th answer of some solvers be wrong."""
    asked: list[str] = []

    def solve(problem: Any, name: str, **settings: Any) -> qpsolvers.Solution:
        asked.append(name)
        answer = SOLVE(problem, name, **settings)
        lies = name in names and answer.x is not None and len(asked) % each == 0
        return wrong(answer) if lies else answer

    patch.setattr("reach.qp.backends.qpsolvers.solve_problem", solve)


def followed(folder: Path, peak_m_s: float) -> FollowResult:
    """What a case's log gives, without advice."""
    return follow_commands(load_cell(write_case(folder, peak_m_s), need="follow"), advice=False)


PEAKS_M_S = {
    "deliverable": 0.3,
    "not deliverable": 0.8,
}  # where limits hold back the arm, so that solvers are needed


@pytest.fixture(scope="module")
def sound(tmp_path_factory: pytest.TempPathFactory) -> dict[str, FollowResult]:
    """The verdicts by sound solvers."""
    found = {word: followed(tmp_path_factory.mktemp("sound"), peak) for word, peak in PEAKS_M_S.items()}
    assert {word: result.verdict.verdict for word, result in found.items()} == {
        word: word for word in PEAKS_M_S
    }
    return found


@pytest.fixture(scope="module")
def by_second(tmp_path_factory: pytest.TempPathFactory) -> dict[str, FollowResult]:
    """What comes out where the second solver is asked first."""
    found = {}
    for word, peak in PEAKS_M_S.items():
        cell = load_cell(write_case(tmp_path_factory.mktemp("second"), peak), need="follow")
        solver = replace(cell.solver, name="piqp", fallback="daqp")
        found[word] = follow_commands(replace(cell, solver=solver), advice=False)
    return found


@pytest.mark.parametrize("word", PEAKS_M_S)
@pytest.mark.parametrize("each", [1, 3])
@pytest.mark.parametrize("wrong", WRONG, ids=lambda wrong: wrong.__name__)
def test_one_solver_that_answers_wrongly_changes_nothing(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    sound: dict[str, FollowResult],
    by_second: dict[str, FollowResult],
    wrong: Callable[..., Any],
    each: int,
    word: str,
) -> None:
    answering(monkeypatch, wrong, ("daqp",), each)
    found, expected = followed(tmp_path, PEAKS_M_S[word]), sound[word]
    assert found.verdict == expected.verdict
    assert found.solver.failed_steps == 0
    if (
        each == 1
    ):  # and the very motion of the second solver alone: what a roll takes back, it takes back whole
        one, other = found.evidence.motion, by_second[word].evidence.motion
        assert one is not None and other is not None
        np.testing.assert_allclose(one.q, other.q, rtol=0, atol=SAME_RAD)
    # asked again a solver may answer well: then the second one was not needed
    assert found.solver.fallback_steps > 0 or each > 1


@pytest.mark.parametrize("word", PEAKS_M_S)
@pytest.mark.parametrize("wrong", WRONG, ids=lambda wrong: wrong.__name__)
def test_no_verdict_rests_on_two_solvers_that_answer_wrongly(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, wrong: Callable[..., Any], word: str
) -> None:
    answering(monkeypatch, wrong, ("daqp", "piqp"))
    found = followed(tmp_path, PEAKS_M_S[word])
    assert found.failed and found.solver.failed_steps > 0
    assert found.verdict.verdict == "undecided" and "steps that no solver answered" in found.verdict.sentence


BOTH_WRONG = """
import sys
import numpy as np, qpsolvers
solve = qpsolvers.solve_problem
def wrong(*given, **settings):
    answer = solve(*given, **settings)
    answer.x = np.full(len(answer.problem.q), np.nan)
    return answer
qpsolvers.solve_problem = wrong
from reach.cli import main
sys.exit(main())
"""


def test_two_solvers_that_answer_wrongly_on_the_command_line(tmp_path: Path) -> None:
    cell = write_case(tmp_path, PEAKS_M_S["deliverable"])
    done = script(BOTH_WRONG, "follow", cell, "--out", tmp_path / "o", *NO_ADVICE)
    assert done.code == 4
    assert done.err.startswith("following the log\na solver failed, so this can't be trusted: undecided")
    assert "steps that no solver answered" in done.out.partition("\n\n")[0]
    assert document(tmp_path / "o")["verdict"] == "undecided"


def script(text: str, *arguments: str | Path) -> Done:
    """Run a script in a process of its own, which can import the package."""
    command = [sys.executable, "-c", text, *map(str, arguments)]
    own = {**os.environ, "PYTHONPATH": str(TOP)}
    done = subprocess.run(command, capture_output=True, env=own, timeout=300, text=True)
    return Done(done.returncode, done.stdout, done.stderr)


# Solvers that do not come back


def sleeps(*_: object, **__: object) -> None:
    """Never come back."""
    while True:
        time.sleep(1e6)


@pytest.fixture
def impatient(monkeypatch: pytest.MonkeyPatch) -> Iterator[None]:
    """A watch that waits less; the alarm is free again afterwards."""
    monkeypatch.setattr(watch_module, "TICK_S", 0.05)
    before = signal.getsignal(signal.SIGALRM)
    yield
    assert signal.getitimer(signal.ITIMER_REAL)[0] == 0.0
    signal.signal(signal.SIGALRM, before)


@pytest.mark.usefixtures("impatient")
@pytest.mark.parametrize("name", ["daqp", "piqp"])
def test_a_solver_that_does_not_come_back_is_named(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, name: str
) -> None:
    def solve(problem: Any, asked: str, **settings: Any) -> qpsolvers.Solution:
        answer = sleeps() if asked == name else SOLVE(problem, asked, **settings)
        return none_found(answer)

    monkeypatch.setattr("reach.qp.backends.qpsolvers.solve_problem", solve)
    cell = write_case(tmp_path)
    before = contents(tmp_path)
    done = call("follow", cell, "--out", tmp_path / "o", "--quiet", *NO_ADVICE)
    assert (done.code, done.out) == (4, "")
    assert len(done.err.splitlines()) == 1
    assert f'solver "{name}" did not come back within 0.05 s' in done.err and "solver.fallback" in done.err
    assert contents(tmp_path) == before and not (tmp_path / "o").exists()


@pytest.mark.usefixtures("impatient")
def test_one_alarm_alone_ends_nothing(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """A process that was held from outside finds one alarm due, and goes on."""

    def solve(problem: Any, asked: str, **settings: Any) -> qpsolvers.Solution:
        if not held:
            held.append(1)
            os.kill(os.getpid(), signal.SIGALRM)
        return SOLVE(problem, asked, **settings)

    held: list[int] = []
    monkeypatch.setattr("reach.qp.backends.qpsolvers.solve_problem", solve)
    assert followed(tmp_path, SLOW_M_S).verdict.verdict == "deliverable" and held


def test_an_alarm_that_others_use_is_left_alone() -> None:
    before = signal.signal(signal.SIGALRM, signal.SIG_IGN)
    try:
        assert not watch_module.Watch().on
        signal.signal(signal.SIGALRM, signal.SIG_DFL)
        signal.setitimer(signal.ITIMER_REAL, 1000.0)
        assert not watch_module.Watch().on
        assert signal.setitimer(signal.ITIMER_REAL, 0.0)[0] > 900.0
        assert watch_module.Watch().on
    finally:
        signal.setitimer(signal.ITIMER_REAL, 0.0)
        signal.signal(signal.SIGALRM, before)


def test_compiled_solvers_bound_their_own_work() -> None:
    """What the watch can't end must end by itself: the iterations of a solve, as its makers set them."""
    import daqp
    import piqp

    assert 0 < daqp.Model().settings["iter_limit"] <= 10000 and daqp.Model().settings["cycle_tol"] > 0
    assert 0 < piqp.DenseSolver().settings.max_iter <= 1000


# Sets of files


@pytest.fixture(scope="module")
def results(tmp_path_factory: pytest.TempPathFactory) -> tuple[FollowResult, FollowResult]:
    """Two runs, every file of which differs."""
    first = followed(tmp_path_factory.mktemp("first"), SLOW_M_S)
    second = followed(tmp_path_factory.mktemp("second"), 2 * SLOW_M_S)
    return first, second


@pytest.fixture
def plain_page(monkeypatch: pytest.MonkeyPatch) -> None:
    """A page without drawings, as large as one."""
    monkeypatch.setitem(WRITERS["follow"], "html", lambda result: f"{id(result)}" * 40000)


def asked(patch: pytest.MonkeyPatch, result: FollowResult, folder: Path, *more: str) -> Done:
    """The command line's answer to a run that gave a result."""
    patch.setattr("reach.api.follow_answer", lambda *_: result)
    cell = write_case(folder)
    return call(
        "follow", cell, "--out", folder / "o", "--junit", folder / "j.xml", "--quiet", *NO_ADVICE, *more
    )


class Fault:
    """Fails at one call of a function, the others being real."""

    def __init__(self, real: Callable[..., Any], call: int, error: Callable[[], BaseException | None]):
        self.real, self.left, self.error = real, call, error

    def __call__(self, *given: Any, **named: Any) -> Any:
        self.left -= 1
        if self.left == 0:
            error = self.error()
            if error is not None:
                raise error
        return self.real(*given, **named)


def full() -> OSError:
    """A full disk's refusal."""
    return OSError(28, "No space left on device")


def terminated() -> None:
    """A request to end, from outside."""
    os.kill(os.getpid(), signal.SIGTERM)


LINES: dict[str, tuple[Callable[[], BaseException | None], str]] = {
    "full disk": (full, "can't be written: No space left on device"),
    "out of memory": (MemoryError, "out of memory"),
    "interrupt": (KeyboardInterrupt, "stopped; nothing was written"),
    "terminated": (terminated, "stopped; nothing was written"),
}


@pytest.mark.usefixtures("plain_page")
@pytest.mark.parametrize("older", [False, True], ids=["new folder", "older run"])
@pytest.mark.parametrize("call", [1, 4])
@pytest.mark.parametrize("kind", LINES)
def test_a_fault_while_files_are_written_leaves_all_as_it_was(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    results: tuple[FollowResult, FollowResult],
    kind: str,
    call: int,
    older: bool,
) -> None:
    if older:
        write_folder(results[0], tmp_path / "o", tmp_path / "j.xml")
    write_case(tmp_path)
    before = contents(tmp_path)
    error, line = LINES[kind]
    monkeypatch.setattr(os, "fsync", Fault(os.fsync, call, error))
    done = asked(monkeypatch, results[1], tmp_path)
    assert (done.code, done.out) == (4, "")
    assert len(done.err.splitlines()) == 1 and line in done.err
    assert contents(tmp_path) == before and (tmp_path / "o").exists() == older


@pytest.mark.usefixtures("plain_page")
@pytest.mark.parametrize("older", [False, True], ids=["new folder", "older run"])
def test_a_file_larger_than_the_system_allows(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, results: tuple[FollowResult, FollowResult], older: bool
) -> None:
    """The operating system's own refusal: the page is larger than a process may write here."""
    if older:
        write_folder(results[0], tmp_path / "o", tmp_path / "j.xml")
    write_case(tmp_path)
    before, limits = contents(tmp_path), resource.getrlimit(resource.RLIMIT_FSIZE)
    assert len(WRITERS["follow"]["html"](results[1])) > 400000
    resource.setrlimit(resource.RLIMIT_FSIZE, (400000, limits[1]))
    try:
        done = asked(monkeypatch, results[1], tmp_path)
    finally:
        resource.setrlimit(resource.RLIMIT_FSIZE, limits)
    assert (done.code, done.out) == (4, "")
    assert done.err == f"{tmp_path / 'o' / 'report.html'}: can't be written: File too large\n"
    assert contents(tmp_path) == before and (tmp_path / "o").exists() == older


@pytest.mark.usefixtures("plain_page")
@pytest.mark.parametrize("older", [False, True], ids=["new folder", "older run"])
@pytest.mark.parametrize("call", [1, 2, 5, 7])
def test_a_move_that_fails_puts_the_older_run_back(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    results: tuple[FollowResult, FollowResult],
    call: int,
    older: bool,
) -> None:
    if older:
        write_folder(results[0], tmp_path / "o", tmp_path / "j.xml")
    write_case(tmp_path)
    before = contents(tmp_path)
    monkeypatch.setattr(os, "replace", Fault(os.replace, call, full))
    done = asked(monkeypatch, results[1], tmp_path)
    assert (done.code, done.out) == (4, "")
    assert len(done.err.splitlines()) == 1 and "can't be written: No space left on device" in done.err
    assert contents(tmp_path) == before and (tmp_path / "o").exists() == older


@pytest.mark.usefixtures("plain_page")
def test_what_can_not_be_put_back_has_no_verdict(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch, results: tuple[FollowResult, FollowResult]
) -> None:
    """A file system without second names, and a move that fails: the folder is no run's, and says so."""

    def refused(*_: object, **__: object) -> None:
        raise PermissionError(1, "Operation not permitted")

    write_folder(results[0], tmp_path)
    names = set(contents(tmp_path))
    monkeypatch.setattr(os, "link", refused)
    monkeypatch.setattr(os, "replace", Fault(os.replace, 4, full))
    with pytest.raises(OutputError, match="No space left on device"):
        write_folder(results[1], tmp_path)
    assert set(contents(tmp_path)) == names - {"verdict.json"}


@pytest.mark.usefixtures("plain_page")
@pytest.mark.parametrize("number", [signal.SIGTERM, signal.SIGINT])
def test_a_request_to_end_waits_until_the_set_is_whole(
    tmp_path: Path,
    monkeypatch: pytest.MonkeyPatch,
    results: tuple[FollowResult, FollowResult],
    number: signal.Signals,
) -> None:
    write_folder(results[0], tmp_path / "o", tmp_path / "j.xml")
    write_folder(results[1], tmp_path / "expected", tmp_path / "j.xml")
    monkeypatch.setattr(os, "replace", Fault(os.replace, 3, lambda: signal.raise_signal(number)))
    done = asked(monkeypatch, results[1], tmp_path)
    assert (done.code, done.out, done.err) == (4, "", "stopped; the results were written before\n")
    assert contents(tmp_path / "o") == contents(tmp_path / "expected")
    assert signal.getsignal(signal.SIGTERM) is signal.SIG_DFL


KILLS = """
import json, os, pathlib, signal, sys
from reach.report.folder import write_files

top, after = pathlib.Path(sys.argv[1]), sys.argv[2] == "after"
NAMES = ("evidence/motion.npz", "evidence/cell.json", "evidence/digests.json")
NAMES += ("motion.csv", "report.html", "verdict.json")

def run(folder, word, without=""):
    files = {folder / name: None if name == without else f"{word} {name} " * 4000 for name in NAMES}
    return write_files(files)

def counted(real, left):
    def call(*given, **named):
        left[0] -= 1
        if left[0] == 0 and not after:
            os.kill(os.getpid(), signal.SIGKILL)
        found = real(*given, **named)
        if left[0] == 0:
            os.kill(os.getpid(), signal.SIGKILL)
        return found
    return call

told, ended, k = [], -signal.SIGKILL, 0
while ended == -signal.SIGKILL:
    k += 1
    folder = top / str(k)
    run(folder, "old")
    child = os.fork()
    if child == 0:
        left = [k]
        for name in ("fsync", "link", "replace", "unlink"):
            setattr(os, name, counted(getattr(os, name), left))
        run(folder, "new", "evidence/motion.npz" if k % 2 else "")
        os._exit(0)
    ended = os.waitstatus_to_exitcode(os.waitpid(child, 0)[1])
    found = {name: (folder / name).read_text() if (folder / name).exists() else None for name in NAMES}
    left_over = [p.name for p in folder.rglob("*") if p.name.endswith(".part")]
    run(folder, "next")
    after_next = sorted(str(p.relative_to(folder)) for p in folder.rglob("*") if p.is_file())
    told.append({"ended": ended, "found": found, "left": left_over, "next": after_next})
print(json.dumps({"names": NAMES, "told": told}))
"""


@pytest.mark.parametrize("when", ["before", pytest.param("after", marks=pytest.mark.campaign)])
def test_a_run_killed_at_any_point_leaves_no_mixed_set(tmp_path: Path, when: str) -> None:
    done = script(KILLS, tmp_path, when)
    assert done.code == 0, done.err
    answer = json.loads(done.out)
    names, told = answer["names"], answer["told"]
    assert told[-1]["ended"] == 0 and len(told) > 15  # every point was tried, until nothing was left to kill
    states = set()
    for k, one in enumerate(told, 1):
        assert one["ended"] == (0 if k == len(told) else KILLED)
        words = {}
        for name, text in one["found"].items():
            words[name] = None if text is None else text.split()[0]
            assert text is None or text == f"{words[name]} {name} " * 4000
        if words["verdict.json"] is not None:
            gone = "evidence/motion.npz" if k % 2 and words["verdict.json"] == "new" else ""
            assert words == {name: None if name == gone else words["verdict.json"] for name in names}
        states.add(words["verdict.json"])
        assert all(PART.fullmatch(name) for name in one["left"])
        assert one["next"] == sorted(names)
    assert states == {"old", "new", None} and any(one["left"] for one in told)


def test_only_own_files_that_nobody_writes_are_cleared(tmp_path: Path) -> None:
    """A file on its way is locked by its run; of others' files none is touched, whatever they look like."""
    import fcntl

    mine = {"notes.part", ".0123456789abcdef.part.txt", ".0123456789ABCDEF.part", ".0123456789abcde.part"}
    left, live = ".0123456789abcdef.part", ".fedcba9876543210.part"
    for name in (*mine, left, live):
        (tmp_path / name).write_text(name)
    (tmp_path / ".00000000000000ff.part").mkdir()
    os.symlink(tmp_path / "notes.part", tmp_path / ".00000000000000ee.part")
    with open(tmp_path / live, "r+b") as file:
        fcntl.flock(file, fcntl.LOCK_EX)
        write_files({tmp_path / "a": "a", tmp_path / "b": "b"})
    rest = {path.name for path in tmp_path.iterdir()}
    assert rest == mine | {live, "a", "b", ".00000000000000ff.part", ".00000000000000ee.part"}
    assert (tmp_path / "notes.part").read_text() == "notes.part"


@pytest.mark.parametrize(("target", "words"), [("/dev/full", "No space left on device"), ("closed", "")])
def test_standard_output_that_takes_nothing(tmp_path: Path, target: str, words: str) -> None:
    cell = write_case(tmp_path)
    command = [sys.executable, "-m", "reach", "describe", str(cell)]
    own = {**os.environ, "PYTHONPATH": str(TOP)}
    if target == "closed":
        near, far = os.pipe()
        os.close(near)
    else:
        far = os.open(target, os.O_WRONLY)
    done = subprocess.run(command, stdout=far, stderr=subprocess.PIPE, env=own, timeout=300, text=True)
    os.close(far)
    assert done.returncode == 4
    assert done.stderr == (f"can't go on: {words}\n" if words else "")


# Worker processes

KILL_ITSELF = """class Mine:
    def __init__(self, setup):
        pass
    def twist(self, seen):
        import os, signal
        os.kill(os.getpid(), signal.SIGKILL)
"""
WAITS = """class Mine:
    def __init__(self, setup):
        pass
    def twist(self, seen):
        import os, pathlib, time
        (pathlib.Path(__file__).parent / f"at_work.{os.getpid()}").touch()
        time.sleep(1e6)
"""
OWN_LAW = 'law = "law.py:Mine"\n'


def expect_lost(done: Done, folder: Path, before: dict[str, bytes]) -> None:
    """Exit 4, the line that says so, nothing written, no process left."""
    assert (done.code, done.out, done.err) == (4, "", LOST)
    assert contents(folder) == before and not (folder / "o").exists()
    assert multiprocessing.active_children() == []


def test_a_law_that_kills_its_worker(tmp_path: Path) -> None:
    cell = test_trial_cli.cell(tmp_path, OWN_LAW, KILL_ITSELF)
    before = contents(tmp_path)
    done = call("trial", cell, "--out", tmp_path / "o", "--allow-code", "--quiet", "--workers", "2")
    expect_lost(done, tmp_path, before)


IN_WORKERS = """import os, signal, sys
if "--multiprocessing-fork" in sys.orig_argv:
    import {module} as module
    module.{name} = {instead}
"""
KILLS_ITSELF = "lambda *_, **__: os.kill(os.getpid(), signal.SIGKILL)"


def in_workers(
    patch: pytest.MonkeyPatch, folder: Path, module: str, name: str, instead: str = KILLS_ITSELF
) -> None:
    """Let worker processes have something else in the place of a function."""
    folder.mkdir()
    text = IN_WORKERS.format(module=module, name=name, instead=instead)
    (folder / "sitecustomize.py").write_text(text, encoding="utf-8")
    patch.setenv("PYTHONPATH", os.pathsep.join([str(folder), str(TOP)]))


def test_a_worker_killed_in_a_search_for_advice(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    cell = write_case(tmp_path / "case", PEAKS_M_S["not deliverable"])
    in_workers(monkeypatch, tmp_path / "own", "reach.advice.search", "outcome")
    before = contents(tmp_path)
    done = call("follow", cell, "--out", tmp_path / "o", "--quiet", "--workers", "2")
    expect_lost(done, tmp_path, before)


def test_a_worker_killed_in_a_survey(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    cell = test_survey_cli.links(tmp_path / "case", [0.3] * 3)
    monkeypatch.setattr("reach.survey.sweep.CHUNK", 1)
    in_workers(monkeypatch, tmp_path / "own", "reach.survey.sweep", "_search")
    before = contents(tmp_path)
    done = call("survey", cell, "--out", tmp_path / "o", "--quiet", "--no-advice", "--workers", "2")
    expect_lost(done, tmp_path, before)


@pytest.mark.campaign  # its worker ends by itself in test_rally_cli
def test_a_worker_killed_in_a_rally(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    cell = test_rally_cli.written(tmp_path / "case")
    in_workers(monkeypatch, tmp_path / "own", "reach.rally.envelope", "_judge")
    before = contents(tmp_path)
    done = call("rally", cell, "--out", tmp_path / "o", "--quiet", "--no-advice", "--workers", "2")
    expect_lost(done, tmp_path, before)


HANGS = """None
    import time, qpsolvers
    import reach.qp.watch
    reach.qp.watch.TICK_S = 0.05
    qpsolvers.solve_problem = lambda *_, **__: time.sleep(1e6)"""


def test_a_solver_that_does_not_come_back_in_a_worker(
    tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    cell = write_case(tmp_path / "case", PEAKS_M_S["not deliverable"])
    in_workers(monkeypatch, tmp_path / "own", "reach", "hangs", HANGS)
    before = contents(tmp_path)
    done = call("follow", cell, "--out", tmp_path / "o", "--quiet", "--workers", "2")
    assert (done.code, done.out) == (4, "")
    assert len(done.err.splitlines()) == 1 and 'solver "daqp" did not come back within 0.05 s' in done.err
    assert contents(tmp_path) == before and not (tmp_path / "o").exists()
    assert multiprocessing.active_children() == []


def test_a_run_that_is_asked_to_end_leaves_nothing(tmp_path: Path) -> None:
    """SIGTERM while both workers are in a law that never answers."""
    cell = test_trial_cli.cell(tmp_path, OWN_LAW, WAITS)
    command = [sys.executable, "-m", "reach", "trial", str(cell), "--out", str(tmp_path / "o")]
    command += ["--allow-code", "--quiet", "--workers", "2"]
    own = {**os.environ, "PYTHONPATH": str(TOP), "PYTHONDONTWRITEBYTECODE": "1"}
    run = subprocess.Popen(command, stdout=subprocess.PIPE, stderr=subprocess.PIPE, env=own, text=True)
    assert until(lambda: len(list(tmp_path.glob("at_work.*"))) == 2)
    workers = [int(path.suffix[1:]) for path in tmp_path.glob("at_work.*")]
    assert all(alive(worker) for worker in workers)
    run.send_signal(signal.SIGTERM)
    out, err = run.communicate(timeout=60)
    assert (run.returncode, out, err) == (4, "", "stopped; nothing was written\n")
    assert until(lambda: not any(alive(worker) for worker in workers), 5.0)
    assert not (tmp_path / "o").exists() and not list(tmp_path.rglob("*.part"))


POOL = """
import sys, time
from reach.workers import worker_pool
if __name__ == "__main__":
    with worker_pool(2) as pool:
        for _ in range(2):
            pool.submit(time.sleep, 1e6)
        print(*pool._processes, flush=True)
        time.sleep(1e6)
"""


def test_workers_end_with_the_process_that_began_them(tmp_path: Path) -> None:
    (tmp_path / "pool.py").write_text(POOL, encoding="utf-8")
    own = {**os.environ, "PYTHONPATH": str(TOP)}
    run = subprocess.Popen(
        [sys.executable, str(tmp_path / "pool.py")],
        stdout=subprocess.PIPE,
        stderr=subprocess.DEVNULL,
        env=own,
        text=True,
    )
    assert run.stdout is not None
    workers = [int(word) for word in run.stdout.readline().split()]
    assert len(workers) == 2 and all(alive(worker) for worker in workers)
    run.kill()
    run.wait(60)
    run.stdout.close()
    assert until(lambda: not any(alive(worker) for worker in workers), 20.0)
