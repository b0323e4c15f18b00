"""[rally] and [trial] of a cell: what they become, what they ask of other tables, the law's file, and their faults."""

from __future__ import annotations

import dataclasses
import hashlib
import math
import os
from pathlib import Path

import numpy as np
import pytest
from formats_case import CELL, expect_fault, faults_of, load, only_fault, replaced, write_cell

from reach.cell import QUARTERS_RAD, Cell, Rally, Recovered, Sensor, Starts, Survey, Trial
from reach.errors import Fault, InputError
from reach.formats import files, grid, load_cell, schema
from reach.formats.capped import MAX_SHOWN
from reach.formats.presets import BALLS, REBOUND
from reach.formats.schema import MAX_ROWS
from reach.formats.toml_cell import Need

ARM = CELL[: CELL.index("[follow]")]
STARTLESS = replaced(ARM, "start_deg = { j1 = 30.0 }\nstart_m = { j2 = 0.1 }\n", "")
BALL = '[ball]\npreset = "table tennis"\n'
CONTACT = "[contact]\nrestitution = 0.8\n"
PAIR = BALL + CONTACT
CENTRE = "centre_m = [0.5, 0, 0.4]\n"
RALLY = "[rally]\n" + CENTRE + "apexes_m = [0.2]\n"
TRIAL = "[trial]\n"
LAW = "class Own:\n    pass\n"
RANGE = "out of any range that means something"


def cell_of(folder: Path, *tables: str, arm: str = ARM) -> Cell:
    return load(folder, cell=arm + PAIR + "".join(tables))


def rally_of(folder: Path, *lines: str) -> Rally:
    rally = cell_of(folder, RALLY, *lines).rally
    assert rally is not None
    return rally


def trial_of(folder: Path, *lines: str) -> Trial:
    trial = cell_of(folder, TRIAL, *lines).trial
    assert trial is not None
    return trial


def bad(folder: Path, *tables: str, arm: str = ARM) -> tuple[Fault, ...]:
    return faults_of(folder, cell=arm + PAIR + "".join(tables))


def test_a_short_rally_has_the_defaults_of_the_contract(tmp_path: Path) -> None:
    cell = cell_of(tmp_path, RALLY)
    assert cell.rally == Rally((0.5, 0, 0.4), (0.2,))
    assert cell.trial is None and cell.contact is not None and not cell.contact.arm_gives


def test_every_key_of_a_rally(tmp_path: Path) -> None:
    rally = rally_of(
        tmp_path,
        "offsets_m = [0, 0.05]\nbearings_deg = [-90, 30]\nrecover_within_bounces = 3\nlatency_s = 0.02\n",
        "lateral_m_s = -0.1\n",
        "required_share = 0.9\ncentres_box_m = [[0.2, -0.4, 0.4], [0.8, 0.4, 0.4]]\ncentres_spacing_m = 0.05\n",
        "contact_offset_spread_m = 0.01\nvelocity_spread_m_s = 0.1\ncases = 200\n",
    )
    assert rally.bearings_rad == pytest.approx((-math.pi / 2, math.pi / 6), abs=1e-12)  # rad
    assert (rally.offsets_m, rally.recover_within_bounces, rally.latency_s) == ((0, 0.05), 3, 0.02)
    assert rally.lateral_m_s == -0.1
    assert (rally.required_share, rally.centres_spacing_m) == (0.9, 0.05)
    assert rally.centres_box_m == ((0.2, -0.4, 0.4), (0.8, 0.4, 0.4))
    assert (rally.contact_offset_spread_m, rally.velocity_spread_m_s, rally.cases) == (0.01, 0.1, 200)


def test_an_empty_trial_has_the_defaults_of_the_contract(tmp_path: Path) -> None:
    assert trial_of(tmp_path) == Trial()
    assert trial_of(tmp_path, "starts = {}\nsensor = {}\nrecovered = {}\ngains = {}\n") == Trial()


def test_every_key_of_a_trial(tmp_path: Path) -> None:
    trial = trial_of(
        tmp_path,
        'law = "planning"\ngains = { energy = 0.05, tilt = -2 }\napex_m = 0.25\nbounces = 80\n' + CENTRE,
        "required_share = 0.5\n[trial.starts]\noffsets_m = [0.08, 0]\nbearings_deg = [90]\n",
        "lateral_m_s = [0, -0.2]\nrandom = 7\n[trial.sensor]\nrate_hz = 120\nlatency_s = 0.03\n",
        "position_noise_m = 0.001\nvelocity_noise_m_s = 0.05\n[trial.recovered]\nwithin_m = 0.05\n",
        "apex_error_m = 0.06\nby_bounce = 30\nthen_for = 50\n",
    )
    assert trial == Trial(
        law="planning",
        gains=(("energy", 0.05), ("tilt", -2.0)),
        centre_m=(0.5, 0, 0.4),
        apex_m=0.25,
        bounces=80,
        starts=Starts((0.08, 0), QUARTERS_RAD[1:2], (0, -0.2), 7),
        sensor=Sensor(120, 0.03, 0.001, 0.05),
        required_share=0.5,
        recovered=Recovered(0.05, 0.06, 30, 50),
    )


def test_no_field_is_left_out_of_the_file() -> None:
    """So that a new field of the dataclasses gets its key; a bearing is in degrees there."""
    for made, keys in ((Rally, schema.RALLY), (Trial, schema.TRIAL)):
        fields = {field.name.replace("_rad", "_deg") for field in dataclasses.fields(made)} - {"law_file"}
        assert fields == set(keys.keys)


def test_repeated_values_count_once_and_are_noted(tmp_path: Path) -> None:
    """-90 is 270 and 720 is 0; the first one written stays, in the order written."""
    lines = "bearings_deg = [270, 0, -90, 720, 360.0000000000001, -1e-11, 90]\noffsets_m = [0.1, 0, 0.1]\n"
    cell = cell_of(tmp_path, RALLY, lines, "[trial.starts]\n", lines, "lateral_m_s = [1, -1, 1]\n")
    assert cell.rally is not None and cell.trial is not None
    for made in (cell.rally, cell.trial.starts):
        assert made.bearings_rad == pytest.approx((1.5 * math.pi, 0, math.pi / 2), abs=1e-12)  # rad
        assert made.offsets_m == (0.1, 0)
    assert cell.trial.starts.lateral_m_s == (1, -1)
    said = [note.partition("cell.toml: ")[2] for note in cell.notes]
    for where in ("rally", "trial.starts"):
        assert f"{where}.bearings_deg: 4 of 7 repeat another and count once" in said
        assert f"{where}.offsets_m: 1 of 3 repeat another and count once" in said
    assert not any("repeat another" in note for note in cell_of(tmp_path, RALLY, TRIAL).notes)


def test_centre_of_a_trial_is_its_own_or_that_of_the_rally(tmp_path: Path) -> None:
    own = cell_of(tmp_path, RALLY, TRIAL, "centre_m = [0.1, 0.2, 0.3]\n").trial
    taken = cell_of(tmp_path, RALLY, TRIAL, arm=STARTLESS).trial
    assert own is not None and own.centre_m == (0.1, 0.2, 0.3)
    assert taken is not None and taken.centre_m == (0.5, 0, 0.4)
    assert trial_of(tmp_path).centre_m is None
    faults = bad(tmp_path, TRIAL, arm=STARTLESS)
    only_fault(faults, "cell.toml", "trial.centre_m", "missing", "start posture")
    assert cell_of(tmp_path, TRIAL, CENTRE, arm=STARTLESS).trial is not None


BAD_RALLIES = [
    ("[rally]\napexes_m = [1]\n", "centre_m", ("missing", "at contact")),
    ("[rally]\n" + CENTRE, "apexes_m", ("missing", "above the centre")),
    (replaced(RALLY, "[0.5, 0, 0.4]", "[0.5, 0]"), "centre_m", ("must have 3",)),
    (replaced(RALLY, "[0.5, 0, 0.4]", "[0.5, 0, nan]"), "centre_m[2]", ("finite",)),
    (replaced(RALLY, "[0.5, 0, 0.4]", "[500, 0, 1001]"), "centre_m[2]", ("at most 1000", "mm")),
    (replaced(RALLY, "[0.2]", "[]"), "apexes_m", ("at least 1",)),
    (replaced(RALLY, "[0.2]", "0.2"), "apexes_m", ("list of apexes",)),
    (replaced(RALLY, "[0.2]", "[0.2, 0]"), "apexes_m[1]", ("above 0 and at most 100",)),
    (replaced(RALLY, "[0.2]", "[-0.2]"), "apexes_m[0]", ("above 0",)),
    (replaced(RALLY, "[0.2]", "[200]"), "apexes_m[0]", ("at most 100", "mm")),
    (replaced(RALLY, "[0.2]", "[inf]"), "apexes_m[0]", ("finite",)),
    (replaced(RALLY, "[0.2]", "[true]"), "apexes_m[0]", ("give a number",)),
    (replaced(RALLY, "[0.2]", "[1e-300]"), "apexes_m[0]", (RANGE,)),
    (replaced(RALLY, "[0.2]", '["0.2"]'), "apexes_m[0]", ("give a number",)),
    (RALLY + "offsets_m = []\n", "offsets_m", ("at least 1",)),
    (RALLY + "offsets_m = [-0.1]\n", "offsets_m[0]", ("at least 0",)),
    (RALLY + "offsets_m = [0, nan]\n", "offsets_m[1]", ("finite",)),
    (RALLY + "offsets_m = [1e308]\n", "offsets_m[0]", ("at most 1000", "mm")),
    (RALLY + "bearings_deg = []\n", "bearings_deg", ("at least 1",)),
    (RALLY + "bearings_deg = [-inf]\n", "bearings_deg[0]", ("finite",)),
    (RALLY + "bearings_deg = [1e300]\n", "bearings_deg[0]", (RANGE,)),
    (RALLY + "bearings_deg = {}\n", "bearings_deg", ("give a list",)),
    (RALLY + "bearings = [0]\n", "bearings", ("unknown key", 'did you mean "bearings_deg"')),
    (RALLY + "recover_within_bounces = 0\n", "recover_within_bounces", ("at least 1 and at most 20",)),
    (RALLY + "recover_within_bounces = 21\n", "recover_within_bounces", ("at most 20",)),
    (RALLY + "recover_within_bounces = 1.0\n", "recover_within_bounces", ("whole number",)),
    (RALLY + "recover_within_bounces = true\n", "recover_within_bounces", ("whole number",)),
    (RALLY + "latency_s = -0.1\n", "latency_s", ("at least 0",)),
    (RALLY + "latency_s = 20\n", "latency_s", ("at most 10", "ms")),
    (RALLY + "required_share = 0\n", "required_share", ("above 0 and at most 1",)),
    (RALLY + "centres_box_m = [[0, 0, 0]]\n", "centres_box_m", ("1 corners", "must have 2")),
    (RALLY + "centres_box_m = [[0, 0, 1], [0, 0, 0]]\n", "centres_box_m", ("z goes from 1 down to 0; swap",)),
    (RALLY + "centres_box_m = [[0, 0, 0], [0, 0, 1e9]]\n", "centres_box_m[1][2]", ("at most 1000",)),
    (RALLY + "centres_spacing_m = 0.1\n", "centres_spacing_m", ("needs centres_box_m",)),
    (
        RALLY + "centres_box_m = [[0, 0, 0], [1000, 1000, 1000]]\ncentres_spacing_m = 0\n",
        "centres_spacing_m",
        ("above 0",),
    ),
    (
        RALLY + "centres_box_m = [[0, 0, 0], [2.7, 2.7, 2.7]]\n",
        "centres_spacing_m",
        ("makes 21952 centres, 28 x 28 x 28, more than 20000; centres_spacing_m = 0.101 would fit",),
    ),
    (
        RALLY + "centres_box_m = [[-1000, -1000, -1000], [1000, 1000, 1000]]\ncentres_spacing_m = 1e-9\n",
        "centres_spacing_m",
        ("makes 8e+36 centres", "would fit"),
    ),
    (RALLY + "contact_offset_spread_m = -1\n", "contact_offset_spread_m", ("at least 0",)),
    (RALLY + "contact_offset_spread_m = 5\n", "contact_offset_spread_m", ("at most 1", "mm")),
    (RALLY + "velocity_spread_m_s = nan\n", "velocity_spread_m_s", ("finite",)),
    (RALLY + "velocity_spread_m_s = 11\n", "velocity_spread_m_s", ("at most 10", "mm/s")),
    (RALLY + "cases = 0\n", "cases", ("at least 1 and at most 10000",)),
    (RALLY + "cases = 10001\n", "cases", ("at most 10000",)),
]


@pytest.mark.parametrize(("table", "key", "words"), BAD_RALLIES)
def test_bad_rally(tmp_path: Path, table: str, key: str, words: tuple[str, ...]) -> None:
    only_fault(bad(tmp_path, table), "cell.toml", f"rally.{key}", *words)


BAD_TRIALS = [
    ("gains = 3\n", "gains", ("give a table",)),
    ("gains = { k = 'x' }\n", "gains.k", ("give a number",)),
    ("gains = { k = nan }\n", "gains.k", ("finite",)),
    ("gains = { k = true }\n", "gains.k", ("give a number",)),
    ("gains = { k = 1e300 }\n", "gains.k", (RANGE,)),
    ("gains = { k = [1] }\n", "gains.k", ("give a number",)),
    ("centre_m = [0, 0, inf]\n", "centre_m[2]", ("finite",)),
    ("centre_m = 1\n", "centre_m", ("list of 3",)),
    ("apex_m = 0\n", "apex_m", ("above 0 and at most 100",)),
    ("apex_m = 101\n", "apex_m", ("at most 100", "mm")),
    ("apex_m = [0.3]\n", "apex_m", ("give a number",)),
    ("bounces = 0\n", "bounces", ("at least 1 and at most 100000",)),
    ("bounces = 100001\n", "bounces", ("at most 100000",)),
    ("bounces = 0x" + "f" * 9000 + "\n", "bounces", ("too many digits",)),
    ("bounces = 29\n", "recovered", ("by_bounce = 10 and then_for = 20 take 30", "trial.bounces = 29")),
    ("recovered = { by_bounce = 31 }\n", "recovered", ("by_bounce = 31", "take 51", "trial.bounces = 50")),
    ("recovered = { by_bounce = 0 }\n", "recovered.by_bounce", ("at least 1",)),
    ("recovered = { then_for = 1e3 }\n", "recovered.then_for", ("whole number",)),
    ("recovered = { within_m = 0 }\n", "recovered.within_m", ("above 0",)),
    ("recovered = { within_m = 20 }\n", "recovered.within_m", ("at most 10", "mm")),
    ("recovered = { apex_error_m = 20 }\n", "recovered.apex_error_m", ("at most 10", "mm")),
    ("required_share = 1.1\n", "required_share", ("at most 1",)),
    ("starts = 3\n", "starts", ("give a table",)),
    ("starts = { ofsets_m = [0] }\n", "starts.ofsets_m", ('did you mean "offsets_m"',)),
    ("starts = { offsets_m = [] }\n", "starts.offsets_m", ("at least 1",)),
    ("starts = { offsets_m = [-1] }\n", "starts.offsets_m[0]", ("at least 0",)),
    ("starts = { bearings_deg = [] }\n", "starts.bearings_deg", ("at least 1",)),
    ("starts = { bearings_deg = [nan] }\n", "starts.bearings_deg[0]", ("finite",)),
    ("starts = { lateral_m_s = [] }\n", "starts.lateral_m_s", ("at least 1",)),
    ("starts = { lateral_m_s = [201] }\n", "starts.lateral_m_s[0]", ("at most 200", "mm/s")),
    ("starts = { random = -1 }\n", "starts.random", ("at least 0 and at most 10000",)),
    ("starts = { random = 10001 }\n", "starts.random", ("at most 10000",)),
    (
        "starts = { random = 10000 }\n",
        "starts",
        ("1 offset x 4 bearings x 1 speed and 10000 at random make 10004 starts, more than 10000",),
    ),
    ("sensor = { rate_hz = -1 }\n", "sensor.rate_hz", ("at least 0 and at most 1e+06",)),
    ("sensor = { rate_hz = 0.5 }\n", "sensor.rate_hz", ("must be 0", "true state", "from 1 to 1e+06")),
    ("sensor = { rate_hz = 2e6 }\n", "sensor.rate_hz", ("at most 1e+06",)),
    ("sensor = { rate_hz = true }\n", "sensor.rate_hz", ("give a number",)),
    ("sensor = { latency_s = 11 }\n", "sensor.latency_s", ("at most 10", "ms")),
    ("sensor = { position_noise_m = 2 }\n", "sensor.position_noise_m", ("at most 1", "mm")),
    ("sensor = { position_noise_m = -1 }\n", "sensor.position_noise_m", ("at least 0",)),
    ("sensor = { velocity_noise_m_s = 11 }\n", "sensor.velocity_noise_m_s", ("at most 10", "mm/s")),
    ("sensor = { velocity_noise_m_s = inf }\n", "sensor.velocity_noise_m_s", ("finite",)),
    ("law = 3\n", "law", ("text in quotes",)),
    ('law = ""\n', "law", ("text in quotes",)),
    ('law = "miror"\n', "law", ('"mirror", "planning"', '"file.py:Name"', 'did you mean "mirror"')),
    ('law = "xx"\n', "law", ('"xx"; it must be one of "mirror", "planning"', "file.py:Name")),
    ('law = "own.py"\n', "law", ("must be one of", "file.py:Name")),
    ('law = "own.txt:Own"\n', "law", ('"own.txt" before the colon is no Python file', "file.py:Name")),
    ('law = ":Own"\n', "law", ("no Python file",)),
    ('law = ".py:Own"\n', "law", ("no Python file",)),
    ('law = "own.py:"\n', "law", ('"" after the colon is no name of a class',)),
    ('law = "own.py:2x"\n', "law", ('"2x" after the colon is no name of a class',)),
    ('law = "own.py:a.b"\n', "law", ("no name of a class",)),
    ('law = "own.py:class"\n', "law", ("no name of a class",)),
    ('law = "own.py:Own()"\n', "law", ("no name of a class",)),
    ('law = "/own.py:Own"\n', "law", ('"/own.py" is an absolute path', "beside the cell file")),
    ('law = "a.py:own\\u0000.py:Own\\n"\n', "law", ("no name of a class",)),
]


@pytest.mark.parametrize(("lines", "key", "words"), BAD_TRIALS)
def test_bad_trial(tmp_path: Path, lines: str, key: str, words: tuple[str, ...]) -> None:
    faults = bad(tmp_path, TRIAL, lines)
    only_fault(faults, "cell.toml", f"trial.{key}", *words)
    assert "\n" not in str(faults[0]) and len(str(faults[0])) < 1000


def test_ends_of_the_ranges_are_let_in(tmp_path: Path) -> None:
    rally = rally_of(tmp_path, "latency_s = 10\nrecover_within_bounces = 20\ncases = 10_000\n")
    assert (rally.latency_s, rally.recover_within_bounces, rally.cases) == (10, 20, 10_000)
    high = (
        "apex_m = 100\nbounces = 100_000\nrecovered = { by_bounce = 99_990, then_for = 10, within_m = 10 }\n"
    )
    trial = trial_of(
        tmp_path, high, "starts = { random = 9996 }\nsensor = { rate_hz = 1e6, latency_s = 10 }\n"
    )
    assert (trial.apex_m, trial.bounces, trial.starts.random) == (100, 100_000, 9996)
    assert trial_of(tmp_path, "sensor = { rate_hz = 1 }\n").sensor.rate_hz == 1


def many(count: int, step: float = 0.001) -> str:
    return f"[{', '.join(f'{i * step:.3f}' for i in range(1, count + 1))}]"


def test_flights_of_a_rally_are_counted(tmp_path: Path) -> None:
    rally = replaced(RALLY, "[0.2]", many(100))
    lines = f"offsets_m = {many(1000)}\nbearings_deg = [0]\n"
    made = cell_of(tmp_path, rally, lines).rally
    assert made is not None and len(made.offsets_m) == 1000
    more = lines.replace("[0]", "[0, 90, 180]")
    told = "100 apexes x 1000 offsets x 3 bearings make 300000 flights, more than 100000; list fewer"
    only_fault(bad(tmp_path, rally, more), "cell.toml", "rally.offsets_m", told)
    once = lines.replace("[0]", "[0, 360, 720]")
    assert cell_of(tmp_path, rally, once).rally is not None
    turned = f"offsets_m = [0, 0.1]\nbearings_deg = {many(501, 0.5)}\n"
    only_fault(
        bad(tmp_path, rally, turned), "cell.toml", "rally.bearings_deg", "100 apexes x 2 offsets x 501"
    )
    longer = f"offsets_m = {many(MAX_ROWS + 1)}\n"
    only_fault(bad(tmp_path, RALLY, longer), "cell.toml", "rally.offsets_m", "1001 offsets", "at most 1000")


def test_starts_of_a_trial_are_counted(tmp_path: Path) -> None:
    starts = f"[trial.starts]\noffsets_m = {many(50)}\nbearings_deg = {many(40)}\nlateral_m_s = {many(5)}\n"
    assert cell_of(tmp_path, starts, arm=ARM).trial is not None
    only_fault(bad(tmp_path, starts, "random = 1\n"), "cell.toml", "trial.starts", "10001 starts", "random")


@pytest.mark.parametrize("high", [(0.3, 0.2, 0.0), (0.65, 1.0, 0.7), (0.0, 0.0, 0.0)])
@pytest.mark.parametrize("spacing_m", [0.1, 0.05, 0.03])
def test_points_of_a_box_are_counted_as_a_survey_counts_them(
    high: tuple[float, float, float], spacing_m: float
) -> None:
    box = ((0.0, 0.0, 0.0), high)
    one = np.zeros((1, 3))
    assert grid.counts(box, spacing_m) == Survey(box, spacing_m, None, one, one, np.ones(1)).counts


def test_a_bounced_ball_needs_ball_and_contact(tmp_path: Path) -> None:
    for table, who in ((RALLY, "[rally] needs it"), (TRIAL, "[trial] needs it")):
        faults = faults_of(tmp_path, cell=ARM + table)
        expect_fault(faults, "cell.toml", "ball", "missing", who, "[ball]")
        expect_fault(faults, "cell.toml", "contact", "missing", who, "restitution", "[contact]")
        assert len(faults) == 2
    both = faults_of(tmp_path, cell=ARM + BALL + RALLY + TRIAL)
    only_fault(both, "cell.toml", "contact", "[rally] and [trial] need it")


@pytest.mark.parametrize(
    ("contact", "where"),
    [
        ("restitution = 0\n", "contact.restitution"),
        ("restitution = 1.01\n", "contact.restitution"),
        ("restitution = 0.9\nrestitution_at = [[1, 0.9], [2, 0]]\n", "contact.restitution_at[1]"),
        ("restitution = 0.9\nrestitution_at = [[1, 1.1]]\n", "contact.restitution_at[0]"),
        ("restitution = 0.9\nrestitution_at = [[1, nan]]\n", "contact.restitution_at[0][1]"),
        ("restitution = 0.9\narm_gives = 1\n", "contact.arm_gives"),
    ],
)
def test_a_bad_contact_is_one_fault(tmp_path: Path, contact: str, where: str) -> None:
    faults = faults_of(tmp_path, cell=ARM + BALL + "[contact]\n" + contact + RALLY + TRIAL)
    only_fault(faults, "cell.toml", where)


def test_an_arm_that_gives(tmp_path: Path) -> None:
    cell = load(tmp_path, cell=ARM + PAIR + "arm_gives = true\n" + RALLY)
    assert cell.contact is not None and cell.contact.arm_gives


def test_a_ball_with_drag_and_lift_may_be_bounced(tmp_path: Path) -> None:
    ball = BALL + "drag_coefficient = 0.45\nlift_coefficient = 0.2\n"
    assert load(tmp_path, cell=ARM + ball + CONTACT + RALLY + TRIAL).rally is not None


PLATE = replaced(
    replaced(ARM, 'shape = "disc"', 'shape = "plate"'), "radius_m = 0.08", "size_m = [0.2, SIDE]"
)
GIVEN = replaced(
    replaced(replaced(ARM, 'shape = "disc"', 'shape = "given"'), "thickness_m = 0.01\n", ""),
    "radius_m = 0.08",
    "com_m = [0, 0, 0]\ninertia_kg_m2 = [1e-3, 1e-3, 2e-3, 0, 0, 0]",
)


@pytest.mark.parametrize("table", [RALLY, TRIAL])
def test_a_face_smaller_than_the_accepted_error(tmp_path: Path, table: str) -> None:
    """The default accept.strike_position_m is 0.005."""
    words = ("0.004", "accept.strike_position_m = 0.005", "may miss")
    disc = replaced(ARM, "radius_m = 0.08", "radius_m = 0.004")
    only_fault(bad(tmp_path, table, arm=disc), "cell.toml", "paddle.radius_m", *words)
    plate = replaced(PLATE, "SIDE", "0.008")
    only_fault(bad(tmp_path, table, arm=plate), "cell.toml", "paddle.size_m", *words)
    stricter = "[accept]\nstrike_position_m = 0.003\n"
    assert cell_of(tmp_path, stricter, table, arm=plate).paddle.size_m == (0.2, 0.008)
    looser = "[accept]\nstrike_position_m = 0.09\n"
    only_fault(bad(tmp_path, looser, table), "cell.toml", "paddle.radius_m", "strike_position_m = 0.09")
    assert load(tmp_path, cell=disc + PAIR).paddle.radius_m == 0.004


def test_a_face_narrower_than_the_ball_is_noted(tmp_path: Path) -> None:
    cell = cell_of(tmp_path, RALLY, arm=replaced(PLATE, "SIDE", "0.03"))
    assert any("paddle.size_m" in note and "radius 0.02 m" in note for note in cell.notes)
    wide = cell_of(tmp_path, RALLY, arm=replaced(PLATE, "SIDE", "0.05"))
    assert not any("paddle.size_m" in note for note in wide.notes)


@pytest.mark.parametrize("table", [RALLY, TRIAL])
def test_a_face_without_an_outline(tmp_path: Path, table: str) -> None:
    words = "rally and trial need the outline of the face: give shape disc or plate"
    only_fault(bad(tmp_path, table, arm=GIVEN), "cell.toml", "paddle.shape", words)
    assert load(tmp_path, cell=GIVEN + PAIR).paddle.shape == "given"


@pytest.mark.parametrize("gravity", ["[0, 0, 9.81]", "[0, 0, 0]", "[0, 1e-8, -9.81]", "[9.81, 0, 0]"])
@pytest.mark.parametrize("table", [RALLY, TRIAL])
def test_gravity_that_does_not_point_down(tmp_path: Path, table: str, gravity: str) -> None:
    arm = replaced(ARM, "[paddle]", f"gravity_m_s2 = {gravity}\n[paddle]")
    only_fault(bad(tmp_path, table, arm=arm), "cell.toml", "arm.gravity_m_s2", "straight down", "world's z")
    assert load(tmp_path, cell=arm + PAIR).arm.gravity_m_s2[2] > -10


def test_gravity_with_rounding_points_down(tmp_path: Path) -> None:
    arm = replaced(ARM, "[paddle]", "gravity_m_s2 = [5e-10, -5e-10, -1.62]\n[paddle]")
    assert cell_of(tmp_path, RALLY, TRIAL, arm=arm).arm.gravity_m_s2[2] == -1.62


def law_cell(folder: Path, named: str) -> Path:
    return write_cell(folder, cell=ARM + PAIR + TRIAL + f"law = '{named}'\n")


def law_faults(folder: Path, named: str) -> tuple[Fault, ...]:
    with pytest.raises(InputError) as caught:
        load_cell(law_cell(folder, named))
    assert caught.value.exit_code == 2
    assert all("\n" not in str(fault) for fault in caught.value.faults)
    return caught.value.faults


def test_a_law_of_the_users_own_is_read_and_not_run(tmp_path: Path) -> None:
    (tmp_path / "own.py").write_text('raise SystemExit("run")\nclass (no Python\n', encoding="utf-8")
    cell = load_cell(law_cell(tmp_path, "own.py:Own"))
    assert cell.trial is not None
    assert (cell.trial.law, cell.trial.law_file) == ("Own", str(tmp_path / "own.py"))
    digest = hashlib.sha256((tmp_path / "own.py").read_bytes()).hexdigest()
    assert (str(tmp_path / "own.py"), digest) in [(item.path, item.sha256) for item in cell.inputs]
    assert cell_of(tmp_path, TRIAL, "law = 'mirror'\n").trial == Trial()


def test_path_of_a_law_is_from_the_cell_file(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    (tmp_path / "here" / "laws:old").mkdir(parents=True)
    (tmp_path / "here" / "laws:old" / "own.py").write_text(LAW, encoding="utf-8")
    (tmp_path / "up.py").write_text(LAW, encoding="utf-8")
    monkeypatch.chdir(tmp_path)
    for named, opened in (
        ("laws:old/own.py:mirror", os.path.join("here", "laws:old", "own.py")),
        ("../up.py:mirror", "up.py"),
    ):
        law_cell(tmp_path / "here", named)
        trial = load_cell(os.path.join("here", "cell.toml")).trial
        assert trial is not None and (trial.law, trial.law_file) == ("mirror", opened)


def test_law_file_that_is_not_there_or_no_file(tmp_path: Path) -> None:
    only_fault(law_faults(tmp_path, "own.py:Own"), "own.py", "file", "not found", "trial.law in")
    (tmp_path / "own.py").mkdir()
    only_fault(law_faults(tmp_path, "own.py:Own"), "own.py", "file", "directory", "trial.law in")
    os.mkfifo(tmp_path / "pipe.py")
    only_fault(law_faults(tmp_path, "pipe.py:Own"), "pipe.py", "file", "not a regular file")
    (fault,) = law_faults(tmp_path, "x" * 5000 + ".py:Own")
    assert "can't be read" in fault.what and len(str(fault)) < 2000


@pytest.mark.parametrize(
    ("content", "where", "word"),
    [
        (b"class Own:\n    x = '\xff'\n", "line 2", "UTF-8"),
        (b"\x7fELF\x02\x01\0\0", "line 1", "zero byte"),
        (LAW.encode() + b"\0", "line 3", "zero byte"),
    ],
)
def test_law_file_that_is_no_text(tmp_path: Path, content: bytes, where: str, word: str) -> None:
    (tmp_path / "own.py").write_bytes(content)
    only_fault(law_faults(tmp_path, "own.py:Own"), "own.py", where, word)


def test_law_file_that_is_too_large_is_refused_unread(tmp_path: Path) -> None:
    with open(tmp_path / "own.py", "wb") as stream:
        stream.truncate(files.MAX_TEXT_BYTES + 1)  # sparse: takes no room on disk
    only_fault(law_faults(tmp_path, "own.py:Own"), "own.py", "file", "MB", "trial.law in")


def test_zero_byte_in_the_path_of_a_law(tmp_path: Path) -> None:
    (fault,) = bad(tmp_path, TRIAL, 'law = "a\\u0000b.py:Own"\n')
    assert "can't be read" in fault.what and "\0" not in str(fault)


def test_tables_that_are_no_tables(tmp_path: Path) -> None:
    for name in ("rally", "trial"):
        for value in ("3", "[]", '"x"', "nan"):
            faults = faults_of(tmp_path, cell=f"{name} = {value}\n" + ARM + PAIR)
            only_fault(faults, "cell.toml", name, "give a table")
        twice = faults_of(tmp_path, cell=ARM + PAIR + f"[[{name}]]\n[[{name}]]\n")
        only_fault(twice, "cell.toml", name, "array of tables")


def test_rally_and_trial_can_be_needed(tmp_path: Path) -> None:
    path = write_cell(tmp_path, cell=ARM + PAIR)
    assert (load_cell(path).rally, load_cell(path).trial) == (None, None)
    needs: tuple[tuple[Need, str], ...] = (("rally", "how high"), ("trial", "which law"))
    for need, word in needs:
        with pytest.raises(InputError) as caught:
            load_cell(path, need=need)
        only_fault(caught.value.faults, "cell.toml", need, "missing", word, f"in a table [{need}]")
    path = write_cell(tmp_path, cell=ARM)
    with pytest.raises(InputError) as caught:
        load_cell(path, need="rally")
    assert [fault.where for fault in caught.value.faults] == ["ball", "contact", "rally"]
    path = write_cell(tmp_path, cell=STARTLESS + PAIR + RALLY + TRIAL)
    assert load_cell(path, need="rally").rally is not None
    assert load_cell(path, need="trial").trial is not None


def test_every_fault_of_both_tables_at_once(tmp_path: Path) -> None:
    arm = replaced(replaced(GIVEN, "[paddle]", "gravity_m_s2 = [0, 0, 1]\n[paddle]"), "0.2", "-1")
    rally = "[rally]\napexes_m = [0]\noffsets_m = [-1]\ncentres_spacing_m = 0.1\n"
    trial = "[trial]\nlaw = 'own.py:2'\nsensor = { rate_hz = 0.1 }\nbounces = 5\nstarts = { random = 9999 }\n"
    faults = faults_of(tmp_path, cell=arm + rally + trial)
    assert [fault.where for fault in faults] == [
        "arm.gravity_m_s2",
        "ball",
        "contact",
        "paddle.mass_kg",
        "paddle.shape",
        "rally.apexes_m[0]",
        "rally.centre_m",
        "rally.centres_spacing_m",
        "rally.offsets_m[0]",
        "trial.law",
        "trial.recovered",
        "trial.sensor.rate_hz",
        "trial.starts",
    ]


def test_a_value_that_could_not_be_read_is_no_second_fault(tmp_path: Path) -> None:
    """The default that stands in for it is not held against the other keys."""
    only_fault(
        bad(tmp_path, TRIAL, "bounces = 'x'\nrecovered = { by_bounce = 90 }\n"), "cell.toml", "trial.bounces"
    )
    lines = "bounces = 12\nrecovered = { by_bounce = 10, then_for = nan }\n"
    only_fault(bad(tmp_path, TRIAL, lines), "cell.toml", "trial.recovered.then_for")


def test_a_flood_of_faults_is_cut_short(tmp_path: Path) -> None:
    gains = ", ".join(f"k{i} = 'x{i}'" for i in range(3000))
    faults = bad(tmp_path, TRIAL, f"gains = {{ {gains} }}\n")
    assert len(faults) == MAX_SHOWN + 1
    minus = ", ".join(f"-{i}" for i in range(1, 1000))
    faults = bad(tmp_path, RALLY, f"offsets_m = [{minus}]\n")
    assert len(faults) == MAX_SHOWN + 1


@pytest.mark.parametrize("seed", range(4))
def test_bent_tables_give_faults_and_nothing_else(tmp_path: Path, seed: int) -> None:
    """Cuts, swaps and odd words anywhere in the two tables."""
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
        ":",
    ]
    full = RALLY + "offsets_m = [0, 0.05]\nbearings_deg = [0, 90]\ncentres_box_m = [[0, 0, 0], [1, 1, 1]]\n"
    full += "cases = 3\n" + TRIAL + 'law = "own.py:Own"\ngains = { a = 1 }\n' + CENTRE
    full += "starts = { random = 3 }\nsensor = { rate_hz = 5 }\nrecovered = { by_bounce = 3 }\n"
    (tmp_path / "own.py").write_text(LAW, encoding="utf-8")
    assert cell_of(tmp_path, full).trial is not None
    for _ in range(60):
        at, size = int(random.integers(len(full))), int(random.integers(12))
        bent = full[:at] + words[random.integers(len(words))] + full[at + size :]
        try:
            cell_of(tmp_path, bent)
        except InputError as error:
            assert error.faults
            assert all(fault.where and fault.what and "\n" not in str(fault) for fault in error.faults)


def test_published_rebound() -> None:
    """Table tennis: T3 B.7, 240 to 265 mm of 305 mm, 0.887 to 0.932. Tennis: 135 to 147 cm of 254 cm, 0.729 to 0.761.

    Squash, from memory: 26 to 33 %, 0.510 to 0.574.
    """
    found = {test.ball: test.restitution for test in REBOUND}
    assert found["table tennis"] == pytest.approx((0.8871, 0.9321), abs=1e-4)
    assert found["tennis"] == pytest.approx((0.729, 0.761), abs=5e-4)
    assert found["squash"] == pytest.approx((0.510, 0.574), abs=5e-4)
    assert set(found) <= set(BALLS)
