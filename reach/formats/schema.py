"""Every key of a cell file, in one table: kind, unit (in its name), range, and default or why required."""

from __future__ import annotations

from typing import get_args

from reach.cell import STANDARD_GRAVITY_M_S2, LimitName
from reach.formats.kinds import ByName, Either, Flag, Integer, Key, ListOf, Number, OneOf, Table, Text
from reach.formats.magnitude import LARGEST_DRIVE, LEAST_LIMIT
from reach.formats.presets import BALLS

SOLVERS = ("daqp", "piqp", "clarabel")
"""Solvers that are let in: others hung, or called false answers found, when tried (DEVELOPERS.md)."""

MAX_ROWS = 1000  # paddle parts, rows of restitution, normals
MOST_POINTS = 10_000_000  # strikes of a survey, whatever its max_points
MOST_FLIGHTS = 100_000  # of a rally: apexes x offsets x bearings
MOST_CENTRES = 20_000  # of a rally
MOST_BOUNCES = 100_000  # of one trial
MOST_STARTS = 10_000  # of the trials
MOST_CASES = 10_000  # of a spread, a flight
WORLD_M = 1000.0  # of a place in the world from its origin
FASTEST_PADDLE_M_S = 100.0
FASTEST_BALL_M_S = 200.0  # along one axis
HIGHEST_APEX_M = 100.0
FASTEST_SENSOR_HZ = 1e6
IN_MM_S = "m/s; is this in mm/s?"

LIMIT_NAMES: tuple[str, ...] = get_args(LimitName)

FINITE = Number()
POSITIVE = Number(above=0)
NOT_NEGATIVE = Number(lo=0)
GAIN_PER_S = Number(lo=0, hi=1e6)
SHARE_KEPT_BACK = Number(lo=0, below=1)
SHARE_REQUIRED = Number(above=0, hi=1)
RESTITUTION = Number(above=0, hi=1)
NEAR_M = Number(lo=-10, hi=10, hint="metres; is this in mm?")
APEX_M = Number(above=0, hi=HIGHEST_APEX_M, hint="metres; is this in mm?")
ERROR_M = Number(above=0, hi=10, hint="metres; is this in mm?")
SPREAD_M = Number(lo=0, hi=1, hint="metres; is this in mm?")
SPREAD_M_S = Number(lo=0, hi=10, hint=IN_MM_S)
LATENCY_S = Number(lo=0, hi=10, hint="seconds; is this in ms?")
MASS_KG = Number(above=0, hi=1000, hint="kg; is this in g?")
TOOL_M_S = Number(above=0, hi=1000, hint=IN_MM_S, least=LEAST_LIMIT)
DRIVE_VALUE = Number(lo=0, hi=LARGEST_DRIVE)
SIZE_M = Number(above=0, hi=2, hint="metres; is this in mm?")

_VECTOR = ListOf(FINITE, 3, what="numbers")
_NEAR_VECTOR = ListOf(NEAR_M, 3, what="numbers")
_WORLD_VECTOR = ListOf(Number(lo=-WORLD_M, hi=WORLD_M, hint="metres; is this in mm?"), 3, what="numbers")
_BALL_VELOCITY = ListOf(Number(lo=-FASTEST_BALL_M_S, hi=FASTEST_BALL_M_S, hint=IN_MM_S), 3, what="numbers")
_GRAVITY = ListOf(Number(lo=-100, hi=100, hint="m/s²"), 3, what="numbers")
_BOX = ListOf(_WORLD_VECTOR, 2, what="corners")
_BEARINGS = ListOf(FINITE, least=1, what="bearings", most=MAX_ROWS)
_OFFSET_M = Number(lo=0, hi=WORLD_M, hint="metres; is this in mm?")
_OFFSETS = ListOf(_OFFSET_M, least=1, what="offsets", most=MAX_ROWS)
_LATERAL = Number(lo=-FASTEST_BALL_M_S, hi=FASTEST_BALL_M_S, hint=IN_MM_S)
_INERTIA = ListOf(FINITE, 6, what="numbers xx, yy, zz, xy, xz, yz")
_ZERO3 = (0.0, 0.0, 0.0)

PLACEMENT = Table({"xyz_m": Key(_NEAR_VECTOR, _ZERO3), "rpy_deg": Key(_VECTOR, _ZERO3)})
BASE = Table({"xyz_m": Key(_WORLD_VECTOR, _ZERO3), "rpy_deg": Key(_VECTOR, _ZERO3)})
_NO_PLACEMENT = {"xyz_m": _ZERO3, "rpy_deg": _ZERO3}

ARM = Table(
    {
        "urdf": Key(Text(), required="name the arm's URDF file"),
        "limits": Key(Text()),
        "tip": Key(Text(), required="name the link that carries the paddle"),
        "locked_rad": Key(ByName(FINITE), {}),
        "locked_m": Key(ByName(FINITE), {}),
        "base": Key(BASE, _NO_PLACEMENT),
        "gravity_m_s2": Key(_GRAVITY, (0.0, 0.0, -STANDARD_GRAVITY_M_S2)),
        "start_rad": Key(ByName(FINITE), {}),
        "start_deg": Key(ByName(FINITE), {}),
        "start_m": Key(ByName(FINITE), {}),
        "start": Key(OneOf(("auto",), "; postures go by joint name into start_rad, start_deg or start_m")),
        "start_velocity_rad_s": Key(ByName(FINITE), {}),
        "start_velocity_m_s": Key(ByName(FINITE), {}),
    }
)

PART = Table(
    {
        "mass_kg": Key(MASS_KG, required="give the part's mass"),
        "com_m": Key(_NEAR_VECTOR, required="give the part's centre of mass in the face frame"),
        "inertia_kg_m2": Key(_INERTIA, (0.0,) * 6),
    }
)

PADDLE = Table(
    {
        "mount": Key(
            PLACEMENT, required="give the placement of the face frame on the tip, { xyz_m, rpy_deg }"
        ),
        "mass_kg": Key(MASS_KG, required="give the paddle's mass"),
        "shape": Key(OneOf(("disc", "plate", "given")), "disc"),
        "radius_m": Key(SIZE_M),
        "size_m": Key(ListOf(SIZE_M, 2, what="numbers x, y")),
        "thickness_m": Key(Number(lo=0, hi=1, hint="metres; is this in mm?"), 0.0),
        "com_m": Key(_NEAR_VECTOR),
        "inertia_kg_m2": Key(_INERTIA),
        "part": Key(ListOf(PART, what="tables", most=MAX_ROWS), ()),
    }
)

TOOL = Table(
    {
        "speed_m_s": Key(TOOL_M_S, required="give the cap on the strike point's speed, or drop [tool]"),
        "source": Key(Text(), "cell"),
    }
)

BALL = Table(
    {
        "preset": Key(OneOf(tuple(BALLS))),
        "mass_kg": Key(Number(above=0, hi=10, hint="kg; is this in g?")),
        "radius_m": Key(SIZE_M),
        "drag_coefficient": Key(NOT_NEGATIVE, 0.0),
        "lift_coefficient": Key(NOT_NEGATIVE, 0.0),
        "air_kg_m3": Key(NOT_NEGATIVE, 1.2),
    }
)

CONTACT = Table(
    {
        "restitution": Key(RESTITUTION, required="give the restitution of ball and face, from a drop test"),
        "restitution_spread": Key(SHARE_KEPT_BACK, 0.0),
        "restitution_at": Key(
            ListOf(ListOf(FINITE, 2, what="numbers speed, restitution"), what="rows", most=MAX_ROWS), ()
        ),
        "friction": Key(NOT_NEGATIVE, 0.0),
        "tangential_restitution": Key(Number(lo=-1, hi=1), 0.0),
        "arm_gives": Key(Flag(), False),
        "source": Key(Text(), "cell"),
    }
)

CONTROL = Table({"period_s": Key(Number(lo=1e-5, hi=0.1, hint="seconds; is this in ms?"), 0.001)})

_LAG = Key(Number(lo=0, hi=1, hint="seconds; is this in ms?"), 0.0)
DRIVE = Table({"delay_s": _LAG, "lag_s": _LAG, "jitter_s": _LAG})

_SOLVER = OneOf(SOLVERS, "; other solvers hung, or called false answers found")
SOLVER = Table(
    {
        "name": Key(_SOLVER, "daqp"),
        "fallback": Key(_SOLVER, "piqp"),
        "rotation_length_m": Key(SIZE_M),
        "posture_gain_per_s": Key(GAIN_PER_S, 0.5),
    }
)

MARGINS = Table(
    {
        "position_rad": Key(Number(lo=0, hi=10, hint="radians; is this in degrees?"), 0.002),
        "position_m": Key(Number(lo=0, hi=10, hint="metres; is this in mm?"), 0.0005),
        "velocity_share": Key(SHARE_KEPT_BACK, 0.02),
        "acceleration_share": Key(SHARE_KEPT_BACK, 0.02),
        "torque_share": Key(SHARE_KEPT_BACK, 0.10),
        "torque_rate_share": Key(SHARE_KEPT_BACK, 0.05),
        "jerk_share": Key(SHARE_KEPT_BACK, 0.05),
    }
)

ACCEPT = Table(
    {
        "at": Key(OneOf(("strikes", "throughout")), "strikes"),
        "strike_speed_error_share": Key(SHARE_REQUIRED, 0.03),
        "strike_lateral_m_s": Key(Number(above=0, hi=100, hint=IN_MM_S), 0.05),
        "strike_position_m": Key(Number(above=0, hi=10, hint="metres; is this in mm?"), 0.005),
        "strike_tilt_error_deg": Key(Number(above=0, hi=180), 1.0),
        "strike_window_s": Key(Number(lo=0, hi=1, hint="seconds; is this in ms?"), 0.010),
        "strikes_share": Key(SHARE_REQUIRED, 1.0),
        "require": Key(
            ListOf(OneOf(LIMIT_NAMES), what="limit names", most=100),
            ("position", "velocity", "torque", "torque rate"),
        ),
    }
)

FOLLOW = Table(
    {
        "commands": Key(Text(), required="name the command log"),
        "frame": Key(
            OneOf(("world", "base", "paddle")),
            required='say whose axes the twist is in: "world" (the cell), "base" (the root link) or "paddle" '
            "(the commanded paddle); there is no default because a wrong one is off by whole turns",
        ),
        "point": Key(
            Either(OneOf(("strike", "tip"), ", or [x, y, z] in the face frame"), _NEAR_VECTOR),
            required='say which point the velocity is of: "strike" (strike point), "tip" (origin of the tip '
            "link) or [x, y, z] in the face frame; there is no default because a lever arm adds speed",
        ),
        "interpolation": Key(OneOf(("hold", "linear")), "hold"),
        "shortfall": Key(OneOf(("closest", "same-direction")), "closest"),
        "pose_gain_per_s": Key(GAIN_PER_S, 0.0),
        "time_faults": Key(OneOf(("refuse", "mend")), "refuse"),
        "max_gap_s": Key(POSITIVE, 0.1),
        "strikes": Key(OneOf(("marked", "guessed-ok")), "marked"),
        "strike_min_m_s": Key(NOT_NEGATIVE, 0.1),
        "strike_min_gap_s": Key(NOT_NEGATIVE, 0.15),
    }
)

SURVEY = Table(
    {
        "box_m": Key(_BOX),
        "strikes": Key(Text()),
        "spacing_m": Key(Number(above=0, hi=WORLD_M, hint="metres; is this in mm?"), 0.05),
        "normals": Key(ListOf(_VECTOR, least=1, what="normals", most=MAX_ROWS)),
        "face_tilts_deg": Key(ListOf(Number(lo=0, hi=180), least=1, what="tilts", most=MAX_ROWS)),
        "bearings_deg": Key(_BEARINGS),
        "direction": Key(_VECTOR),
        "rotation": Key(OneOf(("still", "free")), "still"),
        "paddle_speed_m_s": Key(Number(above=0, hi=FASTEST_PADDLE_M_S, hint=IN_MM_S, least=LEAST_LIMIT)),
        "ball_in_m_s": Key(_BALL_VELOCITY),
        "ball_out_m_s": Key(_BALL_VELOCITY),
        "run_up_m": Key(Number(above=0, hi=10, hint="metres; is this in mm?")),
        "required_share": Key(SHARE_REQUIRED, 1.0),
        "exact": Key(Flag(), False),
        "max_points": Key(Integer(lo=1, hi=MOST_POINTS), 2_000_000),
    }
)

RALLY = Table(
    {
        "centre_m": Key(_WORLD_VECTOR, required="give the ball's centre at contact"),
        "apexes_m": Key(
            ListOf(APEX_M, least=1, what="apexes", most=MAX_ROWS),
            required="give apex heights above the centre",
        ),
        "offsets_m": Key(_OFFSETS, (0.0,)),
        "bearings_deg": Key(_BEARINGS, (0.0, 90.0, 180.0, 270.0)),
        "lateral_m_s": Key(_LATERAL, 0.0),
        "recover_within_bounces": Key(Integer(lo=1, hi=20), 1),
        "latency_s": Key(LATENCY_S, 0.0),
        "required_share": Key(SHARE_REQUIRED, 1.0),
        "centres_box_m": Key(_BOX),
        "centres_spacing_m": Key(Number(above=0, hi=WORLD_M, hint="metres; is this in mm?"), 0.1),
        "contact_offset_spread_m": Key(SPREAD_M, 0.0),
        "velocity_spread_m_s": Key(SPREAD_M_S, 0.0),
        "cases": Key(Integer(lo=1, hi=MOST_CASES), 40),
    }
)

_STARTS = Table(
    {
        "offsets_m": Key(_OFFSETS, (0.0,)),
        "bearings_deg": Key(_BEARINGS, (0.0, 90.0, 180.0, 270.0)),
        "lateral_m_s": Key(ListOf(_LATERAL, least=1, what="speeds", most=MAX_ROWS), (0.0,)),
        "random": Key(Integer(hi=MOST_STARTS), 0),
    }
)
_SENSOR = Table(
    {
        "rate_hz": Key(Number(lo=0, hi=FASTEST_SENSOR_HZ), 0.0),
        "latency_s": Key(LATENCY_S, 0.0),
        "position_noise_m": Key(SPREAD_M, 0.0),
        "velocity_noise_m_s": Key(SPREAD_M_S, 0.0),
    }
)
_RECOVERED = Table(
    {
        "within_m": Key(ERROR_M, 0.02),
        "apex_error_m": Key(ERROR_M, 0.03),
        "by_bounce": Key(Integer(lo=1, hi=MOST_BOUNCES), 10),
        "then_for": Key(Integer(lo=1, hi=MOST_BOUNCES), 20),
    }
)
TRIAL = Table(
    {
        "law": Key(Text(), "mirror"),
        "gains": Key(ByName(FINITE), {}),
        "centre_m": Key(_WORLD_VECTOR),
        "apex_m": Key(APEX_M, 0.3),
        "bounces": Key(Integer(lo=1, hi=MOST_BOUNCES), 50),
        "starts": Key(_STARTS, {}),
        "sensor": Key(_SENSOR, {}),
        "required_share": Key(SHARE_REQUIRED, 1.0),
        "recovered": Key(_RECOVERED, {}),
    }
)

CELL = Table(
    {
        "arm": Key(ARM, required="describe the arm in a table [arm]"),
        "paddle": Key(PADDLE, required="describe the paddle in a table [paddle]"),
        "tool": Key(TOOL),
        "ball": Key(BALL),
        "contact": Key(CONTACT),
        "control": Key(CONTROL),
        "drive": Key(DRIVE),
        "solver": Key(SOLVER),
        "margins": Key(MARGINS),
        "accept": Key(ACCEPT),
        "follow": Key(FOLLOW),
        "survey": Key(SURVEY),
        "rally": Key(RALLY),
        "trial": Key(TRIAL),
    }
)


LIMIT_KEYS: dict[str, tuple[str, str, str]] = {
    "position": ("position_rad", "position_m", "range"),
    "velocity": ("velocity_rad_s", "velocity_m_s", "around zero"),
    "acceleration": ("acceleration_rad_s2", "acceleration_m_s2", "around zero"),
    "jerk": ("jerk_rad_s3", "jerk_m_s3", "around zero"),
    "torque": ("torque_nm", "torque_n", "around zero"),
    "torque_rate": ("torque_rate_nm_s", "torque_rate_n_s", "around zero"),
    "torque_continuous": ("torque_continuous_nm", "torque_continuous_n", "around zero"),
    "armature": ("armature_kg_m2", "armature_kg", "value"),
    "damping": ("damping_nm_s_rad", "damping_n_s_m", "value"),
    "friction": ("friction_nm", "friction_n", "value"),
}
"""Field of JointLimits -> (key of a turning joint, of a sliding joint, what it holds) in a limits file."""
