"""Faults that random cells found, each mended at its root and kept as the smallest case that shows it."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from builders import NO_MARGINS, robot_cell
from follow_case import bump, hinge, hinge_log, limits, one_joint, unlimited
from random_case import FOLLOW, SURVEY
from random_run import looked_at
from strike_case import near, strikable

from reach.arm import Arm
from reach.cell import Accept, Bound, Cell
from reach.evidence.strikes import Errors, strike_faults
from reach.follow import roll
from reach.follow.bench import run
from reach.limits.brake import BrakeModel
from reach.limits.build import build_limits
from reach.strike.setting import Setting
from reach.strike.straight import straight_strokes

# What stood in the way in each, by the seed that draws it.
LOGS = {
    1000055: "a joint without a torque rate took the brakes of the others: a legal log was refused",
    3000141: "the same, with an acceleration unknown",
    3000145: "torque rate passed where dry friction bends: a legal log was refused",
    7000252: "jerk passed by a solver's rounding with no margin: a legal log was refused",
    3000048: "a strike commanded at no speed accepted any",
    2026000036: "a speed of 30 m/s in nine digits is not good to 1e-8 m/s",
}
AS_IT_IS = roll.CHORD_ROUNDS
STRIKES = {
    7000264: "speed not held to the end of a strike window shorter than a control period",
    2026000409: "a straight stroke that two joints can't begin along its line",
    2026000209: "a joint at the end of its travel with no limit of acceleration",
    3000024: "a joint that turns endlessly along its path, with no limit of jerk",
    2026001049: "a swing at rest whose bound is unlimited",
    2026001079: "a still paddle's bound above that of a turning one, where vertices are all but parallel to the rows",
    7000029: "joint speeds of a near singular strike, by a ridge",
}


@pytest.mark.parametrize("seed", LOGS)
def test_a_log_that_went_wrong_goes_right(seed: int) -> None:
    assert looked_at(seed, FOLLOW).findings == ()


@pytest.mark.parametrize("seed", STRIKES)
def test_a_strike_that_went_wrong_goes_right(seed: int) -> None:
    assert looked_at(seed, SURVEY).findings == ()


def test_a_joint_that_nothing_limits_does_not_take_the_others_brakes() -> None:
    cell = unlimited(robot_cell("bench6"))
    known = {"torque": 100.0, "torque_rate": 1000.0}
    joints = [replace(joint, limits=limits(**known)) for joint in cell.arm.joints]
    free = [*joints[:-1], replace(joints[-1], limits=limits())]
    able = []
    for some in (joints, free):
        partly = replace(cell, arm=replace(cell.arm, joints=tuple(some)))
        arm = Arm(partly.arm, partly.paddle)
        state = arm.at(np.array(cell.arm.start), np.zeros(arm.n))
        able.append(BrakeModel(build_limits(partly), 0.001).at(state, state.bias))
    # The wrist carries little: what the shoulder can do hardly hangs on what is known of it.
    np.testing.assert_allclose(able[1].deceleration[:3], able[0].deceleration[:3], rtol=0.5)
    np.testing.assert_allclose(able[1].rate[:3], able[0].rate[:3], rtol=0.5)


def test_the_peak_of_a_joint_without_ends_is_the_farthest_it_goes() -> None:
    endless = replace(limits(), position=Bound(-np.inf, np.inf, "continuous joint"))
    t, speed, marks = bump(1.0, 0.4)
    found = run(hinge_log(hinge(endless), t, speed, marks, interpolation="linear"))
    use = next(use for use in found.evidence.uses if (use.limit, use.joint) == ("position", "j1"))
    assert found.evidence.motion is not None
    assert use.utilisation == 0.0
    assert use.peak == pytest.approx(np.abs(found.evidence.motion.q[:, 0]).max(), abs=1e-6) and use.peak > 0.1


@pytest.mark.parametrize(
    ("asked", "done", "faults"),
    [
        pytest.param(0.0, 0.0009, 0, id="next to nothing, none asked"),
        pytest.param(0.0, 0.0013, 1, id="something, none asked"),
        pytest.param(0.0, -0.5, 1, id="much, none asked"),
        pytest.param(0.02, 0.0209, 0, id="slow, off by less than 1 mm/s"),
        pytest.param(0.02, 0.0211, 1, id="slow, off by more"),
        pytest.param(1.0, 1.029, 0, id="fast, within 3 %"),
        pytest.param(1.0, 1.031, 1, id="fast, beyond 3 %"),
        pytest.param(-1.0, -0.969, 1, id="away from the face, too slow"),
    ],
)
def test_the_speed_of_a_strike_may_be_off_by_a_share_but_a_millimetre_a_second_at_least(
    asked: float, done: float, faults: int
) -> None:
    one, none = np.ones(1), np.zeros(1)
    errors = Errors(asked * one, done * one, none, abs(done - asked) * one, none, none)
    assert len(strike_faults(errors, Accept())) == faults


def rubbing(rounds: int, monkeypatch: pytest.MonkeyPatch) -> float:
    """Largest use of the torque rate by a hinge that reverses against dry friction as fast as it may."""
    monkeypatch.setattr(roll, "CHORD_ROUNDS", rounds)
    known = replace(limits(torque=60.0, torque_rate=400.0), friction=1.0)
    t = 0.002 * np.arange(200)
    speed = np.where(t < 0.2, -1.5, 1.5) * np.minimum(1.0, t / 0.05)
    found = run(hinge_log(hinge(known, period_s=0.002), t, speed, interpolation="linear"))
    assert found.roll is not None and found.roll.elastic_steps == 0
    return max(u.utilisation for u in found.evidence.uses if u.limit == "torque rate" and u.joint == "j1")


def test_torque_rate_holds_where_dry_friction_bends(monkeypatch: pytest.MonkeyPatch) -> None:
    assert rubbing(0, monkeypatch) > 1.3
    assert rubbing(AS_IT_IS, monkeypatch) <= 1.0


def test_a_solvers_rounding_passes_no_jerk_limit() -> None:
    cell = replace(robot_cell("bench6"), margins=NO_MARGINS, period_s=0.0005)
    start = np.array(cell.arm.start)
    found = run(one_joint(cell, 1, 3.0, 0.25, start))
    jerks = [use.utilisation for use in found.evidence.uses if use.limit == "jerk"]
    assert max(jerks) <= 1 + 1e-9 and max(jerks) > 0.99


def lines(cell: Cell) -> tuple[Setting, np.ndarray, np.ndarray, np.ndarray]:
    """A setting, postures, their normals and tangents for strikes along the normal, the paddle free to turn."""
    setting = Setting.of(strikable(cell, 0.2, "free"))
    q = near(setting, np.array(cell.arm.start), 0.3, 5, seed=1)
    _, rotation, jacobian = setting.chain.jacobians(q)
    normal = rotation[:, :, 2]
    tangent = np.array([np.linalg.pinv(j[:3]) @ n for j, n in zip(jacobian, normal, strict=True)])
    return setting, q, normal, tangent


@pytest.mark.parametrize(("name", "held"), [("bench7", True), ("link2", False)])
def test_a_straight_stroke_begins_along_its_line_or_is_none(name: str, held: bool) -> None:
    setting, q, normal, tangent = lines(robot_cell(name))
    paths = straight_strokes(setting.chain, setting.ends, q, tangent, normal, True, 0.1, 0.2)
    long = paths.distance[:, :, -1].min(axis=1) > 1e-3
    assert long.any() if held else not long.any()
    jacobian = setting.chain.jacobians(q)[2]
    speed = np.einsum("mrn,mn->mr", jacobian[:, :3], paths.slope[:, 0, 0])
    assert np.abs(speed - normal)[long].max(initial=0.0) <= 1e-6


@pytest.mark.parametrize(
    ("window_s", "period_s", "held_s"), [(0.01, 0.001, 0.01), (0.004, 0.004, 0.008), (0.0, 0.004, 0.0)]
)
def test_a_strikes_speed_is_held_to_whole_periods(window_s: float, period_s: float, held_s: float) -> None:
    cell = replace(robot_cell("link2"), period_s=period_s, accept=Accept(strike_window_s=window_s))
    assert Setting.of(strikable(cell)).hold_s == pytest.approx(held_s, abs=1e-12)
