"""trial.csv: a row a bounce."""

from __future__ import annotations

from collections.abc import Iterator

import numpy as np

from reach.evidence.trials import Run
from reach.report.rows import Cell, written
from reach.result import TrialResult

START_COLUMNS = ("start", "start_x_m", "start_y_m", "lateral_x_m_s", "lateral_y_m_s", "outcome", "recovered")
BOUNCE_COLUMNS = (
    *("bounce", "t_s", "ball_x_m", "ball_y_m", "ball_z_m", "face_x_m", "face_y_m"),
    *(
        "ball_in_x_m_s",
        "ball_in_y_m_s",
        "ball_in_z_m_s",
        "ball_out_x_m_s",
        "ball_out_y_m_s",
        "ball_out_z_m_s",
    ),
    *("spin_out_x_m_s", "spin_out_y_m_s", "spin_out_z_m_s"),
    *("paddle_m_s", "face_tilt_deg", "face_bearing_deg", "apex_m", "offset_m"),
)


def write(result: TrialResult) -> str:
    """Return the bounces as CSV, trial by trial; a trial with none has a row with its start alone.

    `start` and `bounce` count from 1. Spin is radius times angular velocity. World axes, but face_x and face_y.
    """
    rows = (row for place, run in enumerate(result.evidence.runs, start=1) for row in _rows(place, run))
    return written([*START_COLUMNS, *BOUNCE_COLUMNS], rows)


def _rows(place: int, run: Run) -> Iterator[list[Cell]]:
    start: list[Cell] = [
        *(place, float(run.offset[0]), float(run.offset[1]), float(run.lateral[0]), float(run.lateral[1])),
        *(str(run.outcome), bool(run.recovered)),
    ]
    c = run.contacts
    table = np.column_stack(
        [
            *(c.t_s, c.ball, c.face, c.ball_in, c.ball_out, c.spin_out, c.paddle_m_s),
            *(np.degrees(c.tilt_rad), np.degrees(c.tilt_bearing_rad), c.apex_m, c.offset_m),
        ]
    )
    for bounce, values in enumerate(table.tolist(), start=1):
        yield [*start, bounce, *values]
    if len(table) == 0:
        yield [*start, *(None for _ in BOUNCE_COLUMNS)]
