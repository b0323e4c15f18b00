"""A short strike on the project's two-link arm, on disk: what the tests of command line and library follow."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from builders import ROBOTS, cell_text

from reach.cell import Array

HEADER = "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s"
POSE_HEADER = "px_m,py_m,pz_m,qw,qx,qy,qz"
LIMITS = (ROBOTS / "link2" / "link2.limits.toml").read_text(encoding="utf-8")
URDF = (ROBOTS / "link2" / "link2.urdf").read_text(encoding="utf-8")

# Face up, out to the side. Two joints can't keep a face level on the way up: hence a wide acceptance.
START = {"j1": 0.8, "j2": -0.8}
PADDLE = """[paddle]
mount = { xyz_m = [0, 0, 0.05], rpy_deg = [0, 0, 0] }
radius_m = 0.05
mass_kg = 0.1
"""
REST = """[control]
period_s = 0.002
[accept]
strike_speed_error_share = 0.10
strike_tilt_error_deg = 5.0
[follow]
commands = "log.csv"
frame = "world"
point = "strike"
"""

SLOW_M_S = 0.15  # delivered with ease
FAST_M_S = 3.0  # out of reach
LASTS_S = 0.3


def strike(peak_m_s: float) -> tuple[Array, Array, Array]:
    """Times (N,), twists (N, 6) and marks (N,) of one upward bump, the contact at its peak."""
    t_s = np.round(np.arange(31) * LASTS_S / 30, 9)
    twists = np.zeros((len(t_s), 6))
    twists[:, 2] = np.round(peak_m_s * np.sin(np.pi * t_s / LASTS_S) ** 2, 6)
    return t_s, twists, np.arange(len(t_s)) == len(t_s) // 2


def log_text(peak_m_s: float, pose: str = "") -> str:
    """The strike as a log; `pose` are seven values that every row gets."""
    lines = [f"{HEADER},strike" + (f",{POSE_HEADER}" if pose else "")]
    for t, twist, mark in zip(*strike(peak_m_s), strict=True):
        row = [repr(float(t)), *(repr(float(x)) for x in twist), str(int(mark))]
        lines.append(",".join([*row, pose] if pose else row))
    return "\n".join(lines) + "\n"


def write_case(
    folder: Path,
    peak_m_s: float = SLOW_M_S,
    *,
    log: str = "",
    limits: str = LIMITS,
    urdf: str = URDF,
    rest: str = REST,
    start: dict[str, float] | None = None,
) -> Path:
    """Write a cell with its files and return its path."""
    folder.mkdir(parents=True, exist_ok=True)
    text = cell_text(Path("arm.urdf"), "flange", START, Path("limits.toml"), paddle=PADDLE, rest=rest)
    if start is not None:
        keys = ", ".join(f"{name} = {value!r}" for name, value in start.items())
        lines = [line for line in text.splitlines() if not line.startswith("start_rad")]
        text = "\n".join(lines).replace("[arm]", f"[arm]\nstart_rad = {{ {keys} }}", 1)
    files = {"cell.toml": text, "arm.urdf": urdf, "limits.toml": limits, "log.csv": log or log_text(peak_m_s)}
    for name, content in files.items():
        (folder / name).write_text(content, encoding="utf-8")
    return folder / "cell.toml"


def without_drawings(monkeypatch: pytest.MonkeyPatch, command: str) -> None:
    """Leave the drawings out of a command's pages, for tests that do not look at them: they take their time."""
    monkeypatch.setattr(f"reach.report.{command}.html.pictures", lambda _: [])


def without_key(limits: str, joint: str, key: str) -> str:
    """A limits file with one joint's key left out."""
    before, table, after = limits.partition(f"[joints.{joint}]")
    first, last = after.split(key, 1)
    return before + table + first + last.partition("\n")[2]
