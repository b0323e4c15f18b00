"""Speed profiles along a path: pieces of constant jerk from rest to the strike, and from there to rest."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array


@dataclass(frozen=True, eq=False)
class Side:
    """One side of a stroke as time runs from rest to the strike: pieces of constant jerk, then the strike's window.

    A follow-through is this run backwards in time, which keeps the pieces' jerks and turns their order around.

    Attributes
    ----------
    duration_s, jerk : (p,) s and m/s³
    """

    duration_s: Array
    jerk: Array

    def slowed(self, factor: float) -> Side:
        """The same way at `factor` times the speed."""
        return Side(self.duration_s / factor, self.jerk * factor**3)

    def at(self, t_s: Array) -> tuple[Array, Array, Array]:
        """Way gone, speed and acceleration at times (k,) since the start; at rest before it."""
        starts, states = self._states()
        t = np.clip(t_s, 0.0, starts[-1])
        piece = np.clip(np.searchsorted(starts, t, side="right") - 1, 0, len(self.jerk) - 1)
        since, jerk = t - starts[piece], self.jerk[piece]
        x, v, a = states[piece].T
        return (
            x + v * since + a * since**2 / 2 + jerk * since**3 / 6,
            v + a * since + jerk * since**2 / 2,
            a + jerk * since,
        )

    @property
    def total_s(self) -> float:
        """From rest to the strike."""
        return float(self.duration_s.sum())

    @property
    def end(self) -> tuple[float, float]:
        """Way and speed at the strike."""
        x, v, _ = self._states()[1][-1]
        return float(x), float(v)

    def _states(self) -> tuple[Array, Array]:
        states = np.zeros((len(self.jerk) + 1, 3))
        for i, (t, jerk) in enumerate(zip(self.duration_s, self.jerk, strict=True)):
            x, v, a = states[i]
            states[i + 1] = (
                x + v * t + a * t**2 / 2 + jerk * t**3 / 6,
                v + a * t + jerk * t**2 / 2,
                a + jerk * t,
            )
        return np.append(0.0, np.cumsum(self.duration_s)), states


def double_s(speed: float, acceleration: float, jerk: float, window_s: float) -> Side:
    """From rest to a speed with one acceleration and one jerk, then half the window at that speed."""
    if speed >= acceleration**2 / jerk:
        ramp = acceleration / jerk
        times, jerks = [ramp, speed / acceleration - ramp, ramp], [jerk, 0.0, -jerk]
    else:
        ramp = float(np.sqrt(speed / jerk))
        times, jerks = [ramp, ramp], [jerk, -jerk]
    return Side(np.array([*times, window_s / 2]), np.array([*jerks, 0.0]))


@dataclass(frozen=True, eq=False)
class Profile:
    """A whole stroke's speed along its path: run-up and follow-through, one speed at the strike."""

    before: Side
    after: Side

    def slowed(self, factor: float) -> Profile:
        """The same stroke at `factor` times the speed."""
        return Profile(self.before.slowed(factor), self.after.slowed(factor))

    @property
    def speed(self) -> float:
        """At the strike, m/s along the path."""
        return self.before.end[1]

    def sampled(self, period_s: float) -> tuple[Array, Array, int]:
        """Path coordinate and its speed (rows,) on a control grid with the strike on a row, and that row.

        The first and last rows are at rest.
        """
        counts = [int(np.ceil(side.total_s / period_s - 1e-9)) for side in (self.before, self.after)]
        s, v = [], []
        for side, count, sign in zip((self.before, self.after), counts, (-1.0, 1.0), strict=True):
            back = np.arange(count + 1) * period_s  # time from the strike, outward
            way, speed, _ = side.at(np.asarray(side.total_s - back, dtype=np.float64))
            s.append(sign * (side.end[0] - way))
            v.append(speed)
        speed = np.concatenate([v[0][::-1], v[1][1:]])
        speed[0] = speed[-1] = 0.0
        return np.concatenate([s[0][::-1], s[1][1:]]), speed, counts[0]
