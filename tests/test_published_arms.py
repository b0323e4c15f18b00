"""A short log followed on published arms, whole: reader, roll, evidence, verdict."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from builders import cell_text, following, load_text, published_urdf, robot_cell

import reach
from reach.advice.answer import answer
from reach.cell import Bound, Cell
from reach.follow.bench import run

UR = (
    "shoulder_pan_joint",
    "shoulder_lift_joint",
    "elbow_joint",
    "wrist_1_joint",
    "wrist_2_joint",
    "wrist_3_joint",
)
SEVEN = tuple(f"joint{i + 1}" for i in range(7))
FER = tuple(f"panda_joint{i + 1}" for i in range(7))
# Folder, file, tip, joints, and a bent posture well inside their ranges. The second has a gripper whose fingers are off
# the chain, the last a hand with two sliding ones.
ARMS = {
    "ur5": ("ur_description", "ur5_robot.urdf", "tool0", UR, (0.0, -1.2, 1.8, -0.6, 1.57, 0.0)),
    "ur3 with gripper": (
        "ur_description",
        "ur3_gripper.urdf",
        "tool0",
        UR,
        (0.0, -1.2, 1.8, -0.6, 1.57, 0.0),
    ),
    "xarm7": ("xarm_description", "xarm7.urdf", "link7", SEVEN, (0.0, -0.4, 0.0, 1.0, 0.0, 1.4, 0.0)),
    "z1": ("z1_description", "z1.urdf", "link06", SEVEN[:6], (0.0, 1.5, -1.2, 0.3, 0.0, 0.0)),
    "panda": (
        "panda_description",
        "panda.urdf",
        "panda_link8",
        FER,
        (0.0, -0.785, 0.0, -2.356, 0.0, 1.571, 0.785),
    ),
}
LASTS_S = 0.6


def stroke(cell: Cell) -> Cell:
    """The cell with one gentle stroke up and back, at rest at both ends, its contact marked where it is fastest."""
    t = np.arange(0.0, LASTS_S, 0.001)
    twist = np.zeros((len(t), 6))
    twist[:, 2] = 0.1 * np.sin(2 * np.pi * t / LASTS_S) * np.sin(np.pi * t / LASTS_S) ** 2
    follow = following(cell, t, twist, interpolation="linear").follow
    assert follow is not None
    strike = np.arange(len(t)) == np.argmax(twist[:, 2])
    return replace(cell, follow=replace(follow, commands=replace(follow.commands, strike=strike)))


@pytest.mark.parametrize("name", ARMS)
def test_a_gentle_stroke_is_followed(name: str) -> None:
    folder, file, tip, joints, posture = ARMS[name]
    cell = load_text(cell_text(published_urdf(folder, file), tip, dict(zip(joints, posture, strict=True))))
    result = answer(stroke(cell), advice=False)
    evidence = result.evidence
    (strike,) = evidence.strikes
    assert strike.delivered and evidence.stopped and evidence.failed_steps == 0
    assert strike.delivered_m_s == pytest.approx(strike.commanded_m_s, rel=0.03)
    # No published file states a torque rate, so the verdict must not be "deliverable"; it names what is missing.
    assert result.verdict.verdict == "undecided"
    assert "torque rate" in result.verdict.sentence
    assert all(use.utilisation is None or use.utilisation <= 1 for use in evidence.uses)


def test_a_position_row_does_not_break_jerk_and_acceleration() -> None:
    # A posture and limits at which the shoulder's load takes braking ability from the wrist faster than jerk lets a
    # brake build up. Rows that insisted on stopping in time drove the wrist to 569 % of its jerk, far from its end.
    folder, file, _, joints, _ = ARMS["xarm7"]
    posture = (-1.08403, 0.99046, 1.18167, 0.66450, 1.68451, 2.24885, -1.23538)
    text = cell_text(published_urdf(folder, file), "link_eef", dict(zip(joints, posture, strict=True)))
    plain = load_text(text)
    tight = tuple(
        replace(
            joint,
            limits=replace(
                joint.limits,
                acceleration=Bound(-15.0, 15.0, "guessed"),
                jerk=Bound(-3000.0, 3000.0, "guessed"),
                torque_rate=Bound(-1000.0, 1000.0, "guessed"),
            ),
        )
        for joint in plain.arm.joints
    )
    t = np.arange(0.0, 2.0, 0.005)
    twist = np.zeros((len(t), 6))
    twist[:, 2] = 0.3 * np.sin(2 * np.pi * t) * np.minimum(t, 1.0)
    done = run(following(replace(plain, arm=replace(plain.arm, joints=tight)), t, twist))
    used = {(u.limit, u.joint): u.utilisation for u in done.evidence.uses if u.utilisation is not None}
    assert max(used.values()) <= 1 + 1e-6
    assert used["acceleration", "joint2"] > 0.9  # the motion is no easy one
    assert done.evidence.stopped


def test_strikes_across_the_face_are_pointed_out() -> None:
    cell = stroke(robot_cell("bench7"))  # its face looks up, and the stroke goes up
    assert not any("across the face" in note for note in answer(cell, advice=False).notes)
    aside = replace(cell.paddle, mount=replace(cell.paddle.mount, rpy_rad=(np.pi / 2, 0.0, 0.0)))
    notes = answer(replace(cell, paddle=aside), advice=False).notes
    assert any("1 of 1 strikes are commanded across the face" in note for note in notes)


def test_arrays_that_span_too_many_periods_are_refused() -> None:
    folder, file, tip, joints, posture = ARMS["ur5"]
    cell = load_text(cell_text(published_urdf(folder, file), tip, dict(zip(joints, posture, strict=True))))
    t = np.arange(30000) * 0.1
    with pytest.raises(reach.InputError, match="control periods"):
        reach.follow_commands(
            replace(cell, period_s=1e-3), t, np.zeros((30000, 6)), frame="world", point="strike"
        )
