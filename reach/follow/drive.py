"""How the real joints follow what is sent: a pure delay, then a first-order lag."""

from __future__ import annotations

import math

import numpy as np

from reach.cell import Array, Drive
from reach.evidence.motion import Motion


def behind(drive: Drive, sent: Motion) -> Motion:
    """What the joints do of a motion that is sent to them."""
    state = DriveState(drive, sent.q[0], sent.v[0], sent.period_s)
    q, v = [state.q], [state.v]
    for velocity in sent.v[1:]:
        state.advance(velocity)
        q.append(state.q)
        v.append(state.v)
    speeds = np.array(v)
    accelerations = np.vstack([np.diff(speeds, axis=0) / sent.period_s, np.zeros((1, speeds.shape[1]))])
    return Motion(sent.start_s, sent.period_s, np.array(q), speeds, accelerations)


class DriveState:
    """Joint velocities behind a delay and a lag, one control period after the other.

    What is sent is linear inside a period. Behind the lag it is the exact first-order response at the period's ends to
    the delayed input, taken linear between the period's ends; position is the integral of a velocity linear
    inside each period, so what the joints do is a motion of the same kind as what was sent.

    Parameters
    ----------
    drive : Drive
    q, v : (n,) state at the start, which counts as having held before
    period_s : float
    """

    def __init__(self, drive: Drive, q: Array, v: Array, period_s: float):
        self.q, self.v = q.copy(), v.copy()
        self._period_s, self._lag_s = period_s, drive.lag_s
        whole, part = divmod(drive.delay_s / period_s + 1e-9, 1.0)
        self._part = part if part > 1e-6 else 0.0
        self._line = [v.copy()] * (int(whole) + 2)
        self._input = v.copy()
        self._decay = math.exp(-period_s / drive.lag_s) if drive.lag_s > 0 else 0.0

    def advance(self, sent: Array) -> Array:
        """Take the velocity (n,) sent for the period's end; returns the joints' change of velocity (n,) in it."""
        self._line.insert(0, sent.copy())
        self._line.pop()
        new, old = self._line[-2], self._line[-1]
        delayed = new + self._part * (old - new)
        if self._lag_s > 0:
            ramp = (delayed - self._input) / self._period_s
            behind = delayed - ramp * self._lag_s
            began = self._input - ramp * self._lag_s
            reached = behind + (self.v - began) * self._decay
        else:
            reached = delayed
        self._input = delayed
        change = reached - self.v
        self.q = self.q + (self.v + reached) * self._period_s / 2
        self.v = reached
        return np.asarray(change)

    def settled(self, tolerance: float) -> bool:
        """Whether the joints and all that is still on its way to them are at rest, to a tolerance in rad/s."""
        waiting = max(float(np.abs(v).max()) for v in (*self._line, self.v))
        return waiting < tolerance
