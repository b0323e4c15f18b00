"""motion.csv: what the joints and the strike point do, a row per control period."""

from __future__ import annotations

import csv
import io

import numpy as np

from reach.cell import Array
from reach.report.document import DIGITS, encodable
from reach.result import FollowResult

PLACE = ("px_m", "py_m", "pz_m", "qw", "qx", "qy", "qz")
TWIST = ("vx_m_s", "vy_m_s", "vz_m_s", "wx_rad_s", "wy_rad_s", "wz_rad_s")
TIME_DIGITS = 15  # keeps a millisecond apart even where the log's zero is decades ago


def write(result: FollowResult) -> str:
    """Return the motion as CSV; the header alone where there is no motion."""
    joints = [encodable(joint.name) for joint in result.cell.arm.joints]
    states = [f"{kind}_{joint}" for kind in ("q", "v", "a", "tau") for joint in joints]
    out = io.StringIO()
    csv.writer(out, lineterminator="\n").writerow(["t_s", *states, *PLACE, *TWIST])
    table = _table(result)
    if table is not None:
        row_format = ",".join([f"%.{TIME_DIGITS}g"] + [f"%.{DIGITS}g"] * (table.shape[1] - 1)) + "\n"
        out.writelines(row_format % tuple(row) for row in table.tolist())
    return out.getvalue()


def quaternions(rotation: Array) -> Array:
    """Unit quaternions (m, 4), w first, of rotation matrices (m, 3, 3), without a change of sign on the way.

    Each is taken from the largest of its four components, which keeps every digit (Shepperd, 1978, J.
    Guidance and Control 1(3), from memory).
    """
    x, y, z = rotation[:, 0, 0], rotation[:, 1, 1], rotation[:, 2, 2]
    square = np.stack([1 + x + y + z, 1 + x - y - z, 1 - x + y - z, 1 - x - y + z], axis=1)  # 4 q_i²
    r = rotation
    product = np.empty((len(rotation), 4, 4))  # 4 q_i q_j
    product[:, range(4), range(4)] = square
    product[:, 0, 1] = product[:, 1, 0] = r[:, 2, 1] - r[:, 1, 2]
    product[:, 0, 2] = product[:, 2, 0] = r[:, 0, 2] - r[:, 2, 0]
    product[:, 0, 3] = product[:, 3, 0] = r[:, 1, 0] - r[:, 0, 1]
    product[:, 1, 2] = product[:, 2, 1] = r[:, 1, 0] + r[:, 0, 1]
    product[:, 1, 3] = product[:, 3, 1] = r[:, 0, 2] + r[:, 2, 0]
    product[:, 2, 3] = product[:, 3, 2] = r[:, 2, 1] + r[:, 1, 2]
    largest = product[np.arange(len(rotation)), np.argmax(square, axis=1)]
    unit = largest / np.linalg.norm(largest, axis=1, keepdims=True)
    if len(unit) == 0:
        return np.asarray(unit)
    turns = np.sum(unit[1:] * unit[:-1], axis=1) < 0
    first = -1.0 if unit[0, 0] < 0 else 1.0
    sign = first * np.cumprod(np.append(1.0, np.where(turns, -1.0, 1.0)))
    return np.asarray(unit * sign[:, None] + 0.0)


def _table(result: FollowResult) -> Array | None:
    evidence = result.evidence
    motion, track, torque = evidence.motion, evidence.track, evidence.torque
    if motion is None or track is None or torque is None:
        return None
    place = (track.position, quaternions(track.rotation))
    return np.column_stack([motion.t_s, motion.q, motion.v, motion.a, torque, *place, track.twist])
