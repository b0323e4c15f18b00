"""How a log was read, in words, whether another reading fits its pose far better, and its stamps in numbers."""

from __future__ import annotations

from dataclasses import replace
from typing import Any

import numpy as np
import pytest
from builders import WORKING, robot_cell
from scipy.spatial.transform import Rotation

from reach.advice.answer import answer
from reach.advice.reading import better_reading, fit_to_pose, reading_in_words, stamp_statistics
from reach.arm import Arm
from reach.cell import Array, Cell, CommandLog, Follow, Pose

BASE = Pose((0.0, 0.1, 0.2), (0.2, 0.1, 1.2))
EMPTY = CommandLog(np.zeros(0), np.zeros((0, 6)))


@pytest.mark.parametrize(
    "changed, words",
    [
        ({"frame": "world"}, "world's axes"),
        ({"frame": "base"}, "axes of the arm's base"),
        ({"frame": "paddle"}, "commanded paddle"),
        ({"point": "strike"}, "strike point"),
        ({"point": "tip"}, "tip link's origin"),
        ({"point": (0.01, -0.2, 0.035)}, "(0.01, -0.2, 0.035) m in the face frame"),
        ({"interpolation": "hold"}, "held until the next sample"),
        ({"interpolation": "linear"}, "linear between samples"),
        ({"pose_gain_per_s": 0.0}, "replayed as sent"),
        ({"pose_gain_per_s": 12.5}, "pose feedback of 12.5 per s"),
    ],
    ids=str,
)
def test_reading_in_words(changed: dict[str, Any], words: str) -> None:
    plain = Follow("world", "strike", EMPTY)
    told = reading_in_words(replace(plain, **changed))
    assert words in told
    others = {"frame": "base", "point": "tip", "interpolation": "linear", "pose_gain_per_s": 3.0}
    (key,) = changed
    if changed[key] != others[key]:
        assert words not in reading_in_words(replace(plain, **{key: others[key]}))


def logged(frame: str, point: str, noise_m: float = 0.0) -> Cell:
    """A log of a paddle that turns and moves, in one reading, with the strike point's pose at each stamp.

    The cell reads it as it was made. Made from the pose by differences, so that the twists lead from pose to pose.
    """
    cell = robot_cell("bench6")
    start = np.array(list(WORKING["bench6"].values()))
    cell = replace(cell, arm=replace(cell.arm, base=BASE, start=tuple(start)))
    p0, R0 = Arm(cell.arm, cell.paddle).pose(start)
    t = 0.002 * np.arange(200)
    turn = Rotation.from_rotvec(np.outer(np.sin(5 * t) * 0.6, [0.0, 0.6, 0.8]))
    axes = turn.as_matrix() @ R0
    position = p0 + np.outer(1 - np.cos(6 * t), [0.03, -0.02, 0.05])
    mount = Rotation.from_euler("xyz", [10.0, -5.0, 20.0], degrees=True)
    arm = -mount.inv().apply([0.01, -0.02, 0.06]) if point == "tip" else np.zeros(3)
    twist = differences(frame, position + axes @ arm, axes)
    pose = np.hstack([position, np.roll(Rotation.from_matrix(axes).as_quat(), 1, axis=1)])
    pose[:, :3] += noise_m * np.random.default_rng(1).normal(size=(200, 3))
    log = CommandLog(t, twist, pose=pose)
    return replace(cell, follow=Follow(frame, point, log))


def differences(frame: str, point: Array, axes: Array) -> Array:
    """Mean twists (k, 6) from each of some poses to the next, in a frame, about a point on its path."""
    speed = np.diff(point, axis=0) / 0.002
    turning = Rotation.from_matrix(axes[1:] @ axes[:-1].transpose(0, 2, 1)).as_rotvec() / 0.002
    frames = {
        "world": np.broadcast_to(np.eye(3), axes.shape),
        "base": np.broadcast_to(Rotation.from_euler("xyz", BASE.rpy_rad).as_matrix(), axes.shape),
        "paddle": axes,
    }[frame][:-1]
    both = [np.einsum("kji,kj->ki", frames, x) for x in (speed, turning)]
    return np.vstack([np.hstack(both), np.zeros((1, 6))])


READINGS = [(frame, point) for frame in ("world", "base", "paddle") for point in ("strike", "tip")]


@pytest.mark.parametrize("frame, point", READINGS)
def test_quiet_where_the_reading_fits(frame: str, point: str) -> None:
    cell = logged(frame, point)
    assert cell.follow is not None
    assert fit_to_pose(cell, cell.follow) < 1e-3  # twists by differences, chords for arcs
    assert better_reading(cell) is None


@pytest.mark.parametrize("frame, point", READINGS)
@pytest.mark.parametrize("read_as", READINGS)
def test_the_true_reading_is_found(frame: str, point: str, read_as: tuple[str, str]) -> None:
    cell = logged(frame, point)
    assert cell.follow is not None
    wrong = replace(cell, follow=replace(cell.follow, frame=read_as[0], point=read_as[1]))
    told = better_reading(wrong)
    if read_as == (frame, point):
        assert told is None
    else:
        assert told is not None
        assert f'frame = "{frame}", point = "{point}"' in told


def test_quiet_where_nothing_fits_far_better() -> None:
    # 20 mm of noise in the pose drown the difference between readings.
    cell = logged("world", "strike", noise_m=0.02)
    assert cell.follow is not None
    assert better_reading(replace(cell, follow=replace(cell.follow, frame="base", point="strike"))) is None


def test_quiet_without_a_pose_or_a_log() -> None:
    cell = logged("paddle", "tip")
    assert cell.follow is not None
    bare = replace(cell.follow, commands=replace(cell.follow.commands, pose=None), frame="world")
    assert better_reading(replace(cell, follow=bare)) is None
    assert better_reading(replace(cell, follow=None)) is None


def test_fit_in_closed_form() -> None:
    # Nothing is commanded; the logged pose walks off by 10 mm in steps of a thousandth, turning as far as 0.1 rad.
    cell = logged("world", "strike")
    assert cell.follow is not None and cell.follow.commands.pose is not None
    share = np.linspace(0.0, 1.0, 200)
    pose = np.tile(cell.follow.commands.pose[0], (200, 1))
    pose[:, 1] += 0.010 * share
    still = replace(cell.follow.commands, twist=np.zeros((200, 6)), pose=pose)
    found = fit_to_pose(cell, replace(cell.follow, commands=still))
    assert found == pytest.approx(0.010 * np.sqrt(np.mean(share**2)), rel=1e-9)
    first = Rotation.from_quat(np.roll(pose[:, 3:], -1, axis=1))
    turned = Rotation.from_rotvec(np.outer(0.1 * share, [0, 0, 1])) * first
    pose = np.hstack([pose[:1, :3].repeat(200, 0), np.roll(turned.as_quat(), 1, axis=1)])
    found = fit_to_pose(cell, replace(cell.follow, commands=replace(still, pose=pose)))
    assert found == pytest.approx(0.1 * 0.1 * np.sqrt(np.mean(share**2)), rel=1e-3)


def test_the_answer_passes_it_on() -> None:
    cell = logged("paddle", "strike")
    assert cell.follow is not None
    wrong = replace(cell, follow=replace(cell.follow, frame="world"))
    notes = answer(wrong, advice=False).notes
    assert 'frame = "paddle", point = "strike"' in notes[0]
    assert all("looks like" not in note for note in answer(cell, advice=False).notes)


def test_stamp_statistics() -> None:
    # Steps of 10 ms, one of 11 and one of 8: off by 0 (eight times), 1 and 2 ms.
    t = np.cumsum(np.r_[5.0, [0.010] * 4, 0.011, [0.010] * 2, 0.008, [0.010] * 2])
    told = stamp_statistics(t)
    # The 99th of 10 values in order lies 0.91 of the way from the ninth (1) to the tenth (2).
    assert told == "11 samples over 0.099 s, 100.0 per s; jitter p50 0.000, p99 1.910, max 2.000 ms"


def test_stamp_statistics_of_even_stamps() -> None:
    told = stamp_statistics(0.004 * np.arange(251))
    assert told == "251 samples over 1.000 s, 250.0 per s; jitter p50 0.000, p99 0.000, max 0.000 ms"
