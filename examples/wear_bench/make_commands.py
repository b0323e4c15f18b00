"""Make the command log of an invented wear bench: a steady low rally, then an apex raised strike by strike.

The ball flies in vacuum and the paddle doesn't give. A flight of T seconds between two contacts at one height
has an apex g T²/8 above that height and meets the paddle at v = g T/2. With e the restitution and n the face
normal, a ball that comes with v_in and shall leave with v_out fixes the strike:

    n ∥ v_out - v_in,    u = (v_out·n + e v_in·n)/(1 + e)

u is the paddle's speed along n; in a steady vertical rally it is v (1 - e)/(1 + e). The flight times are
multiples of the log's period, so every contact is a row of the log. Between contacts the strike point follows
quintics: in the held rally one from contact to contact; before a raise one down to rest, a wait, and one up over
the same short way. Everything is computed; nothing was measured.
"""

from __future__ import annotations

import csv
import io
import sys
from dataclasses import dataclass
from itertools import pairwise
from pathlib import Path

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Key = tuple[float, float, float, float]  # time, value, its rate, its second rate

G_M_S2 = 9.80665
PERIOD_S = 0.004
RESTITUTION = 0.70  # a soft, worn rubber; cell.toml says the same
BALL_RADIUS_M = 0.020
START_M = (0.60, 0.0, 0.50)  # strike point at rest, face up; cell.toml's start_rad leads there
RUN_UP_M = 0.035  # for a raise the paddle waits this far below the contact and runs up from there
RUN_UP_SHAPE = 2.0  # run-up time over RUN_UP_M/u; 2 would hold a constant acceleration
IMPACT_M_S2 = -3.0  # along the normal at contact: slowing down, as a rally that steadies itself wants it
RETURN_S = 0.40  # from a contact down to that wait, where the flight leaves so much
EDGE_S = 0.40  # at rest before the first ball falls, and from the last contact to rest

STEADY_STRIKES = 8
# Flight times: into strikes 1 to 8 and out of the 8th the held rally, then a higher apex with every strike.
# The last flight is the one that strike 12 starts.
FLIGHTS_S = np.array([0.508] * (STEADY_STRIKES + 1) + [0.640, 0.760, 0.880, 1.000])
BALL_OFFSETS_M = {3: (0.0, 0.012), 4: (0.008, 0.004), 5: (-0.006, 0.0), 6: (0.004, -0.010)}  # strike: x, y

REST = (*START_M, 0.0, 0.0)  # x, y, z and the two parts of the tilt, at both ends of the log
COLUMNS = "t_s vx_m_s vy_m_s vz_m_s wx_rad_s wy_rad_s wz_rad_s strike px_m py_m pz_m qw qx qy qz".split()


@dataclass(frozen=True)
class Strikes:
    """The strikes, one a row.

    Attributes
    ----------
    time_s : (k,)
    ball_in_m_s, ball_out_m_s : (k, 3)
    normal : (k, 3)
    speed_m_s : (k,) of the paddle, along the normal
    point_m : (k, 3) strike point, a ball's radius behind the ball's centre
    """

    time_s: Array
    ball_in_m_s: Array
    ball_out_m_s: Array
    normal: Array
    speed_m_s: Array
    point_m: Array


def plan_strikes() -> Strikes:
    """The strikes that keep the rally up, from the flights and the ball's offsets alone."""
    count = len(FLIGHTS_S) - 1
    before, after = FLIGHTS_S[:-1, None], FLIGHTS_S[1:, None]
    time = EDGE_S + np.cumsum(FLIGHTS_S[:-1])
    offsets = np.array([BALL_OFFSETS_M.get(i + 1, (0.0, 0.0)) for i in range(count)])
    centre = START_M + np.column_stack([offsets, np.full(count, BALL_RADIUS_M)])
    across = np.vstack([np.zeros(3), np.diff(centre, axis=0) / before[1:], np.zeros(3)])
    up = np.array([0.0, 0.0, G_M_S2 / 2])
    ball_in, ball_out = across[:-1] - before * up, across[1:] + after * up
    normal = (ball_out - ball_in) / np.linalg.norm(ball_out - ball_in, axis=1)[:, None]
    speed = np.sum((ball_out + RESTITUTION * ball_in) * normal, axis=1) / (1 + RESTITUTION)
    return Strikes(time, ball_in, ball_out, normal, speed, centre - BALL_RADIUS_M * normal)


def keys(strikes: Strikes) -> list[list[Key]]:
    """What x, y, z of the strike point and the two parts of the tilt vector pass through, and when."""
    end = float(strikes.time_s[-1]) + EDGE_S
    turn = np.arccos(strikes.normal[:, 2]) / np.maximum(np.linalg.norm(strikes.normal[:, :2], axis=1), 1e-12)
    tilt = np.column_stack([-strikes.normal[:, 1], strikes.normal[:, 0]]) * turn[:, None]
    rows: list[list[Key]] = [[(0.0, rest, 0.0, 0.0)] for rest in REST]
    low = START_M[2] - RUN_UP_M
    for row, rest in zip(rows, REST, strict=True):
        row.append((EDGE_S, rest, 0.0, 0.0))
    for i, time in enumerate(strikes.time_s):
        if i >= STEADY_STRIKES:
            begin = time - RUN_UP_SHAPE * RUN_UP_M / strikes.speed_m_s[i]
            rested = min(float(strikes.time_s[i - 1]) + RETURN_S, begin)
            rows[2] += [(t, low, 0.0, 0.0) for t in sorted({rested, begin})]
        for axis in range(3):
            part, speed = strikes.normal[i, axis], strikes.speed_m_s[i]
            rows[axis].append((time, strikes.point_m[i, axis], speed * part, IMPACT_M_S2 * part))
        for axis in range(2):
            rows[3 + axis].append((time, tilt[i, axis], 0.0, 0.0))
    for row, rest in zip(rows, REST, strict=True):
        row.append((end, rest, 0.0, 0.0))
    return rows


def through(row: list[Key], t_s: Array) -> tuple[Array, Array]:
    """Value and rate, at times (m,), of the quintics through the keys."""
    value, rate = np.empty_like(t_s), np.empty_like(t_s)
    for (begin, x0, v0, a0), (end, x1, v1, a1) in pairwise(row):
        span = end - begin
        inside = (t_s >= begin - 1e-9) & (t_s <= end + 1e-9)
        s = (t_s[inside] - begin) / span
        c1, c2 = v0 * span, a0 * span**2 / 2
        x, v, a = x1 - x0 - c1 - c2, v1 * span - c1 - 2 * c2, a1 * span**2 - 2 * c2  # what is left to reach
        c3, c4, c5 = 10 * x - 4 * v + a / 2, -15 * x + 7 * v - a, 6 * x - 3 * v + a / 2
        value[inside] = x0 + s * (c1 + s * (c2 + s * (c3 + s * (c4 + s * c5))))
        rate[inside] = (c1 + s * (2 * c2 + s * (3 * c3 + s * (4 * c4 + s * 5 * c5)))) / span
    return value, rate


def turning(tilt: Array, rate: Array) -> tuple[Array, Array]:
    """Unit quaternions (m, 4) of rotation vectors (m, 3), and their angular velocity (m, 3) in world axes.

    The left Jacobian of the rotation group, by its series to the third order: exact to 1e-8 at 2°.
    """
    angle = np.linalg.norm(tilt, axis=1)[:, None]
    quaternion = np.hstack([np.cos(angle / 2), tilt / 2 * np.sinc(angle / (2 * np.pi))])
    once = np.cross(tilt, rate)
    twice = np.cross(tilt, once)
    return quaternion, rate + once / 2 + twice / 6 + np.cross(tilt, twice) / 24


def text() -> str:
    """The whole log as CSV."""
    strikes = plan_strikes()
    rows = round((float(strikes.time_s[-1]) + EDGE_S) / PERIOD_S) + 1
    t_s: Array = PERIOD_S * np.arange(rows, dtype=np.float64)
    tracks = [through(row, t_s) for row in keys(strikes)]
    value, rate = (np.column_stack([track[i] for track in tracks]) for i in (0, 1))
    flat = np.zeros((rows, 1))
    quaternion, spin = turning(np.hstack([value[:, 3:], flat]), np.hstack([rate[:, 3:], flat]))
    mark = np.zeros(rows, dtype=int)
    mark[np.rint(strikes.time_s / PERIOD_S).astype(int)] = 1
    out = io.StringIO()
    writer = csv.writer(out, lineterminator="\n")
    writer.writerow(COLUMNS)
    for k in range(rows):
        twist = [f"{x + 0.0:.6f}" for x in np.round([*rate[k, :3], *spin[k]], 6)]
        pose = [f"{x + 0.0:.6f}" for x in np.round([*value[k, :3], *quaternion[k]], 6)]
        writer.writerow([f"{t_s[k]:.3f}", *twist, int(mark[k]), *pose])
    return out.getvalue()


def main(arguments: list[str]) -> int:
    """Write commands.csv beside this file; with --check, say whether it is there already."""
    path = Path(__file__).with_name("commands.csv")
    if arguments not in ([], ["--check"]):
        print("usage: make_commands.py [--check]", file=sys.stderr)
        return 2
    if arguments:
        same = path.is_file() and path.read_text(encoding="utf-8") == text()
        print(f"{path.name} {'is' if same else 'is NOT'} what this script makes")
        return 0 if same else 1
    path.write_text(text(), encoding="utf-8", newline="\n")
    return 0


if __name__ == "__main__":
    sys.exit(main(sys.argv[1:]))
