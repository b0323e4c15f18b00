"""The steady bounce at the centre: speed and acceleration at impact, what is stable by itself, and what errors do."""

from __future__ import annotations

from collections.abc import Sequence

import numpy as np

from reach.ball import Face, NoContact, NoFlight, restitution
from reach.cell import Array
from reach.evidence.rallies import Bounce, OffsetEdge
from reach.rally.court import Court
from reach.rally.cycle import LEGAL
from reach.rally.exchange import Exchange
from reach.rally.quintic import States, legs
from reach.strike.impact import hit

HALVINGS = 8


def bounces(
    court: Court, stance: int, apexes_m: Sequence[float], offsets: Sequence[OffsetEdge]
) -> tuple[Bounce, ...]:
    """The steady bounce at each apex, from one stance."""
    found = []
    for apex in apexes_m:
        try:
            exchange = court.ballistics[stance].steady(apex)
        except (NoFlight, NoContact):
            continue
        edges = [edge.largest_m or 0.0 for edge in offsets if edge.apex_m == apex]
        found.append(_bounce(court, stance, apex, exchange, min(edges, default=np.nan)))
    return tuple(found)


def _bounce(court: Court, stance: int, apex_m: float, exchange: Exchange, offset_m: float) -> Bounce:
    kit, strike = court.kit, exchange.strikes[0]
    accept = kit.cell.accept
    approach = strike.speed_m_s - float(strike.ball_in @ strike.normal)
    contact = kit.cell.contact
    assert contact is not None
    e = restitution(contact, approach)
    gravity = -kit.cell.arm.gravity_m_s2[2]
    window = window_m_s2(e, gravity)
    held, _ = court.delivered([exchange], stance, kit.rally.latency_s)
    impact, least = _accelerations(court, stance, exchange, window[0])
    half = accept.strike_window_s / 2
    out = float(np.linalg.norm(strike.ball_out))
    flight = exchange.flights_s[0]
    drift = 2 * out * flight  # m per rad: 8 h in vacuum
    drift_accepted = drift * accept.strike_tilt_error_rad
    face = Face.of(kit.cell.paddle)
    return Bounce(
        apex_m=apex_m,
        flight_s=flight,
        speed_m_s=strike.speed_m_s,
        approach_m_s=approach,
        restitution=e,
        held=bool(held[0]),
        window_m_s2=window,
        fastest_m_s2=fastest_band_m_s2(e, gravity),
        impact_m_s2=impact,
        least_m_s2=least,
        tolerated_m_s2=accept.strike_speed_error_share * strike.speed_m_s / half if half > 0 else np.inf,
        speed_per_restitution=-2 / (1 - e**2) if e < 1 else -np.inf,
        tilt_drift_m=drift_accepted,
        tilt_drift_m_per_deg=float(drift * np.radians(1.0)),
        place_apex_error_m=(1 - e) * accept.strike_position_m,
        offset_left_m=offset_m - drift_accepted - accept.strike_position_m,
        face_left_m=np.nan if face is None else face.half_width_m - accept.strike_position_m - drift_accepted,
    )


def window_m_s2(e: float, gravity_m_s2: float) -> tuple[float, float]:
    """Paddle acceleration at impact between which a bounce is stable with nobody looking.

    References
    ----------
    S. Schaal, C. G. Atkeson and D. Sternad, "One-handed juggling: a dynamical approach to a rhythmic movement task",
    J. Motor Behavior 28 (1996) 165; T. M. H. Dijkstra, H. Katsumata, A. de Rugy and D. Sternad, Nonlinear Studies 11
    (2004) 319. The determinant of the map is e², its trace 1 + e² + (1 + e)² a / g.
    """
    return -2 * gravity_m_s2 * (1 + e**2) / (1 + e) ** 2, 0.0


def fastest_band_m_s2(e: float, gravity_m_s2: float) -> tuple[float, float]:
    """Acceleration between which the map's eigenvalues have the size e, the least there is."""
    return -gravity_m_s2, -gravity_m_s2 * ((1 - e) / (1 + e)) ** 2


def _accelerations(court: Court, stance: int, exchange: Exchange, least_m_s2: float) -> tuple[float, float]:
    """Paddle acceleration along the normal at impact: with joints at constant velocity, and the least legal one.

    Legal: the quintic from impact to impact, with that acceleration at both, keeps every kept-back limit.
    """
    player = court.players[stance]
    played = player.play([exchange], 0.0)
    q, v = played.q[:1], played.v[:1]
    normal = exchange.strikes[0].normal
    speed = exchange.strikes[0].speed_m_s
    drift = float(court.kit.setting.arm.twist_terms(q[0], v[0])[1][:3] @ normal)
    if speed <= 0:
        return drift, np.nan
    tangent = v / speed

    def legal(acceleration: float) -> bool:
        state = States(q, v, tangent * (acceleration - drift))
        made = legs(state, state, np.array(exchange.flights_s[:1]))
        return bool(court.kit.gauge.uses(made).max() <= LEGAL)

    if legal(least_m_s2):
        return drift, least_m_s2
    if not legal(0.0):
        return drift, np.nan
    low, high = least_m_s2, 0.0
    for _ in range(HALVINGS):
        middle = (low + high) / 2
        low, high = (low, middle) if legal(middle) else (middle, high)
    return drift, high


def impulse(court: Court, stance: int, bounces: Sequence[Bounce]) -> tuple[float, Array, Array]:
    """Effective mass in kg, joint velocity jump (n,) and joint impulse (n,) of the hardest steady hit at the centre."""
    kit = court.kit
    hardest = max(bounces, key=lambda one: one.approach_m_s)
    up = np.array([0.0, 0.0, 1.0])
    struck = hit(
        kit.setting.arm, court.stances[stance], up, kit.cell.ball, hardest.restitution, hardest.approach_m_s
    )
    return struck.effective_mass_kg, struck.velocity_jump, struck.joint_impulse
