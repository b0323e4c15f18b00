"""The library's verbs: follow a log, describe a cell, write what came out."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from os import PathLike
from pathlib import Path
from typing import Literal

import numpy as np
from numpy.typing import ArrayLike

from reach.cell import Cell, Follow, Vec3
from reach.describe import describe_cell as describe_cell
from reach.errors import Fault, InputError
from reach.follow.answer import answer
from reach.formats import check_arrays
from reach.result import FollowResult

Frame = Literal["world", "base", "paddle"]
Point = Literal["strike", "tip"] | Vec3


def follow_commands(
    cell: Cell,
    t_s: ArrayLike | None = None,
    twists: ArrayLike | None = None,
    *,
    frame: Frame | None = None,
    point: Point | None = None,
    strikes: ArrayLike | None = None,
    poses: ArrayLike | None = None,
    workers: int = 1,
    advice: bool = True,
    progress: Callable[[str], None] | None = None,
) -> FollowResult:
    """Say whether a cell's arm delivers commanded paddle twists, why not, and what would help.

    Parameters
    ----------
    cell : Cell
        From `load_cell`. Its [follow] table supplies the log and its reading where they are not given here.
    t_s : (N,) array, s
        Time stamps, strictly increasing.
    twists : (N, 6) array
        vx, vy, vz in m/s and wx, wy, wz in rad/s.
    frame, point
        The axes of the twists and the point that they refer to, as in the cell file; asked for, never guessed.
    strikes : (N,) array of bool
        Rows that mark contact instants.
    poses : (N, 7) array
        px, py, pz in m and a unit quaternion qw, qx, qy, qz of the strike frame in the world.
    workers : int
        Processes for the re-runs of the searches. Above 1, call from under `if __name__ == "__main__":`.
    advice : bool
        False leaves out the searches (headroom, needs, remedies), which take most of the time.
    progress : callable
        Called with a line of what is being done.

    Returns
    -------
    FollowResult

    Raises
    ------
    InputError
        Faults of the arrays, or no log, frame or point given anywhere.
    """
    if (t_s is None) != (twists is None):
        raise InputError([Fault("arrays", "follow", "give t_s and twists together, or neither")])
    settings = cell.follow
    if t_s is not None and twists is not None:
        log = check_arrays(
            np.asarray(t_s, dtype=float),
            np.asarray(twists, dtype=float),
            None if strikes is None else np.asarray(strikes),
            None if poses is None else np.asarray(poses, dtype=float),
        )
        if settings is None:
            if frame is None or point is None:
                what = "say what the twists mean: frame (world, base or paddle) and point (strike, tip or x, y, z)"
                raise InputError([Fault("arrays", "follow", what)])
            settings = Follow(frame=frame, point=point, commands=log)
        settings = replace(settings, commands=log)
    if settings is None:
        raise InputError([Fault(cell.path, "follow", "the cell has no [follow] table; give t_s and twists")])
    settings = replace(settings, frame=frame or settings.frame, point=point or settings.point)
    return answer(replace(cell, follow=settings), workers, advice, progress)


def write_results(result: FollowResult, folder: str | PathLike[str]) -> list[Path]:
    """Write verdict.json, motion.csv, report.html and evidence/ into a folder, each whole or not at all.

    Raises
    ------
    OutputError
        When something can't be written there.
    """
    from reach.report import write_folder

    return write_folder(result, Path(folder))
