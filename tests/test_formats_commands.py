"""Command logs: the CSV's form, the checks on times and values, and the same checks on arrays."""

from __future__ import annotations

from pathlib import Path

import numpy as np
import pytest
from formats_case import CELL, LOG, expect_fault, faults_of, load, only_fault, replaced, write_cell

from reach.cell import CommandLog
from reach.errors import InputError
from reach.formats import READERS, check_arrays, load_cell

HEADER = "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s"
POSE = ",px_m,py_m,pz_m,qw,qx,qy,qz"
ROWS = "0,1,0,0,0,0,0\n0.05,2,0,0,0,0,0\n"


def read(text: str | bytes, max_gap_s: float = 0.1, time_faults: str = "refuse") -> CommandLog:
    content = text.encode() if isinstance(text, str) else text
    return READERS[".csv"](content, "log.csv", max_gap_s, time_faults)


def read_faults(text: str | bytes, **options: str) -> InputError:
    with pytest.raises(InputError) as caught:
        read(text, time_faults=options.get("time_faults", "refuse"))
    return caught.value


def test_sound_log(tmp_path: Path) -> None:
    follow = load(tmp_path).follow
    assert follow is not None
    log = follow.commands
    np.testing.assert_array_equal(log.t_s, [0, 0.05, 0.1])
    np.testing.assert_array_equal(log.twist[:, 2], [0.1, 0.2, 0.1])
    assert log.strike is not None and log.strike.tolist() == [False, True, False]
    assert log.pose is None and log.mends == ()
    assert not log.t_s.flags.writeable and not log.twist.flags.writeable


def test_columns_are_found_by_name() -> None:
    names = "strike,wz_rad_s,qw,t_s,vx_m_s,vy_m_s,px_m,py_m,pz_m,vz_m_s,wx_rad_s,wy_rad_s,qx,qy,qz"
    log = read(names + "\n1,6,1,0,1,2,7,8,9,3,4,5,0,0,0\n0,6,1,0.1,1,2,7,8,9,3,4,5,0,0,0\n")
    np.testing.assert_array_equal(log.twist[0], [1, 2, 3, 4, 5, 6])
    assert log.pose is not None and log.pose[0].tolist() == [7, 8, 9, 1, 0, 0, 0]
    assert log.strike is not None and log.strike.tolist() == [True, False]


@pytest.mark.parametrize(
    "text",
    [
        "\ufeff" + HEADER + "\n" + ROWS,
        (HEADER + "\n" + ROWS).replace("\n", "\r\n"),
        (HEADER + "\n" + ROWS).replace("\n", "\r"),
        HEADER + "\n\n" + ROWS + "\n\n",
        HEADER + "\n   \n" + ROWS,
        HEADER.replace(",", " , ") + "\n" + ROWS.replace(",", ", "),
        HEADER.replace("t_s", '"t_s"') + "\n" + ROWS.replace("0.05,", '"0.05",'),
        HEADER + "\n" + ROWS.rstrip("\n"),
    ],
)
def test_forms_that_read_alike(text: str) -> None:
    log = read(text)
    np.testing.assert_array_equal(log.t_s, [0, 0.05])
    np.testing.assert_array_equal(log.twist[:, 0], [1, 2])


BAD = [
    ("", "line 1", ("no header", "t_s,vx_m_s")),
    (ROWS, "line 1", ("numbers, not names",)),
    (HEADER + "\n", "whole log", ("no rows",)),
    (HEADER + "\n0,0,0,0,0,0,0\n", "whole log", ("one row",)),
    (HEADER.replace(",", ";") + "\n" + ROWS.replace(",", ";"), "line 1", ("semicolons", "commas")),
    (HEADER.replace(",", "\t") + "\n", "line 1", ("tabs",)),
    (HEADER.replace("vz_m_s", "vz") + "\n" + ROWS, "line 1", ('unknown column "vz"', "vz_m_s")),
    (HEADER.replace("vz_m_s", "vy_m_s") + "\n" + ROWS, "line 1", ("stands twice",)),
    (HEADER.replace(",wz_rad_s", "") + "\n", "line 1", ("wz_rad_s missing",)),
    (HEADER + ",\n", "line 1", ("column 8 has no name",)),
    (HEADER + ",px_m,qw\n", "line 1", ("incomplete", "py_m")),
    (HEADER + "\n" + ROWS + "1,2,3\n", "line 4", ("3 fields", "header 7")),
    (HEADER + "\n" + ROWS + "0.1,0,0,0,0,0,0,0\n", "line 4", ("8 fields",)),
    (HEADER + "\n" + ROWS + "0.1,0,0,fast,0,0,0\n", "line 4, column vz_m_s", ('"fast"', "no number")),
    (HEADER + "\n" + ROWS + "0.1,0,0,,0,0,0\n", "line 4, column vz_m_s", ("empty",)),
    (HEADER + "\n" + ROWS + "0.1,0,0,1_0,0,0,0\n", "line 4, column vz_m_s", ("no number",)),
    (HEADER + "\n" + ROWS + "# comment\n", "line 4", ("1 fields",)),
    (HEADER + "\n\n" + ROWS + "0.1,0,0,nan,0,0,0\n", "line 5, column vz_m_s", ("nan", "finite")),
    (HEADER + "\n" + ROWS + "0.1,0,0,0,0,0,-inf\n", "line 4, column wz_rad_s", ("inf", "finite")),
    (HEADER + "\n" + ROWS + "0.1,0,0,1e999,0,0,0\n", "line 4, column vz_m_s", ("inf", "finite")),
    (HEADER + "\n" + ROWS + "0.05,0,0,0,0,0,0\n", "line 4, column t_s", ("0.05 s again", "mend")),
    (HEADER + "\n" + ROWS + "0.04,0,0,0,0,0,0\n", "line 4, column t_s", ("back by 0.01", "mend")),
    (HEADER + "\n" + ROWS + "0.25,0,0,0,0,0,0\n", "line 4, column t_s", ("gap of 0.2 s", "max_gap_s")),
    (HEADER + "\n" + ROWS + "0.1,500,0,0,0,0,0\n", "line 4, column vx_m_s", ("mm/s", "500")),
    (HEADER + "\n" + ROWS + "0.1,0,0,0,0,0,180\n", "line 4, column wx_rad_s", ("deg/s", "180")),
    (HEADER + ",strike\n0,0,0,0,0,0,0,2\n0.1,0,0,0,0,0,0,0\n", "line 2, column strike", ("give 1",)),
    (
        HEADER + POSE + "\n0,0,0,0,0,0,0,0,0,0,1,1,0,0\n0.1,0,0,0,0,0,0,0,0,0,1,0,0,0\n",
        "line 2, column qw",
        ("length 1.414",),
    ),
    (
        HEADER + POSE + "\n0,0,0,0,0,0,0,0,0,0,0,0,0,0\n0.1,0,0,0,0,0,0,0,0,0,1,0,0,0\n",
        "line 2, column qw",
        ("length 0",),
    ),
    (
        HEADER + POSE + "\n0,0,0,0,0,0,0,500,0,0,1,0,0,0\n0.1,0,0,0,0,0,0,0,0,0,1,0,0,0\n",
        "line 2, column px_m",
        ("mm",),
    ),
    (b"t_s\n\xff\n", "line 2", ("UTF-8",)),
    (b"PK\x03\x04\0\0", "line 1", ("not text",)),
]


@pytest.mark.parametrize(("text", "where", "words"), BAD)
def test_bad_log(text: str | bytes, where: str, words: tuple[str, ...]) -> None:
    expect_fault(read_faults(text).faults, "log.csv", where, *words)


def test_unclosed_quote_is_a_fault_not_a_crash() -> None:
    faults = read_faults(HEADER + '\n0,0,0,0,0,0,"0\n').faults
    assert len(faults) == 1 and "quotes" in faults[0].what


def test_faults_of_one_kind_are_cut_at_twenty() -> None:
    rows = "".join(f"{0.01 * i:.2f},x,0,0,0,0,0\n" for i in range(50))
    faults = read_faults(HEADER + "\n" + rows).faults
    assert len(faults) == 21
    assert faults[-1].what.startswith("… and 30 more")


def test_quaternions_are_normalised() -> None:
    text = HEADER + POSE + "\n" + "".join(f"{t},0,0,0,0,0,0,0,0,0,0.6004,0.8004,0,0\n" for t in (0, 0.1))
    pose = read(text).pose
    assert pose is not None
    np.testing.assert_allclose(np.linalg.norm(pose[:, 3:], axis=1), 1, rtol=1e-15)


def test_mending_lists_what_it_did() -> None:
    text = (
        HEADER
        + ",strike\n"
        + "".join(
            f"{t},{v},0,0,0,0,0,{s}\n"
            for t, v, s in [(0, 1, 0), (0.05, 2, 1), (0.05, 3, 0), (0.04, 4, 1), (0.1, 5, 0), (0.35, 6, 0)]
        )
    )
    log = read(text, time_faults="mend")
    np.testing.assert_array_equal(log.t_s, [0, 0.05, 0.1, 0.35])
    np.testing.assert_array_equal(log.twist[:, 0], [1, 3, 5, 6])
    assert log.strike is not None and log.strike.tolist() == [False, True, False, False]
    back, again, gap = log.mends
    assert back.startswith("line 5, column t_s: goes back by 0.01 s") and "strike mark lost" in back
    assert again.startswith("line 4, column t_s: time 0.05 s again")
    assert gap.startswith("line 7, column t_s: gap of 0.25 s")


@pytest.mark.parametrize(
    ("row", "words"), [("0.5,0,0,0,0,0,0\n", ("gap of 0.45",)), ("-0.2,0,0,0,0,0,0\n", ("restarted",))]
)
def test_what_can_not_be_mended(row: str, words: tuple[str, ...]) -> None:
    faults = read_faults(HEADER + "\n" + ROWS + row, time_faults="mend").faults
    only_fault(faults, "log.csv", "line 4, column t_s", *words)


def test_mends_reach_the_notes(tmp_path: Path) -> None:
    cell = load(tmp_path, cell=CELL + 'time_faults = "mend"\n', log=LOG + "0.10,0,0,0,0,0,0,0\n")
    assert cell.follow is not None and len(cell.follow.commands.mends) == 1
    assert any("line 5" in note and "again" in note for note in cell.notes)


def test_gap_is_the_cells_to_choose(tmp_path: Path) -> None:
    late = LOG + "0.5,0,0,0,0,0,0,0\n"
    only_fault(faults_of(tmp_path, log=late), "log.csv", "line 5, column t_s", "max_gap_s above 0.1")
    assert load(tmp_path, cell=CELL + "max_gap_s = 0.4\n", log=late).follow is not None


def test_gap_of_exactly_the_limit_is_none() -> None:
    times = np.arange(50) * 0.1
    assert len(check_arrays(times, np.zeros((50, 6)), max_gap_s=0.1).t_s) == 50


def test_log_of_another_suffix_case(tmp_path: Path) -> None:
    path = write_cell(tmp_path, cell=replaced(CELL, "log.csv", "LOG.CSV"))
    (tmp_path / "LOG.CSV").write_text(LOG)
    assert load_cell(path).follow is not None


def test_many_rows_come_back_exact() -> None:
    """What the fast path reads is what was written, bit by bit, in 20,000 random rows."""
    table = np.random.default_rng(1).uniform(-1, 1, (20_000, 7))
    table[:, 0] = np.arange(20_000) * 0.01
    lines = [",".join(map(repr, row)) for row in table.tolist()]
    log = read(HEADER + "\n" + "\n".join(lines) + "\n")
    np.testing.assert_array_equal(log.t_s, table[:, 0])
    np.testing.assert_array_equal(log.twist, table[:, 1:])


def test_fault_far_down_a_long_log_keeps_its_line() -> None:
    lines = [f"{0.01 * i:.2f},0,0,0,0,0,0" for i in range(30_000)]
    lines[29_000] = "290.00,0,0,0,nan,0,0"
    lines[100] = "\n" + lines[100]
    only_fault(
        read_faults("\n".join([HEADER, *lines])).faults, "log.csv", "line 29003, column wx_rad_s", "nan"
    )


TIMES, TWISTS = np.array([0.0, 0.1, 0.2]), np.zeros((3, 6))


@pytest.mark.parametrize(
    ("arguments", "where", "words"),
    [
        ({"t_s": TIMES[:, None].repeat(2, axis=1)}, "t_s", ("shape (3, 2)", "(N,)")),
        ({"twist": TWISTS[:, :5]}, "twist", ("shape (3, 5)", "(3, 6)")),
        ({"twist": TWISTS[:2]}, "twist", ("shape (2, 6)",)),
        ({"twist": [["a"] * 6] * 3}, "twist", ("no array of numbers",)),
        ({"twist": TWISTS * np.nan}, "row 1, column vx_m_s", ("finite",)),
        ({"strike": [0, 1]}, "strike", ("shape (2,)",)),
        ({"strike": ["a", "b", "c"]}, "strike", ("0 and 1",)),
        ({"strike": [0, 1, 3]}, "row 3, column strike", ("3",)),
        ({"pose": np.zeros((3, 6))}, "pose", ("(3, 7)",)),
        ({"pose": np.zeros((3, 7))}, "row 1, column qw", ("length 0",)),
        ({"t_s": [0.0, 0.2, 0.1]}, "row 3, column t_s", ("back",)),
        ({"t_s": [], "twist": np.zeros((0, 6))}, "whole log", ("no rows",)),
    ],
)
def test_arrays_get_the_same_checks(arguments: dict[str, object], where: str, words: tuple[str, ...]) -> None:
    given: dict[str, object] = {"t_s": TIMES, "twist": TWISTS, "source": "mine"} | arguments
    with pytest.raises(InputError) as caught:
        check_arrays(**given)
    expect_fault(caught.value.faults, "mine", where, *words)


def test_arrays_are_copied_and_read_only() -> None:
    times = TIMES.copy()
    log = check_arrays(times, TWISTS.tolist(), strike=[False, True, False])
    times[0] = -5
    assert log.t_s[0] == 0 and log.source == "arrays"
    assert log.strike is not None and log.strike.dtype == np.bool_
    with pytest.raises(ValueError, match="read-only"):
        log.twist[0, 0] = 1


def test_every_reader_refuses_noise() -> None:
    noise = np.random.default_rng(0).bytes(4096)
    for suffix, reader in READERS.items():
        with pytest.raises(InputError):
            reader(noise, f"log{suffix}", 0.1, "refuse")
