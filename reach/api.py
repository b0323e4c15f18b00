"""The library's verbs: follow, survey, size a rally, try a law, describe a cell, write what came out, recheck it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from os import PathLike, fspath
from pathlib import Path
from typing import Literal, cast, get_args

import numpy as np
from numpy.typing import ArrayLike

from reach.advice.answer import answer as follow_answer
from reach.cell import Cell, CommandLog, Follow, Input, Vec3
from reach.describe import describe_cell as describe_cell
from reach.errors import Fault, FaultList, InputError
from reach.formats import check_arrays, check_span
from reach.rally.answer import answer as rally_answer
from reach.result import Answer, FollowResult, RallyResult, RecheckResult, SurveyResult, TrialResult
from reach.survey.answer import answer as survey_answer
from reach.trial.answer import answer as trial_answer
from reach.verdict import judge_recheck

Frame = Literal["world", "base", "paddle"]
Point = Literal["strike", "tip"] | Vec3
NO_LOG = CommandLog(np.zeros(0), np.zeros((0, 6)))


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
    seed: int = 0,
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
    seed : int
        Of the random starts of inverse kinematics.
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
    arrays = t_s is not None and twists is not None
    if not arrays and any(given is not None for given in (t_s, twists, strikes, poses)):
        raise InputError(
            [Fault("arrays", "follow", "give t_s and twists together; strikes and poses belong to them")]
        )
    if not arrays and cell.follow is None:
        raise InputError([Fault(cell.path, "follow", "the cell has no [follow] table; give t_s and twists")])
    if cell.follow is None and cell.arm.start is None:
        raise InputError(
            [Fault(cell.path, "arm.start_rad", "missing; give the posture that the log starts from")]
        )
    settings = _settings(cell, frame, point)
    if t_s is not None and twists is not None:
        gaps = (settings.max_gap_s, settings.time_faults)
        log, faults = check_arrays(t_s, twists, strikes, poses, *gaps), FaultList("arrays")
        check_span(log, cell.period_s, faults, "t_s")
        faults.raise_if_any()
        settings = replace(settings, commands=log)
    return follow_answer(replace(cell, follow=settings), workers, advice, progress, seed)


def survey_strikes(
    cell: Cell,
    *,
    workers: int = 1,
    seed: int = 0,
    advice: bool = True,
    progress: Callable[[str], None] | None = None,
) -> SurveyResult:
    """Say where a cell's arm can strike, and how fast, at every strike of its [survey] table.

    Parameters
    ----------
    cell : Cell
        From `load_cell`.
    workers, seed, progress
        As for `follow_commands`; the answer is the same for any number of workers.
    advice : bool
        False leaves out the searches (remedies, headroom), which take most of the time.

    Returns
    -------
    SurveyResult
        After an interrupt with what was done until then, the rest undecided.

    Raises
    ------
    InputError
        Where the cell has no [survey] table.
    """
    _has(cell, "survey", cell.survey)
    return survey_answer(cell, workers, advice, progress, seed)


def size_rally(
    cell: Cell,
    *,
    workers: int = 1,
    seed: int = 0,
    advice: bool = True,
    progress: Callable[[str], None] | None = None,
) -> RallyResult:
    """Say how large the usable juggling envelope of a cell is: apexes, offsets and bearings, and what bounds them.

    Parameters
    ----------
    cell : Cell
        From `load_cell`, with [rally], [ball] and [contact].
    workers, seed, progress
        As for `survey_strikes`.
    advice : bool
        False leaves out the searches (remedies, headroom).

    Returns
    -------
    RallyResult
        After an interrupt with what was done until then, the rest undecided.

    Raises
    ------
    InputError
        Where the cell has no [rally] table.
    """
    _has(cell, "rally", cell.rally)
    return rally_answer(cell, workers, advice, progress, seed)


def try_law(
    cell: Cell,
    *,
    workers: int = 1,
    seed: int = 0,
    allow_code: bool = False,
    advice: bool = True,
    progress: Callable[[str], None] | None = None,
) -> TrialResult:
    """Say whether a law of control, on a cell's arm, keeps the ball up, and from which starts.

    Parameters
    ----------
    cell : Cell
        From `load_cell`, with [trial], [ball] and [contact].
    workers, progress
        As for `survey_strikes`.
    seed : int
        Of random starts, the sensor's noise and the random starts of inverse kinematics.
    allow_code : bool
        Whether a Python file named by trial.law may run. It can do whatever you can.
    advice : bool
        False leaves out what would help where starts are lost.

    Returns
    -------
    TrialResult
        After an interrupt with what was tried until then, the other starts undecided.

    Raises
    ------
    InputError
        Where the cell has no [trial] table, or the law may not run, can't be loaded or has no such gain.
    """
    _has(cell, "trial", cell.trial)
    return trial_answer(cell, workers, allow_code, advice, progress, seed)


def recheck_results(
    folder: str | PathLike[str], *, progress: Callable[[str], None] | None = None
) -> RecheckResult:
    """Say whether a second engine, which shares no code with the first, agrees with what a command stored.

    Parameters
    ----------
    folder : path
        That a command wrote its results to (`write_results`). The inputs that it names are looked for from the
        present folder, as the command was given them.
    progress : callable
        As for `follow_commands`.

    Returns
    -------
    RecheckResult
        Torques need the extra `second-opinion`; without it they count as not checkable.

    Raises
    ------
    InputError
        The folder is no finished run's, or a file of it or an input has changed since.
    """
    from reach.recheck.answer import opinion

    found = opinion(folder, progress)
    verdict = judge_recheck(found.items, found.command, found.verdict)
    return RecheckResult(
        folder=fspath(folder),
        of=found.command,
        stored=found.verdict,
        items=found.items,
        verdict=verdict,
        engine=found.engine,
        files=tuple(Input(path, digest) for path, digest in found.files),
        notes=found.notes,
        versions=found.versions,
    )


def _has(cell: Cell, table: str, found: object) -> None:
    """Raise where a cell lacks a table."""
    if found is None:
        raise InputError([Fault(cell.path, table, f"the cell has no [{table}] table")])


def _settings(cell: Cell, frame: object, point: object) -> Follow:
    """The cell's [follow] with frame and point as given, checked; its log still the cell's own."""
    settings, faults = cell.follow, FaultList("arrays")
    if frame is None and settings is not None:
        frame = settings.frame
    if point is None and settings is not None:
        point = settings.point
    if frame is None or point is None:
        faults.add(
            "follow",
            "say what the twists mean: frame (world, base, paddle) and point (strike, tip, or x, y, z)",
        )
        faults.raise_if_any()
    if frame not in get_args(Frame):
        faults.add("frame", f"{frame!r} is none of world, base, paddle; say along whose axes the twists are")
    if not isinstance(point, str):
        numbers = np.asarray(point, dtype=object).ravel().tolist()
        finite = all(isinstance(x, int | float) and np.isfinite(x) for x in numbers)
        point = tuple(float(x) for x in numbers) if finite and len(numbers) == 3 else None
    if not isinstance(point, tuple) and point not in ("strike", "tip"):
        faults.add("point", "it must be strike, tip, or three finite numbers x, y, z in m in the face frame")
    faults.raise_if_any()
    read_as: tuple[Frame, Point] = cast(Frame, frame), cast(Point, point)  # both checked above
    if settings is None:
        return Follow(*read_as, commands=NO_LOG)
    return replace(settings, frame=read_as[0], point=read_as[1])


def write_results(
    result: Answer, folder: str | PathLike[str], junit: str | PathLike[str] | None = None
) -> list[Path]:
    """Write verdict.json, motion.csv or survey.csv, report.html and evidence/ into a folder, each whole or not at all.

    `junit` names one more file, in JUnit's XML.

    Raises
    ------
    OutputError
        When something can't be written there.
    """
    from reach.report import write_folder

    return write_folder(result, Path(folder), None if junit is None else Path(junit))
