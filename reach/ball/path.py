"""Flight with drag or lift, integrated as far as it is asked for."""

from __future__ import annotations

import math
from bisect import bisect_left
from collections.abc import Callable, Iterator

import numpy as np

from reach.cell import Array, Vec3
from reach.errors import ReachError

LONGEST_S = 60.0  # of a flight that is looked at; a ball from 2 m is down in less than one
LONGEST_STEP_S = (
    0.5  # short beside the seconds in which lift turns a ball round, so that a step holds one turn at most
)
RELATIVE, ABSOLUTE = (
    1e-11,
    1e-13,
)  # tolerances of a step, m and m/s; ten times wider leaves errors of 2e-9 m/s
REST_SHARE = 0.8  # of the time in which a slowing ball would come to rest: most that a step takes
REST_STEP_S = 4e-3  # it takes as much where the ball rests: flights over a top then err by 2e-11 m at most
FASTEST = 1e50  # m and m/s: beyond, squares overflow, and the solver's step is no number and never ends
ROUNDING_M = 1e-12  # a height above the top by less is the top

State = tuple[float, float, float, float, float, float]


class NoFlight(ReachError):
    """No flight does what is asked."""


def root_of(function: Callable[[float], float], begin: float, end: float) -> float:
    """Where a function that changes its sign between two ends is zero, by Brent's method."""
    from scipy.optimize import brentq

    return float(brentq(function, begin, end, xtol=1e-12))


class Path:
    """States x, y, z (m), vx, vy, vz (m/s) of a ball over the seconds since its start.

    Dormand and Prince's method of order 8 with its own interpolation (E. Hairer, S. P. Norsett and G. Wanner, "Solving
    Ordinary Differential Equations I", 2nd ed., 1993, II.5 and II.6). Steps are kept, and taken when first needed.
    With drag and lift of the other sign it runs the same flight backwards.

    Drag |v| v is not smooth where the ball rests, as at the top of a vertical flight, and the method takes a smooth
    rate for granted: over a step of 0.1 s across a top it errs by 1e-9 m and 7e-9 m/s, which its own estimate does not
    show. So a step of a ball that slows down ends well before |v|/|a|, which is how far off the zeros of v · v are.

    Parameters
    ----------
    start : the state at 0 s
    drag_per_m : k of the acceleration -k |v| v
    lift_per_m : c of the acceleration |v| (c x v)
    gravity_m_s2 : world axes
    """

    def __init__(self, start: State, drag_per_m: float, lift_per_m: Vec3, gravity_m_s2: Vec3):
        from scipy.integrate import DOP853

        if not max(map(abs, start)) < FASTEST:
            raise NoFlight("the flight can't be followed: its start is beyond all measure")
        self._rate = _rate(drag_per_m, lift_per_m, gravity_m_s2)
        self._solver = DOP853(
            self._rate, 0.0, start, math.inf, max_step=LONGEST_STEP_S, rtol=RELATIVE, atol=ABSOLUTE
        )
        self._ends: list[float] = []
        self._states: list[State] = [start]  # at the start and at each end
        self._between: list[Callable[[float], Array]] = []

    def at(self, after_s: float) -> State:
        """The state at an instant."""
        while not self._ends or self._ends[-1] < after_s:
            self._step()
        return _state(self._between[bisect_left(self._ends, after_s)](after_s))

    def top(self) -> float:
        """When the ball first begins to come down."""
        for begin, high, _, low in self._slopes():
            if low < high:
                return begin
        raise NoFlight(f"the ball does not come down within {LONGEST_S:g} s")

    def down_to(self, z: float) -> float | None:
        """When the ball first comes down through a height; None where it does not in LONGEST_S."""
        for begin, high, end, low in self._slopes():
            if high + ROUNDING_M >= z > low:
                return begin if high <= z else root_of(lambda t: self.at(t)[2] - z, begin, end)
        return None

    def _slopes(self) -> Iterator[tuple[float, float, float, float]]:
        """Spans, one after another, in which the ball goes up or down all along: begin, height, end, height."""
        begin, count = 0.0, 0
        while begin < LONGEST_S:
            if count == len(self._ends):
                self._step()
            end, old, new = self._ends[count], self._states[count], self._states[count + 1]
            if old[5] * new[5] < 0:
                turn = root_of(lambda t: self.at(t)[5], begin, end)
                height = self.at(turn)[2]
                yield begin, old[2], turn, height
                yield turn, height, end, new[2]
            else:
                yield begin, old[2], end, new[2]
            begin, count = end, count + 1

    def _step(self) -> None:
        if self._ends and self._ends[-1] > LONGEST_S:
            raise NoFlight(f"a flight is followed for {LONGEST_S:g} s and no longer")
        self._solver.max_step = self._longest()
        with np.errstate(over="ignore", invalid="ignore"):  # of a ball so fast that no step is short enough
            fault = self._solver.step()
        if self._solver.status != "running":
            raise NoFlight(f"the flight can't be followed past {self._solver.t:g} s: {fault}")
        self._ends.append(float(self._solver.t))
        self._states.append(_state(self._solver.y))
        self._between.append(self._solver.dense_output())

    def _longest(self) -> float:
        """Longest next step in s."""
        _, _, _, vx, vy, vz = self._states[-1]
        _, _, _, ax, ay, az = self._rate(0.0, self._solver.y)
        if vx * ax + vy * ay + vz * az >= 0:
            return LONGEST_STEP_S
        rest_s = math.sqrt((vx * vx + vy * vy + vz * vz) / (ax * ax + ay * ay + az * az))
        return min(LONGEST_STEP_S, max(REST_STEP_S, REST_SHARE * rest_s))


def _state(array: Array) -> State:
    x, y, z, vx, vy, vz = array.tolist()
    return x, y, z, vx, vy, vz


def _rate(drag: float, lift: Vec3, gravity: Vec3) -> Callable[[float, Array], State]:
    """Rate of change of the state."""
    (cx, cy, cz), (gx, gy, gz) = lift, gravity

    def rate(_: float, state: Array) -> State:
        vx, vy, vz = state[3:].tolist()
        speed = math.sqrt(vx * vx + vy * vy + vz * vz)
        return (
            vx,
            vy,
            vz,
            gx + speed * (cy * vz - cz * vy - drag * vx),
            gy + speed * (cz * vx - cx * vz - drag * vy),
            gz + speed * (cx * vy - cy * vx - drag * vz),
        )

    return rate
