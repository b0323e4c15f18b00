"""The command again: the log read from its file, and the motion that it asks of the strike point.

A twist holds from its stamp on ("hold"), or is drawn to the next one ("linear"); the last one holds for one more
period of the log's median. Between two instants at which the command or the control changes, the pose moves by the
exponential of the mean twist, and the strike point's twist is linear.
"""

from __future__ import annotations

import csv
import io
from dataclasses import dataclass

import numpy as np

from reach.formats.files import MAX_LOG_BYTES, Reading, decode
from reach.recheck.stored import BadFolder, Stored
from reach.recheck.turns import exponential, from_quaternion, from_rpy

LOG = "log.npz"
TIME = "t_s"
TWIST = ("vx_m_s", "vy_m_s", "vz_m_s", "wx_rad_s", "wy_rad_s", "wz_rad_s")
POSE = ("px_m", "py_m", "pz_m", "qw", "qx", "qy", "qz")
COLUMNS = {"t_s": (TIME,), "twist": TWIST, "strike": ("strike",), "pose": POSE}
SNAP_SHARE = 1e-6  # of a period: a stamp this close to a control instant is on it
MOST_PERIODS = 2_000_000  # control periods of a log; half an hour at 1 kHz
LATEST_S = 1e10  # of a stamp; seconds since 1970 are 1.8e9
TERMS = 12  # of a series in an angle that one period covers: 0.5 rad leaves 1e-14


@dataclass(frozen=True, eq=False)
class Log:
    """A log as sent: t_s (N,), twist (N, 6), strike (N,) or None, pose (N, 7) or None."""

    t_s: np.ndarray
    twist: np.ndarray
    strike: np.ndarray | None
    pose: np.ndarray | None

    @staticmethod
    def of(stored: Stored) -> Log:
        """The log that was stored.

        Raises
        ------
        BadFolder
        """
        times, place = stored.finite(LOG, "t_s", (None,)), f"{stored.folder}/evidence/{LOG}"
        if len(times) < 2 or not (np.diff(times) > 0).all():
            raise BadFolder("t_s", "does not increase", place)
        long = times[-1] - times[0] > MOST_PERIODS * stored.number("period_s")
        if long or np.abs(times).max() > LATEST_S:
            raise BadFolder("t_s", f"is no time of a log of at most {MOST_PERIODS} control periods", place)
        n = len(times)
        strike = stored.array(LOG, "strike", (n,), "b") if stored.has(LOG, "strike") else None
        pose = stored.finite(LOG, "pose", (n, 7)) if stored.has(LOG, "pose") else None
        return Log(times, stored.finite(LOG, "twist", (n, 6)), strike, pose)

    @property
    def end_s(self) -> float:
        """Where the command ends: one period after the last stamp."""
        return float(self.t_s[-1] + np.median(np.diff(self.t_s)))

    @property
    def marked_s(self) -> np.ndarray:
        """Marked contacts, rows of marks in succession counted once, at their first."""
        if self.strike is None:
            return np.zeros(0)
        before = np.concatenate([[False], self.strike[:-1]])
        return np.asarray(self.t_s[self.strike & ~before])


def log_again(stored: Stored) -> dict[str, np.ndarray] | str:
    """The log's columns read from its file again, or why that can't be done.

    Raises
    ------
    BadFolder
        Where the file has changed since.
    """
    source, mends = stored.word("follow", "source"), stored.words("follow", "mends")
    if source == "arrays":
        return "the log was given as arrays, not as a file"
    if mends:
        return "the log was mended while it was read"
    digests = stored.inputs()
    reading = Reading()
    content = reading.read(source, MAX_LOG_BYTES) if source in digests else None
    if content is None:
        return "the log's file is not there"
    if reading.inputs[0].sha256 != digests[source]:
        raise BadFolder("file", "changed since the run; run the command again", source)
    text, _ = decode(content)
    try:
        rows = [row for row in csv.reader(io.StringIO(text or "")) if row]
        names = [name.strip() for name in rows[0]]
        values = np.array(rows[1:], dtype=np.float64)
        return {
            key: values[:, [names.index(name) for name in columns]]
            for key, columns in COLUMNS.items()
            if columns[0] in names
        }
    except (IndexError, ValueError, csv.Error) as error:
        return f"{source} is not plain rows of numbers ({error})"


@dataclass(frozen=True, eq=False)
class Command:
    """The commanded motion of the strike point, k instants.

    t_s (k,); twist, slope (k, 6) world axes, the slope until the next instant; position (k, 3), rotation (k, 3, 3)
    """

    t_s: np.ndarray
    twist: np.ndarray
    slope: np.ndarray
    position: np.ndarray
    rotation: np.ndarray

    def at(self, t_s: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Twist (m, 6), position (m, 3) and axes (m, 3, 3) at times (m,)."""
        k = np.clip(np.searchsorted(self.t_s, t_s + 1e-12, side="right") - 1, 0, len(self.t_s) - 1)
        ahead = np.maximum(t_s - self.t_s[k], 0.0)[:, None]
        mean = self.twist[k] + self.slope[k] * (ahead / 2)
        turned = exponential(mean[:, 3:] * ahead) @ self.rotation[k]
        return self.twist[k] + self.slope[k] * ahead, self.position[k] + mean[:, :3] * ahead, turned


def command_of(stored: Stored, log: Log, position: np.ndarray, rotation: np.ndarray) -> Command:
    """The command integrated from a pose (3,), (3, 3) of the strike point at the log's first stamp.

    Raises
    ------
    BadFolder
    """
    frame, period = stored.word("follow", "frame"), stored.number("period_s")
    axes = from_rpy(stored.vector(3, "arm", "base", "rpy_rad")) if frame == "base" else np.eye(3)
    arm = _offset(stored)
    t = _instants(log, period)
    sent, rate = _sent(log, t, stored.at("follow", "interpolation") == "linear")
    span = np.append(np.diff(t), 0.0)[:, None]
    mean = sent + rate * span / 2
    turns = exponential((mean[:, 3:] if frame == "paddle" else mean[:, 3:] @ axes.T) * span)
    rotations = np.empty((len(t), 3, 3))
    rotations[0] = rotation
    for k in range(len(t) - 1):
        rotations[k + 1] = rotations[k] @ turns[k] if frame == "paddle" else turns[k] @ rotations[k]
    own = rotations if frame == "paddle" else np.broadcast_to(axes, rotations.shape)
    steps = _gone(mean, span[:, 0]) if frame == "paddle" else mean[:, :3] * span
    moved = np.cumsum(np.einsum("kij,kj->ki", own, steps), axis=0)
    lever = rotations @ arm  # from the strike point to the point that the twist refers to
    point = position + lever[0] + np.vstack([np.zeros((1, 3)), moved[:-1]])
    twist, after = _moved(sent, own, lever), _moved(sent + rate * span, _next(own), _next(lever))
    slope = np.divide(after - twist, span, out=np.zeros_like(twist), where=span > 0)
    slope[-1] = 0.0
    return Command(t, twist, slope, point - lever, rotations)


def first_pose(log: Log, place: np.ndarray, axes: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Where the command begins: at the log's first pose, or where the arm stands."""
    return (place, axes) if log.pose is None else (log.pose[0, :3], from_quaternion(log.pose[0, 3:]))


def _next(values: np.ndarray) -> np.ndarray:
    return np.concatenate([values[1:], values[-1:]])


def _instants(log: Log, period: float) -> np.ndarray:
    """Control instants and stamps up to the command's end, those that are the same but for rounding once."""
    stamps = log.t_s
    end = log.end_s
    count = int(np.ceil((end - stamps[0]) / period - SNAP_SHARE)) + 1
    grid = stamps[0] + period * np.arange(count)
    ticks = (np.append(stamps, end) - stamps[0]) / period
    odd = np.abs(ticks - np.clip(np.rint(ticks), 0, count - 1)) > SNAP_SHARE
    return np.unique(np.concatenate([grid, np.append(stamps, end)[odd]]))


def _sent(log: Log, t: np.ndarray, linear: bool) -> tuple[np.ndarray, np.ndarray]:
    """The twist as sent from instants (k,) on, and its rate: (k, 6) each; nothing from the command's end on."""
    end = log.end_s
    hair = 1e-9 * max(1.0, abs(end))
    k = np.clip(np.searchsorted(log.t_s, t + hair, side="right") - 1, 0, len(log.t_s) - 1)
    sent, rate = log.twist[k], np.zeros((len(t), 6))
    if linear:
        slopes = np.diff(log.twist, axis=0) / np.diff(log.t_s)[:, None]
        rate = np.vstack([slopes, np.zeros((1, 6))])[k]
        sent = sent + rate * (t - log.t_s[k])[:, None]
    on = (t < end - hair)[:, None]
    return sent * on, rate * on


def _offset(stored: Stored) -> np.ndarray:
    """From the strike point to the point that the twist refers to (3,), paddle axes."""
    point = stored.at("follow", "point")
    if point == "strike":
        return np.zeros(3)
    if point == "tip":
        place, turn = (stored.vector(3, "paddle", "mount", key) for key in ("xyz_m", "rpy_rad"))
        return np.asarray(-from_rpy(turn).T @ place)
    return stored.vector(3, "follow", "point")


def _moved(sent: np.ndarray, axes: np.ndarray, lever: np.ndarray) -> np.ndarray:
    """Twists (k, 6) in given axes, about the strike point and in world axes."""
    linear, angular = (np.einsum("kij,kj->ki", axes, part) for part in (sent[:, :3], sent[:, 3:]))
    return np.hstack([linear - np.cross(angular, lever), angular])


def _gone(mean: np.ndarray, span: np.ndarray) -> np.ndarray:
    """How far (k, 3) a body goes that moves with its own twist (k, 6): Σ (w dt)×^j / (j + 1)! v dt."""
    term = mean[:, :3] * span[:, None]
    total, turn = term.copy(), mean[:, 3:] * span[:, None]
    for j in range(1, TERMS):
        term = np.cross(turn, term) / (j + 1)
        total += term
    return np.asarray(total)
