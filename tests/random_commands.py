"""Random command logs for a drawn arm: smooth ones that a planted motion makes, and others that none may follow."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.random import Generator
from numpy.typing import NDArray
from random_arm import Arm
from random_limits import Course, Limits, draw_postures, used

from reach.cell import Array

STYLES = ("smooth", "jerky", "infeasible", "singular", "limit", "still")
SHARES = (0.45, 0.15, 0.12, 0.12, 0.12, 0.04)
MOST_STEPS = 240  # control periods of a log
COARSE = 40  # rows at which a motion is sized; the oracle measures all of them


@dataclass(frozen=True, eq=False)
class Log:
    """A command log as the cell reads it, and what was planted.

    Attributes
    ----------
    t_s : (N,) stamps ; sent : (N, 6) twists along `frame`'s axes, of `point`
    marks : (N,) bool, or None without a strike column ; poses : (N, 7) or None
    frame, interpolation, shortfall, gain, at : as in the cell file
    offset : (3,) from the strike point to the point of the twists, face axes; point : as in the cell file
    start : (n,) ; auto : whether the cell leaves the start to be found
    planted : the motion that the twists came from, None where they were changed afterwards
    share : of the kept-back limits that it was made for
    """

    style: str
    t_s: Array
    sent: Array
    marks: NDArray[np.bool_] | None
    poses: Array | None
    frame: str
    point: str | tuple[float, float, float]
    offset: Array
    interpolation: str
    shortfall: str
    gain: float
    at: str
    start: Array
    auto: bool
    planted: Course | None
    share: float


def draw_log(rng: Generator, arm: Arm, limits: Limits, kept: Limits, period_s: float) -> Log:
    """A log of 0.1 to 0.4 s."""
    style = str(rng.choice(STYLES, p=SHARES))
    steps = int(min(rng.uniform(0.1, 0.4) / period_s, MOST_STEPS))
    every = int(rng.choice((1, 2, 4), p=(0.6, 0.25, 0.15)))
    interpolation = str(rng.choice(("hold", "linear"), p=(0.4, 0.6)))
    start = _start(rng, arm, limits, kept, style)
    share = float(rng.choice((0.3, 0.5, 0.8, 1.5), p=(0.3, 0.4, 0.15, 0.15)))
    rows = steps // every * every + 1
    path = _planted(rng, arm, kept, start, rows, period_s, share if style != "still" else 0.0)
    jacobians, turns, places = arm.jacobian(path.q)
    twist = np.einsum("mij,mj->mi", jacobians, path.v)
    # A held sample is due when its period ends; of a line the value at its stamp counts.
    due = np.arange(0, rows - 1, every) + (every if interpolation == "hold" else 0)
    stamps = np.arange(0, rows - 1, every)
    twist = _spoilt(rng, twist[due], style)
    frame, (point, offset) = str(rng.choice(("world", "base", "paddle"))), _point(rng, arm)
    sent = _as_sent(arm, twist, turns[stamps if interpolation == "linear" else due], frame, offset)
    along = np.einsum("mi,mi->m", twist[:, :3], turns[due][:, :, 2])
    marks, at = _marks(rng, along)
    posed = rng.random() < 0.15
    poses = np.hstack([places[stamps], quaternions(turns[stamps])]) if posed else None
    begin = float(rng.choice((0.0, 3.25)))
    return Log(
        style=style,
        t_s=begin + stamps * period_s,
        sent=sent,
        marks=marks,
        poses=poses,
        frame=frame,
        point=point,
        offset=offset,
        interpolation=interpolation,
        shortfall=str(rng.choice(("closest", "same-direction"), p=(0.8, 0.2))),
        gain=float(rng.choice((0.0, 10.0))),
        at=at,
        start=start,
        auto=bool(posed and rng.random() < 0.3),
        planted=path if style not in ("jerky", "infeasible") else None,
        share=share,
    )


def _start(rng: Generator, arm: Arm, limits: Limits, kept: Limits, style: str) -> Array:
    """A posture in mid-range; a stretched one; or one with a joint at its end, stated or kept back."""
    lo, hi = kept.lo["position"], kept.hi["position"]
    start = draw_postures(rng, lo, hi, 1, 0.45)[0]
    if style == "singular":
        many = draw_postures(rng, lo, hi, 300, 0.8)
        sizes = np.linalg.svd(arm.jacobian(many)[0], compute_uv=False)[:, -1]
        start = many[int(np.argmin(sizes))]
    if style == "limit":
        ended = np.flatnonzero(np.isfinite(lo))
        if len(ended):
            i, ends = int(rng.choice(ended)), limits if rng.random() < 0.5 else kept
            start[i] = (ends.lo if rng.random() < 0.5 else ends.hi)["position"][i]
    return start


def _planted(
    rng: Generator, arm: Arm, kept: Limits, start: Array, rows: int, period_s: float, share: float
) -> Course:
    """A motion from rest to rest, every joint by bumps and steps of its own, that uses `share` of some limit.

    Bumps τ³(1 − τ)³ and steps of the fifth degree have no velocity and no acceleration at both ends.
    """
    x = np.linspace(0, 1, rows)[:, None]
    bump = 3 * x**2 * (1 - x) ** 2 * (1 - 2 * x) * 64
    step = 30 * x**2 * (1 - x) ** 2
    bumps, steps = rng.normal(size=(2, arm.n))
    ends = np.stack([kept.lo["position"] - start, start - kept.hi["position"]])
    for side, i in np.argwhere(ends >= -1e-9):
        bumps[i], steps[i] = 0.0, abs(steps[i]) * (1 if side == 0 else -1)  # from its end a joint goes inward
    v = bump * bumps + step * steps
    if share == 0:
        return Course.of(start, 0 * v, period_s)
    low, middle, high = 0.0, 1.0, 30.0
    coarse = slice(None, None, max(1, (rows - 1) // COARSE))
    v_coarse, dt_coarse = v[coarse], period_s * max(1, (rows - 1) // COARSE)
    rest = used(arm, kept, Course.of(start, 0 * v[:2], period_s))
    most = {kind: max(share, rest[kind] + share * (1 - rest[kind]) / 2) for kind in rest}
    most["position"] = max(1.0, rest["position"])
    for _ in range(8):
        found = used(arm, kept, Course.of(start, v_coarse * middle, dt_coarse))
        over = any(found[kind] > most[kind] for kind in found if kind != "duty")
        low, high = (low, middle) if over else (middle, high)
        middle = np.sqrt(max(low, high / 100) * high)
    return Course.of(start, v * low, period_s)


def _spoilt(rng: Generator, twist: Array, style: str) -> Array:
    """Twists (N, 6) changed as the style has it, within what a log may say."""
    out = twist.copy()
    if style == "jerky":
        for _ in range(rng.integers(1, 4)):
            first = rng.integers(len(out))
            out[first:] += rng.normal(size=6) * [0.15, 0.15, 0.15, 0.5, 0.5, 0.5] * rng.uniform(0.1, 2)
    if style == "infeasible":
        out *= rng.uniform(3, 30)
    for part, most in ((slice(0, 3), 15.0), (slice(3, 6), 60.0)):
        size = np.linalg.norm(out[:, part], axis=1, keepdims=True)
        out[:, part] *= np.minimum(1.0, most / np.maximum(size, 1e-9))
    return out


def _point(rng: Generator, arm: Arm) -> tuple[str | tuple[float, float, float], Array]:
    """The point of the twists, as the cell has it, and its offset (3,) from the strike point in face axes."""
    way = rng.choice(3, p=(0.5, 0.25, 0.25))
    if way == 0:
        return "strike", np.zeros(3)
    if way == 1:
        return "tip", -arm.mount[:3, :3].T @ arm.mount[:3, 3]
    own = rng.uniform(-0.1, 0.1, 3)
    return (float(own[0]), float(own[1]), float(own[2])), own


def _as_sent(arm: Arm, twist: Array, turns: Array, frame: str, offset: Array) -> Array:
    """World twists (N, 6) of the strike point along the frame's axes, of the point at `offset`."""
    linear = twist[:, :3] + np.cross(twist[:, 3:], turns @ offset)
    axes = {"world": np.eye(3)[None], "base": arm.base[None, :3, :3], "paddle": turns}[frame]
    axes = np.broadcast_to(axes, turns.shape)
    return np.hstack([np.einsum("mji,mj->mi", axes, part) for part in (linear, twist[:, 3:])])


def _marks(rng: Generator, along: Array) -> tuple[NDArray[np.bool_] | None, str]:
    """Strike marks where the commanded speed along the normal is largest, and how the log is judged."""
    at = str(rng.choice(("strikes", "throughout"), p=(0.85, 0.15)))
    way = rng.random()
    if way < 0.05:
        return None, at
    marks = np.zeros(len(along), dtype=bool)
    if way < 0.85:
        marks[int(np.argmax(np.abs(along)))] = True
        if rng.random() < 0.3:
            marks[rng.integers(len(along))] = True
    return marks, at


def quaternions(turns: Array) -> Array:
    """Unit quaternions (m, 4), w first, of turns (m, 3, 3), by the largest of four (Shepperd 1978)."""
    trace = np.einsum("mii->m", turns)
    squares = np.stack([trace, *(2 * turns[:, i, i] - trace for i in range(3))], axis=1)
    out = np.empty((len(turns), 4))
    for k, (turn, pick) in enumerate(zip(turns, np.argmax(squares, axis=1), strict=True)):
        sums, turning = (
            turn + turn.T,
            np.array([turn[2, 1] - turn[1, 2], turn[0, 2] - turn[2, 0], turn[1, 0] - turn[0, 1]]),
        )
        row = np.empty(4)
        if pick == 0:
            row[0], row[1:] = 1 + trace[k], turning
        else:
            i = int(pick) - 1
            row[0], row[1:] = turning[i], sums[i]
            row[1 + i] = 1 + squares[k, pick]
        out[k] = row / np.linalg.norm(row)
    return out
