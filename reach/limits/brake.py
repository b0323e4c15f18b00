"""How fast all joints together can slow down, and how soon: what position and velocity bounds rest on.

A brake takes time to build up under torque-rate and jerk limits (45 to 90 ms at 1,000 N·m/s), so the stopping
distance is that of a third-order motion. Viability in discrete time for the second-order case: Del Prete, IEEE
RA-L 3(1) 2018; braking distance as a compatibility term: Rubrecht et al., Auton. Robots 32 (2012); Decré et al.,
ICRA 2009. The third-order form and its factor are our own and are tested by adversarial roll-outs.
"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from reach.arm import State
from reach.cell import Array
from reach.limits.base import Brake, Caution, Limit

BRAKE_SHARE = 0.5  # of what torque and acceleration allow; 0.5 held in 1,000 adversarial roll-outs
DRIFT_CAP = 0.7  # largest share of the torque rate that gravity and Coriolis drift may claim
UNLIMITED = 1e9  # stands for "no limit known" in rad/s² and rad/s³, where infinity would give 0 * inf
CAUTIOUS_SHARE = 0.5  # of a deceleration that must still be there a few periods later
VAST = 1e15  # N·m and N·m/s, the same for torque and its rate
STANDSTILL_SHARE = 1e-3  # of the acceleration that is left where the static load takes all the torque


class BrakeModel:
    """Braking ability from kept-back limits.

    Parameters
    ----------
    limits : dict of Limit by name
        Acceleration, jerk, torque and torque rate count, each with its tighter side; inf where unknown.
    period_s : float
    """

    def __init__(self, limits: dict[str, Limit], period_s: float):
        torque, rate = limits["torque"].tighter, limits["torque rate"].tighter
        self._limit = np.minimum(np.array([torque, rate * period_s]), VAST)
        self._claim = np.array([np.full(len(rate), np.inf), DRIFT_CAP * self._limit[1]])
        self._spare = np.empty_like(self._limit)
        self._acceleration = limits["acceleration"].tighter
        self._stated = np.isfinite(self._acceleration)
        self._all_stated = bool(self._stated.all())
        self._jerk = np.minimum(BRAKE_SHARE * limits["jerk"].tighter, UNLIMITED)
        self._period_s = period_s

    def at(self, state: State, bias_before: Array) -> Brake:
        """Ability at a state; bias_before (n,) is the torque at zero acceleration one period earlier."""
        own = ramp = top = self._acceleration
        if not self._all_stated:
            own, ramp, top = self._by_torque(state)
        spare = self._spare
        spare[0] = state.bias
        np.subtract(state.bias, bias_before, out=spare[1])
        np.abs(spare, out=spare)
        np.minimum(spare, self._claim, out=spare)
        np.subtract(self._limit, spare, out=spare)
        inertia = np.abs(state.mass)
        spare[0] /= inertia.dot(own)
        spare[1] /= inertia.dot(ramp)
        force, speed = np.minimum.reduce(spare, axis=1).tolist()
        deceleration = own * (BRAKE_SHARE * min(1.0, max(force, STANDSTILL_SHARE)))
        rate = ramp * (BRAKE_SHARE * speed / self._period_s)
        return Brake(deceleration, np.minimum(rate, self._jerk, out=rate), top)

    def cautious(self, state: State) -> tuple[Brake, Caution]:
        """Ability that is not lost within a few periods: half the deceleration, and its rate at the most drift."""
        fresh, dt = self.at(state, state.bias), self._period_s
        alpha = fresh.deceleration * CAUTIOUS_SHARE
        beta = np.minimum(fresh.rate * (1 - DRIFT_CAP), self._jerk)
        caution = Caution(1 / (2 * beta * dt * dt), 1 / (beta * dt), alpha / beta + dt, 1 / (2 * alpha))
        return Brake(alpha, beta, fresh.top), caution

    def _by_torque(self, state: State) -> tuple[Array, Array, Array]:
        """Where no acceleration is stated: its share by torque, by torque rate, and the most that a joint can have.

        A share only sets the proportion of the joints to each other. By rate it is each joint's own, so that one with
        much torque and a modest rate does not slow the others' brakes.
        """
        torque, own_inertia = self._limit[0], np.diagonal(state.mass)
        together = np.abs(np.linalg.inv(state.mass)) @ (torque + np.abs(state.bias))
        most = np.minimum(together, UNLIMITED)
        own = np.where(self._stated, self._acceleration, torque / own_inertia)
        own = _like_the_others(own, self._stated | (torque < VAST), np.ones_like(own))
        ramp = _like_the_others(self._limit[1] / own_inertia, self._limit[1] < VAST, own)
        return own, ramp, np.where(self._stated, self._acceleration, most)


def _like_the_others(values: Array, known: NDArray[np.bool_], scale: Array) -> Array:
    """Values (n,), and where nothing limits a joint the largest that the others have, in shares of a scale (n,).

    Only their proportion counts: a joint that could do anything must not ask the others to keep up with it.
    """
    shares = values[known] / scale[known]
    return np.where(
        known, np.minimum(values, UNLIMITED), scale * shares.max(initial=0.0) if len(shares) else UNLIMITED
    )


def stopping_distance(v: float, a: float, deceleration: float, rate: float) -> float:
    """Distance that a joint at speed v and acceleration a still travels forward before it can stand.

    The acceleration falls at `rate` to at most -`deceleration` and stays there. Zero where it does not move forward.
    """
    square = a * a + 2 * rate * v
    if (v <= 0 and a <= 0) or square <= 0:
        return 0.0
    if a <= -deceleration:
        return v * v / (2 * deceleration)
    root = math.sqrt(square)
    if root <= deceleration:
        t = (a + root) / rate
        return v * t + a * t * t / 2 - rate * t**3 / 6
    t = (a + deceleration) / rate
    left = v + (a * a - deceleration * deceleration) / (2 * rate)
    return v * t + a * t * t / 2 - rate * t**3 / 6 + left * left / (2 * deceleration)


def largest_velocity(
    room: float, v: float, ceiling: float, deceleration: float, rate: float, period_s: float
) -> float:
    """The largest next velocity, at most `ceiling`, from which the joint still stops inside `room`.

    Exact for constant acceleration in the period: (v + v⁺) dt / 2 + stopping distance <= room. The left side
    grows with v⁺; bisection to one part in 2^40 of the bracket.
    """

    def over(candidate: float) -> bool:
        travel = (v + candidate) * period_s / 2
        stop = stopping_distance(candidate, (candidate - v) / period_s, deceleration, rate)
        return travel + stop > room

    if not over(ceiling):
        return ceiling
    low = min(v, ceiling) - max(4 * deceleration * period_s, 1e-6)
    while over(low):
        low -= 4 * (ceiling - low)
        if low < -1e6:
            return low
    high = ceiling
    for _ in range(40):
        middle = (low + high) / 2
        if over(middle):
            high = middle
        else:
            low = middle
    return low
