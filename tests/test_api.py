"""The library as a program uses it: a cell, arrays in, a frozen result out, the same bytes every time."""

from __future__ import annotations

import dataclasses
import json
from dataclasses import replace
from pathlib import Path

import numpy as np
import pytest
from cli_case import FAST_M_S, REST, SLOW_M_S, strike, write_case

import reach
from reach.cell import Cell
from reach.errors import OutputError, ReachError
from reach.report.document import document

T_S, TWISTS, MARKS = strike(SLOW_M_S)
WITHOUT_FOLLOW = REST[: REST.index("[follow]")]


@pytest.fixture(scope="module")
def folder(tmp_path_factory: pytest.TempPathFactory) -> Path:
    """A folder with the case in it."""
    folder = tmp_path_factory.mktemp("api")
    write_case(folder)
    return folder


@pytest.fixture(scope="module")
def cell(folder: Path) -> Cell:
    """The cell with its log."""
    return reach.load_cell(folder / "cell.toml")


@pytest.fixture(scope="module")
def bare(folder: Path) -> Cell:
    """The cell without a [follow] table."""
    return reach.load_cell(write_case(folder / "bare", rest=WITHOUT_FOLLOW))


@pytest.fixture(scope="module")
def by_file(cell: Cell) -> reach.FollowResult:
    """The answer on the cell's own log."""
    return reach.follow_commands(cell, advice=False)


@pytest.fixture(scope="module")
def by_arrays(bare: Cell) -> reach.FollowResult:
    """The answer on the same log, handed over as arrays."""
    return reach.follow_commands(
        bare, T_S, TWISTS, strikes=MARKS, frame="world", point="strike", advice=False
    )


def same_answer(one: reach.FollowResult, other: reach.FollowResult) -> None:
    """Two results with the very same motion, and the same told about it but for where the log came from."""
    a, b = one.evidence, other.evidence
    assert a.motion is not None and b.motion is not None
    assert np.array_equal(a.motion.q, b.motion.q) and np.array_equal(a.motion.v, b.motion.v)
    told, told_too = document(one), document(other)
    del told["inputs"], told_too["inputs"]
    assert told == told_too


def test_result_of_a_cell(by_file: reach.FollowResult) -> None:
    assert by_file.verdict.verdict == "deliverable" and by_file.verdict.exit_code == 0
    assert by_file.verdict.sentence.startswith("deliverable on 7 of 8 limits")
    (hit,) = by_file.evidence.strikes
    assert hit.delivered and hit.time_s == pytest.approx(0.15)
    assert by_file.cell.follow is not None and by_file.cell.follow.commands.source.endswith("log.csv")
    assert (by_file.needs, by_file.remedies, by_file.headroom_share) == ((), (), None)


def test_arrays_get_the_same_answer_as_a_file(
    by_file: reach.FollowResult, by_arrays: reach.FollowResult
) -> None:
    same_answer(by_file, by_arrays)


def test_lists_do_for_arrays_and_arguments_outrank_the_cell(cell: Cell, by_file: reach.FollowResult) -> None:
    assert cell.follow is not None
    other = replace(cell, follow=replace(cell.follow, frame="paddle", point="tip"))
    result = reach.follow_commands(
        other,
        T_S.tolist(),
        TWISTS.tolist(),
        strikes=MARKS.tolist(),
        frame="world",
        point="strike",
        advice=False,
    )
    same_answer(by_file, result)


def test_the_point_matters(bare: Cell, by_arrays: reach.FollowResult) -> None:
    turning = TWISTS.copy()
    turning[:, 4] = -0.3
    strike_point, origin, beside = (
        reach.follow_commands(bare, T_S, turning, strikes=MARKS, frame="world", point=point, advice=False)
        for point in ("strike", (0.0, 0.0, 0.0), (0.02, 0.0, 0.0))
    )
    assert strike_point.evidence.motion is not None and origin.evidence.motion is not None
    assert np.array_equal(strike_point.evidence.motion.q, origin.evidence.motion.q)
    lever = -0.3 * 0.02  # omega × r along the normal, which is up: the strike point is slower than the point
    hit, other = strike_point.evidence.strikes[0], beside.evidence.strikes[0]
    assert other.commanded_m_s - hit.commanded_m_s == pytest.approx(lever, abs=5e-4)


@pytest.mark.parametrize("point", [[0.02, 0.0, 0.0], np.array([0.02, 0.0, 0.0])], ids=["list", "array"])
def test_a_point_may_come_as_list_or_array(bare: Cell, point: object) -> None:
    found = [
        reach.follow_commands(bare, T_S, TWISTS, strikes=MARKS, frame="world", point=one, advice=False)
        for one in ((0.02, 0.0, 0.0), point)
    ]
    same_answer(*found)


def test_a_log_without_marks_is_at_best_undecided(bare: Cell) -> None:
    result = reach.follow_commands(bare, T_S, TWISTS, frame="world", point="strike", advice=False)
    assert result.verdict.verdict == "undecided" and result.evidence.guessed


def test_not_deliverable_says_why(bare: Cell) -> None:
    t_s, twists, marks = strike(FAST_M_S)
    result = reach.follow_commands(
        bare, t_s, twists, strikes=marks, frame="world", point="strike", advice=False
    )
    assert result.verdict.verdict == "not deliverable" and result.verdict.exit_code == 1
    assert result.reasons[0].decides


def test_results_are_frozen(by_arrays: reach.FollowResult, cell: Cell) -> None:
    parts = (
        (by_arrays, "headroom_share"),
        (by_arrays.verdict, "verdict"),
        (by_arrays.evidence, "strikes"),
        (by_arrays.evidence.strikes[0], "time_s"),
        (by_arrays.evidence.motion, "q"),
        (cell, "period_s"),
        (cell.arm, "tip"),
        (cell.follow, "frame"),
    )
    for part, name in parts:
        with pytest.raises(dataclasses.FrozenInstanceError):
            setattr(part, name, None)
    assert cell.follow is not None
    with pytest.raises(ValueError, match="read-only"):
        cell.follow.commands.twist[0, 0] = 1.0


def test_arrays_handed_over_are_left_alone_and_not_shared(bare: Cell) -> None:
    t_s, twists, marks = T_S.copy(), TWISTS.copy(), MARKS.copy()
    result = reach.follow_commands(
        bare, t_s, twists, strikes=marks, frame="world", point="strike", advice=False
    )
    assert np.array_equal(t_s, T_S) and np.array_equal(twists, TWISTS) and np.array_equal(marks, MARKS)
    assert bare.follow is None
    twists[:] = 9.0
    assert result.cell.follow is not None
    assert np.array_equal(result.cell.follow.commands.twist, TWISTS)


def test_all_faults_of_arrays_at_once(bare: Cell) -> None:
    twists = TWISTS.copy()
    twists[3, 1], twists[5, 2] = np.nan, np.inf
    with pytest.raises(reach.InputError) as caught:
        reach.follow_commands(bare, T_S, twists, strikes=MARKS[:-1], frame="world", point="strike")
    places = [(fault.file, fault.where) for fault in caught.value.faults]
    assert places == [
        ("arrays", "row 4, column vy_m_s"),
        ("arrays", "row 6, column vz_m_s"),
        ("arrays", "strike"),
    ]
    assert str(caught.value).count("\n") == 2 and caught.value.exit_code == 2


BAD_ARRAYS = {
    "time repeated": (np.where(T_S == T_S[4], T_S[3], T_S), TWISTS, "row 5, column t_s", "again"),
    "time backward": (T_S[::-1], TWISTS, "row 2, column t_s", "back"),
    "gap": (T_S * 20, TWISTS, "row 2, column t_s", "max_gap_s"),
    "one row": (T_S[:1], TWISTS[:1], "whole log", "one row"),
    "no rows": (T_S[:0], TWISTS[:0], "whole log", "no rows"),
    "columns": (T_S, TWISTS[:, :3], "twist", "(31, 6)"),
    "lengths": (T_S, TWISTS[:-1], "twist", "(31, 6)"),
    "mm/s": (T_S, TWISTS * 1000, "row 16, column vx_m_s", "mm/s"),
    "a number": (0.5, TWISTS, "t_s", "(N,)"),
    "texts": (["zero"] * 31, TWISTS, "t_s", "numbers"),
    "ragged": (T_S, [[0.0] * 6] * 30 + [[0.0]], "twist", "numbers"),
    "nothing": (T_S, [None] * 31, "twist", "give"),
    "complex": (T_S, TWISTS * 1j, "twist", "numbers"),
}


@pytest.mark.parametrize("name", BAD_ARRAYS)
def test_bad_arrays(bare: Cell, name: str) -> None:
    t_s, twists, where, words = BAD_ARRAYS[name]
    with pytest.raises(reach.InputError) as caught:
        reach.follow_commands(bare, t_s, twists, frame="world", point="strike", advice=False)
    assert any(
        fault.file == "arrays" and fault.where == where and words in fault.what
        for fault in caught.value.faults
    ), caught.value


@pytest.mark.parametrize("given", [{}, {"frame": "world"}, {"point": "strike"}], ids=str)
def test_frame_and_point_are_asked_for(bare: Cell, given: dict[str, str]) -> None:
    with pytest.raises(reach.InputError, match=r"frame.*point"):
        reach.follow_commands(bare, T_S, TWISTS, **given)


@pytest.mark.parametrize(
    "given",
    [
        {"frame": "flange", "point": "strike"},
        {"frame": "world", "point": "centre"},
        {"frame": "world", "point": (0.0, 0.1)},
        {"frame": "world", "point": (0.0, 0.0, float("nan"))},
    ],
    ids=str,
)
def test_a_wrong_frame_or_point_is_refused(bare: Cell, given: dict[str, object]) -> None:
    with pytest.raises(reach.InputError):
        reach.follow_commands(bare, T_S, TWISTS, advice=False, **given)


def test_no_log_at_all(bare: Cell) -> None:
    with pytest.raises(reach.InputError, match=r"no \[follow\] table"):
        reach.follow_commands(bare)
    with pytest.raises(reach.InputError, match="together"):
        reach.follow_commands(bare, T_S, frame="world", point="strike")
    with pytest.raises(reach.InputError, match="together"):
        reach.follow_commands(bare, twists=TWISTS, frame="world", point="strike")


@pytest.mark.parametrize("more", [{"strikes": MARKS}, {"poses": np.zeros((31, 7))}], ids=["strikes", "poses"])
def test_marks_or_poses_without_a_log_are_not_dropped_in_silence(cell: Cell, more: dict[str, object]) -> None:
    with pytest.raises(reach.InputError):
        reach.follow_commands(cell, advice=False, **more)


def test_same_bytes_every_run(cell: Cell, by_file: reach.FollowResult, tmp_path: Path, folder: Path) -> None:
    again = reach.follow_commands(reach.load_cell(folder / "cell.toml"), advice=False)
    for name, result in (("a", by_file), ("b", again)):
        reach.write_results(result, tmp_path / name)
    for name in ("verdict.json", "motion.csv", "report.html"):
        assert (tmp_path / "a" / name).read_bytes() == (tmp_path / "b" / name).read_bytes(), name


def test_write_results(by_arrays: reach.FollowResult, tmp_path: Path) -> None:
    written = reach.write_results(by_arrays, str(tmp_path / "deep" / "out"))
    assert all(path.is_file() for path in written)
    assert {path.name for path in written} >= {"verdict.json", "motion.csv", "report.html"}
    assert {path for path in (tmp_path / "deep").rglob("*") if path.is_file()} == set(written)
    told = json.loads((tmp_path / "deep" / "out" / "verdict.json").read_text(encoding="utf-8"))
    assert told["verdict"] == by_arrays.verdict.verdict and told["sentence"] == by_arrays.verdict.sentence


def test_results_that_can_not_be_written(by_arrays: reach.FollowResult, tmp_path: Path) -> None:
    (tmp_path / "taken").write_text("mine", encoding="utf-8")
    with pytest.raises(OutputError, match="taken") as caught:
        reach.write_results(by_arrays, tmp_path / "taken")
    assert isinstance(caught.value, ReachError) and caught.value.exit_code == 4
    assert (tmp_path / "taken").read_text(encoding="utf-8") == "mine"


def test_describe_cell(cell: Cell, bare: Cell) -> None:
    assert "velocity of j1" in reach.describe_cell(cell)
    assert "no [follow] table" in reach.describe_cell(bare)


def test_public_names() -> None:
    assert set(reach.__all__) == {
        "Cell",
        "FollowResult",
        "InputError",
        "describe_cell",
        "follow_commands",
        "RallyResult",
        "RecheckResult",
        "SurveyResult",
        "recheck_results",
        "TrialResult",
        "load_cell",
        "size_rally",
        "survey_strikes",
        "try_law",
        "write_results",
    }
    for name in reach.__all__:
        assert getattr(reach, name).__doc__
    with pytest.raises(AttributeError, match="follow_commands"):
        reach.follow_comands  # noqa: B018
