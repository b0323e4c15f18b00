"""How trials begin, and what the sensor says of the ball."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from reach.cell import Array, Sensor, Starts

BallState = tuple[float, float, float, float, float, float]  # position in m, then velocity in m/s


@dataclass(frozen=True, eq=False)
class Start:
    """A ball off the centre: offset (2,) m and lateral velocity (2,) m/s, world x and y."""

    offset: Array
    lateral: Array


def starts_of(starts: Starts, seed: int) -> list[Start]:
    """Every offset with every bearing and lateral speed, each once, then the random ones.

    Random offsets are even over the disc of the largest offset, lateral velocities over the disc of the largest speed.
    """
    found: dict[tuple[float, ...], Start] = {}
    for offset in starts.offsets_m:
        for bearing in starts.bearings_rad:
            for speed in starts.lateral_m_s:
                along = np.array([np.cos(bearing), np.sin(bearing)])
                start = Start(offset * along, speed * along)
                found.setdefault(tuple(np.round([*start.offset, *start.lateral], 9).tolist()), start)
    rng = np.random.default_rng([seed, 1])
    most = max(starts.offsets_m), max(abs(speed) for speed in starts.lateral_m_s)
    cloud = [Start(_in_disc(rng, most[0]), _in_disc(rng, most[1])) for _ in range(starts.random)]
    return [*found.values(), *cloud]


def _in_disc(rng: np.random.Generator, radius: float) -> Array:
    size, angle = radius * np.sqrt(rng.uniform()), rng.uniform(0.0, 2 * np.pi)
    return np.array([size * np.cos(angle), size * np.sin(angle)])


class Eye:
    """The sensor of one trial: the ball's state, taken at its rate, told after its latency, with its noise.

    A sample due between two control periods is taken at the next one. Rate 0: one every period.
    """

    def __init__(self, sensor: Sensor, period_s: float, rng: np.random.Generator):
        self._latency_s, self._every_s = sensor.latency_s, 1 / sensor.rate_hz if sensor.rate_hz > 0 else 0.0
        self._noise = np.repeat([sensor.position_noise_m, sensor.velocity_noise_m_s], 3)
        self._noisy = bool(self._noise.any())
        self._plain = not (self._latency_s or self._every_s or self._noisy)
        self._rng, self._due_s, self._slack_s = rng, 0.0, 1e-6 * period_s
        self._waiting: list[tuple[float, BallState]] = []
        self._told: tuple[float, BallState] | None = None

    def sees(self, t_s: float, ball: BallState) -> tuple[float, BallState]:
        """When the newest sample that is told at t_s was taken, and what it says; the first one is told at once."""
        if self._plain:
            return t_s, ball
        if t_s >= self._due_s - self._slack_s:
            self._due_s += self._every_s
            self._waiting.append((t_s, self._with_noise(ball)))
        if self._told is None:
            self._told = self._waiting[0]
        while self._waiting and self._waiting[0][0] + self._latency_s <= t_s + self._slack_s:
            self._told = self._waiting.pop(0)
        return self._told

    def _with_noise(self, ball: BallState) -> BallState:
        if not self._noisy:
            return ball
        x, y, z, vx, vy, vz = (np.array(ball) + self._noise * self._rng.normal(size=6)).tolist()
        return x, y, z, vx, vy, vz
