"""rally.csv: a row a point of the envelope."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from reach.evidence.rallies import RallyPoints
from reach.report.rows import Cell, written
from reach.result import RallyResult

COLUMNS = (
    *("centre_x_m", "centre_y_m", "centre_z_m", "apex_m", "offset_m", "bearing_deg", "paddle_speed_m_s"),
    *("face_tilt_deg", "flight_s", "cycle_s", "margin_s", "verdict", "basis", "limit", "joint"),
)
MORE_COLUMNS = (
    *("time_bound_s", "speed_bound_m_s", "margin_free", "postures"),
    *("feasible_share", "feasible_low_share", "feasible_high_share", "largest_delay_s", "largest_tilt_deg"),
    *("largest_contact_offset_m", "largest_restitution_error", "reason"),
)


def write(result: RallyResult) -> str:
    """Return the points as CSV, empty where there is nothing.

    The posture of the strike at the centre stands in q_<joint>, rad or m.
    """
    joints = [f"q_{joint.name}" for joint in result.cell.arm.joints]
    return written([*COLUMNS, *joints, *MORE_COLUMNS], _rows(result.evidence.points))


def _rows(points: RallyPoints) -> Iterator[list[Cell]]:
    bearing, tilt = np.degrees(points.bearing_rad), np.degrees(points.face_tilt_rad)
    largest_tilt = np.degrees(points.largest_tilt_rad)
    for k in range(len(points.verdict)):
        yield [
            *(float(x) for x in points.centre[k]),
            *(
                float(column[k])
                for column in (points.apex_m, points.offset_m, bearing, points.paddle_speed_m_s)
            ),
            *(float(column[k]) for column in (tilt, points.flight_s, points.cycle_s, points.margin_s)),
            *(str(column[k]) for column in (points.verdict, points.basis, points.limit, points.joint)),
            *(float(x) for x in points.q[k]),
            float(points.time_bound_s[k]),
            float(points.speed_bound_m_s[k]),
            bool(points.margin_free[k]),
            int(points.postures[k]),
            *(
                float(column[k])
                for column in (points.feasible_share, points.feasible_low, points.feasible_high)
            ),
            *(float(column[k]) for column in (points.largest_delay_s, largest_tilt)),
            *(
                float(column[k])
                for column in (points.largest_contact_offset_m, points.largest_restitution_error)
            ),
            points.reason[k],
        ]
