"""Trials for tests: a gantry that hardly has limits, laws that live in the tests, one trial, its contacts by hand."""

from __future__ import annotations

import math
import tempfile
from collections.abc import Callable
from dataclasses import replace
from functools import cache
from pathlib import Path
from typing import Any, ClassVar

import numpy as np
from scipy.integrate import solve_ivp

from reach.arm import Arm
from reach.cell import Array, Ball, Cell, Contact, Trial
from reach.evidence.trials import Contacts, Run
from reach.formats import load_cell
from reach.kinematics import Chain
from reach.trial.bout import Ground, play
from reach.trial.laws import Seen, Setup, Twist
from reach.trial.starts import Start

G = 9.80665  # m/s², 3rd CGPM, 1901
CENTRE = (0.0, 0.0, 0.5)
RADIUS = 0.02  # of the ball, m

# A gantry: three slides, then two turns whose axes meet in the strike point. Light links. Invented.
AXES = {"x": "1 0 0", "y": "0 1 0", "z": "0 0 1", "roll": "1 0 0", "pitch": "0 1 0"}
SLIDES = ("x", "y", "z")
LINK_KG = {"x": 1.0, "y": 1.0, "z": 1.0, "roll": 0.1, "pitch": 0.1}
PADDLE_KG = 0.1
BODY = """  <link name="l_{name}">
    <inertial><mass value="{mass}"/><inertia ixx="1e-3" iyy="1e-3" izz="1e-3" ixy="0" ixz="0" iyz="0"/></inertial>
  </link>
  <joint name="{name}" type="{kind}">
    <parent link="{before}"/><child link="l_{name}"/><axis xyz="{axis}"/>
    <limit lower="-1.5" upper="1.5" effort="1e6" velocity="1e3"/>
  </joint>
"""
# Limits of every joint, m or rad: more than any law here asks for, so that what fails is the law.
FAST = {
    "velocity": 20.0,
    "acceleration": 400.0,
    "jerk": 1e6,
    "torque": 1e5,
    "torque_rate": 1e8,
}
UNITS = {
    "velocity": ("velocity_rad_s", "velocity_m_s"),
    "acceleration": ("acceleration_rad_s2", "acceleration_m_s2"),
    "jerk": ("jerk_rad_s3", "jerk_m_s3"),
    "torque": ("torque_nm", "torque_n"),
    "torque_rate": ("torque_rate_nm_s", "torque_rate_n_s"),
}
CELL = """[arm]
urdf = "gantry.urdf"
limits = "gantry.limits.toml"
tip = "flange"
start_m = { x = 0.0, y = 0.0, z = 0.48 }
start_rad = { roll = 0.0, pitch = 0.0 }
[paddle]
mount = { xyz_m = [0, 0, 0] }
radius_m = 0.085
mass_kg = 0.1
[ball]
mass_kg = 0.0027
radius_m = 0.02
drag_coefficient = 0.0
[contact]
restitution = 0.7
[control]
period_s = 0.002
"""
Own = dict[str, float | None]  # limits of one joint by name; None leaves one out


def gantry_urdf() -> str:
    """The gantry as a URDF."""
    text, before = '<robot name="gantry">\n  <link name="base"/>\n', "base"
    for name, axis in AXES.items():
        kind = "prismatic" if name in SLIDES else "revolute"
        text += BODY.format(name=name, mass=LINK_KG[name], kind=kind, before=before, axis=axis)
        before = f"l_{name}"
    mount = f'<joint name="mount" type="fixed"><parent link="{before}"/><child link="flange"/></joint>'
    return f'{text}  <link name="flange"/>\n  {mount}\n</robot>\n'


def gantry_limits(**own: Own) -> str:
    """A limits file of the gantry, with other limits of some joints."""
    lines = []
    for name in AXES:
        lines += [f"[joints.{name}]", 'source = "invented"']
        for kind, value in {**FAST, **own.get(name, {})}.items():
            if value is not None:
                lines.append(f"{UNITS[kind][name in SLIDES]} = {value!r}")
    return "\n".join(lines) + "\n"


def write_gantry(folder: Path, rest: str = "", **own: Own) -> Path:
    """Write the gantry's cell with its files and further tables, and return its path."""
    folder.mkdir(parents=True, exist_ok=True)
    (folder / "gantry.urdf").write_text(gantry_urdf(), encoding="utf-8")
    (folder / "gantry.limits.toml").write_text(gantry_limits(**own), encoding="utf-8")
    (folder / "cell.toml").write_text(CELL + rest, encoding="utf-8")
    return folder / "cell.toml"


def slow_gantry(**own: Own) -> Cell:
    """The gantry with other limits of some joints, by name."""
    with tempfile.TemporaryDirectory() as folder:
        return load_cell(write_gantry(Path(folder), **own))


@cache
def gantry(period_s: float = 0.002) -> Cell:
    """The fast gantry."""
    return replace(slow_gantry(), period_s=period_s)


def tried(
    cell: Cell, contact: dict[str, Any] | None = None, ball: dict[str, Any] | None = None, **trial: Any
) -> Cell:
    """The cell with a trial, and with other fields of contact and ball."""
    return replace(
        cell,
        contact=replace(cell.contact or Contact(0.7), **(contact or {})),
        ball=replace(cell.ball or Ball(0.0027, RADIUS), **(ball or {})),
        trial=Trial(**{"apex_m": 0.2, "bounces": 15, "centre_m": CENTRE} | trial),
    )


def ground_of(cell: Cell, law: type | None = None, seed: int = 0, **gains: float) -> Ground:
    """The ground of a cell that starts in its start posture; `law` takes the place of the trial's, with these gains."""
    assert cell.trial is not None and cell.trial.centre_m is not None and cell.arm.start is not None
    made = Ground.of(cell, cell.trial.centre_m, np.array(cell.arm.start), seed)
    return made if law is None else replace(made, law=law, gains=gains)


def bout(
    cell: Cell,
    law: type | None = None,
    offset: tuple[float, float] = (0.0, 0.0),
    lateral: tuple[float, float] = (0.0, 0.0),
    number: int = 0,
    seed: int = 0,
    **gains: float,
) -> Run:
    """One trial, with its motion."""
    start = Start(np.array(offset), np.array(lateral))
    return play(ground_of(cell, law, seed, **gains), start, number, True)


class Hand:
    """A law for tests: the paddle is under the ball and leans, its height is a reference that a subclass gives.

    `height` gives the reference over the height of contact, and its rate, of ball height and vertical speed; `lean`
    the horizontal part of the normal, of offset and lateral velocity.
    """

    gains: ClassVar[dict[str, float]] = {}
    follow, turn = 60.0, 60.0  # 1/s, of what is left of an error

    def __init__(self, setup: Setup):
        self.setup, self.own = setup, setup.gains
        self.e = setup.contact.restitution
        self.share = (1 - self.e) / (1 + self.e)  # of the ball's speed, that keeps the ball's energy
        self.speed = math.sqrt(2 * G * setup.apex_m)

    def height(self, b: float, vz: float) -> tuple[float, float]:
        """Mirror with the dead-beat energy term (CHECKS 2.1)."""
        eta = self.speed**2 / 2
        kappa = self.share + (eta - G * b - vz * vz / 2) / (2 * (1 + self.e) * eta)
        return -kappa * b, -kappa * vz

    def lean(self, place: Array, velocity: Array) -> Array:
        """Level."""
        return np.zeros(2)

    def twist(self, seen: Seen) -> Twist:
        """Reference's rate and what takes the error away."""
        ahead = self.setup.period_s + seen.ball_age_s
        down = np.array([0.0, 0.0, G])
        velocity = np.array(seen.ball_m_s) - down * ahead
        ball = np.array(seen.ball_m) + np.array(seen.ball_m_s) * ahead - down * ahead**2 / 2
        off = ball - self.setup.centre_m
        r, rate = self.height(float(off[2]), float(velocity[2]))
        across = self.lean(off[:2], velocity[:2])
        normal = np.array([*across, math.sqrt(1 - float(across @ across))])
        place = np.array([*ball[:2], self.setup.centre_m[2] + r]) - self.setup.ball.radius_m * normal
        there = np.array(seen.paddle_m) + self.setup.period_s * np.array(seen.paddle_m_s)
        going = np.array([*velocity[:2], rate]) + self.follow * (place - there)
        turning = self.turn * np.cross(seen.paddle_normal, normal)
        vx, vy, vz, wx, wy, wz = (*going.tolist(), *turning.tolist())
        return vx, vy, vz, wx, wy, wz


class Still:
    """The paddle stays where it is."""

    def __init__(self, setup: Setup):
        pass

    def twist(self, seen: Seen) -> Twist:
        """Nothing."""
        return 0.0, 0.0, 0.0, 0.0, 0.0, 0.0


def watched(law: type, seen: list[Seen]) -> type:
    """The law, that notes all it sees."""

    class Watched(law):
        def twist(self, sight: Seen) -> Twist:
            seen.append(sight)
            answer: Twist = super().twist(sight)
            return answer

    return Watched


def wild(seed: int) -> tuple[Cell, Run]:
    """A cell and a trial of a law that shakes the paddle at random on all six axes, from a random start."""
    rng = np.random.default_rng(seed)
    size = rng.normal(size=(6, 3)) * np.array([6.0, 6.0, 1.0, 5.0, 5.0, 5.0])[:, None] * rng.uniform(0.0, 1.0)
    rate, phase = rng.uniform(2.0, 60.0, (6, 3)), rng.uniform(0.0, 6.0, (6, 3))

    class Wild(Hand):
        def lean(self, place: Array, velocity: Array) -> Array:
            back = -0.5 * place / (8 * self.setup.apex_m) - 0.8 * velocity / (2 * self.speed)
            return np.asarray(np.clip(back, -0.5, 0.5))

        def twist(self, seen: Seen) -> Twist:
            shaken = np.array(super().twist(seen)) + (size * np.sin(rate * seen.t_s + phase)).sum(axis=1)
            vx, vy, vz, wx, wy, wz = shaken.tolist()
            return vx, vy, vz, wx, wy, wz

    period_s, apex_m = float(rng.choice([0.001, 0.002, 0.004, 0.01])), float(rng.uniform(0.05, 0.3))
    cell = tried(gantry(period_s), apex_m=apex_m, bounces=8)
    (x, y), (vx, vy) = rng.uniform(-0.15, 0.15, 2).tolist(), rng.uniform(-0.8, 0.8, 2).tolist()
    return cell, bout(cell, Wild, (x, y), (vx, vy))


def contacts_of(offset_m: Any, apex_m: Any) -> Contacts:
    """Contacts of which only offsets (k,) and apexes (k,) are given."""
    k = len(offset_m)
    one, three = np.zeros(k), np.zeros((k, 3))
    return Contacts(
        one, three, np.zeros((k, 2)), three, three, three, one, one, one, np.array(apex_m), np.array(offset_m)
    )


# The same trial by hand: ball from contact to contact, paddle by the chain


Places = Callable[[Array], Array]  # of instants (k,): the ball's centre (k, 3)


def ball_flights(cell: Cell, run: Run) -> list[Places]:
    """The ball's centre (k, 3) over instants (k,) in every flight, first the start's; integrated anew from contact
    to contact."""
    ball, trial = cell.ball, cell.trial
    assert ball is not None and trial is not None and trial.centre_m is not None
    share = ball.air_kg_m3 * math.pi * ball.radius_m**2 / (2 * ball.mass_kg)
    k, lift = share * ball.drag_coefficient, share * ball.lift_coefficient
    up = math.sqrt(2 * G * trial.apex_m) if k == 0 else math.sqrt(G / k * math.expm1(2 * k * trial.apex_m))
    place = np.array(trial.centre_m) + np.array([*run.offset, 0.0])
    begins = [(0.0, place, np.array([*run.lateral, up]), np.zeros(3))]
    c = run.contacts
    begins += list(zip(c.t_s, c.ball, c.ball_out, c.spin_out, strict=True))
    return [_flight(*begin, k, lift) for begin in begins]


def _flight(
    begin_s: float, place: Array, velocity: Array, spin: Array, k: float, lift: float
) -> Callable[[Array], Array]:
    down = np.array([0.0, 0.0, -G])
    size = float(np.linalg.norm(spin))
    if k == 0 and (lift == 0 or size == 0):
        return lambda t: place + np.outer(t - begin_s, velocity) + np.outer((t - begin_s) ** 2 / 2, down)
    axis = spin / size if size else spin

    def rate(_: float, state: Array) -> Array:
        v = state[3:]
        speed = float(np.linalg.norm(v))
        return np.concatenate([v, down - k * speed * v + lift * speed * np.cross(axis, v)])

    start = np.concatenate([place, velocity])
    path = solve_ivp(rate, (0.0, 2.0), start, "DOP853", dense_output=True, rtol=1e-10, atol=1e-12).sol
    return lambda t: path(t - begin_s).T[:, :3]


def paddle_at(cell: Cell, run: Run, t_s: Array) -> tuple[Array, Array, Array]:
    """Strike points (k, 3), normals (k, 3) and twists (k, 6) of a trial's motion, by the chain."""
    assert run.motion is not None
    q, v, _ = run.motion.at(t_s)
    point, rotation, twist = Chain.of(Arm(cell.arm, cell.paddle)).twists(q, v)
    return point, rotation[:, :, 2], twist


def gaps(cell: Cell, run: Run, flight: Places, t_s: Array) -> Array:
    """From ball to face (k,) in m."""
    assert cell.ball is not None
    point, normal, _ = paddle_at(cell, run, t_s)
    return np.asarray(np.einsum("ki,ki->k", flight(t_s) - point, normal) - cell.ball.radius_m)


def struck_by_hand(cell: Cell, run: Run) -> Array:
    """The ball's velocity (k, 3) after every contact on a face without friction that does not give, by Newton's law."""
    assert cell.ball is not None and cell.contact is not None
    c = run.contacts
    point, normal, twist = paddle_at(cell, run, c.t_s)
    arm = c.ball - cell.ball.radius_m * normal - point
    face = twist[:, :3] + np.cross(twist[:, 3:], arm)
    approach = -np.einsum("ki,ki->k", c.ball_in - face, normal)
    return np.asarray(c.ball_in + (1 + cell.contact.restitution) * approach[:, None] * normal)
