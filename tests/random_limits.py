"""Random limits for a drawn arm, the text that states them, and how much of them a motion uses."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.random import Generator
from numpy.typing import NDArray
from random_arm import Arm, Bone

from reach.cell import Array

# Kind: keys of a turning and of a sliding joint in the limits file.
KEYS = {
    "position": ("position_rad", "position_m"),
    "velocity": ("velocity_rad_s", "velocity_m_s"),
    "acceleration": ("acceleration_rad_s2", "acceleration_m_s2"),
    "jerk": ("jerk_rad_s3", "jerk_m_s3"),
    "torque": ("torque_nm", "torque_n"),
    "torque rate": ("torque_rate_nm_s", "torque_rate_n_s"),
    "duty": ("torque_continuous_nm", "torque_continuous_n"),
}
RUBBING = {
    "armature": ("armature_kg_m2", "armature_kg"),
    "damping": ("damping_nm_s_rad", "damping_n_s_m"),
    "friction": ("friction_nm", "friction_n"),
}
# The cell's defaults (INTERFACE.md).
MARGINS = {
    "position_rad": 0.002,
    "position_m": 0.0005,
    "velocity_share": 0.02,
    "acceleration_share": 0.02,
    "torque_share": 0.10,
    "torque_rate_share": 0.05,
    "jerk_share": 0.05,
}


@dataclass(frozen=True, eq=False)
class Limits:
    """Limits by kind, (n,) each: nan where nobody states one, infinite where there is none."""

    lo: dict[str, Array]
    hi: dict[str, Array]
    sliding: NDArray[np.bool_]

    def kept(self, margins: dict[str, float]) -> Limits:
        """What is left of the limits beside the margins."""
        lo, hi = dict(self.lo), dict(self.hi)
        back = np.where(self.sliding, margins["position_m"], margins["position_rad"])
        lo["position"], hi["position"] = lo["position"] + back, hi["position"] - back
        for kind in KEYS:
            share = margins.get(f"{kind.replace(' ', '_')}_share", 0.0)
            lo[kind], hi[kind] = lo[kind] * (1 - share), hi[kind] * (1 - share)
        return Limits(lo, hi, self.sliding)

    def reach_of_slides(self) -> Array:
        """Farthest travel (n,) m of each sliding joint from its zero, 0 for turning ones."""
        ends = np.maximum(np.abs(self.lo["position"]), np.abs(self.hi["position"]))
        return np.where(self.sliding, ends, 0.0)

    def fastest(self) -> Array:
        """The larger side (n,) of each velocity limit, infinite where nobody states one."""
        most = np.maximum(-self.lo["velocity"], self.hi["velocity"])
        return np.where(np.isnan(most), np.inf, most)

    def travel_box(self, q: Array) -> tuple[Array, Array]:
        """Joint velocities (n,) that a motion from rest to rest can have at a posture (n,); infinite where nothing
        limits them.

        Forward a joint gains with a+ on the travel behind it and stops with a- on the travel ahead; backward it gains
        with a- on the travel ahead and stops with a+ on that behind: the same size.
        """
        behind, ahead = q - self.lo["position"], self.hi["position"] - q
        with np.errstate(invalid="ignore"):
            square = 2 * np.fmin(self.hi["acceleration"] * behind, -self.lo["acceleration"] * ahead)
        most = np.sqrt(np.where(np.isnan(square), np.inf, square))
        lo, hi = (np.where(np.isnan(x), np.inf, x) for x in (-self.lo["velocity"], self.hi["velocity"]))
        return -np.minimum(lo, most), np.minimum(hi, most)


@dataclass(frozen=True, eq=False)
class Course:
    """A joint motion on the control grid: q, v, a (m, n); a holds until the next row, the last one is 0."""

    q: Array
    v: Array
    a: Array
    period_s: float

    @staticmethod
    def of(start: Array, v: Array, period_s: float) -> Course:
        """The motion from `start` (n,) whose velocities at the rows are v (m, n)."""
        a = np.zeros_like(v)
        a[:-1] = np.diff(v, axis=0) / period_s
        q = start + np.concatenate(
            [np.zeros((1, v.shape[1])), np.cumsum((v[1:] + v[:-1]) * period_s / 2, axis=0)]
        )
        return Course(q, v, a, period_s)


def used(arm: Arm, limits: Limits, path: Course) -> dict[str, float]:
    """The largest share of each kind of limit that a motion uses at the rows, just after them and just before the next.

    Position: distance from the middle of the travel as a share of half of it. What nobody states counts 0.
    """
    dt, before = path.period_s, arm.torque(path.q[:1], path.v[:1], 0 * path.v[:1])
    first = arm.torque(path.q, path.v, path.a)
    last = arm.torque(path.q[1:], path.v[1:], path.a[:-1])
    middle, half = _travel(limits)
    rates = [np.diff(first, axis=0, prepend=before), np.diff(last, axis=0)]
    values = {
        "velocity": path.v,
        "acceleration": path.a,
        "jerk": np.diff(path.a, axis=0, prepend=0 * path.a[:1]) / dt,
        "torque": np.concatenate([first, last]),
        "torque rate": np.concatenate(rates) / dt,
        "duty": np.sqrt(np.mean(first**2, axis=0, keepdims=True)),
    }
    out = {"position": float(np.max(np.abs(path.q - middle) / half))}
    for kind, value in values.items():
        side = np.where(value >= 0, limits.hi[kind], -limits.lo[kind])
        out[kind] = float(np.nan_to_num(np.abs(value) / side, nan=0.0).max())
    return out


def _travel(limits: Limits) -> tuple[Array, Array]:
    """Middle and half (n,) of the travel, 0 and inf where there is no end."""
    lo, hi = limits.lo["position"], limits.hi["position"]
    ends = np.isfinite(lo) & np.isfinite(hi)
    low, high = np.where(ends, lo, -1.0), np.where(ends, hi, 1.0)
    return (low + high) / 2, np.where(ends, (high - low) / 2, np.inf)


def draw_margins(rng: Generator) -> dict[str, float]:
    """The defaults, none at all, or odd ones."""
    way = rng.choice(3, p=(0.6, 0.2, 0.2))
    if way == 0:
        return dict(MARGINS)
    if way == 1:
        return dict.fromkeys(MARGINS, 0.0)
    return {key: float(rng.uniform(0, 0.03 if "position" in key else 0.3)) for key in MARGINS}


def draw_travel(rng: Generator, bones: tuple[Bone, ...]) -> tuple[Array, Array]:
    """Ends of travel (n,); a continuous joint has none."""
    lo, hi = np.zeros(len(bones)), np.zeros(len(bones))
    for i, bone in enumerate(bones):
        middle, half = rng.uniform(-0.6, 0.6), rng.uniform(0.7, 2.9)
        if bone.kind == "prismatic":
            middle, half = rng.uniform(-0.1, 0.2), rng.uniform(0.1, 0.5)
        lo[i], hi[i] = (-np.inf, np.inf) if bone.kind == "continuous" else (middle - half, middle + half)
    return lo, hi


def draw_postures(rng: Generator, lo: Array, hi: Array, count: int, share: float) -> Array:
    """Random postures (count, n) in the middle share of the travel, of half a turn each way where it has no end."""
    low, high = np.where(np.isfinite(lo), lo, -np.pi), np.where(np.isfinite(hi), hi, np.pi)
    return (low + high) / 2 + share * (high - low) / 2 * rng.uniform(-1, 1, (count, len(lo)))


def draw_rubbing(rng: Generator, sizes: dict[str, Array]) -> dict[str, Array]:
    """Damping and dry friction (n,) of up to a tenth of the torque each; all or none of each stated."""
    tops = {"damping": sizes["torque"] / sizes["velocity"], "friction": sizes["torque"]}
    return {name: 0.1 * top * rng.uniform(0, 1, len(top)) for name, top in tops.items() if rng.random() < 0.6}


def draw_limits(rng: Generator, arm: Arm, lo: Array, hi: Array) -> tuple[Limits, dict[str, Array], bool]:
    """Limits that let the arm hold itself and move, mostly; their sizes before some were left unknown; and
    whether one joint was made too weak on purpose.

    Torque is what gravity asks at most in random postures times 1.3 to 6, and what the accelerations ask.
    """
    n, sliding = arm.n, arm.sliding
    scale = np.where(sliding, 0.4, 1.0)
    velocity, acceleration = rng.uniform(0.8, 4.0, n) * scale, rng.uniform(4, 25, n) * scale
    q = draw_postures(rng, lo, hi, 12, 0.9)
    rest, pushes = np.zeros_like(q), acceleration * rng.choice((-1.0, 1.0), q.shape)
    static = arm.torque(q, rest, rest)
    weight, inertial = np.abs(static).max(axis=0), np.abs(arm.torque(q, rest, pushes) - static).max(axis=0)
    torque = weight * rng.uniform(1.3, 6.0, n) + inertial * rng.uniform(0.3, 1.5, n) + 0.1
    weak = rng.random() < 0.06
    if weak:
        torque[int(np.argmax(weight))] = max(rng.uniform(0.2, 0.8) * weight.max(), 0.01)
    both = {
        "velocity": velocity,
        "acceleration": acceleration,
        "jerk": acceleration * np.exp(rng.uniform(np.log(30), np.log(800), n)),
        "torque": torque,
        "torque rate": torque * np.exp(rng.uniform(np.log(8), np.log(80), n)),
        "duty": torque * rng.uniform(0.3, 0.9, n),
    }
    silent = {
        "velocity": 0.04,
        "acceleration": 0.3,
        "jerk": 0.45,
        "torque": 0.04,
        "torque rate": 0.12,
        "duty": 0.5,
    }
    lows, highs = {"position": lo}, {"position": hi}
    for kind, size in both.items():
        low, high = -size, size.copy()
        if rng.random() < 0.2:
            low = low * rng.uniform(0.6, 1.0, n)
        if rng.random() < silent[kind]:
            gone = rng.random(n) < rng.choice((0.3, 1.0))
            low[gone], high[gone] = np.nan, np.nan
        lows[kind], highs[kind] = low, high
    return Limits(lows, highs, sliding), both, weak


def urdf_limits(rng: Generator, bones: tuple[Bone, ...], limits: Limits) -> list[str]:
    """Each joint's <limit>: as stated, or looser than the limits file has it."""
    out = []
    for i, bone in enumerate(bones):
        loose = rng.choice((1.0, 1.0, 1.25))
        parts = []
        if bone.kind != "continuous":
            lo, hi = limits.lo["position"][i], limits.hi["position"][i]
            wide = (loose - 1) * (hi - lo)
            parts.append(f'lower="{float(lo - wide)!r}" upper="{float(hi + wide)!r}"')
        for kind, name in (("torque", "effort"), ("velocity", "velocity")):
            most = max(-limits.lo[kind][i], limits.hi[kind][i])
            known = np.isfinite(most) and (kind == "velocity" or rng.random() < 0.8)
            parts.append(f'{name}="{float(most * loose) if known else 0.0!r}"')
        out.append(f"<limit {' '.join(parts)}/>")
    return out


def limits_text(bones: tuple[Bone, ...], limits: Limits, rubbing: dict[str, Array]) -> str:
    """The limits file."""
    lines = ["# Drawn at random."]
    for i, bone in enumerate(bones):
        lines += ["", f"[joints.j{i + 1}]"]
        sliding = bone.kind == "prismatic"
        for kind, keys in KEYS.items():
            lo, hi = float(limits.lo[kind][i]), float(limits.hi[kind][i])
            if np.isfinite(lo) and np.isfinite(hi):
                even = kind != "position" and lo == -hi
                lines.append(f"{keys[sliding]} = {hi!r}" if even else f"{keys[sliding]} = [{lo!r}, {hi!r}]")
        lines += [f"{RUBBING[name][sliding]} = {float(values[i])!r}" for name, values in rubbing.items()]
    return "\n".join([*lines, ""])
