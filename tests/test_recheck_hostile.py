"""Folders that are no honest run's: recheck refuses or differs; it never fails, hangs, fills the memory or agrees."""

from __future__ import annotations

import hashlib
import io
import json
import math
import os
import random
import shutil
import subprocess
import sys
import zipfile
from collections.abc import Callable, Iterator
from copy import deepcopy
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from rally_case import court_of, points_at, write_gantry
from recheck_case import evidence_only, forged, named, redigest

import reach
from reach.cell import Cell
from reach.cli import main
from reach.errors import InputError
from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, decided
from reach.rally.answer import gathered
from reach.rally.envelope import Envelope
from reach.recheck import answer
from reach.recheck.answer import opinion
from reach.recheck.folder import read_folder
from reach.recheck.stored import Stored
from reach.report.writers import WRITERS
from reach.result import RallyResult
from reach.verdict import judge_rally

COMMANDS = ("follow", "survey", "rally", "trial")
REST = """
[control]
period_s = 0.004
[tool]
speed_m_s = 5.0
[drive]
jitter_s = 0.002
[follow]
commands = "commands.csv"
frame = "base"
point = "tip"
[survey]
strikes = "strikes.csv"
required_share = 0.3
[rally]
centre_m = [0.0, 0.0, 0.5]
apexes_m = [0.2]
offsets_m = [0.0, 0.3]
bearings_deg = [20]
required_share = 0.5
[trial]
law = "planning"
apex_m = 0.2
bounces = 3
recovered = { within_m = 0.03, by_bounce = 1, then_for = 2 }
starts = { offsets_m = [0.0, 0.6], bearings_deg = [0] }
"""
SLOW = {"z": {"velocity": 0.6}, "x": {"velocity": 0.5}}  # one point of the rally is refused by time
STRIKES = "x_m,y_m,z_m,nx,ny,nz,paddle_speed_m_s\n0,0,0.5,0,0,1,0.3\n0,0.1,0.5,0,0.1,1,0.9\n5,0,5,0,0,1,1\n"
GONE = object()
DEEP = 50  # levels: a file may have as many
VALUES = (
    *(GONE, None, "x", "", "\ud800\x1b[31m", [], [1], ["a", "b"], {}, {"a": {"b": [1]}}, True, False),
    *(-1, 0, 1, 3, 0.5, 1e9, 1e308, -1e308, 10**400, 1e-320, math.nan, math.inf),
)


def log() -> str:
    """A bump of speed, 0.12 s at 125 Hz, marked at its top."""
    head = "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s,strike\n"
    rows = (
        f"{0.008 * k:.3f},0,0,{0.2 * math.sin(math.pi * k / 15) ** 2:.6f},0,0.01,0,{int(k == 8)}\n"
        for k in range(16)
    )
    return head + "".join(rows)


def sized(cell: Cell) -> RallyResult:
    """The points of a cell's rally, without edges and errors, which take longer and are not decided anew."""
    n, points = len(cell.arm.joints), points_at(court_of(cell))
    nothing = (np.nan, np.full(n, np.nan), np.full(n, np.nan))
    evidence = gathered(cell, Envelope(points, (), (), (), (), None, nothing, True, False))
    assert cell.rally is not None
    verdict = judge_rally(evidence, cell.rally.required_share, cell.accept)
    return RallyResult(
        cell=cell,
        verdict=verdict,
        without_margins=verdict.verdict,
        reasons=(),
        needs=(),
        remedies=(),
        headroom_share=None,
        headroom_text="",
        notes=(),
        evidence=evidence,
    )


@pytest.fixture(scope="module")
def runs(tmp_path_factory) -> Path:
    """A folder with one cell, its inputs, and the results of every command."""
    top = tmp_path_factory.mktemp("runs")
    path = write_gantry(top, SLOW, REST)
    (top / "commands.csv").write_text(log(), "utf-8")
    (top / "strikes.csv").write_text(STRIKES, "utf-8")
    cell = reach.load_cell(path)
    evidence_only(reach.follow_commands(cell, advice=False), top / "follow")
    evidence_only(reach.survey_strikes(cell, advice=False), top / "survey")
    evidence_only(sized(cell), top / "rally")
    evidence_only(reach.try_law(cell, advice=False), top / "trial")
    return top


@pytest.mark.parametrize("command", COMMANDS)
def test_what_is_changed_below_was_right(runs, command):
    assert {item.status for item in opinion(runs / command).items} == {AGREE}


# Every key and every array


def places(value: Any, before: tuple[Any, ...] = ()) -> Iterator[tuple[Any, ...]]:
    """Every place in a JSON value, of lists the first and the last entry."""
    inside: list[Any] = []
    if isinstance(value, dict):
        inside = list(value)
    elif isinstance(value, list) and value:
        inside = sorted({0, len(value) - 1})
    for key in inside:
        yield (*before, key)
        yield from places(value[key], (*before, key))


def changed(top: Any, place: tuple[Any, ...], value: Any) -> Any:
    """A copy with one value replaced or removed."""
    copy = deepcopy(top)
    inside = copy
    for key in place[:-1]:
        inside = inside[key]
    if value is GONE:
        del inside[place[-1]]
    else:
        inside[place[-1]] = value
    return copy


def arrays_of(array: np.ndarray, pick: random.Random) -> Iterator[np.ndarray | None]:
    """What may stand in an array's place, None where nothing does."""
    one = array.copy(order="C")
    yield None
    yield from (
        array[None],
        array.reshape(-1)[:0],
        np.array(1.0),
        np.zeros_like(array),
        ~np.isin(array, array),
    )
    yield from (np.full(array.shape, fill) for fill in ("a", True, 7, 2**62, b"x", 1j, np.datetime64("2020")))
    yield from (np.full(array.shape, word) for word in ("deliverable", "proved", "reach", "\ud800", "held"))
    yield from (np.concatenate([array, array]), array[:-1]) if array.ndim else ()
    if array.dtype.kind == "f":
        yield from (
            np.full(array.shape, size) for size in (math.nan, math.inf, 1e308, -1e200, 1e9, -1.0, 1e-320)
        )
        for size in (math.nan, -math.inf, 1e308, 1e9, -1.0):
            if one.size:
                one.reshape(-1)[pick.randrange(one.size)] = size
            yield one.copy()


def word_of(stored: Stored, monkeypatch) -> str:
    """What recheck says of what was read, every output written; an InputError is a refusal."""
    monkeypatch.setattr(answer, "read_folder", lambda folder: stored)
    try:
        result = reach.recheck_results("folder")
    except InputError as error:
        assert all(fault.file and fault.where and fault.what for fault in error.faults)
        assert str(error).replace("\n", "").isprintable() and len(str(error)) < 2000
        return "refused"
    for output in ("text", "json", "csv", "junit"):
        WRITERS["recheck"][output](result)
    return result.verdict.verdict


@pytest.mark.parametrize("command", COMMANDS)
@pytest.mark.parametrize("file", ["cell", "verdict"])
def test_no_value_of_a_key_makes_it_stumble(runs, command, file, monkeypatch):
    """Numbers that Python's JSON would give, too: the reader refuses them, and so does what reads them."""
    monkeypatch.setitem(
        sys.modules, "mujoco", None
    )  # each build of the engine takes longer than all the rest
    stored, pick = read_folder(str(runs / command)), random.Random(f"{command} {file}")
    whole = getattr(stored, file)
    if file == "cell":
        whole = {**whole, "inputs": []}  # no input is left to contradict the change
    every = list(places(whole))
    words = []
    for place in pick.sample(every, min(len(every), 36 if file == "cell" else 5)):
        content = changed(whole, place, pick.choice(VALUES))
        words.append(word_of(replace(stored, **{file: content}), monkeypatch))
    assert set(words) <= {"refused", DIFFER, NOT_CHECKABLE}
    assert "refused" in words or file == "verdict"


@pytest.mark.parametrize("command", COMMANDS)
def test_no_array_makes_it_stumble(runs, command, monkeypatch):
    monkeypatch.setitem(sys.modules, "mujoco", None)
    stored, pick = read_folder(str(runs / command)), random.Random(command)
    every = [(file, name) for file, arrays in stored.arrays.items() for name in arrays]
    words = []
    for _ in range(20):
        file, name = pick.choice(every)
        instead = pick.choice(list(arrays_of(stored.arrays[file][name], pick)))
        arrays = {key: dict(content) for key, content in stored.arrays.items()}
        if instead is None:
            del arrays[file][name]
        else:
            arrays[file][name] = instead
        words.append(word_of(replace(stored, arrays=arrays), monkeypatch))
    assert {"refused", DIFFER} <= set(words) <= {"refused", DIFFER, NOT_CHECKABLE}


# What decides, changed so that it contradicts the inputs


def put(*keys: Any, of: str = "cell") -> Callable[[Any, Any, Any], None]:
    """Put a value (the last key) at a place of cell.json or verdict.json."""

    def change(arrays: Any, cell: Any, verdict: Any) -> None:
        inside = {"cell": cell, "verdict": verdict}[of]
        for key in keys[:-2]:
            inside = inside[key]
        inside[keys[-2]] = keys[-1]

    return change


def lighter(arrays: Any, cell: Any, verdict: Any) -> None:
    """Another robot in cell.json, and the user's own no longer named."""
    cell["arm"]["model_xml"] = cell["arm"]["model_xml"].replace('<mass value="', '<mass value="0')
    cell["arm"]["urdf_path"] = "elsewhere.urdf"


@pytest.mark.parametrize(
    ("command", "change", "check"),
    [
        pytest.param("follow", lighter, "URDF", id="another robot"),
        pytest.param("follow", put("follow", "source", "strikes.csv"), "log", id="another log"),
        pytest.param("follow", put("drive", None), "drives given", id="no jitter of the drives"),
        pytest.param("follow", put("drive", "jitter_s", 0.0), "drive jitter_s", id="less jitter"),
        pytest.param("rally", put("ball", "radius_m", 0.0201), "ball radius_m", id="another ball"),
        pytest.param("trial", put("ball", "mass_kg", 0.0028), "ball mass_kg", id="a heavier ball"),
    ],
)
def test_what_the_inputs_contradict_differs(runs, tmp_path, command, change, check):
    found = opinion(forged(runs / command, tmp_path / "forged", change)).items
    assert check in {name for kind, _, name in named(list(found)) if kind == "as stated"}


def test_a_preset_ball_is_the_one_of_its_rules(tmp_path):
    """A cell that names a ball's kind alone states its mass and radius all the same."""
    path = write_gantry(tmp_path, SLOW, REST)
    text = path.read_text("utf-8").replace("mass_kg = 0.0027\nradius_m = 0.02\n", 'preset = "tennis"\n')
    path.write_text(text, "utf-8")
    (tmp_path / "commands.csv").write_text(log(), "utf-8")
    (tmp_path / "strikes.csv").write_text(STRIKES, "utf-8")
    folder = evidence_only(reach.try_law(reach.load_cell(path), advice=False), tmp_path / "out")
    assert decided(opinion(folder).items) == AGREE
    other = forged(folder, tmp_path / "other", put("ball", "radius_m", 0.0336))
    assert ("as stated", "cell", "ball radius_m") in named(list(opinion(other).items))


def test_a_missing_motion_is_no_reason_to_agree(runs, tmp_path):
    """The run says "not deliverable", which "no motion" would be too; but nothing says that there was none."""
    folder = without(shutil.copytree(runs / "follow", tmp_path / "out"), "evidence/motion.npz")
    with pytest.raises(
        InputError, match=r"motion.npz: is missing, and cell.json has nothing that stood against"
    ):
        opinion(folder)


@pytest.mark.parametrize("file", ["motions.npz", "proofs.npz", "points.npz"])
def test_missing_evidence_of_a_rally_is_no_reason_to_agree(runs, tmp_path, file):
    folder = without(shutil.copytree(runs / "rally", tmp_path / "out"), f"evidence/{file}")
    try:
        assert decided(opinion(folder).items) == DIFFER
    except InputError as error:
        assert "points.npz" in str(error)


def without(folder: Path, name: str) -> Path:
    """A folder without a file, on its list and on the disk."""
    place = folder / "evidence" / "digests.json"
    content = json.loads(place.read_text("utf-8"))
    content["files"] = [entry for entry in content["files"] if entry["path"] != name]
    place.write_text(json.dumps(content), "utf-8")
    (folder / name).unlink()
    return folder


def guessed(folder: Path) -> Path:
    """A log without marks followed, its two strikes guessed and accepted."""
    rows = [line.rsplit(",", 1)[0] for line in log().splitlines()]
    rows += [f"{0.128 + float(line.split(',', 1)[0]):.3f},{line.split(',', 1)[1]}" for line in rows[1:]]
    path = write_gantry(folder, None, REST.replace('point = "tip"', 'point = "tip"\nstrikes = "guessed-ok"'))
    text = path.read_text("utf-8") + "[accept]\nstrikes_share = 0.5\n"
    path.write_text(text.replace("jitter_s = 0.002", "jitter_s = 0.0"), "utf-8")
    (folder / "commands.csv").write_text("\n".join(rows) + "\n", "utf-8")
    (folder / "strikes.csv").write_text(STRIKES, "utf-8")
    cell = reach.load_cell(path)
    cell = replace(cell, follow=replace(cell.follow, strike_min_gap_s=0.05))
    return evidence_only(reach.follow_commands(cell, advice=False), folder / "out")


def test_strikes_that_were_guessed_are_counted_again(tmp_path):
    folder = guessed(tmp_path)
    found = opinion(folder)
    named_so = {(item.kind, item.where, check.name) for item in found.items for check in item.checks}
    assert ("strike", "peaks", "number") in named_so
    differ = named(list(found.items))
    assert {name for _, _, name in differ} <= {"follow strike_min_gap_s"}, (
        "which the cell's file has otherwise"
    )
    less = forged(folder, tmp_path / "less", lambda arrays, cell, verdict: verdict["strikes"].pop())
    assert ("strike", "peaks", "number") in named(list(opinion(less).items))


# The files themselves


def listed(entries: list[Any], more: bool = True) -> Callable[[Path], None]:
    """Put entries on the list of digests, beside or instead of those there."""

    def change(folder: Path) -> None:
        place = folder / "evidence" / "digests.json"
        content = json.loads(place.read_text("utf-8"))
        content["files"] = [*content["files"], *entries] if more else entries
        place.write_text(json.dumps(content), "utf-8")

    return change


def entry(path: str, content: bytes = b"") -> dict[str, Any]:
    return {"path": path, "sha256": hashlib.sha256(content).hexdigest()}


def linked(target: str) -> Callable[[Path], None]:
    """A listed name that is a link to something else."""

    def change(folder: Path) -> None:
        (folder / "x.csv").symlink_to(target)
        listed([entry("x.csv")])(folder)

    return change


def pipe(folder: Path) -> None:
    os.mkfifo(folder / "x.csv")
    listed([entry("x.csv")])(folder)


def directory(folder: Path) -> None:
    (folder / "x.csv").mkdir()
    listed([entry("x.csv")])(folder)


def text(name: str, content: str | bytes) -> Callable[[Path], None]:
    """A file of other content, its digest right."""

    def change(folder: Path) -> None:
        (folder / name).write_bytes(content.encode() if isinstance(content, str) else content)
        if name != "evidence/digests.json":
            redigest(folder)

    return change


def cell_text(change: Callable[[str], str]) -> Callable[[Path], None]:
    """cell.json rewritten as text."""
    return lambda folder: text(
        "evidence/cell.json", change((folder / "evidence/cell.json").read_text("utf-8"))
    )(folder)


def packed(change: Callable[[dict[str, bytes]], None], **how: Any) -> Callable[[Path], None]:
    """motion.npz packed again, its members changed."""

    def rewrite(folder: Path) -> None:
        path = folder / "evidence" / "motion.npz"
        with zipfile.ZipFile(path) as old:
            members = {name: old.read(name) for name in old.namelist()}
        change(members)
        with zipfile.ZipFile(path, "w", **how) as new:
            for name, content in members.items():
                new.writestr(name, content)
        redigest(folder)

    return rewrite


def npy(array: Any) -> bytes:
    out = io.BytesIO()
    np.save(out, array, allow_pickle=True)
    return out.getvalue()


def header(shape: str, descr: str = "'<f8'", body: bytes = b"") -> bytes:
    """The beginning of an array that claims a shape."""
    told = f"{{'descr': {descr}, 'fortran_order': False, 'shape': {shape}, }}".ljust(117) + "\n"
    return b"\x93NUMPY\x01\x00" + len(told).to_bytes(2, "little") + told.encode() + body


def declared(folder: Path) -> None:
    """An archive whose directory declares 8 EB in a member."""
    path = folder / "evidence" / "motion.npz"
    content = bytearray(path.read_bytes())
    at = content.rindex(b"PK\x01\x02")
    content[at + 24 : at + 28] = (0xFFFFFFFE).to_bytes(4, "little")
    path.write_bytes(content)
    redigest(folder)


def flagged(folder: Path) -> None:
    """A member that is said to be encrypted."""
    path = folder / "evidence" / "motion.npz"
    content = bytearray(path.read_bytes())
    at = content.rindex(b"PK\x01\x02")
    content[at + 8] |= 1
    path.write_bytes(content)
    redigest(folder)


def twice(folder: Path) -> None:
    """A member that is there twice."""
    path = folder / "evidence" / "motion.npz"
    with zipfile.ZipFile(path) as old:
        content = old.read("q.npy")
    with pytest.warns(UserWarning, match="Duplicate name"), zipfile.ZipFile(path, "a") as new:
        new.writestr("q.npy", content)
    redigest(folder)


def flipped(folder: Path) -> None:
    """Bytes of packed data turned over."""
    path = folder / "evidence" / "motion.npz"
    content = bytearray(path.read_bytes())
    for at in range(200, 400):
        content[at] ^= 0xFF
    path.write_bytes(content)
    redigest(folder)


def torn(folder: Path) -> None:
    path = folder / "evidence" / "motion.npz"
    path.write_bytes(path.read_bytes()[:900])
    redigest(folder)


def set_member(name: str, content: bytes) -> Callable[[Path], None]:
    return packed(lambda members: members.update({name: content}))


DIGESTS, CELL = "evidence/digests.json", "evidence/cell.json"
NEST = '{"a": ' * 5000 + "1" + "}" * 5000
FILES: dict[str, tuple[Callable[[Path], None], str]] = {
    "a file above": (listed([entry("../../etc/passwd")]), "which lies elsewhere"),
    "a file above evidence": (listed([entry("evidence/../verdict.json")]), "which lies elsewhere"),
    "an absolute file": (listed([entry("/etc/passwd")]), "which lies elsewhere"),
    "a name of two lines": (listed([entry("x\ny")]), "which lies elsewhere"),
    "a name that is none": (listed([{"path": 7, "sha256": None}]), "without path and sha256"),
    "an entry that is none": (listed(["x"]), "without path and sha256"),
    "a link outside": (linked("/etc/passwd"), "x.csv: file: changed since"),
    "an endless file": (linked("/dev/zero"), "x.csv: file: is not a regular file"),
    "a pipe": (pipe, "x.csv: file: is not a regular file"),
    "a directory": (directory, "x.csv: file: is a directory"),
    "a file that is not there": (listed([entry("x.csv")]), "x.csv: file: is not there, and was"),
    "a name twice": (listed([entry(CELL)]), "twice"),
    "no cell.json": (listed([entry("verdict.json")], False), f"does not list {CELL}"),
    "no list": (text(DIGESTS, '{"schema": "strikecheck/digests/1", "files": 3}'), "digests.json: schema"),
    "ten thousand files": (listed([entry(f"{k}.csv") for k in range(10_000)]), "digests.json: schema"),
    "digests that are no JSON": (text(DIGESTS, "\x00"), "is no JSON"),
    "digests of a list": (text(DIGESTS, "[]"), "is no JSON object"),
    "digests of Latin-1": (text(DIGESTS, b'{"schema": "\xe9"}'), "is no JSON"),
    "another schema": (cell_text(lambda content: content.replace("evidence/1", "evidence/2", 1)), "schema"),
    "a deep cell": (cell_text(lambda content: '{"x": ' + NEST + "," + content[1:]), "cell.json: file"),
    "a nest of lists": (
        cell_text(lambda content: '{"x": ' + "[" * 70 + "]" * 70 + "," + content[1:]),
        "nests",
    ),
    "a number without end": (
        cell_text(lambda content: '{"x": ' + "9" * 5000 + "," + content[1:]),
        "is no JSON",
    ),
    "not a number": (cell_text(lambda content: '{"x": NaN,' + content[1:]), "NaN is no finite number"),
    "infinity": (
        cell_text(lambda content: '{"x": -Infinity,' + content[1:]),
        "-Infinity is no finite number",
    ),
    "too large a number": (
        cell_text(lambda content: '{"x": 1e999,' + content[1:]),
        "1e999 is no finite number",
    ),
    "a torn archive": (
        lambda folder: text("evidence/motion.npz", (folder / "evidence/motion.npz").read_bytes()[:900])(
            folder
        ),
        "is no archive",
    ),
    "an empty archive": (text("evidence/motion.npz", b""), "is no archive"),
    "turned bytes": (flipped, "is no archive"),
    "a pickle": (
        set_member("q.npy", npy(np.array([{1: 2}], dtype=object))),
        "does not begin as an array does",
    ),
    "a torn array": (set_member("q.npy", b"\x93NUMPY\x01\x00"), "is no archive"),
    "an array of later versions": (
        set_member("q.npy", b"\x93NUMPY\x09\x00" + npy(np.zeros(3))[8:]),
        "does not begin",
    ),
    "a petabyte": (set_member("q.npy", header("(125000000000000,)")), "does not hold what it declares"),
    "a negative side": (set_member("q.npy", header("(-1, -1)", body=bytes(8))), "does not begin"),
    "a header that runs": (
        set_member("q.npy", header("(1,)", "__import__('os')", bytes(8))),
        "is no archive",
    ),
    "sides without end": (
        set_member("q.npy", header("(99999999999, 0, 99999999999)")),
        "is no archive|has shape",
    ),
    "eight exabytes": (declared, "is no archive|unpacks to more"),
    "an encrypted member": (flagged, "is no array that a run writes"),
    "another packing": (packed(lambda members: None, compression=zipfile.ZIP_BZIP2), "is no array that"),
    "a member that is no array": (set_member("notes.txt", b"x"), "is no array that a run writes"),
    "a member twice": (twice, "has a name twice"),
    "a member elsewhere": (set_member("../../x.npy", b"x"), "is no archive"),
}


@pytest.mark.parametrize("name", FILES)
def test_files_that_no_run_writes_are_refused(runs, tmp_path, name):
    change, told = FILES[name]
    folder = shutil.copytree(runs / "follow", tmp_path / "out")
    change(folder)
    with pytest.raises(InputError, match=told) as caught:
        opinion(folder)
    assert all(str(fault).isprintable() for fault in caught.value.faults)


def test_a_file_that_is_not_listed_is_not_read(runs, tmp_path):
    folder = shutil.copytree(runs / "follow", tmp_path / "out")
    (folder / "evidence" / "points.npz").write_bytes(b"no archive")
    assert decided(opinion(folder).items) == AGREE


def gone(name: str) -> Callable[[Path], None]:
    """A file or folder deleted."""

    def change(folder: Path) -> None:
        path = folder / name
        shutil.rmtree(path) if path.is_dir() else path.unlink()

    return change


MISSING: dict[str, tuple[Callable[[Path], None], str]] = {
    "evidence": (gone("evidence"), r"evidence/digests.json: is not there: evidence/ belongs to the results"),
    "an archive": (gone("evidence/log.npz"), r"evidence/log.npz: file: is not there, and was when"),
    "the verdict": (gone("verdict.json"), r"verdict.json: is not there: the run did not end"),
}


@pytest.mark.parametrize("name", MISSING)
def test_what_is_missing_is_told(runs, tmp_path, name):
    change, told = MISSING[name]
    folder = shutil.copytree(runs / "follow", tmp_path / "out")
    change(folder)
    with pytest.raises(InputError, match=told):
        opinion(folder)


def test_the_command_line_tells_a_difference_and_what_is_a_second_opinion(runs, tmp_path, capsys):
    """Exit code 1 for a difference in words and numbers; 2 for a folder that recheck wrote."""

    def change(arrays: Any, cell: Any, verdict: Any) -> None:
        verdict["verdict"] = cell["verdict"] = "deliverable"

    folder, out = forged(runs / "follow", tmp_path / "forged", change), str(tmp_path / "again")
    assert main(["recheck", str(folder), "--out", out]) == 1
    shown = " ".join(capsys.readouterr().out.split())
    assert shown.startswith("differ: follow says deliverable; 24 of 25 items agree, 1 differ")
    assert "not deliverable here, deliverable in verdict.json" in shown
    assert main(["recheck", out, "--out", str(tmp_path / "third"), "--quiet"]) == 2
    assert "is a second opinion's; name the folder that the command itself wrote" in capsys.readouterr().err


def test_inputs_that_are_elsewhere_are_told_once(runs, tmp_path):
    """As when recheck is run in another folder than the command was."""

    def change(arrays: Any, cell: Any, verdict: Any) -> None:
        for one in cell["inputs"]:
            one["path"] = one["path"].replace(str(runs), "elsewhere")
        cell["arm"]["urdf_path"], cell["follow"]["source"] = "elsewhere/gantry.urdf", "elsewhere/commands.csv"

    found = opinion(forged(runs / "follow", tmp_path / "out", change)).items
    assert decided(found) == NOT_CHECKABLE
    told = {item.left_out for item in found if item.left_out}
    (where,) = (text for text in told if "run recheck in the folder in which the command was run" in text)
    assert where.count("elsewhere/") == 5 and told == {where, "the log's file is not there"}


# Inputs that cell.json names, and robots


@pytest.mark.parametrize("kind", ["zero", "pipe", "directory", "sparse", "absent"])
def test_inputs_that_are_no_files_are_left_out(runs, tmp_path, kind):
    """Neither waited for nor read to their end; without them not all could be checked."""
    path = tmp_path / "log.csv"
    if kind == "pipe":
        os.mkfifo(path)
    elif kind == "directory":
        path.mkdir()
    elif kind == "sparse":
        with open(path, "wb") as stream:
            stream.truncate(10_000_000_000)
    named_so = "/dev/zero" if kind == "zero" else str(path)

    def change(arrays: Any, cell: Any, verdict: Any) -> None:
        found = next(one for one in cell["inputs"] if one["path"].endswith("commands.csv"))
        found["path"] = cell["follow"]["source"] = named_so

    words = {item.status for item in opinion(forged(runs / "follow", tmp_path / "out", change)).items}
    assert words == {AGREE, DIFFER, NOT_CHECKABLE}, "the cell's own file names another log"


def inputs(change: Callable[[list[dict[str, str]]], Any]) -> Callable[[Any, Any, Any], None]:
    return lambda arrays, cell, verdict: cell.update(inputs=change(cell["inputs"]))


@pytest.mark.parametrize(
    "change",
    [
        pytest.param(lambda given: given * 2, id="twice"),
        pytest.param(lambda given: given + [{"path": f"{k}", "sha256": ""} for k in range(50)], id="many"),
        pytest.param(lambda given: "x", id="a word"),
        pytest.param(lambda given: [{"path": {}, "sha256": []}], id="tables"),
        pytest.param(lambda given: [{**given[0], "sha256": "0"}, *given[1:]], id="another digest"),
    ],
)
def test_a_list_of_inputs_that_is_none_is_refused(runs, tmp_path, change):
    folder = forged(runs / "follow", tmp_path / "out", inputs(change))
    with pytest.raises(InputError):
        opinion(folder)


def test_a_log_that_is_no_table_is_told(runs, tmp_path):
    """One field longer than a CSV reader takes."""
    path = tmp_path / "log.csv"
    path.write_text('"' + "x" * 200_000 + '"\n', "utf-8")

    def change(arrays: Any, cell: Any, verdict: Any) -> None:
        cell["inputs"].append({"path": str(path), "sha256": hashlib.sha256(path.read_bytes()).hexdigest()})
        cell["follow"]["source"] = str(path)

    found = opinion(forged(runs / "follow", tmp_path / "out", change)).items
    assert any("is not plain rows of numbers" in item.left_out for item in found)


def of_joints(count: int) -> str:
    """A robot of so many joints in a row."""
    links = "".join(f'<link name="l{k}"/>' for k in range(count)) + '<link name="tip"/>'
    joints = "".join(
        f'<joint name="chain_{k}" type="revolute"><parent link="l{k}"/>'
        f'<child link="{f"l{k + 1}" if k + 1 < count else "tip"}"/></joint>'
        for k in range(count)
    )
    return f'<robot name="r">{links}{joints}</robot>'


LAUGHS = "".join(f'<!ENTITY x{k} "{f"&x{k - 1};" * 10}">' for k in range(1, 10))
CIRCLE = (
    of_joints(3)
    .replace('<child link="tip"/>', '<child link="l0"/>')
    .replace('<link name="l0"/>', '<link name="l0"/>', 1)
)
ROBOTS = {
    "a bomb": f'<!DOCTYPE r [<!ENTITY x0 "x">{LAUGHS}]><robot name="&x9;"/>',
    "a file from elsewhere": '<!DOCTYPE r [<!ENTITY x SYSTEM "file:///etc/passwd">]><robot name="&x;"/>',
    "no XML": "\ud800",
    "no robot": "<r/>",
    "a deep one": "<robot>" + "<link>" * 50_000 + "</link>" * 50_000 + "</robot>",
    "thousands of joints": of_joints(2000),
    "too many elements": of_joints(9000),
    "a circle": CIRCLE,
    "an axis of nothing": of_joints(5).replace("<child", '<axis xyz="0 0 0"/><child'),
    "an axis that is none": of_joints(5).replace("<child", '<axis xyz="nan 1e999 x"/><child'),
}


@pytest.mark.parametrize("name", ROBOTS)
def test_robots_that_are_none_are_refused(runs, tmp_path, name):
    def change(arrays: Any, cell: Any, verdict: Any) -> None:
        cell["arm"]["model_xml"], cell["inputs"] = ROBOTS[name], []

    folder = forged(runs / "survey", tmp_path / "out", change)
    with pytest.raises(InputError):
        opinion(folder)


# Time and memory, in a process of its own

CHILD = """
import resource, sys
resource.setrlimit(resource.RLIMIT_AS, ({bytes}, {bytes}))
resource.setrlimit(resource.RLIMIT_CPU, ({seconds}, {seconds}))
import warnings
from reach.cell import Cell
from reach.cli import main
from reach.errors import InputError
from reach.evidence.items import decided
from reach.recheck.answer import opinion
for folder in sys.argv[1:]:
    try:
        print(decided(opinion(folder).items), flush=True)
    except InputError:
        print("refused", flush=True)
"""
MOST_BYTES, MOST_S = 2_500_000_000, 60


def bomb(folder: Path) -> None:
    """An archive of 3 kB that says in all its places that 3 GB are in it."""
    path = folder / "evidence" / "motion.npz"
    with (
        zipfile.ZipFile(path, "w", zipfile.ZIP_DEFLATED) as new,
        new.open("q.npy", "w", force_zip64=True) as file,
    ):
        file.write(header("(3000, 125000)", body=bytes(2_999_872)))
    small, large = (3_000_000).to_bytes(4, "little"), (3_000_000_128).to_bytes(4, "little")
    assert path.read_bytes().count(small) == 2
    path.write_bytes(path.read_bytes().replace(small, large))
    redigest(folder)


def sparse(folder: Path) -> None:
    """Many listed files of 1.5 GB that take no room on the disk."""
    with open(folder / "verdict.json", "r+b") as stream:
        stream.truncate(1_500_000_000)


def endless_log(folder: Path) -> None:
    """A log of 30 years."""
    change_arrays(folder, "log.npz", lambda arrays: arrays["t_s"].__setitem__(-1, 1e9))


def long_window(folder: Path) -> None:
    """Strikes judged over a year."""
    change_cell(folder, lambda cell: cell["accept"].update(strike_window_s=3e7))


def long_stroke(folder: Path) -> None:
    """A swing of an hour."""
    change_arrays(folder, "points.npz", lambda arrays: arrays["profile_duration_s"].__setitem__(0, 3600.0))


def fine_grid(folder: Path) -> None:
    """A box with more points than there are atoms."""
    box = {"listed": None, "box_m": [[0, 0, 0], [1e9, 1e9, 1e9]], "spacing_m": 1e-300}
    change_cell(folder, lambda cell: cell["survey"].update(box))


def long_exchange(folder: Path) -> None:
    """Knots a year apart."""
    change_arrays(folder, "motions.npz", lambda arrays: arrays["t_s_0"].__imul__(1e7))


def many_starts(folder: Path) -> None:
    """A grid of 1e12 starts."""
    many = dict.fromkeys(("offsets_m", "bearings_rad", "lateral_m_s"), [0.0] * 10_000)
    change_cell(folder, lambda cell: cell["trial"]["starts"].update(many))


def change_cell(folder: Path, change: Callable[[Any], Any]) -> None:
    place = folder / "evidence" / "cell.json"
    content = json.loads(place.read_text("utf-8"))
    change(content)
    place.write_text(json.dumps(content), "utf-8")
    redigest(folder)


def change_arrays(folder: Path, file: str, change: Callable[[dict[str, np.ndarray]], Any]) -> None:
    place = folder / "evidence" / file
    arrays = dict(np.load(place))
    change(arrays)
    np.savez(place, **arrays)
    redigest(folder)


LARGE: dict[str, tuple[str, Callable[[Path], None]]] = {
    "bomb": ("follow", bomb),
    "sparse": ("follow", sparse),
    "endless log": ("follow", endless_log),
    "long window": ("follow", long_window),
    "long stroke": ("survey", long_stroke),
    "fine grid": ("survey", fine_grid),
    "many starts": ("trial", many_starts),
    "long exchange": ("rally", long_exchange),
}


@pytest.mark.skipif(sys.platform != "linux", reason="limits of a process")
def test_nothing_takes_more_time_or_memory_than_there_is(runs, tmp_path):
    folders = []
    for name, (command, change) in LARGE.items():
        folders.append(str(shutil.copytree(runs / command, tmp_path / name)))
        change(tmp_path / name)
    code = CHILD.format(bytes=MOST_BYTES, seconds=MOST_S)
    done = subprocess.run(
        [sys.executable, "-c", code, *folders],
        capture_output=True,
        text=True,
        timeout=3 * MOST_S,
        check=False,
    )
    assert "Traceback" not in done.stderr and "Warning" not in done.stderr, done.stderr
    assert done.stdout.splitlines() == ["refused"] * len(LARGE)
