"""Every key of a cell file and of a limits file, and every column of a command log and a file of strikes."""

from __future__ import annotations

import textwrap
from collections.abc import Iterator
from typing import Any

from reach.formats.command_log import (
    FARTHEST_M,
    FASTEST_M_S,
    FASTEST_RAD_S,
    POSE_COLUMNS,
    STRIKE_COLUMN,
    TWIST_COLUMNS,
)
from reach.formats.kinds import ByName, Either, Flag, Integer, Key, Kind, ListOf, Number, OneOf, Table, Text
from reach.formats.log_time import TIME_COLUMN
from reach.formats.magnitude import LARGEST, LARGEST_DRIVE, LEAST_LIMIT
from reach.formats.presets import BALLS, REBOUND
from reach.formats.schema import (
    CELL,
    FASTEST_PADDLE_M_S,
    LIMIT_KEYS,
    MOST_CENTRES,
    MOST_FLIGHTS,
    MOST_STARTS,
    WORLD_M,
)
from reach.formats.strikes_csv import DIRECTION, NORMAL, POINT, SPEED
from reach.formats.toml_trial import LAWS, SLOWEST_SENSOR_HZ

WIDTH = 100
_KEY_WIDTH = 34

_UNITS = {
    "_kg_m2": "kg·m²",
    "_kg_m3": "kg/m³",
    "_nm_s_rad": "N·m·s/rad",
    "_n_s_m": "N·s/m",
    "_nm_s": "N·m/s",
    "_n_s": "N/s",
    "_rad_s3": "rad/s³",
    "_rad_s2": "rad/s²",
    "_rad_s": "rad/s",
    "_m_s3": "m/s³",
    "_m_s2": "m/s²",
    "_m_s": "m/s",
    "_per_s": "1/s",
    "_share": "shares of 1",
    "_deg": "degrees",
    "_rad": "rad",
    "_nm": "N·m",
    "_kg": "kg",
    "_hz": "Hz",
    "_n": "N",
    "_m": "m",
    "_s": "s",
}
"""End of a key's name -> unit; a longer end stands before one that it ends with."""

_SECTIONS = {
    "arm": "URDF, limits, what is held, where the base stands, and the posture at the start. The start takes one "
    'value for every joint of the chain (start_rad or start_deg, and start_m), or start = "auto" with a log that has '
    "pose columns; without [follow] it may be left out. Placements are xyz_m, then roll, pitch, yaw about fixed axes "
    "in degrees.",
    "paddle": "The rigid paddle. The face frame has its origin at the strike point on the face and z out of "
    'the face; mount places it on the tip link. Shape "disc" needs radius_m, "plate" needs size_m, "given" '
    "needs com_m and inertia_kg_m2 (about the centre of mass, along the face frame's axes).",
    "tool": "A cap that the maker sets on the speed of the strike point.",
    "ball": "The ball: a preset, or mass_kg and radius_m.",
    "contact": "What happens between ball and face. The arm counts as unmoved by the ball, or, where arm_gives is "
    "true, as giving with its effective mass.",
    "control": "The period at which joint commands are given.",
    "drive": "How late the drives answer.",
    "solver": "Solvers of the quadratic programs, and how turning counts beside moving.",
    "margins": "What is kept back of every limit: an angle or length at both ends of the travel, shares of "
    "the others.",
    "accept": "What a cell must do to pass.",
    "follow": "The command log, and how it is meant.",
    "survey": "Where the paddle is to strike and how fast, for the command survey. Every face goes to every point of "
    "a box, from its low corner on; or a file names the strikes one by one. Faces are normals, out of the face "
    "along the world's axes, or tilts from the world's +z toward bearings from +x, counter-clockwise seen from "
    "above; or the ball's velocities right before and after contact, with [contact], give face and speed. The "
    "strike goes along the normal unless direction says otherwise.",
    "rally": "Flights of the ball that the paddle is to keep up, for the command rally. Every apex goes with every "
    "offset and bearing: the ball rises so far above the centre and comes down so far from it, toward bearings from "
    "+x, counter-clockwise seen from above, at lateral_m_s outward along the bearing, and is to be back at the centre "
    "after recover_within_bounces strikes. "
    "Needs [ball], [contact], a paddle of shape disc or plate, and gravity straight down; spreads are standard "
    "deviations, tried in so many cases. centres_box_m gives further places for the centre, a grid of at most "
    f"{MOST_CENTRES} from its low corner on; there are at most {MOST_FLIGHTS} flights.",
    "trial": "A law of control, tried on ball and arm in simulation, for the command trial. The law is "
    + " or ".join(f'"{law}"' for law in LAWS)
    + ', or a class of your own, "file.py:Name", the path relative to the cell file; gains are the law\'s own. Needs '
    "what [rally] needs. centre_m is the ball's centre at contact: left out, it is that of [rally], else above the "
    "strike point of the start posture. Trials start from every offset, bearing and lateral speed, outward along "
    f"the bearing, and from so many more at random, at most {MOST_STARTS} in all. A sensor of rate 0 sees the ball's "
    f"true state at every control period; other rates start at {SLOWEST_SENSOR_HZ:g} Hz. A start has recovered when "
    "contacts and apexes are within the errors from by_bounce on, for then_for bounces more.",
}

_LIMITS = {
    "position": "ends of the travel",
    "velocity": "greatest speed",
    "acceleration": "greatest acceleration",
    "jerk": "greatest change of acceleration",
    "torque": "greatest torque (force of a sliding joint)",
    "torque_rate": "greatest change of torque (force)",
    "torque_continuous": "torque (force) that may be held for ever, as a root mean square",
    "armature": "rotor inertia as felt at the joint",
    "damping": "friction in proportion to speed",
    "friction": "dry friction",
}


def keys_text() -> str:
    """Return the table of keys and columns, at most WIDTH characters wide."""
    lines = ["CELL FILE (TOML)", ""]
    for name, spec in CELL.keys.items():
        must = "must be given" if spec.required else "may be left out"
        lines += _wrapped(f"[{name}]  {must}. {_SECTIONS[name]}", "", "    ")
        for key, told in _rows(name, spec):
            lines += _row(key, told)
        lines.append("")
    parts = [_balls(), _limits_file(), _command_log(), _strikes_file()]
    text = "\n\n".join("\n".join(part) for part in parts)
    return "\n".join([*lines, text]) + "\n"


def _wrapped(text: str, first: str, rest: str) -> list[str]:
    return textwrap.wrap(text, WIDTH, initial_indent=first, subsequent_indent=rest, break_on_hyphens=False)


def _row(key: str, told: str) -> list[str]:
    return _wrapped(told, f"  {key:<{_KEY_WIDTH}}", " " * (_KEY_WIDTH + 4))


def _rows(where: str, spec: Key) -> Iterator[tuple[str, str]]:
    """Every key below a table's, by dotted name, with what it takes and its default."""
    table = spec.kind.item if isinstance(spec.kind, ListOf) else spec.kind
    assert isinstance(table, Table)
    for name, key in table.keys.items():
        dotted = f"{where}.{name}"
        inside = key.kind.item if isinstance(key.kind, ListOf) else key.kind
        if not isinstance(inside, Table):
            yield dotted, f"{_takes(key.kind, name)}; {_default(key)}"
            continue
        if isinstance(key.kind, ListOf):
            yield (
                dotted,
                f"tables [[{dotted}]], at most {key.kind.most}, each with the keys below; {_default(key)}",
            )
        else:
            yield dotted, f"table; {_default(key) if key.required else 'may be left out'}"
        yield from _rows(dotted, key)


def _takes(kind: Kind, name: str) -> str:
    """What a key of that kind and name takes, in words."""
    unit = next((f" in {unit}" for end, unit in _UNITS.items() if name.endswith(end)), "")
    match kind:
        case Number():
            return " ".join(f"number{unit} {kind.range_text()}".split())
        case Integer():
            return f"whole number {kind.range_text()}"
        case Flag():
            return "true or false"
        case Text():
            return "text"
        case OneOf():
            return "one of " + ", ".join(f'"{word}"' for word in kind.words)
        case Either():
            return f"{_takes(kind.words, name)}; or {_takes(kind.other, name + '_m')}"
        case ByName():
            return f"table by name, each {_takes(kind.item, name)}"
        case ListOf():
            return " ".join(f"list of {_length(kind)} {kind.what}, each {_takes(kind.item, name)}".split())
    raise TypeError(f"no words for {kind!r}")


def _length(kind: ListOf) -> str:
    if kind.length is not None:
        return str(kind.length)
    words = [f"at least {kind.least}"] if kind.least else []
    return " and ".join([*words, f"at most {kind.most}"] if kind.most is not None else words)


def _default(key: Key) -> str:
    if key.required:
        return f"must be given: {key.required}"
    if key.default is None or key.default in ({}, ()):
        return "no default"
    return f"default {_value(key.default)}"


def _value(value: Any) -> str:
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, tuple):
        return f"[{', '.join(map(_value, value))}]"
    return f'"{value}"' if isinstance(value, str) else f"{value:.7g}"


def _balls() -> list[str]:
    lines = ["BALLS (ball.preset), and restitution by published drop tests", ""]
    lines += _wrapped(
        "No preset sets contact.restitution, which belongs to the pair of ball and face. What drop tests ask of a "
        "ball on a hard floor, the air's drag left out, is the root of rebound height over drop height.",
        "  ",
        "  ",
    )
    for name, ball in BALLS.items():
        lines += _row(name, f"{ball.mass_kg:g} kg, radius {ball.radius_m:g} m ({ball.source})")
        for test in REBOUND:
            if test.ball == name:
                low, high = test.restitution
                lines += _row("", f"restitution {low:.3f} to {high:.3f} on {test.onto} ({test.source})")
    return lines


def _limits_file() -> list[str]:
    lines = ["LIMITS FILE (TOML, named by arm.limits): one table [joints.NAME] for each joint", ""]
    lines += _wrapped(
        "The URDF and this file hold side by side, the stricter one counting, unless override = true. A "
        "symmetric limit is one number above 0; [lo, hi] with lo <= 0 <= hi where the two sides differ. Leave "
        f"out what is not known. Limits have a size from {LEAST_LIMIT:g} to {LARGEST:g}.",
        "  ",
        "  ",
    )
    forms = {
        "range": "list [lo, hi]",
        "around zero": "number, or list [lo, hi]",
        "value": f"number of at least 0 and at most {LARGEST_DRIVE:g}",
    }
    for name, (turning, sliding, holds) in LIMIT_KEYS.items():
        for key, joint in ((turning, "turning"), (sliding, "sliding")):
            unit = next(unit for end, unit in _UNITS.items() if key.endswith(end))
            lines += _row(key, f"{joint} joint: {_LIMITS[name]}; {forms[holds]} in {unit}")
    lines += _row("source", "text: where the numbers come from; default the file's name")
    lines += _row("override", "true: this file holds alone, also where the URDF is stricter; default false")
    return lines


def _command_log() -> list[str]:
    lines = ["COMMAND LOG (CSV, named by follow.commands): columns by name in the first line", ""]
    lines += _row(TIME_COLUMN, "time in s, going up; must be given")
    linear, angular = ", ".join(TWIST_COLUMNS[:3]), ", ".join(TWIST_COLUMNS[3:])
    lines += _row(
        linear,
        "velocity of the point that follow.point names, along the axes of follow.frame, "
        f"in m/s, its size at most {FASTEST_M_S:g}; must be given",
    )
    lines += _row(
        angular,
        "angular velocity of the paddle along the same axes, in rad/s, its size at most "
        f"{FASTEST_RAD_S:g}; must be given",
    )
    lines += _row(STRIKE_COLUMN, "1 at an instant of contact, else 0; may be left out")
    lines += _row(
        ", ".join(POSE_COLUMNS[:3]),
        "position of the strike frame in the world, in m, at most "
        f"{FARTHEST_M:g} away; all seven pose columns or none",
    )
    lines += _row(
        ", ".join(POSE_COLUMNS[3:]),
        "turn of the strike frame in the world, as a unit quaternion (w, x, y, z)",
    )
    lines += _wrapped(
        "The strike frame is the face frame of the paddle: its origin at the strike point on the face, z out "
        "of the face.",
        "  ",
        "  ",
    )
    return lines


def _strikes_file() -> list[str]:
    lines = ["FILE OF STRIKES (CSV, named by survey.strikes): columns by name in the first line", ""]
    lines += _row(
        ", ".join(POINT), f"strike point in the world, in m, at most {WORLD_M:g} either way; must be given"
    )
    lines += _row(
        ", ".join(NORMAL), "normal out of the face along the world's axes, any length; must be given"
    )
    lines += _row(
        SPEED,
        "paddle speed needed along the normal, in m/s, above 0 and at most "
        f"{FASTEST_PADDLE_M_S:g}; must be given",
    )
    lines += _row(
        ", ".join(DIRECTION),
        "direction of the strike along the world's axes, any length, going out of the face; all three columns or "
        "none, which stands for the normal",
    )
    return lines
