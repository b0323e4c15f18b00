"""Rallies for tests: the project's arms with small envelopes, and a gantry whose strikes can be told by hand."""

from __future__ import annotations

import tempfile
from collections.abc import Sequence
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any

import numpy as np
from builders import NO_MARGINS, robot_cell
from scipy.interpolate import BPoly
from scipy.optimize import linprog

from reach.cell import Array, Cell, Contact, Rally
from reach.evidence.rallies import Knots, RallyPoints
from reach.formats import load_cell
from reach.rally.court import Court, Kit, Point, points_of
from reach.rally.envelope import best_stance
from reach.rally.points import judged

# Face along the flange's axis, level in the working posture: invented.
LEVEL_TOML = """
[paddle]
mount = { xyz_m = [0.0, 0.0, 0.12] }
shape = "disc"
radius_m = 0.085
thickness_m = 0.012
mass_kg = 0.25
"""
BALL_TOML = """
[ball]
mass_kg = 0.0027
radius_m = 0.02
drag_coefficient = 0.0
[contact]
restitution = 0.7
"""
CENTRE = {"bench7": (0.6, 0.0, 0.52), "bench6": (0.5, 0.0, 0.85), "gantry": (0.0, 0.0, 0.5)}

G = 9.80665  # m/s²
E = 0.7  # of the face below
LIMIT_NAMES = {
    *("position", "velocity", "acceleration", "jerk", "torque", "torque rate", "tool speed"),
    *("reach", "singularity", "cycle time"),
}
STEPS = 80  # of the linear programme

# A gantry with a wrist whose axes meet in the strike point: the slides alone move it. Invented.
Own = dict[str, dict[str, Any]] | None
TURNS = ("roll", "pitch")
GANTRY_URDF = """<robot name="gantry">
  <link name="base"/>
{bodies}
  <link name="flange"/>
  <joint name="mount" type="fixed"><parent link="l_pitch"/><child link="flange"/></joint>
</robot>
"""
INERTIA = '<inertial><mass value="{mass}"/><inertia ixx="{i}" iyy="{i}" izz="{i}" ixy="0" ixz="0" iyz="0"/></inertial>'
AXES = {"x": "1 0 0", "y": "0 1 0", "z": "0 0 1", "roll": "1 0 0", "pitch": "0 1 0"}
GANTRY = {
    "velocity": 4.0,
    "acceleration": 40.0,
    "jerk": 1e5,
    "torque": 1e5,
    "torque_rate": 1e8,
}  # of every joint, m or rad; the last three far from binding
UNITS = {
    "position": ("position_rad", "position_m"),
    "velocity": ("velocity_rad_s", "velocity_m_s"),
    "acceleration": ("acceleration_rad_s2", "acceleration_m_s2"),
    "jerk": ("jerk_rad_s3", "jerk_m_s3"),
    "torque": ("torque_nm", "torque_n"),
    "torque_rate": ("torque_rate_nm_s", "torque_rate_n_s"),
}


def axes(lift: bool) -> dict[str, str]:
    """Joints and their axes; `lift` puts a second vertical slide before the others."""
    return {"lift": AXES["z"], **AXES} if lift else AXES


def gantry_urdf(lift: bool = False) -> str:
    """The gantry as a URDF."""
    bodies, before = [], "base"
    for name, axis in axes(lift).items():
        slides = name not in TURNS
        inertia = INERTIA.format(mass=1.0 if slides else 0.1, i=1e-3)
        bodies += [
            f'  <link name="l_{name}">{inertia}</link>',
            f'  <joint name="{name}" type="{"prismatic" if slides else "revolute"}">',
            f'    <parent link="{before}"/><child link="l_{name}"/><axis xyz="{axis}"/>',
            '    <limit lower="-1.5" upper="1.5" effort="1e6" velocity="1e3"/>',
            "  </joint>",
        ]
        before = f"l_{name}"
    return GANTRY_URDF.format(bodies="\n".join(bodies))


def gantry_limits(own: Own = None, lift: bool = False) -> str:
    """A limits file of the gantry; `own` changes or (None) leaves out a joint's limits by name."""
    lines = []
    for name in axes(lift):
        lines += [f"[joints.{name}]", 'source = "invented"']
        for kind, value in (GANTRY | (own or {}).get(name, {})).items():
            if value is not None:
                lines.append(f"{UNITS[kind][name not in TURNS]} = {value!r}")
    return "\n".join(lines) + "\n"


def gantry_cell(own: Own = None, rest: str = "", lift: bool = False, window_s: float | None = None) -> Cell:
    """The gantry's cell, no margins, the paddle at the wrist's centre; `rest` are further tables."""
    with tempfile.TemporaryDirectory() as folder:
        cell = replace(load_cell(write_gantry(Path(folder), own, rest, lift)), margins=NO_MARGINS)
    window = cell.accept.strike_window_s if window_s is None else window_s
    return replace(cell, accept=replace(cell.accept, strike_window_s=window))


def write_gantry(folder: Path, own: Own = None, rest: str = "", lift: bool = False) -> Path:
    """Write the gantry's cell with its files and return its path."""
    folder.mkdir(parents=True, exist_ok=True)
    slides = "x = 0.0, y = 0.0, z = 0.24, lift = 0.24" if lift else "x = 0.0, y = 0.0, z = 0.48"
    text = [
        '[arm]\nurdf = "gantry.urdf"\nlimits = "gantry.limits.toml"\ntip = "flange"',
        f"start_m = {{ {slides} }}\nstart_rad = {{ roll = 0.0, pitch = 0.0 }}",
        "[paddle]\nmount = { xyz_m = [0, 0, 0] }\nradius_m = 0.085\nmass_kg = 0.1",
        BALL_TOML,
        rest,
    ]
    (folder / "gantry.urdf").write_text(gantry_urdf(lift), encoding="utf-8")
    (folder / "gantry.limits.toml").write_text(gantry_limits(own, lift), encoding="utf-8")
    (folder / "cell.toml").write_text("\n".join(text), encoding="utf-8")
    return folder / "cell.toml"


@cache
def bench(name: str) -> Cell:
    """A project's arm with a level paddle, a ball and a face."""
    return robot_cell(name, paddle=LEVEL_TOML, rest=BALL_TOML)


def rallied(
    cell: Cell, centre: tuple[float, float, float], apexes: Sequence[float] = (0.2,), **rally: Any
) -> Cell:
    """The cell with a rally."""
    return replace(cell, rally=Rally(centre, tuple(apexes), **rally))


def on_gantry(apexes: Sequence[float] = (0.2,), own: Own = None, **rally: Any) -> Cell:
    """The gantry with a rally around its middle."""
    return rallied(gantry_cell(own), CENTRE["gantry"], apexes, **rally)


def on_bench(name: str, apexes: Sequence[float] = (0.2,), **rally: Any) -> Cell:
    """A project's arm with a rally around its centre."""
    return rallied(bench(name), CENTRE[name], apexes, **rally)


def with_contact(cell: Cell, **contact: Any) -> Cell:
    """The cell with another face."""
    return replace(cell, contact=replace(cell.contact or Contact(0.7), **contact))


def court_of(cell: Cell) -> Court:
    """The court at the cell's own centre."""
    assert cell.rally is not None
    return Kit(cell, 0).court(cell.rally.centre_m)


def again(court: Court, **changes: Any) -> Court:
    """The same court with other fields of its rally; arm, stances and library are kept."""
    kit = object.__new__(Kit)
    kit.__dict__.update(court.kit.__dict__)
    kit.rally = replace(court.kit.rally, **changes)
    kit.cell = replace(court.kit.cell, rally=kit.rally)
    other = object.__new__(Court)
    other.__dict__.update({k: v for k, v in court.__dict__.items() if k != "ballistics"})
    other.kit = kit
    return other


def points_at(court: Court, points: Sequence[Point] | None = None) -> RallyPoints:
    """The court's points judged from its best stance."""
    points = points_of(court.kit.rally) if points is None else points
    main = best_stance(court, points) if len(court.stances) else 0
    return judged(court, points, main)


def row(points: RallyPoints, k: int) -> dict[str, Any]:
    """One row of points by name."""
    names = [name for name in vars(points) if name != "motions"]
    return {name: getattr(points, name)[k] for name in names}


def turned_z(angle_rad: float, vector: Array) -> Array:
    """A vector (3,) turned about the vertical."""
    c, s = np.cos(angle_rad), np.sin(angle_rad)
    return np.array([c * vector[0] - s * vector[1], s * vector[0] + c * vector[1], vector[2]])


def ballistic(apex: float, offset: float, bearing: float) -> tuple[list[Array], list[Array], list[float]]:
    """Ball places from the centre, normals and speeds of out, return, stop and steady strike, by hand; one bounce."""
    fall, time = np.sqrt(2 * G * apex), 2 * np.sqrt(2 * apex / G)
    up, away = np.array([0.0, 0.0, 1.0]), turned_z(bearing, np.array([1.0, 0.0, 0.0]))
    home = -offset / time * away
    ways = [(-fall * up, fall * up), (-fall * up, home + fall * up), (home - fall * up, fall * up)]
    ways.append(ways[0])
    if offset == 0:
        ways = ways[:1] * 2
    places = [k * away * offset for k in ((0, 1, 0, 0) if offset else (0, 0))]
    normals, speeds = [], []
    for before, after in ways:
        normal = (after - before) / np.linalg.norm(after - before)
        normals.append(normal)
        speeds.append(float((after @ normal + E * (before @ normal)) / (1 + E)))
    return places, normals, speeds


def path_of(knots: Knots) -> BPoly:
    """The quintics by another library."""
    return BPoly.from_derivatives(knots.t_s, np.stack([knots.q, knots.v, knots.a], axis=1))


def ways_by_programme(v0: float, v1: float, time_s: float, v: Array, a: Array) -> tuple[float, float] | None:
    """Least and largest way of a joint in a time, its acceleration constant in each of STEPS; None: no way at all."""
    step = time_s / STEPS
    gained = np.tril(np.ones((STEPS, STEPS))) * step  # speed after each step, by the accelerations
    before = np.vstack([np.zeros(STEPS), gained[:-1]])
    way = ((before + gained) / 2 * step).sum(axis=0)
    rows = np.vstack([gained, -gained])
    room = np.concatenate([np.full(STEPS, v[1] - v0), np.full(STEPS, v0 - v[0])])
    ends = []
    for side in (1.0, -1.0):
        done = linprog(
            side * way,
            A_ub=rows,
            b_ub=room + 1e-12,
            A_eq=gained[-1:],
            b_eq=[v1 - v0],
            bounds=[tuple(a)] * STEPS,
            method="highs",
        )
        if done.status != 0:
            return None
        ends.append(v0 * time_s + side * done.fun)
    return ends[0], ends[1]


def too_late(court: Court, point: Point) -> bool:
    """Whether some joint can't make some leg in any of the stances, by the linear programme."""
    setting, hair = court.kit.setting, 1e-4  # m or rad: what the steps may leave a way off
    velocity, acceleration = setting.limits["velocity"], setting.limits["acceleration"]
    for k, player in enumerate(court.players):
        (exchange,) = court.exchanges([point], k)
        assert exchange is not None
        played = player.play([exchange], 0.0)
        late = False
        for leg, flight in zip(played.leg.tolist(), played.flight_s.tolist(), strict=True):
            if not played.met[leg : leg + 2].all():
                continue
            for i in range(setting.arm.n):
                v0, v1 = played.v[leg, i], played.v[leg + 1, i]
                v = np.array([velocity.kept_lo[i], velocity.kept_hi[i]])
                a = np.array([acceleration.kept_lo[i], acceleration.kept_hi[i]])
                found = ways_by_programme(v0, v1, flight, v, a)
                way = played.q[leg + 1, i] - played.q[leg, i]
                late |= found is None or not found[0] - hair <= way <= found[1] + hair
        if not late:
            return False
    return True
