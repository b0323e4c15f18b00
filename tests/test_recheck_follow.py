"""The second opinion on a followed log: it agrees with an honest run, and sees every single forgery."""

from __future__ import annotations

import ast
import subprocess
import sys
from pathlib import Path
from typing import Any

import numpy as np
import pytest
from builders import ROBOTS
from recheck_case import differing, evidence_only, forged, named, redigest

import reach
from reach.cli import main
from reach.errors import InputError
from reach.evidence.items import AGREE, NOT_CHECKABLE
from reach.recheck.answer import opinion

CELL = f"""
[arm]
urdf = '{ROBOTS}/bench7/bench7.urdf'
limits = 'arm.limits.toml'
tip = "flange"
base = {{ rpy_deg = [5.0, -10.0, 30.0] }}
start_deg = {{ j1 = 0.0, j2 = -31.8, j3 = 0.0, j4 = 95.4, j5 = 0.0, j6 = 127.2, j7 = 0.0 }}
[paddle]
mount = {{ xyz_m = [0.0, 0.01, 0.12], rpy_deg = [3.0, 0.0, 10.0] }}
shape = "plate"
size_m = [0.15, 0.16]
thickness_m = 0.01
mass_kg = 0.25
[control]
period_s = 0.002
[tool]
speed_m_s = 1.7
[drive]
delay_s = 0.002
jitter_s = 0.0005
[follow]
commands = "commands.csv"
frame = "FRAME"
point = "POINT"
interpolation = "READ"
"""
HEAD = "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s,strike\n"


def log(peak_m_s: float = 0.5) -> str:
    """Two bumps of speed along one axis with some turning, 0.5 s at 250 Hz, marked at their tops."""
    t = 0.004 * np.arange(126)
    up = peak_m_s * np.sin(2 * np.pi * t / 0.5)
    turn = 0.3 * np.sin(np.pi * t / 0.5) ** 2
    marks = np.isin(np.arange(126), [31, 94])
    rows = [
        f"{a:.3f},0.02,0,{b:.9f},{c:.9f},0,{c / 2:.9f},{int(m)}"
        for a, b, c, m in zip(t, up, turn, marks, strict=True)
    ]
    return HEAD + "\n".join(rows) + "\n"


LIMITS = (ROBOTS / "bench7" / "bench7.limits.toml").read_text("utf-8")


def ran(
    folder: Path,
    frame: str = "world",
    point: str = "strike",
    read: str = "hold",
    peak: float = 0.5,
    limits: str = LIMITS,
) -> Path:
    """A log followed and written, in a folder of its own."""
    (folder / "arm.limits.toml").write_text(limits, "utf-8")
    text = CELL.replace("FRAME", frame).replace("READ", read)
    text = text.replace('"POINT"', point if point.startswith("[") else f'"{point}"')
    (folder / "cell.toml").write_text(text, "utf-8")
    (folder / "commands.csv").write_text(log(peak), "utf-8")
    result = reach.follow_commands(reach.load_cell(folder / "cell.toml"), advice=False)
    return evidence_only(result, folder / "out")


@pytest.fixture(scope="module")
def honest(tmp_path_factory) -> Path:
    return ran(tmp_path_factory.mktemp("honest"), "base", "[0.01, 0.02, -0.05]", "linear")


def test_an_honest_run_agrees_item_by_item(honest):
    found = opinion(honest)
    assert {item.status for item in found.items} == {AGREE}
    kinds = [item.kind for item in found.items]
    assert kinds.count("limits") == 8 and kinds.count("torque") == 7 and kinds.count("strike") == 3
    assert {"as stated", "command", "motion", "verdict"} <= set(kinds)
    # The checks look at something: two programs never agree to the last digit in every torque.
    rows = [c.difference for i in found.items if i.kind == "torque" for c in i.checks if "row" in c.name]
    assert 0 < max(rows) < 1e-6


@pytest.mark.parametrize(
    ("frame", "point", "read"), [("world", "tip", "hold"), ("paddle", "strike", "linear")]
)
def test_every_reading_of_the_twists_is_integrated_alike(tmp_path, frame, point, read):
    found = opinion(ran(tmp_path, frame, point, read, peak=1.2))
    assert {item.status for item in found.items} == {AGREE}
    assert found.verdict == "not deliverable"  # both say so


def added(file: str, name: str, place: Any, by: float):
    """Add to one number of an archive."""

    def change(arrays, cell, verdict):
        arrays[file][name][place] += by

    return change


def put(*keys: Any):
    """Put a value (the last key) at a place of cell.json."""

    def change(arrays, cell, verdict):
        inside = cell
        for key in keys[:-2]:
            inside = inside[key]
        inside[keys[-2]] = keys[-1]

    return change


def claimed(*keys: Any):
    """Put a value (the last key) at a place of verdict.json."""

    def change(arrays, cell, verdict):
        put(*keys)(arrays, verdict, cell)

    return change


def scaled(name: str, factor: float):
    """Scale an array of the motion."""

    def change(arrays, cell, verdict):
        arrays["motion.npz"][name] = arrays["motion.npz"][name] * factor

    return change


def limit_of(joint: int, kind: str, size: float):
    """State another limit in cell.json."""
    return put("arm", "joints", joint, "limits", kind, {"lo": -size, "hi": size, "source": "forged"})


M = "motion.npz"
WHOLE = "joints and strike point"


@pytest.mark.parametrize(
    ("change", "kind", "where", "check"),
    [
        pytest.param(added(M, "q", (100, 2), 1e-6), "motion", WHOLE, "position integrated", id="a position"),
        pytest.param(added(M, "v", (100, 2), 1e-5), "motion", WHOLE, "velocity integrated", id="a velocity"),
        pytest.param(
            added(M, "a", (100, 2), 1e-2), "motion", WHOLE, "velocity integrated", id="an acceleration"
        ),
        pytest.param(
            added(M, "q", (slice(None), 2), 1e-6), "motion", WHOLE, "start posture", id="all positions"
        ),
        pytest.param(added(M, "position", (50, 0), 1e-7), "motion", WHOLE, "strike point", id="a place"),
        pytest.param(added(M, "rotation", (50, 0, 1), 1e-6), "motion", WHOLE, "paddle axes", id="an axis"),
        pytest.param(added(M, "twist", (50, 2), 1e-7), "motion", WHOLE, "speed", id="a speed"),
        pytest.param(added(M, "twist", (50, 4), 1e-7), "motion", WHOLE, "turning", id="a turning"),
        pytest.param(added(M, "torque", (50, 3), 1e-3), "torque", "j4", "torque, row by row", id="a torque"),
        pytest.param(
            scaled("torque", -1.0), "torque", "j2", "torque, row by row", id="torques of other sign"
        ),
        pytest.param(added(M, "wanted_twist", (50, 2), 1e-6), "command", "", "speed", id="a commanded speed"),
        pytest.param(
            added(M, "wanted_position", (50, 2), 1e-6), "command", "", "place", id="a commanded place"
        ),
        pytest.param(added("log.npz", "twist", (50, 2), 1e-6), "as stated", "log", "twist", id="the log"),
        pytest.param(put("stopped", False), "motion", "the end", "the arm stands", id="the stand"),
        pytest.param(limit_of(3, "velocity", 0.2), "limits", "j4", "velocity kept", id="a limit of velocity"),
        pytest.param(limit_of(1, "torque", 20.0), "torque", "j2", "torque kept", id="a limit of torque"),
        pytest.param(limit_of(1, "torque", 20.0), "as stated", "j2", "torque", id="a limit against the file"),
        pytest.param(limit_of(1, "torque", 20.0), "verdict", "", "verdict", id="a limit that decides"),
        pytest.param(
            put("paddle", "mass_kg", 0.1), "torque", "j2", "torque, row by row", id="mass of the paddle"
        ),
        pytest.param(
            put("paddle", "mount", "xyz_m", [0, 0.01, 0.13]), "motion", WHOLE, "strike point", id="the mount"
        ),
        pytest.param(
            put("arm", "gravity_m_s2", [0, 0, -9.7]), "torque", "j2", "torque, row by row", id="gravity"
        ),
        pytest.param(
            put("arm", "base", "rpy_rad", [0, 0, 0]), "motion", WHOLE, "strike point", id="the base"
        ),
        pytest.param(put("follow", "frame", "world"), "command", "", "speed", id="the frame of the twists"),
        pytest.param(put("follow", "point", "strike"), "command", "", "speed", id="the point of the twists"),
        pytest.param(put("follow", "interpolation", "hold"), "command", "", "speed", id="the interpolation"),
        pytest.param(
            put("accept", "strike_speed_error_share", 1e-6), "verdict", "", "verdict", id="what is accepted"
        ),
        pytest.param(claimed("verdict", "undecided"), "verdict", "", "verdict", id="the verdict"),
        pytest.param(
            claimed("limits", 0, "delivered_peak", 0.3), "limits", "j1", "position", id="a peak in the report"
        ),
        pytest.param(
            claimed("strikes", 0, "delivered_m_s", 0.45),
            "strike",
            "strike 1 at 0.124 s",
            "delivered",
            id="a strike",
        ),
        pytest.param(
            claimed("strikes", 1, "delivered", False),
            "strike",
            "strike 2 at 0.376 s",
            "delivered",
            id="a miss",
        ),
        pytest.param(claimed("strikes", 1, "time_s", 0.38), "strike", "marks", "instants", id="an instant"),
    ],
)
def test_a_forgery_is_seen_where_it_stands(honest, tmp_path, change, kind, where, check):
    # Paths in cell.json are absolute here, so the inputs are found from anywhere.
    found = named(differing(forged(honest, tmp_path / "forged", change)))
    assert (kind, where, check) in found


def test_a_changed_file_is_named(honest, tmp_path, capsys):
    folder = forged(honest, tmp_path / "f", lambda *_: None)
    motion = folder / "evidence" / "motion.npz"
    motion.write_bytes(motion.read_bytes()[:-100])
    assert main(["recheck", str(folder), "--out", str(tmp_path / "out")]) == 2
    assert "motion.npz: file: changed since it was written" in capsys.readouterr().err
    assert not (tmp_path / "out").exists()
    redigest(folder)
    assert main(["recheck", str(folder), "--out", str(tmp_path / "out")]) == 2  # it is no archive either
    assert "motion.npz: file: is no archive of arrays" in capsys.readouterr().err


def test_a_changed_input_is_named(tmp_path, capsys):
    folder = ran(tmp_path)
    path = tmp_path / "commands.csv"
    path.write_text(path.read_text("utf-8") + "0.504,0,0,0,0,0,0,0\n", "utf-8")
    assert main(["recheck", str(folder), "--out", str(tmp_path / "again")]) == 2
    assert "commands.csv: file: changed since the run" in capsys.readouterr().err
    path.unlink()
    assert main(["recheck", str(folder), "--out", str(tmp_path / "again"), "--quiet"]) == 3
    words = {item.where: item for item in opinion(folder).items}
    assert words["log"].status == NOT_CHECKABLE and "is not there" in words["log"].left_out


def test_the_command_line_agrees_and_writes_its_own_folder(honest, tmp_path, capsys):
    assert main(["recheck", str(honest), "--out", str(tmp_path / "out")]) == 0
    assert capsys.readouterr().out.startswith("agree: follow says")
    assert {path.name for path in (tmp_path / "out").iterdir()} >= {
        "verdict.json",
        "recheck.csv",
        "report.html",
    }
    assert (
        main(["recheck", str(honest), "--out", str(honest)]) == 2
    )  # results that are looked at stay as they are


def test_without_the_engine_it_does_what_numpy_allows(honest, monkeypatch):
    monkeypatch.setitem(sys.modules, "mujoco", None)
    found = opinion(honest)
    left = {item.kind for item in found.items if item.status == NOT_CHECKABLE}
    assert left == {"torque", "verdict"}
    assert {item.status for item in found.items if item.kind in ("motion", "limits", "strike")} == {AGREE}
    assert found.engine is None
    assert any("second-opinion" in item.left_out for item in found.items)


@pytest.mark.parametrize("name", ["nowhere", "file", "empty"])
def test_what_is_no_folder_of_results_is_refused(tmp_path, name):
    (tmp_path / "file").write_text("x", "utf-8")
    (tmp_path / "empty").mkdir()
    with pytest.raises(InputError):
        opinion(tmp_path / name)


def test_the_second_opinion_shares_no_code_with_the_first(honest):
    """Neither by what its modules import, nor by what is loaded when it has run."""
    package = Path(reach.__file__).parent / "recheck"
    allowed = (
        "reach.recheck",
        "reach.errors",
        "reach.evidence.items",
        "reach.formats.files",
        "reach.formats.xml_tree",
    )
    outside = {"numpy", "mujoco"}
    for path in package.rglob("*.py"):
        for node in ast.walk(ast.parse(path.read_text("utf-8"))):
            names = [a.name for a in node.names] if isinstance(node, ast.Import) else []
            names += [node.module or ""] if isinstance(node, ast.ImportFrom) else []
            for name in names:
                assert name.startswith(allowed) or name.partition(".")[0] in outside | set(
                    sys.stdlib_module_names
                )
    code = (
        f"import sys; from reach.recheck.answer import opinion; opinion({str(honest)!r}); print(*sys.modules)"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, timeout=100)
    assert done.returncode == 0, done.stderr
    loaded = set(done.stdout.split())
    assert "mujoco" in loaded
    assert not loaded & {"pinocchio", "qpsolvers", "scipy", "daqp", "piqp"}
    own = {name for name in loaded if name.startswith("reach.") and not name.startswith("reach.recheck")}
    data = {"reach.errors", "reach.evidence", "reach.evidence.items", "reach.cell", "reach.formats"}
    assert {n for n in own if not n.startswith(("reach.cell.", "reach.formats."))} <= data
