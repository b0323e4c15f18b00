"""Checks on a command log that stand once, for every file format and for arrays handed over in Python."""

from __future__ import annotations

from typing import Literal

import numpy as np
from numpy.typing import ArrayLike, NDArray

from reach.cell import Array, CommandLog
from reach.errors import FaultList
from reach.formats.capped import ByKind
from reach.formats.fixed import read_only
from reach.formats.log_time import TIME_COLUMN, Place, TimeOrder
from reach.formats.magnitude import LARGEST, LARGEST_STAMP_S

TWIST_COLUMNS = ("vx_m_s", "vy_m_s", "vz_m_s", "wx_rad_s", "wy_rad_s", "wz_rad_s")
POSE_COLUMNS = ("px_m", "py_m", "pz_m", "qw", "qx", "qy", "qz")
STRIKE_COLUMN = "strike"

DEFAULT_MAX_GAP_S = 0.1
FASTEST_M_S = 20.0  # no arm's paddle is faster: the log is in mm/s
FASTEST_RAD_S = 100.0  # nor turns faster: the log is in deg/s
FARTHEST_M = 20.0  # nor is farther from its world's origin: the pose is in mm
QUATERNION_SLACK = 1e-3


def check_arrays(
    t_s: ArrayLike,
    twist: ArrayLike,
    strike: ArrayLike | None = None,
    pose: ArrayLike | None = None,
    max_gap_s: float = DEFAULT_MAX_GAP_S,
    time_faults: Literal["refuse", "mend"] | str = "refuse",
    source: str = "arrays",
    place: Place | None = None,
) -> CommandLog:
    """Check a log of commanded twists and return it, read-only.

    Parameters
    ----------
    t_s : (N,) s, strictly increasing unless mended
    twist : (N, 6) m/s and rad/s, linear then angular
    strike : (N,) 0 or 1, optional
    pose : (N, 7) position in m and quaternion w, x, y, z, optional
    max_gap_s : float
        A longer time between neighbours is a fault.
    time_faults : "refuse" or "mend"
        "mend" keeps the last of rows of the same time, drops rows that go back by at most `max_gap_s`, and
        lets the interpolation bridge gaps of up to three times `max_gap_s`; each is listed in `mends`.
    source : str
        Shown in faults.
    place : callable, optional
        (row, column) -> text; by default "row i" from 1.

    Raises
    ------
    InputError
        With every fault found.
    """
    faults = FaultList(source)
    columns = _Columns(faults, place or _by_row)
    times = columns.table(t_s, TIME_COLUMN, 1, (TIME_COLUMN,))
    rows = None if times is None else len(times)
    twists = columns.table(twist, "twist", rows, TWIST_COLUMNS)
    poses = None if pose is None else columns.table(pose, "pose", rows, POSE_COLUMNS)
    marks = None if strike is None else columns.marks(strike, rows)
    if times is not None and len(times) < 2:
        few = "no rows" if len(times) == 0 else "one row"
        faults.add("whole log", f"has {few}; at least two are needed")
    columns.raise_if_any()
    assert times is not None and twists is not None
    columns.plausible(twists, poses)
    if poses is not None:
        poses = columns.unit_quaternions(poses)
    order = TimeOrder(max_gap_s, time_faults == "mend", columns.place, columns.kinds)
    keep, marks = order.rows(times[:, 0], marks)
    columns.raise_if_any()
    return CommandLog(
        read_only(times[keep, 0]),
        read_only(twists[keep]),
        None if marks is None else read_only(marks[keep]),
        None if poses is None else read_only(poses[keep]),
        tuple(order.mends),
        source,
    )


def _by_row(row: int, column: str) -> str:
    return f"row {row + 1}, column {column}" if column else f"row {row + 1}"


class _Columns:
    """The checks, sharing the fault list and the way places are told."""

    def __init__(self, faults: FaultList, place: Place):
        self.faults, self.place, self.kinds = faults, place, ByKind(faults, "whole log")

    def raise_if_any(self) -> None:
        """Raise InputError with what was found so far, long lists of a kind cut short."""
        self.kinds.close()
        self.faults.raise_if_any()

    def table(self, values: ArrayLike, name: str, rows: int | None, columns: tuple[str, ...]) -> Array | None:
        """Values as a finite (N, len(columns)) array of numbers."""
        try:
            array = np.asarray(values)
            if array.dtype.kind not in "iuf" and array.size:
                raise TypeError
            with np.errstate(over="ignore"):
                array = array.astype(np.float64)
        except (TypeError, ValueError):
            self.faults.add(name, "is no array of numbers; give one")
            return None
        if array.ndim == 1 and (len(columns) == 1 or array.size == 0):
            array = array.reshape(-1, len(columns))
        expected = rows if len(columns) > 1 else None
        if (
            array.ndim != 2
            or array.shape[1] != len(columns)
            or (expected is not None and len(array) != expected)
        ):
            count = "N" if expected is None else str(expected)
            wanted = f"({count}, {len(columns)})" if len(columns) > 1 else "(N,)"
            shape = np.shape(values)
            self.faults.add(name, f"has shape {shape}; give {wanted}: {', '.join(columns)}")
            return None
        self.kinds.add_each(
            "not finite", ~np.isfinite(array), array, self.place, columns, "give a finite number"
        )
        most = LARGEST_STAMP_S if name == TIME_COLUMN else LARGEST
        beyond = np.isfinite(array) & (np.abs(array) > most)
        told = f"out of any range that means something; give a size of at most {most:g}"
        self.kinds.add_each("out of range", beyond, array, self.place, columns, told)
        return array

    def marks(self, strike: ArrayLike, rows: int | None) -> NDArray[np.bool_] | None:
        """Strike marks as (N,) truth values."""
        array = np.asarray(strike)
        if array.ndim != 1 or (rows is not None and len(array) != rows):
            self.faults.add(STRIKE_COLUMN, f"has shape {array.shape}; give ({rows},)")
            return None
        if array.dtype.kind not in "biuf":
            self.faults.add(STRIKE_COLUMN, "is no array of 0 and 1; give one")
            return None
        for row in np.flatnonzero((array != 0) & (array != 1)):
            where = self.place(int(row), STRIKE_COLUMN)
            self.kinds.add("strike neither 0 nor 1", where, f"is {array[row]:g}; give 1 at contacts, else 0")
        return np.asarray(array == 1, dtype=np.bool_)

    def plausible(self, twists: Array, poses: Array | None) -> None:
        """Refuse what only a wrong unit explains."""
        checks = [
            (np.linalg.norm(twists[:, :3], axis=1), FASTEST_M_S, TWIST_COLUMNS[0], "m/s", "mm/s"),
            (np.linalg.norm(twists[:, 3:], axis=1), FASTEST_RAD_S, TWIST_COLUMNS[3], "rad/s", "deg/s"),
        ]
        if poses is not None:
            checks.append((np.linalg.norm(poses[:, :3], axis=1), FARTHEST_M, POSE_COLUMNS[0], "m", "mm"))
        for sizes, most, column, unit, slip in checks:
            row = int(np.argmax(sizes))
            if sizes[row] > most:
                self.faults.add(
                    self.place(row, column),
                    f"size {sizes[row]:.4g} {unit} is above {most:g}; the log looks like {slip}: convert it",
                )

    def unit_quaternions(self, poses: Array) -> Array:
        """Poses with their quaternions scaled to length one; one far from it is a fault."""
        lengths = np.linalg.norm(poses[:, 3:], axis=1)
        for row in np.flatnonzero(~(np.abs(lengths - 1) <= QUATERNION_SLACK)):
            self.kinds.add(
                "quaternion not of length 1",
                self.place(int(row), POSE_COLUMNS[3]),
                f"the quaternion has length {lengths[row]:.4g}; give qw, qx, qy, qz of length 1",
            )
        return np.hstack([poses[:, :3], poses[:, 3:] / np.where(lengths > 0, lengths, 1)[:, None]])
