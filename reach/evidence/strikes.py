"""Strikes and tracking of a finished motion against the commanded one."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from reach.cell import STANDARD_GRAVITY_M_S2, Accept, Array, Contact
from reach.evidence.motion import FINE, Motion
from reach.evidence.record import Strike, Track
from reach.kinematics import Chain

STILL_M_S = (
    1e-3  # errors of speed along the normal up to here never fail: a share of next to nothing means nothing
)
Wanted = Callable[[Array], tuple[Array, Array, Array]]  # times -> twist, position, axes of the command


@dataclass(frozen=True, eq=False)
class Errors:
    """Commanded against delivered at k instants.

    wanted_normal, normal : (k,) speed along the commanded face normal, m/s
    lateral : (k,) size of the velocity error across it, m/s; velocity : (k,) of the whole
    position : (k,) m; tilt : (k,) angle between the normals, rad
    """

    wanted_normal: Array
    normal: Array
    lateral: Array
    velocity: Array
    position: Array
    tilt: Array


def compare(wanted: tuple[Array, Array, Array], twist: Array, position: Array, rotation: Array) -> Errors:
    """Errors of delivered twists (k, 6), points (k, 3) and axes (k, 3, 3) against the commanded ones."""
    wanted_twist, wanted_position, wanted_rotation = wanted
    normal = wanted_rotation[:, :, 2]
    error = twist[:, :3] - wanted_twist[:, :3]
    along = np.einsum("ki,ki->k", error, normal)
    wanted_normal = np.einsum("ki,ki->k", wanted_twist[:, :3], normal)
    across = error - along[:, None] * normal
    face = rotation[:, :, 2]
    sine = np.linalg.norm(np.cross(face, normal), axis=1)
    tilt = np.arctan2(sine, np.einsum("ki,ki->k", face, normal))
    return Errors(
        wanted_normal,
        wanted_normal + along,
        np.linalg.norm(across, axis=1),
        np.linalg.norm(error, axis=1),
        np.linalg.norm(position - wanted_position, axis=1),
        tilt,
    )


def window_times(time_s: float, half_s: float, period_s: float) -> Array:
    """Instants at which a strike is judged: the window around it, its ends and middle, at the fine rate."""
    count = int(np.ceil(half_s / (period_s / FINE)))
    return time_s + np.linspace(-half_s, half_s, 2 * count + 1) if count else np.array([time_s])


def strike_faults(errors: Errors, accept: Accept) -> tuple[str, ...]:
    """Which acceptance items fail anywhere in a window, in words."""
    found = []
    size = np.abs(errors.wanted_normal)
    allowed = np.maximum(accept.strike_speed_error_share * size, STILL_M_S)
    error = errors.normal - errors.wanted_normal
    worst = int(np.argmax(np.abs(error) / allowed))
    if not abs(error[worst]) <= allowed[worst]:  # so that a nan fails, here and below
        if size[worst] > STILL_M_S:
            fast = error[worst] * errors.wanted_normal[worst] > 0
            found.append(f"too {'fast' if fast else 'slow'} by {100 * abs(error[worst]) / size[worst]:.1f} %")
        else:
            found.append(f"{errors.normal[worst]:.3f} m/s along the normal, where none is commanded")
    if not (lateral := errors.lateral.max()) <= accept.strike_lateral_m_s:
        found.append(f"{lateral:.3f} m/s sideways")
    if not (off := errors.position.max()) <= accept.strike_position_m:
        found.append(f"{1000 * off:.1f} mm off")
    if not (tilt := errors.tilt.max()) <= accept.strike_tilt_error_rad:
        found.append(f"tilted by {np.degrees(tilt):.2f}°")
    return tuple(found)


def judge_strike(
    time_s: float,
    marked: bool,
    chain: Chain,
    motion: Motion,
    wanted: Wanted,
    accept: Accept,
    jitter_s: float,
    flight_s: float | None = None,
) -> Strike:
    """One strike of a motion over its window, widened by the drive's timing jitter; flight_s is to the next contact."""
    times = window_times(time_s, accept.strike_window_s / 2 + jitter_s, motion.period_s)
    q, v, _ = motion.at(times)
    position, rotation, twist = chain.twists(q, v)
    errors = compare(wanted(times), twist, position, rotation)
    middle = len(times) // 2
    worst = int(np.argmax(np.abs(errors.normal - errors.wanted_normal)))
    commanded = float(errors.wanted_normal[middle])
    asked = float(errors.wanted_normal[worst])
    tilt = float(errors.tilt.max())
    return Strike(
        time_s=time_s,
        marked=marked,
        commanded_m_s=commanded,
        delivered_m_s=float(errors.normal[middle]),
        delivered_share=float(errors.normal[worst]) / asked if abs(asked) > 1e-9 else None,
        lateral_m_s=float(errors.lateral.max()),
        tilt_error_deg=float(np.degrees(tilt)),
        position_error_m=float(errors.position.max()),
        faults=strike_faults(errors, accept),
        next_contact_shift_m=next_contact_shift(flight_s, tilt),
        shift_per_degree_m=next_contact_shift(flight_s, float(np.radians(1.0))),
    )


def next_contact_shift(flight_s: float | None, tilt_rad: float) -> float | None:
    """How far a tilt error moves the next contact: about 8 h θ at apex h, hence g T² θ after a flight of T seconds.

    A small tilt θ turns the ball's velocity by 2θ, and v = g T / 2 over T is the way.
    """
    return None if flight_s is None else float(STANDARD_GRAVITY_M_S2 * flight_s**2 * tilt_rad)


def flight_times(contacts_s: Array, speeds_m_s: Array, contact: Contact | None) -> list[float | None]:
    """Time in s from each contact (k,) to the next one.

    After the last, that of the steady rally which its paddle speed keeps up, u = v (1 - e)/(1 + e), T = 2v/g; None
    where there is no restitution to tell it by.
    """
    flights: list[float | None] = [float(t) for t in np.diff(contacts_s)]
    if not len(contacts_s):
        return flights
    if contact is None or contact.restitution >= 1:
        return [*flights, None]
    ball = abs(float(speeds_m_s[-1])) * (1 + contact.restitution) / (1 - contact.restitution)
    return [*flights, 2 * ball / STANDARD_GRAVITY_M_S2]


def track(
    motion: Motion, wanted: Wanted, position: Array, rotation: Array, twist: Array, end_row: int
) -> Track:
    """Commanded beside delivered at every row of a motion."""
    asked = wanted(motion.t_s)
    errors = compare(asked, twist, position, rotation)
    return Track(
        motion.t_s,
        errors.wanted_normal,
        errors.normal,
        errors.velocity,
        errors.position,
        errors.tilt,
        position,
        asked[1],
        rotation,
        twist,
        asked[0],
        np.arange(len(motion.q)) < max(end_row, 1),
    )


def throughout_faults(track_: Track, accept: Accept) -> tuple[str, ...]:
    """What fails where the whole log is judged, in words.

    Speed along the normal may err by the accepted share of the largest commanded speed; the rest is as at a strike.
    """
    during = track_.during
    peak = float(np.abs(track_.commanded_normal[during]).max(initial=0.0))
    speed = np.abs(track_.delivered_normal - track_.commanded_normal)
    allowed = accept.strike_speed_error_share * peak
    lateral = np.sqrt(np.maximum(track_.velocity_error**2 - speed**2, 0.0))
    checks = (
        (speed, max(allowed, STILL_M_S), "speed along the normal off by {:.4f} m/s", 1.0),
        (lateral, accept.strike_lateral_m_s, "{:.3f} m/s sideways", 1.0),
        (track_.position_error, accept.strike_position_m, "{:.1f} mm off the commanded path", 1000.0),
        (track_.tilt_error, accept.strike_tilt_error_rad, "tilted by {:.2f}°", 180 / np.pi),
    )
    found = []
    for values, allowed, text, factor in checks:
        at = int(np.argmax(np.where(during, values, -1.0)))
        if not values[at] <= allowed:
            found.append(text.format(values[at] * factor) + f" at {track_.t_s[at]:.3f} s")
    return tuple(found)
