"""Strikes of a followed motion, decided anew over their windows."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.trace import FINE, Trace
from reach.recheck.follow.command import SNAP_SHARE, Command, Log
from reach.recheck.follow.contacts import contacts
from reach.recheck.stored import Stored, largest, number_in
from reach.recheck.turns import between

MOTION = "motion.npz"
LONGEST_JITTER_S = 1.0  # of a drive
STILL_M_S = 1e-3  # errors of speed along the normal up to here never fail


def strike_items(
    stored: Stored, ground: Ground, log: Log, command: Command, trace: Trace
) -> tuple[list[Item], list[str]]:
    """Every strike over its window, or the whole log; and what is not delivered, in words."""
    accept, claims = ground.accept, stored.entries("strikes")
    counted, times = contacts(stored, log, command)
    found, missed = [counted] if len(times) or claims else [], 0
    jitter = 0.0 if stored.at("drive") is None else stored.between(0.0, LONGEST_JITTER_S, "drive", "jitter_s")
    half = float(accept["strike_window_s"]) / 2 + jitter
    for k, (time, claim) in enumerate(zip(times, claims, strict=False), start=1):
        item, delivered = _strike(k, float(time), half, ground, command, trace, claim)
        found.append(item)
        missed += not delivered
    faults = []
    if len(times) and accept["at"] == "strikes":
        needed = math.ceil(float(accept["strikes_share"]) * len(times) - 1e-9)
        if len(times) - missed < needed:
            faults.append(f"{missed} of {len(times)} strikes")
    else:
        during, counted_rows = _during(stored, log, trace)
        wrong = _throughout(during, ground, command, trace)
        kept = same("delivered", not wrong, not stored.at("throughout"))
        found.append(Item("throughout", "", (counted_rows, kept)))
        faults += wrong
    return found, faults


def _strike(
    number: int,
    time: float,
    half: float,
    ground: Ground,
    command: Command,
    trace: Trace,
    claim: dict[str, Any],
) -> tuple[Item, bool]:
    """One strike: its worst errors over the window against those claimed, and whether it counts as delivered."""
    count = math.ceil(half / (ground.period_s / FINE))
    times = time + np.linspace(-half, half, 2 * count + 1) if count else np.array([time])
    errors = _errors(ground, command, trace, times)
    limits = ground.accept
    delivered = bool(
        (
            np.abs(errors["along"])
            <= np.maximum(limits["strike_speed_error_share"] * np.abs(errors["asked"]), STILL_M_S)
        ).all()
        and errors["aside"].max() <= limits["strike_lateral_m_s"]
        and errors["off"].max() <= limits["strike_position_m"]
        and errors["tilt"].max() <= limits["strike_tilt_error_rad"]
    )
    middle = len(times) // 2
    own = {
        "commanded_m_s": (errors["asked"][middle], allowed.SPEED_M_S, "m/s"),
        "delivered_m_s": ((errors["asked"] + errors["along"])[middle], allowed.SPEED_M_S, "m/s"),
        "lateral_m_s": (errors["aside"].max(), allowed.SPEED_M_S, "m/s"),
        "position_error_m": (errors["off"].max(), allowed.PLACE_M, "m"),
        "tilt_error_deg": (np.degrees(errors["tilt"].max()), math.degrees(allowed.TURN_RAD), "°"),
    }
    checks = [
        Check(
            key.rsplit("_", 2 if unit == "m/s" else 1)[0].replace("_", " "),
            abs(float(value) - number_in(claim, key)),
            most + allowed.DIGITS * abs(float(value)),
            unit,
        )
        for key, (value, most, unit) in own.items()
    ]
    checks.append(same("delivered", delivered, claim.get("delivered")))
    return Item("strike", f"strike {number} at {time:.3f} s", tuple(checks)), delivered


def _errors(ground: Ground, command: Command, trace: Trace, times: np.ndarray) -> dict[str, np.ndarray]:
    """Commanded against delivered at times (k,): speed asked and missed along the normal, aside, place, tilt."""
    twist, position, axes = command.at(times)
    seen = ground.chain.seen(*_state(trace, times, ground.period_s))
    normal = axes[:, :, 2]
    error = seen.linear - twist[:, :3]
    along = np.einsum("ki,ki->k", error, normal)
    return {
        "asked": np.einsum("ki,ki->k", twist[:, :3], normal),
        "along": along,
        "aside": np.linalg.norm(error - along[:, None] * normal, axis=1),
        "off": np.linalg.norm(seen.place - position, axis=1),
        "tilt": between(seen.axes[:, :, 2], normal),
    }


def _state(trace: Trace, times: np.ndarray, period: float) -> tuple[np.ndarray, np.ndarray]:
    """Joint positions and velocities at times (k,); at the motion's ends the arm stays as it is there."""
    rows = trace.q[::FINE], trace.v[::FINE], trace.a[::FINE]
    ticks = (times - trace.t_s[0]) / period
    k = np.clip(np.floor(ticks + 1e-9).astype(int), 0, len(rows[0]) - 1)
    ahead = np.clip((ticks - k) * period, 0.0, period)[:, None]
    q, v, a = (values[k] for values in rows)
    return q + v * ahead + a * ahead**2 / 2, v + a * ahead


def _during(stored: Stored, log: Log, trace: Trace) -> tuple[np.ndarray, Check]:
    """Rows (m,) of the motion before the command's end, and whether they are those stored."""
    rows = len(trace.q) // FINE + 1
    periods = (log.end_s - log.t_s[0]) / trace.period_s
    own = np.arange(rows) < max(math.ceil(periods - SNAP_SHARE), 1)
    return own, same("rows judged", int(own.sum()), int(stored.array(MOTION, "during", (rows,), "b").sum()))


def _throughout(during: np.ndarray, ground: Ground, command: Command, trace: Trace) -> list[str]:
    """What fails where the whole log is judged: at every row before the command's end."""
    errors = _errors(ground, command, trace, trace.t_s[::FINE])
    peak = float(np.abs(errors["asked"][during]).max(initial=0.0))
    accept = ground.accept
    bounds = {
        "along": max(accept["strike_speed_error_share"] * peak, STILL_M_S),
        "aside": accept["strike_lateral_m_s"],
        "off": accept["strike_position_m"],
        "tilt": accept["strike_tilt_error_rad"],
    }
    return [name for name, most in bounds.items() if not largest(errors[name][during]) <= most]
