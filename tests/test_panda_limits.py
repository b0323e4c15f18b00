"""A published arm with its maker's limits, from files: every number arrives, and a command is followed under them."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from builders import FER, NO_MARGINS, fer_cell, following

from reach.cell import Bound, Cell
from reach.follow.bench import run
from reach.limits.base import Fine
from reach.limits.build import build_limits

# The table is in builders.FER, with its source: frankarobotics/docs @5f28326 and libfranka @6474466.
BOTH_WAYS = ("velocity", "acceleration", "jerk", "torque", "torque_rate")


@pytest.fixture
def cell(tmp_path) -> Cell:
    """The FER with its hand, fingers held."""
    return fer_cell(tmp_path)


def test_every_number_arrives(cell):
    joints = cell.arm.joints
    assert [joint.name for joint in joints] == [f"panda_joint{i + 1}" for i in range(7)]
    for i, joint in enumerate(joints):
        position = joint.limits.position
        assert isinstance(position, Bound)
        assert (position.lo, position.hi) == (FER["position_lo"][i], FER["position_hi"][i])
        for name in BOTH_WAYS:
            bound = getattr(joint.limits, name)
            assert (bound.lo, bound.hi) == (-FER[name][i], FER[name][i]), (joint.name, name)
        for name in ("acceleration", "jerk", "torque_rate"):  # no URDF has these
            assert getattr(joint.limits, name).source == "maker, FER"
        assert joint.limits.torque_continuous is None and joint.limits.armature is None


def test_fingers_are_held_where_the_cell_says(cell):
    held = {joint.name: joint.value for joint in cell.arm.held}
    assert held == {"panda_finger_joint1": 0.01, "panda_finger_joint2": 0.02}


def test_limit_kinds_carry_the_table(cell):
    limits = build_limits(cell)
    for name in BOTH_WAYS:
        kind = limits[name.replace("_", " ")]
        np.testing.assert_array_equal(kind.hi, FER[name])
        np.testing.assert_array_equal(kind.lo, -np.array(FER[name]))
        assert kind.known.all()
    assert not limits["duty"].known.any() and not limits["tool speed"].known.any()


def test_jerk_limit_is_half_the_acceleration_in_a_millisecond(cell):
    # Derived from the table: jerk · 1 ms = half the acceleration limit on every joint.
    limits = build_limits(cell)
    np.testing.assert_allclose(limits["jerk"].hi * cell.period_s, limits["acceleration"].hi / 2, rtol=1e-15)


@pytest.mark.parametrize(
    ("torque", "joint", "ramp_s"),
    [
        # Derived from the table: full torque from zero takes 87 ms at 1,000 N·m/s, 12 ms at the wrist.
        pytest.param((0.0, 87.0), 0, 0.087, id="0 to 87"),
        pytest.param((-87.0, 87.0), 1, 0.174, id="-87 to 87"),
        pytest.param((0.0, 12.0), 6, 0.012, id="0 to 12"),
    ],
)
def test_torque_ramp_takes_its_time(cell, torque, joint, ramp_s):
    limits = build_limits(cell)

    def uses(length_s: float) -> tuple[float, float]:
        t = np.arange(0.0, length_s + 0.01, 0.00025)
        values = np.zeros((len(t), 7))
        values[:, joint] = np.clip(torque[0] + (torque[1] - torque[0]) * t / length_s, *torque)
        still = np.zeros_like(values)
        before = np.zeros(7)
        before[joint] = torque[0]
        fine = Fine(t, still, still, still, values, np.zeros(len(t)), 4, np.zeros(7), before, 0.001)
        rate, size = limits["torque rate"], limits["torque"]
        return tuple(float(k.utilisation(k.measure(fine))[:, joint].max()) for k in (rate, size))

    rate, size = uses(ramp_s)
    assert rate == pytest.approx(1.0, abs=1e-9) and size == pytest.approx(1.0, abs=1e-12)
    assert uses(ramp_s - 0.001)[0] > 1.005
    assert uses(ramp_s + 0.001)[0] < 0.999


def test_command_is_followed_under_the_limits(cell):
    # A gentle sway of the tool, 0.25 m/s at 2 Hz for half a second: no limit of this arm is near.
    t = np.arange(0.0, 0.5, 0.001)
    twist = np.zeros((len(t), 6))
    twist[:, 2] = 0.25 * np.sin(2 * np.pi * 2.0 * t) ** 2 * np.sign(np.sin(2 * np.pi * 2.0 * t))
    done = run(following(cell, t, twist, interpolation="linear", strikes="guessed-ok"))
    assert done.verdict.verdict == "deliverable"
    assert done.roll.stopped and done.roll.failed_steps == done.roll.elastic_steps == 0
    shares = [use.utilisation for use in done.evidence.uses if use.utilisation is not None]
    assert 0.05 < max(shares) <= 1.0
    assert np.abs(done.roll.shortfall).max() < 1e-3  # m/s
    assert ("duty", "panda_joint1") in done.evidence.unknown


def test_command_beyond_the_limits_is_not(cell):
    # 3 m/s upward from a stand in 50 ms asks of this arm about ten times what its accelerations allow.
    t = np.arange(0.0, 0.2, 0.001)
    twist = np.zeros((len(t), 6))
    twist[:, 2] = 3.0 * np.minimum(t / 0.05, 1.0)
    tried = replace(following(cell, t, twist), margins=NO_MARGINS)
    done = run(tried)
    assert done.verdict.verdict == "not deliverable"
    assert done.roll.failed_steps == 0
    for use in done.evidence.uses:
        if use.limit in ("position", "velocity", "acceleration", "jerk", "torque"):
            assert use.utilisation is not None and use.utilisation <= 1 + 1e-6, use
