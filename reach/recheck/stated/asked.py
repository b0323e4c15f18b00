"""What a cell file states beside the joints, compared with what a run stored of it."""

from __future__ import annotations

import csv
import io
import math
from collections.abc import Mapping, Sequence
from dataclasses import replace
from typing import Any

from reach.evidence.items import Check, same
from reach.recheck.stored import Stored, as_number

ROUNDING = 1e-12  # of the number, or of 1 where it is smaller: degrees to radians, and dust read as zero
LONGEST_TEXT = 60  # characters of one side of two that differ
ZERO3 = [0.0, 0.0, 0.0]
STANDARD_GRAVITY_M_S2 = 9.80665  # 3rd CGPM, 1901
UNITS = {
    "_kg_m3": "kg/m³",
    "_m_s": "m/s",
    "_rad": "rad",
    "_deg": "rad",
    "_share": "1",
    "_hz": "Hz",
    "_per_s": "1/s",
    "_kg": "kg",
    "_m": "m",
    "_s": "s",
}
"""End of a key -> unit of what is stored; a longer end stands before one that it ends with."""

MARGINS = {
    "position_rad": 0.002,
    "position_m": 0.0005,
    "velocity_share": 0.02,
    "acceleration_share": 0.02,
    "torque_share": 0.10,
    "torque_rate_share": 0.05,
    "jerk_share": 0.05,
}
ACCEPT = {
    "at": "strikes",
    "strike_speed_error_share": 0.03,
    "strike_lateral_m_s": 0.05,
    "strike_position_m": 0.005,
    "strike_tilt_error_deg": 1.0,
    "strike_window_s": 0.010,
    "strikes_share": 1.0,
    "require": ["position", "velocity", "torque", "torque rate"],
}
PADDLE = {
    "shape": "disc",
    "mass_kg": None,
    "radius_m": None,
    "size_m": None,
    "thickness_m": 0.0,
    "com_m": None,
    "inertia_kg_m2": None,
}
BALL = {
    "mass_kg": None,
    "radius_m": None,
    "drag_coefficient": 0.0,
    "lift_coefficient": 0.0,
    "air_kg_m3": 1.2,
}
BALLS = {
    "table tennis": {"mass_kg": 0.0027, "radius_m": 0.020},
    "tennis": {"mass_kg": 0.0577, "radius_m": 0.0335},
    "squash": {"mass_kg": 0.0240, "radius_m": 0.020},
}
"""ITTF Technical Leaflet T3; ITF Rules of Tennis, Appendix I, mid-range; WSF specification, mid-range (from memory)."""
DRIVE = {"delay_s": 0.0, "lag_s": 0.0, "jitter_s": 0.0}
CONTACT: dict[str, Any] = {
    "restitution": None,
    "restitution_spread": 0.0,
    "restitution_at": [],
    "friction": 0.0,
    "tangential_restitution": 0.0,
    "arm_gives": False,
}
COMMANDS: dict[str, dict[str, Any]] = {
    "follow": {
        "frame": None,
        "point": None,
        "interpolation": "hold",
        "shortfall": "closest",
        "pose_gain_per_s": 0.0,
        "strikes": "marked",
        "strike_min_m_s": 0.1,
        "strike_min_gap_s": 0.15,
    },
    "survey": {
        "box_m": None,
        "spacing_m": 0.05,
        "ball_in_m_s": None,
        "rotation": "still",
        "run_up_m": None,
        "required_share": 1.0,
        "exact": False,
        "max_points": 2_000_000,
    },
    "rally": {
        "centre_m": None,
        "apexes_m": None,
        "offsets_m": [0.0],
        "bearings_deg": [0.0, 90.0, 180.0, 270.0],
        "lateral_m_s": 0.0,
        "recover_within_bounces": 1,
        "latency_s": 0.0,
        "required_share": 1.0,
        "centres_box_m": None,
        "centres_spacing_m": 0.1,
        "contact_offset_spread_m": 0.0,
        "velocity_spread_m_s": 0.0,
        "cases": 40,
    },
    "trial": {"law": "mirror", "gains": {}, "apex_m": 0.3, "bounces": 50, "required_share": 1.0},
}
"""Defaults of a cell file's tables; None where there is none."""
TRIAL_PARTS: dict[str, dict[str, Any]] = {
    "starts": {
        "offsets_m": [0.0],
        "bearings_deg": [0.0, 90.0, 180.0, 270.0],
        "lateral_m_s": [0.0],
        "random": 0,
    },
    "sensor": {"rate_hz": 0.0, "latency_s": 0.0, "position_noise_m": 0.0, "velocity_noise_m_s": 0.0},
    "recovered": {"within_m": 0.02, "apex_error_m": 0.03, "by_bounce": 10, "then_for": 20},
}
ONCE = ("apexes_m", "offsets_m", "bearings_deg")  # lists whose repetitions count once


def near(name: str, ours: Any, stored: Any, unit: str) -> Check:
    """Numbers of any nesting that must be the same but for rounding; None on both sides is the same too."""
    mine, theirs = _flat(ours), _flat(stored)
    if len(mine) != len(theirs) or any((a is None) != (b is None) for a, b in zip(mine, theirs, strict=True)):
        return Check(name, math.inf, 0.0, unit, _text(ours, stored))
    pairs = [(a, b) for a, b in zip(mine, theirs, strict=True) if a is not None and b is not None]
    sizes = [abs(a) for a, _ in pairs if math.isfinite(a)]
    worst = 0.0
    for a, b in pairs:
        off = 0.0 if a == b else abs(a - b)
        worst = off if off > worst or math.isnan(off) else worst
    return Check(name, worst, ROUNDING * max([1.0, *sizes]), unit)


def table_checks(
    prefix: str, table: Mapping[str, Any], defaults: Mapping[str, Any], stored: Mapping[str, Any]
) -> list[Check]:
    """A table of a cell file, its defaults put in, against what is stored under the same names."""
    found = []
    for key, default in defaults.items():
        name, ours = f"{prefix} {key}".strip(), table.get(key, default)
        if key in ONCE and isinstance(ours, list):
            turn = 360.0 if key.endswith("_deg") else None
            ours = _once(ours, turn)
        kept = key
        if key.endswith("_deg"):
            kept, ours = f"{key[:-4]}_rad", _radians(ours)
        theirs = stored.get(kept)
        if isinstance(ours, (str, bool, dict)) or (isinstance(ours, list) and _has_text(ours)):
            found.append(replace(same(name, ours, theirs), text=_text(ours, theirs)))
        else:
            found.append(near(name, ours, theirs, unit_of(key)))
    return found


def placement_checks(name: str, table: Mapping[str, Any], stored: Any) -> list[Check]:
    """A placement: metres, and roll, pitch and yaw from degrees."""
    theirs = stored if isinstance(stored, dict) else {}
    return [
        near(f"{name} place", table.get("xyz_m", ZERO3), theirs.get("xyz_m"), "m"),
        near(f"{name} turn", _radians(table.get("rpy_deg", ZERO3)), theirs.get("rpy_rad"), "rad"),
    ]


def cell_checks(document: Mapping[str, Any], stored: Stored) -> list[Check]:
    """Everything but the joints and the command's own table."""
    arm, paddle = document["arm"], document["paddle"]
    found = [near("period", document.get("control", {}).get("period_s", 0.001), stored.at("period_s"), "s")]
    found += placement_checks("base", arm.get("base", {}), stored.at("arm", "base"))
    down = [0.0, 0.0, -STANDARD_GRAVITY_M_S2]
    found.append(near("gravity", arm.get("gravity_m_s2", down), stored.at("arm", "gravity_m_s2"), "m/s²"))
    found += placement_checks("mount", paddle.get("mount", {}), stored.at("paddle", "mount"))
    found += table_checks("paddle", paddle, PADDLE, stored.table("paddle"))
    found += _part_checks(paddle.get("part", []), stored.tables("paddle", "parts"))
    cap = document["tool"]["speed_m_s"] if "tool" in document else None
    told = None if stored.at("tool") is None else stored.at("tool", "speed_m_s")
    found.append(near("tool cap", cap, told, "m/s"))
    found += table_checks("margins", document.get("margins", {}), MARGINS, stored.table("margins"))
    found += table_checks("accept", document.get("accept", {}), ACCEPT, stored.table("accept"))
    if stored.command == "follow":
        told = stored.at("drive")
        found.append(same("drives given", "drive" in document, told is not None))
        found += table_checks(
            "drive", document.get("drive", {}), DRIVE, DRIVE if told is None else stored.table("drive")
        )
    for name, defaults in (("ball", BALL), ("contact", CONTACT)):
        if name in document and isinstance(stored.cell.get(name), dict):
            table = {**BALLS.get(document[name].get("preset", ""), {}), **document[name]}
            asked = {key: default for key, default in defaults.items() if default is not None or key in table}
            found += table_checks(name, table, asked, stored.table(name))
    return found


def command_checks(document: Mapping[str, Any], stored: Stored) -> list[Check]:
    """The command's own table, so far as it holds numbers and words and not the names of files."""
    name = stored.command
    table, told = document.get(name), stored.cell.get(name)
    if not isinstance(table, dict) or not isinstance(told, dict):
        return []
    asked = dict(COMMANDS[name])
    if name == "trial":
        file, _, law = table.get("law", "mirror").rpartition(":")
        table = {**table, "law": law}
        asked |= {} if file else {"law_file": None}
    found = table_checks(name, table, asked, told)
    if name == "survey":
        found += _face_checks(table, told)
    if name == "trial":
        for part, defaults in TRIAL_PARTS.items():
            found += table_checks(f"trial {part}", table.get(part, {}), defaults, _table(told.get(part)))
        centre = table.get("centre_m", document.get("rally", {}).get("centre_m"))
        found.append(near("trial centre_m", centre, told.get("centre_m"), "m"))
    return found


def strikes_checks(content: bytes, stored: Stored) -> list[Check]:
    """A file of strikes: a point, a face, a speed and maybe a direction on every line."""
    rows = list(csv.DictReader(io.StringIO(content.decode("utf-8-sig")), skipinitialspace=True))
    lines = [{str(name).strip(): value for name, value in row.items()} for row in rows]

    def column(names: str) -> list[list[float]]:
        return [[float(line[name]) for name in names.split()] for line in lines]

    normals = [_unit(normal) for normal in column("nx ny nz")]
    turned = bool(lines) and "dx" in lines[0]
    ours = {
        "listed": (column("x_m y_m z_m"), "m"),
        "normals": (normals, "1"),
        "directions": ([_unit(way) for way in column("dx dy dz")] if turned else normals, "1"),
        "speeds_m_s": (column("paddle_speed_m_s"), "m/s"),
    }
    told = stored.table("survey")
    return [near(f"survey {name}", values, told.get(name), unit) for name, (values, unit) in ours.items()]


def unit_of(key: str) -> str:
    """The unit that the end of a key tells, of what is stored under it."""
    if key.endswith("_kg_m2"):
        return "kg·m²"
    return next((unit for end, unit in UNITS.items() if key.endswith(end)), "1")


def _face_checks(table: Mapping[str, Any], told: Mapping[str, Any]) -> list[Check]:
    """Normals, direction and speed, where the cell states them as such."""
    found = []
    if "normals" in table:
        given = _once([_unit(normal) for normal in table["normals"]], None)
        found.append(near("survey normals", given, told.get("normals"), "1"))
    elif "face_tilts_deg" in table:
        bearings = table.get("bearings_deg", [0.0])
        tilted = [_tilted(tilt, bearing) for tilt in table["face_tilts_deg"] for bearing in bearings]
        found.append(near("survey face_tilts_deg", _once(tilted, None), told.get("normals"), "1"))
    normals = told.get("normals")
    faces = normals if isinstance(normals, list) else []
    if "strikes" not in table:
        directions = [_unit(table["direction"])] * len(faces) if "direction" in table else faces
        found.append(near("survey direction", directions, told.get("directions"), "1"))
    if "paddle_speed_m_s" in table:
        speeds = [table["paddle_speed_m_s"]] * len(faces)
        found.append(near("survey paddle_speed_m_s", speeds, told.get("speeds_m_s"), "m/s"))
    return found


def _table(found: Any) -> dict[str, Any]:
    """A table, an empty one where there is none."""
    return found if isinstance(found, dict) else {}


def _part_checks(parts: Sequence[Mapping[str, Any]], stored: list[dict[str, Any]]) -> list[Check]:
    found = [same("paddle parts", len(parts), len(stored))]
    for number, (part, told) in enumerate(zip(parts, stored, strict=False)):
        defaults = {"mass_kg": None, "com_m": None, "inertia_kg_m2": [0.0] * 6}
        found += table_checks(f"paddle part {number}", part, defaults, told)
    return found


def _flat(value: Any) -> list[float | None]:
    if isinstance(value, (list, tuple)):
        return [item for part in value for item in _flat(part)]
    return [None] if value is None else [as_number(value)]


def _radians(value: Any) -> Any:
    if isinstance(value, list):
        return [_radians(part) for part in value]
    return None if value is None else math.radians(value)


def _tilted(tilt_deg: float, bearing_deg: float) -> list[float]:
    """World +z tilted toward a bearing from +x, counter-clockwise seen from above."""
    tilt, bearing = math.radians(tilt_deg), math.radians(bearing_deg)
    return [math.sin(tilt) * math.cos(bearing), math.sin(tilt) * math.sin(bearing), math.cos(tilt)]


def _unit(vector: Sequence[float]) -> list[float]:
    size = math.hypot(*vector)
    return [x / size for x in vector]


def _once(values: Sequence[Any], turn: float | None) -> list[Any]:
    """Values in their order without repetitions, angles by whole turns."""
    first: dict[Any, Any] = {}
    for value in values:
        if isinstance(value, list):
            key: Any = tuple(round(x, 12) + 0.0 for x in value)
        else:
            key = value if turn is None else round(value % turn, 9) % turn
        first.setdefault(key, value)
    return list(first.values())


def _has_text(value: Any) -> bool:
    return any(isinstance(item, str) for item in value)


def _text(ours: Any, stored: Any) -> str:
    """Both sides in words, cut to a sensible length; nothing where they are the same."""
    texts = [str(value) for value in (ours, stored)]
    mine, theirs = (text if len(text) <= LONGEST_TEXT else f"{text[:LONGEST_TEXT]}…" for text in texts)
    return "" if ours == stored else f"{mine} here, {theirs} stored"
