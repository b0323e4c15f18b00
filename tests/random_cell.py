"""Random parts of a cell file: where the base stands, the paddle, the drives, what is accepted; and their text."""

from __future__ import annotations

import numpy as np
from numpy.random import Generator
from random_arm import Bone, Load, Origin
from random_commands import Log

from reach.cell import Array

ALWAYS = ("position", "velocity", "torque", "torque rate")  # accept.require's default (INTERFACE.md)


def draw_base(rng: Generator) -> tuple[Origin, str]:
    """Where the base stands: upright, hanging, on a wall, or anyhow; and as the cell has it."""
    way = rng.choice(4, p=(0.45, 0.15, 0.15, 0.25))
    turns = ([0.0, 0, 0], [180.0, 0, 0], [0.0, 90, 0], rng.uniform(-180, 180, 3).round(2))
    degrees = np.array(turns[way])
    xyz = rng.uniform(-0.5, 0.5, 3).round(3) if rng.random() < 0.5 else np.zeros(3)
    text = f"base = {{ xyz_m = {listed(xyz)}, rpy_deg = {listed(degrees)} }}"
    return Origin(xyz, np.radians(degrees)), text


def draw_paddle(rng: Generator) -> tuple[str, list[Load], bool]:
    """The paddle's shape and parts as the cell has them, its solids in the face frame, and whether it is a disc."""
    mass, thick = float(rng.uniform(0.05, 0.5)), float(rng.choice((0.0, 0.012)))
    shape = str(rng.choice(("disc", "plate", "given"), p=(0.6, 0.25, 0.15)))
    com = np.array([0.0, 0.0, -thick / 2])
    lines = [f'shape = "{shape}"', f"mass_kg = {mass!r}"]
    if shape == "disc":
        r = float(rng.uniform(0.04, 0.12))
        moments = mass / 12 * np.array([3 * r * r + thick**2, 3 * r * r + thick**2, 6 * r * r])
        lines += [f"radius_m = {r!r}", f"thickness_m = {thick!r}"]
        inertia = np.diag(moments)
    elif shape == "plate":
        x, y = (float(s) for s in rng.uniform(0.06, 0.25, 2))
        moments = mass / 12 * np.array([y * y + thick**2, x * x + thick**2, x * x + y * y])
        lines += [f"size_m = [{x!r}, {y!r}]", f"thickness_m = {thick!r}"]
        inertia = np.diag(moments)
    else:
        com = rng.uniform(-0.05, 0.05, 3)
        turn = Origin(np.zeros(3), rng.uniform(-np.pi, np.pi, 3)).turn
        a, b, c = rng.uniform(0.01, 0.1, 3) ** 2 * mass
        inertia = turn @ np.diag([b + c, a + c, a + b]) @ turn.T
        lines += [f"com_m = {listed(com)}", f"inertia_kg_m2 = {listed(six(inertia))}"]
    loads = [Load(-1, mass, com, inertia)]
    for _ in range(rng.integers(0, 3)):
        part, at = float(rng.uniform(0.02, 0.3)), rng.uniform(-0.08, 0.02, 3)
        own = np.diag(rng.uniform(0.01, 0.012, 3) ** 2 * part) if rng.random() < 0.5 else np.zeros((3, 3))
        lines += ["[[paddle.part]]", f"mass_kg = {part!r}", f"com_m = {listed(at)}"]
        lines += [f"inertia_kg_m2 = {listed(six(own))}"] if own.any() else []
        loads.append(Load(-1, part, at, own))
    return "\n".join(lines), loads, shape == "disc"


def draw_drive(rng: Generator) -> dict[str, float]:
    """How late the drives answer; mostly nothing said."""
    if rng.random() < 0.9:
        return {}
    found = {
        "delay_s": rng.uniform(0, 0.008),
        "lag_s": rng.uniform(0, 0.01),
        "jitter_s": rng.uniform(0, 0.001),
    }
    return {key: float(value) for key, value in found.items() if rng.random() < 0.7}


def draw_accept(rng: Generator) -> tuple[dict[str, float], list[str]]:
    """Numbers of [accept], the defaults of INTERFACE.md where nothing else was drawn; and what must be known."""
    accept = {
        "strike_speed_error_share": 0.03,
        "strike_lateral_m_s": 0.05,
        "strike_position_m": 0.005,
        "strike_tilt_error_deg": 1.0,
        "strike_window_s": 0.010,
        "strikes_share": 1.0,
    }
    if rng.random() < 0.3:
        accept["strike_speed_error_share"] = float(rng.choice((0.01, 0.1)))
    if rng.random() < 0.2:
        accept["strike_window_s"] = float(rng.choice((0.0, 0.004)))
    if rng.random() < 0.1:
        accept["strikes_share"] = 0.5
    require = list(ALWAYS)
    if rng.random() < 0.3:
        require = require[: int(rng.integers(2, 4))]
    return accept, require


def arm_table(bones: tuple[Bone, ...], tip: Origin | None, base: str, log: Log | None) -> str:
    """The [arm] table."""
    named = f"link_{len(bones) - 1}" if tip is None else "flange"
    lines = ["[arm]", 'urdf = "arm.urdf"', 'limits = "arm.limits.toml"', f'tip = "{named}"', base]
    held = {f"held_{i}": bone.side[2] for i, bone in enumerate(bones) if bone.side is not None}
    lines += [f"locked_rad = {table(held)}"] if held else []
    if log is not None and log.auto:
        return "\n".join([*lines, 'start = "auto"'])
    if log is not None:
        for key, sliding in (("start_rad", False), ("start_m", True)):
            some = {
                f"j{i + 1}": log.start[i] for i, b in enumerate(bones) if (b.kind == "prismatic") == sliding
            }
            lines += [f"{key} = {table(some)}"] if some else []
    return "\n".join(lines)


def mount_text(mount: Origin, degrees: Array) -> str:
    """The head of the [paddle] table."""
    return f"[paddle]\nmount = {{ xyz_m = {listed(mount.xyz)}, rpy_deg = {listed(degrees)} }}"


def listed(values: Array) -> str:
    """Numbers as a list."""
    return "[" + ", ".join(repr(float(x)) for x in values) + "]"


def table(values: dict[str, float]) -> str:
    """Numbers by name as an inline table."""
    return "{ " + ", ".join(f"{key} = {float(value)!r}" for key, value in values.items()) + " }"


def six(inertia: Array) -> Array:
    """xx, yy, zz, xy, xz, yz of a symmetric matrix (3, 3)."""
    return inertia[[0, 1, 2, 0, 0, 1], [0, 1, 2, 1, 2, 2]]
