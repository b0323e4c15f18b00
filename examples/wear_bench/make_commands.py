"""Make the command log of an invented wear bench: a steady low rally, then an apex raised strike by strike.

The ball flies in vacuum and the paddle doesn't give. A flight of T seconds between two contacts at one height
has an apex of g T²/8 above that height and meets the paddle at v = g T/2. With e the restitution and n the face
normal, a ball that comes with v_in and shall leave with v_out fixes the strike:

    n ∥ v_out - v_in,    u = (v_out·n + e v_in·n)/(1 + e)

u is the paddle's speed along n; in a steady vertical rally it is v (1 - e)/(1 + e). The flight times are multiples
of the log's period, so every contact is a row of the log. Between contacts the paddle follows quintic strokes: from the
strike up and back to rest at the backswing, a wait if there is time, then the run-up. Nothing here was measured.
"""

from __future__ import annotations

import argparse
import csv
import io
import sys
from dataclasses import dataclass
from pathlib import Path

import numpy as np

G_M_S2 = 9.80665
PERIOD_S = 0.004
RESTITUTION = 0.70  # a soft, worn rubber; repeated in cell.toml
BALL_RADIUS_M = 0.020
CONTACT_M = np.array([0.60, 0.0, 0.50])  # strike point at rest, face up; repeated by start_rad in cell.toml
RUN_UP_M = 0.040  # the guard under the paddle leaves no more
IMPACT_M_S2 = -3.0  # paddle acceleration at contact: negative, inside the window of a self-stable rally
RUN_UP_SHAPE = 2.0  # run-up time in units of run-up/speed; 2 is a constant acceleration
RETURN_S = 0.30  # from contact back to the backswing, where the flight leaves that much
SETTLE_S = 0.40  # from the start posture to the first backswing, and from the last strike to rest

STEADY_FLIGHTS = 12
FLIGHT_S = np.array([0.452] * STEADY_FLIGHTS + [0.568, 0.684, 0.800, 0.916])  # before strike 2, 3, ...; the last one after
BALL_OFFSET_M = {5: (0.0, 0.012), 6: (0.008, 0.004), 7: (-0.006, 0.0), 8: (0.004, -0.010)}  # x, y; elsewhere 0

HEADER = (
    "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s,strike,px_m,py_m,pz_m,qw,qx,qy,qz".split(",")
)


@dataclass(frozen=True)
class Strikes:
    """The strikes of the log.

    Attributes
    ----------
    time_s : (k,)
    ball_in_m_s, ball_out_m_s : (k, 3)
    normal : (k, 3)
    speed_m_s : (k,) of the paddle along the normal
    point_m : (k, 3) strike point, a ball's radius behind the ball's centre
    """

    time_s: np.ndarray
    ball_in_m_s: np.ndarray
    ball_out_m_s: np.ndarray
    normal: np.ndarray
    speed_m_s: np.ndarray
    point_m: np.ndarray


def plan_strikes() -> Strikes:
    """The strikes that keep the rally up, from the flights alone."""
    count = len(FLIGHT_S)
    first = SETTLE_S + FLIGHT_S[0]
    time = first + np.append(0.0, np.cumsum(FLIGHT_S[:-1]))
    centre = CONTACT_M + np.array([(*BALL_OFFSET_M.get(i + 1, (0.0, 0.0)), BALL_RADIUS_M) for i in range(count)])
    across = np.diff(centre, axis=0) / FLIGHT_S[:-1, None]
    outward = np.vstack([across, np.zeros(3)]) + G_M_S2 / 2 * FLIGHT_S[:, None] * np.array([0.0, 0.0, 1.0])
    before = np.append(FLIGHT_S[0], FLIGHT_S[:-1])
    inward = np.vstack([np.zeros(3), across]) - G_M_S2 / 2 * before[:, None] * np.array([0.0, 0.0, 1.0])
    change = outward - inward
    normal = change / np.linalg.norm(change, axis=1)[:, None]
    speed = np.sum((outward + RESTITUTION * inward) * normal, axis=1) / (1 + RESTITUTION)
    return Strikes(time, inward, outward, normal, speed, centre - BALL_RADIUS_M * normal)


@dataclass(frozen=True)
class Quintic:
    """The quintic from one (value, rate, second rate) to another over begin_s..end_s, held at its ends outside."""

    begin_s: float
    end_s: float
    coefficients: np.ndarray

    @staticmethod
    def between(begin_s: float, end_s: float, first: tuple[float, ...], last: tuple[float, ...]) -> Quintic:
        span = end_s - begin_s
        rows = []
        for t in (0.0, span):
            rows.append([t**i for i in range(6)])
            rows.append([i * t ** max(i - 1, 0) for i in range(6)])
            rows.append([i * (i - 1) * t ** max(i - 2, 0) for i in range(6)])
        return Quintic(begin_s, end_s, np.linalg.solve(np.array(rows), np.array([*first, *last])))

    def at(self, t_s: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
        """Value and rate at times inside begin_s..end_s."""
        powers = (t_s - self.begin_s)[:, None] ** np.arange(6)
        return powers @ self.coefficients, powers[:, :5] @ (self.coefficients[1:] * np.arange(1, 6))


Track = list[Quintic]


def height_track(strikes: Strikes, end_s: float) -> Track:
    """Height of the strike point: return to the backswing, wait, run up, for every strike."""
    low = CONTACT_M[2] - RUN_UP_M
    track: Track = []
    now, state, back = 0.0, (CONTACT_M[2], 0.0, 0.0), SETTLE_S
    for time, speed, point, normal in zip(
        strikes.time_s, strikes.speed_m_s, strikes.point_m, strikes.normal, strict=True
    ):
        rise = speed * normal[2]
        start = time - RUN_UP_SHAPE * RUN_UP_M / rise
        rested = min(now + back, start)
        track.append(Quintic.between(now, rested, state, (low, 0.0, 0.0)))
        track.append(Quintic.between(rested, start, (low, 0.0, 0.0), (low, 0.0, 0.0)) if start > rested else track.pop())
        now, state, back = time, (point[2], rise, IMPACT_M_S2), RETURN_S
        track.append(Quintic.between(start, time, (low, 0.0, 0.0), state))
    track.append(Quintic.between(now, end_s, state, (CONTACT_M[2], 0.0, 0.0)))
    return track
