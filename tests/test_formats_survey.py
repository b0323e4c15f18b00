"""[survey] of a cell: every way to say where, which way and how fast, the file of strikes, and their faults."""

from __future__ import annotations

import hashlib
from pathlib import Path

import numpy as np
import pytest
from formats_case import CELL, STRIKES, expect_fault, faults_of, load, only_fault, replaced, write_cell

from reach.ball import impact
from reach.cell import Array, Cell, Survey
from reach.errors import InputError
from reach.formats import files, load_cell
from reach.formats.capped import MAX_SHOWN
from reach.formats.schema import MOST_POINTS

ARM = replaced(CELL[: CELL.index("[follow]")], "start_deg = { j1 = 30.0 }\nstart_m = { j2 = 0.1 }\n", "")
BOX = "box_m = [[0.2, -0.4, 0.2], [0.8, 0.4, 0.9]]\n"
POINT = "box_m = [[0.2, 0, 0.2], [0.2, 0, 0.2]]\n"
FACE = "normals = [[0, 0, 1]]\n"
SPEED = "paddle_speed_m_s = 1.0\n"
CONTACT = "[contact]\nrestitution = 0.8\n"
FLOAT = 1e-12


def with_survey(*lines: str) -> str:
    return ARM + "[survey]\n" + "".join(lines)


def survey_of(folder: Path, *lines: str, **files: str | bytes) -> Survey:
    cell = load(folder, cell=with_survey(*lines), **files)
    assert cell.survey is not None
    for array in (cell.survey.normals, cell.survey.directions, cell.survey.speeds_m_s):
        assert not array.flags.writeable
        assert len(array) == len(cell.survey.normals)
    return cell.survey


def close(found: Array, expected: object) -> None:
    np.testing.assert_allclose(found, expected, atol=FLOAT)


def test_sound_survey(tmp_path: Path) -> None:
    survey = survey_of(tmp_path, BOX, FACE, SPEED)
    assert survey.box_m == ((0.2, -0.4, 0.2), (0.8, 0.4, 0.9))
    assert (survey.spacing_m, survey.counts, survey.size) == (0.05, (13, 17, 15), 13 * 17 * 15)
    close(survey.normals, [[0, 0, 1]])
    close(survey.directions, [[0, 0, 1]])
    close(survey.speeds_m_s, [1.0])
    assert (survey.listed, survey.ball_in_m_s, survey.run_up_m) == (None, None, None)
    assert (survey.rotation, survey.required_share, survey.exact) == ("still", 1.0, False)
    assert survey.max_points == 2_000_000


def test_every_other_key(tmp_path: Path) -> None:
    more = 'rotation = "free"\nrun_up_m = 0.3\nrequired_share = 0.9\nexact = true\nmax_points = 5\n'
    survey = survey_of(tmp_path, POINT, FACE, SPEED, "spacing_m = 0.1\n", more)
    assert (survey.rotation, survey.run_up_m, survey.required_share) == ("free", 0.3, 0.9)
    assert (survey.exact, survey.max_points, survey.spacing_m, survey.size) == (True, 5, 0.1, 1)


def test_flat_box(tmp_path: Path) -> None:
    survey = survey_of(tmp_path, "box_m = [[0.2, 0, 0.5], [0.3, 0, 0.6]]\n", FACE, SPEED)
    assert survey.counts == (3, 1, 3)


def test_normals_are_scaled_to_length_one(tmp_path: Path) -> None:
    lines = "normals = [[0, 0, 2], [3, 0, 4], [0, 0, 5], [1e-3, 0, 0]]\n"
    cell = load(tmp_path, cell=with_survey(POINT, lines, SPEED))
    assert cell.survey is not None
    close(cell.survey.normals, [[0, 0, 1], [0.6, 0, 0.8], [1, 0, 0]])
    assert any("survey.normals: 1 of 4 repeat another" in note for note in cell.notes)


def test_tilts_and_bearings(tmp_path: Path) -> None:
    """Tilted from +z by 90° toward bearing 0 is +x, toward 90 +y; by 30° toward 180 leans to -x."""
    lines = "face_tilts_deg = [0, 90, 30]\nbearings_deg = [0, 90, 180, 360]\n"
    normals = survey_of(tmp_path, POINT, lines, SPEED).normals
    half, root = 0.5, np.sqrt(0.75)
    leaning = [[half, 0, root], [0, half, root], [-half, 0, root]]
    close(normals, [[0, 0, 1], [1, 0, 0], [0, 1, 0], [-1, 0, 0], *leaning])
    again = "face_tilts_deg = [20]\nbearings_deg = [50, 410, -310, 51]\n"
    assert len(survey_of(tmp_path, POINT, again, SPEED).normals) == 2
    assert not (np.signbit(normals) & (normals == 0)).any()


def test_tilts_that_need_no_bearings(tmp_path: Path) -> None:
    close(survey_of(tmp_path, POINT, "face_tilts_deg = [0]\n", SPEED).normals, [[0, 0, 1]])
    close(survey_of(tmp_path, POINT, "face_tilts_deg = [180, 0]\n", SPEED).normals, [[0, 0, -1], [0, 0, 1]])
    lines = "face_tilts_deg = [180]\nbearings_deg = [0, 45, 200]\n"
    close(survey_of(tmp_path, POINT, lines, SPEED).normals, [[0, 0, -1]])


def test_direction(tmp_path: Path) -> None:
    lines = "normals = [[0, 0, 1], [0, 1, 1]]\ndirection = [0, 0, 3]\n"
    survey = survey_of(tmp_path, POINT, lines, SPEED)
    close(survey.directions, [[0, 0, 1], [0, 0, 1]])
    close(survey.normals[1], [0, np.sqrt(0.5), np.sqrt(0.5)])


@pytest.mark.parametrize(
    "more", ["", "friction = 0.2\n", "restitution_at = [[1, 0.9], [4, 0.7]]\nfriction = 0.1\n"]
)
def test_face_and_speed_from_the_ball(tmp_path: Path, more: str) -> None:
    """The ball that meets this face at this speed is the one that was asked for."""
    lines = "ball_in_m_s = [1, 0, -3]\nball_out_m_s = [-1, 0.5, 3]\n"
    cell = load(tmp_path, cell=with_survey(POINT, lines, CONTACT, more))
    survey, contact = cell.survey, cell.contact
    assert survey is not None and contact is not None
    assert survey.ball_in_m_s == (1, 0, -3)
    assert survey.normals.shape == (1, 3) and survey.speeds_m_s[0] > 0
    close(survey.directions, survey.normals)
    normal, speed = survey.normals[0], survey.speeds_m_s[0]
    out, _ = impact(survey.ball_in_m_s, normal, speed * normal, contact)
    np.testing.assert_allclose(out, [-1, 0.5, 3], atol=1e-9)


def test_ball_straight_up(tmp_path: Path) -> None:
    """u = v (1 - e)/(1 + e), from memory: 2 m/s down and up at e = 0.8 take 0.2222 m/s."""
    lines = "ball_in_m_s = [0, 0, -2]\nball_out_m_s = [0, 0, 2]\n"
    survey = survey_of(tmp_path, POINT, lines, CONTACT)
    close(survey.normals, [[0, 0, 1]])
    close(survey.speeds_m_s, [2 * 0.2 / 1.8])


BAD = [
    ((), "box_m", ("missing", "two corners", "strikes")),
    ((POINT, SPEED), "normals", ("missing", "face_tilts_deg", "ball_in_m_s", "no default")),
    ((POINT, FACE), "paddle_speed_m_s", ("missing", "ball_in_m_s")),
    ((POINT, FACE, SPEED, "spacng_m = 1\n"), "spacng_m", ("unknown key", 'did you mean "spacing_m"')),
    ((POINT, FACE, SPEED, "paddle_speed = 1\n"), "paddle_speed", ("unknown key", "paddle_speed_m_s")),
    (("box_m = [[0, 0, 1], [0, 0, 0]]\n", FACE, SPEED), "box_m", ("z goes from 1 down to 0; swap",)),
    (("box_m = [[0, 0, 1]]\n", FACE, SPEED), "box_m", ("1 corners", "must have 2")),
    (("box_m = [[0, 0], [1, 1, 1]]\n", FACE, SPEED), "box_m[0]", ("2 numbers", "must have 3")),
    (("box_m = [[0, 0, 0], [0, 0, 1001]]\n", FACE, SPEED), "box_m[1][2]", ("at most 1000", "mm")),
    (("box_m = [[0, 0, -1e300], [0, 0, 1]]\n", FACE, SPEED), "box_m[0][2]", ("at least -1000", "mm")),
    (("box_m = [[0, nan, 0], [0, 0, 0]]\n", FACE, SPEED), "box_m[0][1]", ("finite",)),
    ((POINT, FACE, SPEED, "spacing_m = 0\n"), "spacing_m", ("above 0",)),
    ((POINT, FACE, SPEED, "spacing_m = 1e-300\n"), "spacing_m", ("out of any range",)),
    ((POINT, FACE, SPEED, "spacing_m = inf\n"), "spacing_m", ("finite",)),
    ((POINT, "normals = [[0, 0, 1], [0, 0, 0]]\n", SPEED), "normals[1]", ("is zero; give a direction",)),
    ((POINT, "normals = []\n", SPEED), "normals", ("at least 1",)),
    ((POINT, "normals = [0]\n", SPEED), "normals[0]", ("list of 3",)),
    ((POINT, "normals = [[0, 0, inf]]\n", SPEED), "normals[0][2]", ("finite",)),
    ((POINT, "normals = [[0, 0, 1e300]]\n", SPEED), "normals[0][2]", ("out of any range",)),
    ((POINT, FACE, "paddle_speed_m_s = 0\n"), "paddle_speed_m_s", ("above 0",)),
    ((POINT, FACE, "paddle_speed_m_s = -1\n"), "paddle_speed_m_s", ("above 0",)),
    ((POINT, FACE, "paddle_speed_m_s = 1e-9\n"), "paddle_speed_m_s", ("out of any range",)),
    ((POINT, FACE, "paddle_speed_m_s = 1000\n"), "paddle_speed_m_s", ("at most 100", "mm/s")),
    ((POINT, FACE, "paddle_speed_m_s = true\n"), "paddle_speed_m_s", ("give a number",)),
    ((POINT, FACE, SPEED, "run_up_m = 0\n"), "run_up_m", ("above 0",)),
    ((POINT, FACE, SPEED, "run_up_m = 300\n"), "run_up_m", ("mm",)),
    ((POINT, FACE, SPEED, "required_share = 1.5\n"), "required_share", ("at most 1",)),
    ((POINT, FACE, SPEED, 'rotation = "fixed"\n'), "rotation", ("one of", '"still", "free"')),
    ((POINT, FACE, SPEED, "exact = 1\n"), "exact", ("true or false",)),
    ((POINT, FACE, SPEED, "max_points = 1.5\n"), "max_points", ("whole",)),
    ((POINT, FACE, SPEED, "max_points = 0\n"), "max_points", ("whole number of at least 1",)),
    ((POINT, FACE, SPEED, f"max_points = {MOST_POINTS + 1}\n"), "max_points", (f"at most {MOST_POINTS}",)),
    ((POINT, FACE, SPEED, "face_tilts_deg = [0]\n"), "normals", ("beside face_tilts_deg",)),
    ((POINT, FACE, SPEED, "bearings_deg = [0]\n"), "normals", ("beside face_tilts_deg or bearings_deg",)),
    ((POINT, SPEED, "bearings_deg = [0]\n"), "bearings_deg", ("needs face_tilts_deg",)),
    ((POINT, SPEED, "face_tilts_deg = [0, 10]\n"), "bearings_deg", ("missing", "tilts toward")),
    ((POINT, SPEED, "face_tilts_deg = [181]\nbearings_deg = [0]\n"), "face_tilts_deg[0]", ("at most 180",)),
    ((POINT, SPEED, "face_tilts_deg = [0]\nbearings_deg = []\n"), "bearings_deg", ("at least 1",)),
    ((POINT, FACE, SPEED, "direction = [0, 0, 0]\n"), "direction", ("is zero",)),
    ((POINT, FACE, SPEED, "direction = [1, 0]\n"), "direction", ("must have 3",)),
    ((POINT, FACE, SPEED, "direction = [1, 0, 0]\n"), "direction", ("normal [0, 0, 1]", "positive part")),
    (
        (POINT, "normals = [[0, 0, 1], [1, 0, 0]]\n", SPEED, "direction = [-1, 0, 1]\n"),
        "direction",
        ("normal [1, 0, 0]",),
    ),
    (
        (BOX, FACE, SPEED, "max_points = 100\n"),
        "spacing_m",
        ("3315 strikes, 13 x 17 x 15 points, more than max_points = 100", "would fit", "max_points"),
    ),
    (
        (POINT, SPEED, "face_tilts_deg = [10]\nbearings_deg = [0, 90]\nmax_points = 1\n"),
        "spacing_m",
        ("2 strikes, 1 x 1 x 1 points for each of 2 faces", "the faces alone are too many"),
    ),
    (
        ("box_m = [[-1000, -1000, -1000], [1000, 1000, 1000]]\nspacing_m = 1e-9\n", FACE, SPEED),
        "spacing_m",
        ("makes 8e+36 strikes, 2e+12 x 2e+12 x 2e+12 points", "spacing_m = 16.1 would fit"),
    ),
    (('strikes = "strikes.csv"\n', POINT), "box_m", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', "spacing_m = 0.05\n"), "spacing_m", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', FACE), "normals", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', SPEED), "paddle_speed_m_s", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', "face_tilts_deg = [0]\n"), "face_tilts_deg", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', "bearings_deg = [0]\n"), "bearings_deg", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', "direction = [0, 0, 1]\n"), "direction", ("beside strikes",)),
    (('strikes = "strikes.csv"\n', "ball_in_m_s = [0, 0, 1]\n"), "ball_in_m_s", ("beside strikes",)),
    (('strikes = ""\n',), "strikes", ("text in quotes",)),
    (('strikes = "strikes.csv"\n', "max_points = 1\n"), "strikes", ("2 strikes", "max_points = 1")),
]


@pytest.mark.parametrize(("lines", "key", "words"), BAD)
def test_bad_survey(tmp_path: Path, lines: tuple[str, ...], key: str, words: tuple[str, ...]) -> None:
    faults = faults_of(tmp_path, cell=with_survey(*lines))
    if lines:
        only_fault(faults, "cell.toml", f"survey.{key}", *words)
    else:
        expect_fault(faults, "cell.toml", f"survey.{key}", *words)
        assert [fault.where for fault in faults] == [
            f"survey.{name}" for name in ("box_m", "normals", "paddle_speed_m_s")
        ]


IN, OUT = "ball_in_m_s = [0, 0, -2]\n", "ball_out_m_s = [0, 0, 2]\n"
BAD_BALLS = [
    ((IN, CONTACT), "ball_in_m_s", ("needs both",)),
    ((OUT, CONTACT), "ball_out_m_s", ("needs both",)),
    ((IN, OUT), "ball_in_m_s", ("restitution", "[contact]")),
    ((IN, OUT, FACE, CONTACT), "ball_in_m_s", ("fixes", "drop normals,")),
    ((IN, OUT, SPEED, CONTACT), "ball_in_m_s", ("drop paddle_speed_m_s,",)),
    ((IN, OUT, "direction = [0, 0, 1]\n", CONTACT), "ball_in_m_s", ("drop direction,",)),
    ((IN, OUT, "face_tilts_deg = [0]\n", CONTACT), "ball_in_m_s", ("drop face_tilts_deg,",)),
    ((IN, "ball_out_m_s = [0, 0, -2]\n", CONTACT), "ball_out_m_s", ("equals ball_in_m_s",)),
    (
        ("ball_in_m_s = [0, 0, 2]\nball_out_m_s = [0, 0, 3]\n", CONTACT),
        "ball_in_m_s",
        ("does not come toward the face", "normal [0, 0, 1]", "right before contact"),
    ),
    (
        (IN, "ball_out_m_s = [0, 0, 1.5]\n", CONTACT),
        "ball_out_m_s",
        ("would have to give way at 0.05556 m/s", "normal [0, 0, 1]"),
    ),
    ((IN, "ball_out_m_s = [0, 0, 1.6]\n", CONTACT), "ball_out_m_s", ("give way at",)),
    ((IN, "ball_out_m_s = [0, 0, -1]\n", CONTACT), "ball_out_m_s", ("give way at",)),
    ((IN, "ball_out_m_s = [0, 0, 201]\n", CONTACT), "ball_out_m_s[2]", ("at most 200", "mm/s")),
    ((IN, "ball_out_m_s = [0, 0, nan]\n", CONTACT), "ball_out_m_s[2]", ("finite",)),
    ((IN, "ball_out_m_s = 2\n", CONTACT), "ball_out_m_s", ("list of 3",)),
]


@pytest.mark.parametrize(("lines", "key", "words"), BAD_BALLS)
def test_bad_ball(tmp_path: Path, lines: tuple[str, ...], key: str, words: tuple[str, ...]) -> None:
    only_fault(faults_of(tmp_path, cell=with_survey(POINT, *lines)), "cell.toml", f"survey.{key}", *words)


@pytest.mark.parametrize("line", ["restitution = 2\n", "restitution = 0.8\nrestitution_at = [[2, 2]]\n", ""])
def test_a_bad_contact_is_one_fault(tmp_path: Path, line: str) -> None:
    (fault,) = faults_of(tmp_path, cell=with_survey(POINT, IN, OUT, "[contact]\n", line))
    assert fault.where.startswith("contact.restitution")


def test_survey_that_is_no_table(tmp_path: Path) -> None:
    only_fault(faults_of(tmp_path, cell="survey = 3\n" + ARM), "cell.toml", "survey", "give a table")


@pytest.mark.parametrize("spacing", [0.05, 0.001, 1e-6])
@pytest.mark.parametrize("most", [1, 7, 500, 20_000])
def test_the_spacing_that_is_proposed_fits(tmp_path: Path, spacing: float, most: int) -> None:
    lines = (BOX, FACE, SPEED, f"max_points = {most}\n")
    try:
        survey_of(tmp_path, *lines, f"spacing_m = {spacing}\n")
        assert (spacing, most) == (0.05, 20_000)
        return
    except InputError as error:
        (fault,) = error.faults
    proposed = float(fault.what.partition("spacing_m = ")[2].split()[0])
    assert spacing < proposed < 1
    assert survey_of(tmp_path, *lines, f"spacing_m = {proposed!r}\n").size <= most
    with pytest.raises(InputError, match="would fit"):
        survey_of(tmp_path, *lines, f"spacing_m = {0.98 * proposed!r}\n")


def strikes_cell(folder: Path, strikes: str | bytes = STRIKES) -> Cell:
    return load(folder, cell=with_survey('strikes = "strikes.csv"\n'), strikes=strikes)


def test_strikes_file(tmp_path: Path) -> None:
    cell = strikes_cell(tmp_path)
    survey = cell.survey
    assert survey is not None and survey.listed is not None
    assert (survey.box_m, survey.counts, survey.size) == (None, (0, 0, 0), 2)
    close(survey.listed, [[0.3, 0, 0.5], [0.4, -0.1, 0.5]])
    close(survey.normals, [[0, 0, 1], [0.6, 0, 0.8]])
    close(survey.directions, [[0, 0, 1], [0, 0.6, 0.8]])
    close(survey.speeds_m_s, [1.0, 0.5])
    assert not any(a.flags.writeable for a in (survey.listed, survey.normals, survey.speeds_m_s))
    named = {Path(item.path).name: item.sha256 for item in cell.inputs}
    assert named["strikes.csv"] == hashlib.sha256((tmp_path / "strikes.csv").read_bytes()).hexdigest()


HEADER = "x_m,y_m,z_m,nx,ny,nz,paddle_speed_m_s"
ROW = "0.3,0.1,0.5,0,0,1,1.0"


def test_columns_of_strikes_are_found_by_name(tmp_path: Path) -> None:
    survey = strikes_cell(tmp_path, "paddle_speed_m_s,nz,ny,nx,z_m,y_m,x_m\n1.5,4,0,3,0.5,0.1,0.3\n").survey
    assert survey is not None and survey.listed is not None
    close(survey.listed, [[0.3, 0.1, 0.5]])
    close(survey.normals, [[0.6, 0, 0.8]])
    assert survey.directions is not None
    close(survey.directions, survey.normals)
    close(survey.speeds_m_s, [1.5])


BAD_STRIKES = [
    ("", "line 1", ("no header", HEADER)),
    (HEADER + "\n", "whole file", ("no rows",)),
    (ROW + "\n", "line 1", ("numbers, not names",)),
    (HEADER.replace(",nz", "") + "\n", "line 1", ("nz missing",)),
    (HEADER.replace("z_m", "y_m") + "\n" + ROW, "line 1", ("stands twice",)),
    (HEADER + ",speed\n" + ROW + ",1\n", "line 1", ('unknown column "speed"', "paddle_speed_m_s")),
    (HEADER + ",dx,dy\n" + ROW + ",0,0\n", "line 1", ("direction columns are incomplete, without dz",)),
    (HEADER.replace(",", ";") + "\n", "line 1", ("semicolons",)),
    (f"{HEADER}\n{ROW}\n0,0\n", "line 3", ("2 fields, the header 7",)),
    (f"{HEADER}\n{ROW}\n0,0,x,0,0,1,1\n", "line 3, column z_m", ('"x" is no number',)),
    (f"{HEADER}\n\n{ROW}\n0,0,,0,0,1,1\n", "line 4, column z_m", ("is empty",)),
    (f"{HEADER}\n{ROW}\n0,0,nan,0,0,1,1\n", "line 3, column z_m", ("nan", "finite")),
    (f"{HEADER}\n{ROW}\n0,0,0,0,inf,1,1\n", "line 3, column ny", ("inf", "finite")),
    (f"{HEADER}\n{ROW}\n0,0,0,0,0,1,1e999\n", "line 3, column paddle_speed_m_s", ("inf", "finite")),
    (f"{HEADER}\n{ROW}\n0,-1e3001,0,0,0,1,1\n", "line 3, column y_m", ("-inf", "finite")),
    (f"{HEADER}\n{ROW}\n1001,0,0,0,0,1,1\n", "line 3, column x_m", ("1001", "at most 1000", "mm")),
    (f"{HEADER}\n{ROW}\n0,-1e300,0,0,0,1,1\n", "line 3, column y_m", ("-1e+300", "at most 1000")),
    (f"{HEADER}\n{ROW}\n0,0,0,0,0,1e300,1\n", "line 3, column nz", ("1e+300", "at most 1e+09")),
    (f"{HEADER}\n{ROW}\n0,0,0,0,0,0,1\n", "line 3, column nx", ("the normal is zero",)),
    (f"{HEADER}\n{ROW}\n0,0,0,0,0,1,0\n", "line 3, column paddle_speed_m_s", ("is 0", "at least 1e-06")),
    (f"{HEADER}\n{ROW}\n0,0,0,0,0,1,-1\n", "line 3, column paddle_speed_m_s", ("is -1", "at least")),
    (f"{HEADER}\n{ROW}\n0,0,0,0,0,1,800\n", "line 3, column paddle_speed_m_s", ("at most 100", "mm/s")),
    (f"{HEADER},dx,dy,dz\n{ROW},0,0,0\n", "line 2, column dx", ("the direction is zero",)),
    (f"{HEADER},dx,dy,dz\n{ROW},0,0,-1\n", "line 2, column dx", ("not go out of the face",)),
    (f"{HEADER},dx,dy,dz\n{ROW},1,0,0\n", "line 2, column dx", ("not go out of the face",)),
    (f"{HEADER},dx,dy,dz\n{ROW},1,0,nan\n", "line 2, column dz", ("finite",)),
    (HEADER + '\n0,0,0,0,0,1,"1\n', "line 2", ("quotes",)),
    (b"x_m\n\xff\n", "line 2", ("UTF-8",)),
    (b"PK\x03\x04\0\0", "line 1", ("not text",)),
]


@pytest.mark.parametrize(("text", "where", "words"), BAD_STRIKES)
def test_bad_strikes(tmp_path: Path, text: str | bytes, where: str, words: tuple[str, ...]) -> None:
    faults = faults_of(tmp_path, cell=with_survey('strikes = "strikes.csv"\n'), strikes=text)
    expect_fault(faults, "strikes.csv", where, *words)
    assert len(faults) == (2 if "stands twice" in words else 1), faults  # the column it took the place of


def test_every_fault_of_a_strikes_file_at_once(tmp_path: Path) -> None:
    rows = "0,0,nan,0,0,1,1,0,0,1\n0,0,0,0,0,0,1,0,0,1\n2000,0,0,0,0,1,-1,0,0,-1\n"
    text = f"{HEADER},dx,dy,dz\n{rows}"
    faults = faults_of(tmp_path, cell=with_survey('strikes = "strikes.csv"\n', "spacing = 1\n"), strikes=text)
    assert [(Path(fault.file).name, fault.where) for fault in faults] == [
        ("cell.toml", "survey.spacing"),
        ("strikes.csv", "line 2, column z_m"),
        ("strikes.csv", "line 3, column nx"),
        ("strikes.csv", "line 4, column dx"),
        ("strikes.csv", "line 4, column paddle_speed_m_s"),
        ("strikes.csv", "line 4, column x_m"),
    ]


def test_many_bad_strikes_are_cut_short(tmp_path: Path) -> None:
    text = HEADER + "\n" + "0,0,0,0,0,0,0\n" * 500
    faults = faults_of(tmp_path, cell=with_survey('strikes = "strikes.csv"\n'), strikes=text)
    assert len(faults) == 2 * (MAX_SHOWN + 1)
    expect_fault(faults, "strikes.csv", "whole file", "480 more: normal is zero")
    expect_fault(faults, "strikes.csv", "whole file", "480 more: out of range")


def test_strikes_file_that_is_not_there_or_too_large(tmp_path: Path) -> None:
    path = write_cell(tmp_path, cell=with_survey('strikes = "strikes.csv"\n'))
    with open(tmp_path / "strikes.csv", "wb") as stream:
        stream.truncate(files.MAX_LOG_BYTES + 1)  # sparse: takes no room on disk
    with pytest.raises(InputError, match="MB"):
        load_cell(path)
    (tmp_path / "strikes.csv").unlink()
    with pytest.raises(InputError) as caught:
        load_cell(path)
    only_fault(caught.value.faults, "strikes.csv", "file", "not found", "survey.strikes in")


def test_survey_table_can_be_needed(tmp_path: Path) -> None:
    path = write_cell(tmp_path)
    assert load_cell(path).survey is None
    with pytest.raises(InputError) as caught:
        load_cell(path, need="survey")
    only_fault(caught.value.faults, "cell.toml", "survey", "missing", "[survey]")
    path = write_cell(tmp_path, cell=with_survey(POINT, FACE, SPEED))
    assert load_cell(path, need="survey").survey is not None
    with pytest.raises(InputError) as caught:
        load_cell(path, need="follow")
    faults = caught.value.faults
    expect_fault(faults, "cell.toml", "follow", "missing", "[follow]")
    expect_fault(faults, "cell.toml", "arm.start_rad", "missing", "j1 = 0.0")
    assert len(faults) == 2


def test_start_posture_is_needed_to_follow_alone(tmp_path: Path) -> None:
    assert load(tmp_path, cell=with_survey(POINT, FACE, SPEED)).arm.start is None
    follow = CELL[CELL.index("[follow]") :]
    both = with_survey(POINT, FACE, SPEED) + follow
    only_fault(faults_of(tmp_path, cell=both), "cell.toml", "arm.start_rad", "missing")
    part = replaced(with_survey(POINT, FACE, SPEED), "[paddle]", "start_rad = { j1 = 0.1 }\n[paddle]")
    only_fault(faults_of(tmp_path, cell=part), "cell.toml", "arm.start_m.j2", "every chain joint")
    auto = replaced(with_survey(POINT, FACE, SPEED), "[paddle]", 'start = "auto"\n[paddle]')
    only_fault(faults_of(tmp_path, cell=auto), "cell.toml", "arm.start", "pose columns")


@pytest.mark.parametrize("seed", range(4))
def test_bent_survey_gives_faults_and_nothing_else(tmp_path: Path, seed: int) -> None:
    """Cuts, swaps and odd words anywhere in the table or the file of strikes."""
    random = np.random.default_rng(seed)
    words = [
        "nan",
        "-inf",
        "-1",
        "0",
        '""',
        "[]",
        "{}",
        "true",
        "1e308",
        "1e-308",
        "é",
        "\0",
        "[",
        '"',
        ",",
        "_",
    ]
    ball = "ball_in_m_s = [1, 0, -3]\nball_out_m_s = [-1, 0.5, 3]\n"
    tables = [
        BOX + FACE + SPEED + "direction = [0.1, 0, 1]\n",
        BOX + "face_tilts_deg = [0, 20]\nbearings_deg = [0, 90, 180]\n" + SPEED,
        POINT + ball + CONTACT + "friction = 0.2\nrestitution_at = [[1, 0.9], [3, 0.8]]\n",
        'strikes = "strikes.csv"\nrun_up_m = 0.2\n',
    ]
    for turn in range(60):
        texts = [tables[turn % 4], STRIKES]
        which = int(turn % 8 == 3)
        at, size = int(random.integers(len(texts[which]))), int(random.integers(12))
        texts[which] = texts[which][:at] + words[random.integers(len(words))] + texts[which][at + size :]
        try:
            load(tmp_path, cell=with_survey(texts[0]), strikes=texts[1])
        except InputError as error:
            assert error.faults
            assert all(fault.where and fault.what and "\n" not in str(fault) for fault in error.faults)
