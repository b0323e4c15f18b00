"""survey.csv: a row a strike."""

from __future__ import annotations

import csv
import io
from collections.abc import Iterable, Iterator

import numpy as np

from reach.cell import Array
from reach.evidence.points import Points, Texts
from reach.report.document import DIGITS, encodable
from reach.result import SurveyResult

COLUMNS = (
    *("x_m", "y_m", "z_m", "nx", "ny", "nz", "paddle_speed_m_s", "verdict", "basis", "demonstrated_m_s"),
    *("bound_still_m_s", "bound_free_m_s", "limit", "joint", "phase", "family"),
)
MORE_COLUMNS = (
    *("dx", "dy", "dz"),
    *(
        "effective_mass_kg",
        "to_limit_share",
        "approach_m_s",
        "ball_impulse_free_n_s",
        "ball_impulse_locked_n_s",
    ),
    *("velocity_jump_free_max_rad_s", "joint_impulse_locked_max_nm_s", "stroke", "postures", "reason"),
)
ROWS = 4096  # formatted at once


def write(result: SurveyResult) -> str:
    """Return the strikes as CSV, empty where there is nothing; `inf` where nothing bounds a speed.

    The largest velocity jump and impulse of a row are of its turning joints; evidence/ has every joint's.
    """
    joints = [f"q_{encodable(joint.name)}" for joint in result.cell.arm.joints]
    out = io.StringIO()
    csv.writer(out, lineterminator="\n").writerow([*COLUMNS, *joints, *MORE_COLUMNS])
    turning = np.array([not joint.sliding for joint in result.cell.arm.joints], dtype=bool)
    points = result.evidence.points
    for start in range(0, len(points.verdict), ROWS):
        rows = slice(start, start + ROWS)
        for line in zip(*_columns(points, rows, turning), strict=True):
            out.write(",".join(line) + "\n")
    return out.getvalue()


def _columns(points: Points, rows: slice, turning: np.ndarray) -> Iterator[list[str]]:
    """Give the cells of some rows from left to right: runs of columns of numbers are joined already."""
    yield _numbers(points.position[rows], points.normal[rows], points.required_m_s[rows])
    yield from (_texts(points.verdict[rows]), _texts(points.basis[rows]))
    yield _numbers(points.demonstrated_m_s[rows], points.bound_still_m_s[rows], points.bound_free_m_s[rows])
    yield from (_texts(column[rows]) for column in (points.limit, points.joint, points.phase, points.family))
    yield _numbers(
        points.q[rows],
        points.direction[rows],
        points.effective_mass_kg[rows],
        points.to_limit_share[rows],
        points.approach_m_s[rows],
        points.ball_impulse[rows],
        _largest(points.velocity_jump[rows][:, turning]),
        _largest(points.joint_impulse[rows][:, turning]),
    )
    yield _texts(points.stroke[rows])
    yield _numbers(points.postures[rows])
    yield list(map(_quoted, points.reason[rows]))


def _numbers(*columns: Array | np.ndarray) -> list[str]:
    """Return each row of some columns (m,) or (m, k) as one text with commas inside; nan is nothing."""
    table = (
        np.column_stack([np.asarray(column, dtype=np.float64) for column in columns]) + 0.0
    )  # no negative zero
    line = ",".join([f"%.{DIGITS}g"] * table.shape[1]) + "\n"
    text = (line * len(table)) % tuple(table.ravel().tolist())
    return text.replace("nan", "").split("\n")[:-1]


def _largest(values: Array) -> Array:
    """Return the largest size in each row (m,) of values (m, k), nan left out; nan where there is none."""
    sizes = np.where(np.isnan(values), -1.0, np.abs(values)).max(axis=1, initial=-1.0)
    return np.where(sizes < 0, np.nan, sizes)


def _texts(column: Texts) -> list[str]:
    """Return the cells of a column of few different texts."""
    words, which = np.unique(column, return_inverse=True)
    quoted = [_quoted(str(word)) for word in words]
    return [quoted[k] for k in which.tolist()]


def _quoted(text: str) -> str:
    """Return a text as a cell that holds it whole (RFC 4180)."""
    text = encodable(text)
    return '"' + text.replace('"', '""') + '"' if _any_of(text, '",\n\r') else text


def _any_of(text: str, signs: Iterable[str]) -> bool:
    return any(sign in text for sign in signs)
