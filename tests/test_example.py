"""The wear bench example: its log against the ball's closed forms, and the headline of its run."""

from __future__ import annotations

import csv
import subprocess
import sys
from dataclasses import replace
from functools import cache
from pathlib import Path

import numpy as np
import pytest
from numpy.typing import NDArray

from reach.api import follow_commands, survey_strikes
from reach.arm import Arm
from reach.cell import STANDARD_GRAVITY_M_S2, Array, Cell
from reach.evidence.points import Points
from reach.formats import load_cell
from reach.result import FollowResult

BENCH = Path(__file__).parents[1] / "examples" / "wear_bench"
STEADY, RAISED = 8, 4
BALL_RADIUS_M = 0.020  # ITTF Technical Leaflet T3


@cache
def cell() -> Cell:
    return load_cell(BENCH / "cell.toml")


@cache
def result() -> FollowResult:
    return follow_commands(cell(), advice=False)


@cache
def log() -> dict[str, Array]:
    """The committed log by column, read without the package."""
    with (BENCH / "commands.csv").open(encoding="utf-8", newline="") as file:
        rows = list(csv.DictReader(file))
    return {name: np.array([float(row[name]) for row in rows]) for name in rows[0]}


def columns(names: str) -> Array:
    return np.column_stack([log()[name] for name in names.split()])


def contact_rows() -> NDArray[np.intp]:
    return np.flatnonzero(log()["strike"] == 1)


def normals() -> Array:
    """Face normals (N, 3): the third column of the rotation matrix of a unit quaternion."""
    w, x, y, z = columns("qw qx qy qz").T
    return np.column_stack([2 * (x * z + w * y), 2 * (y * z - w * x), 1 - 2 * (x * x + y * y)])


def integrated() -> Array:
    """Where the linearly interpolated velocities lead from the first pose: (N, 3)."""
    velocity, step = columns("vx_m_s vy_m_s vz_m_s"), np.diff(log()["t_s"])[:, None]
    moved = np.cumsum((velocity[1:] + velocity[:-1]) / 2 * step, axis=0)
    return np.asarray(columns("px_m py_m pz_m")[0] + np.vstack([np.zeros(3), moved]))


def restitution() -> float:
    contact = cell().contact
    assert contact is not None
    return contact.restitution


def check(script: Path) -> subprocess.CompletedProcess[str]:
    return subprocess.run(
        [sys.executable, str(script), "--check"], capture_output=True, text=True, timeout=60
    )


def test_log_is_what_the_script_makes() -> None:
    done = check(BENCH / "make_commands.py")
    assert done.returncode == 0, done.stdout + done.stderr


def test_check_tells_a_changed_log(tmp_path: Path) -> None:
    script = tmp_path / "make_commands.py"
    script.write_text((BENCH / script.name).read_text(encoding="utf-8"), encoding="utf-8")
    text = (BENCH / "commands.csv").read_text(encoding="utf-8")
    (tmp_path / "commands.csv").write_text(text.replace("0.000000", "0.000001", 1), encoding="utf-8")
    done = check(script)
    assert done.returncode == 1, done.stdout + done.stderr


def test_steady_strikes_have_the_closed_form_speed() -> None:
    # v = g T/2 and u = v (1 - e)/(1 + e): vertical throw and Newton's restitution. These strikes are vertical.
    rows, e = contact_rows(), restitution()
    flights = np.diff(log()["t_s"][rows])[: STEADY - 1]
    assert np.ptp(flights) < 1e-9
    speed = STANDARD_GRAVITY_M_S2 * flights[0] / 2 * (1 - e) / (1 + e)
    vertical = rows[[0, 7]]
    np.testing.assert_allclose(log()["vz_m_s"][vertical], speed, atol=2e-6)  # the log's last digit


def test_every_strike_sends_the_ball_to_the_next_contact() -> None:
    """The paddle's twist and face at each contact turn the ball that comes into the ball that is due next."""
    rows, e, gravity = contact_rows(), restitution(), np.array([0.0, 0.0, -STANDARD_GRAVITY_M_S2])
    normal, paddle = normals()[rows], columns("vx_m_s vy_m_s vz_m_s")[rows]
    flights = np.diff(log()["t_s"][rows])[:, None]
    centre = columns("px_m py_m pz_m")[rows] + BALL_RADIUS_M * normal
    leaves = np.diff(centre, axis=0) / flights - gravity * flights / 2
    dropped = gravity * flights[0] / 2  # from the steady apex
    comes = np.vstack([dropped, leaves[:-1] + gravity * flights[:-1]])
    along = np.sum((paddle[:-1] - comes) * normal[:-1], axis=1)[:, None]
    struck = comes + (1 + e) * along * normal[:-1]
    # The last digit of a quaternion is 2e-6 rad at most, times (1 + e)(v + u) = 10 m/s.
    np.testing.assert_allclose(struck, leaves, atol=3e-5)


def test_velocities_lead_back_to_the_contact_height() -> None:
    point, rows = integrated(), contact_rows()
    np.testing.assert_allclose(point[rows, 2], columns("pz_m")[0, 0], atol=2e-5)
    np.testing.assert_allclose(point, columns("px_m py_m pz_m"), atol=5e-5)


def test_paddle_decelerates_at_contact_inside_the_self_steadying_window() -> None:
    # Schaal, Atkeson & Sternad, J. Motor Behav. 28(2), 1996: -2g (1 + e²)/(1 + e)² < a < 0.
    rows, e, t = contact_rows(), restitution(), log()["t_s"]
    rate = np.gradient(log()["vz_m_s"], t)[rows]
    lowest = -2 * STANDARD_GRAVITY_M_S2 * (1 + e**2) / (1 + e) ** 2
    assert np.all((rate > lowest) & (rate < 0))


def test_first_pose_is_the_start_posture() -> None:
    arm = Arm(cell().arm, cell().paddle)
    position, rotation = arm.pose(np.array(cell().arm.start))
    np.testing.assert_allclose(position, columns("px_m py_m pz_m")[0], atol=1e-3)
    tilt = np.degrees(np.arccos(np.clip(rotation[:, 2] @ normals()[0], -1, 1)))
    assert tilt < 0.1


def test_headline_of_the_run() -> None:
    assert result().verdict.verdict == "not deliverable"
    strikes = result().evidence.strikes
    assert [s.delivered for s in strikes] == [True] * STEADY + [False] * RAISED
    assert all(s.marked for s in strikes)
    assert (result().without_margins, result().without_pose_gain) == ("not deliverable", "not deliverable")
    assert result().solver.failed_steps == 0


def test_held_rally_is_followed_closely() -> None:
    for strike in result().evidence.strikes[:STEADY]:
        assert abs(strike.delivered_m_s / strike.commanded_m_s - 1) < 0.001
        assert strike.position_error_m < 1e-4
        assert strike.tilt_error_deg < 0.05


def test_acceleration_of_j2_decides_every_miss() -> None:
    first = result().reasons[0]
    assert (first.decides, first.limit, first.joint) == (True, "acceleration", "j2")
    assert first.bound == 12.0
    assert first.value is not None and 40 < first.value < 55  # README: up to 48
    missed = result().evidence.strikes[STEADY:]
    assert {(s.limit, s.joint) for s in missed} == {("acceleration", "j2")}
    assert "fast" in missed[0].faults[0]
    assert all("slow" in s.faults[0] for s in missed[1:])


def test_misses_are_clear_and_grow_with_the_apex() -> None:
    missed = result().evidence.strikes[STEADY:]
    shares = [s.delivered_share for s in missed]
    assert all(share is not None and abs(share - 1) > 0.10 for share in shares)
    off = [s.position_error_m for s in missed]
    assert off == sorted(off)
    assert 0.5 < missed[-1].delivered_m_s / missed[-1].commanded_m_s < 0.7


def test_nothing_but_acceleration_and_torque_rate_is_near_its_limit() -> None:
    peak: dict[str, float] = {}
    for use in result().evidence.uses:
        peak[use.limit] = max(peak.get(use.limit, 0.0), use.utilisation or 0.0)
    spare = {limit: peak[limit] for limit in ("velocity", "torque", "duty", "tool speed")}
    assert max(spare.values()) < 0.8, spare


def at_run_up(run_up_m: float, spacing_m: float) -> Points:
    """What the example's survey finds with another run-up and grid."""
    survey = cell().survey
    assert survey is not None
    asked = replace(cell(), survey=replace(survey, run_up_m=run_up_m, spacing_m=spacing_m))
    return survey_strikes(asked, advice=False).evidence.points


def undecided_share(points: Points) -> float:
    """Of the strikes within reach."""
    return float((points.verdict == "undecided")[points.limit != "reach"].mean())


def test_few_strikes_stay_undecided_on_a_long_run_up() -> None:
    points = at_run_up(0.3, 0.2)
    assert len(points.verdict) == 3 * 5 * 3
    assert undecided_share(points) <= 0.10
    assert (points.verdict == "deliverable").sum() >= 30


@pytest.mark.campaign
def test_the_survey_says_what_the_readme_says() -> None:
    points = at_run_up(0.3, 0.1)
    counts = {word: int((points.verdict == word).sum()) for word in ("deliverable", "not deliverable")}
    assert counts == {"deliverable": 217, "not deliverable": 53}
    assert (points.limit == "reach").sum() == 45
    # No upper bound knows how short the way is: what a short run-up can't do stays undecided.
    for run_up, least, most in ((0.1, 0.0, 0.3), (0.05, 0.5, 1.0)):
        share = undecided_share(at_run_up(run_up, 0.1))
        print(f"run-up {run_up} m: {share:.3f} undecided")
        assert least <= share <= most
