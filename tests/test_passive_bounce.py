"""Passive stability of a bouncing ball: the published windows of the exact map and of the map of Holmes."""

from __future__ import annotations

import math

import numpy as np
import pytest
from ideal_paddle import GRAVITY
from scipy.optimize import brentq

OMEGA = 4 * math.pi  # 2 Hz, of the check values


def passive(e: float, acceleration: float) -> np.ndarray:
    """Jacobian in (t, v) of a ball on a table A sin(w t), one bounce a cycle, by differences of the exact flight."""
    v = GRAVITY * math.pi / OMEGA
    along, across = (
        (1 - e) / (1 + e) * v / OMEGA,
        -acceleration / OMEGA**2,
    )  # A cos, A sin of the contact's phase
    size, phase = math.hypot(along, across), math.atan2(across, along)

    def bounced(state: np.ndarray) -> np.ndarray:
        t, up = state

        def gap(s: float) -> float:
            table = size * (math.sin(OMEGA * (t + s)) - math.sin(OMEGA * t))
            return float(up * s - GRAVITY * s * s / 2 - table)

        fly = brentq(gap, 0.6 * 2 * v / GRAVITY, 1.4 * 2 * v / GRAVITY, xtol=1e-14)
        table = size * OMEGA * math.cos(OMEGA * (t + fly))
        return np.array((t + fly, -e * (up - GRAVITY * fly) + (1 + e) * table))

    at = np.array((phase / OMEGA, v))
    np.testing.assert_allclose(bounced(at), (at[0] + 2 * math.pi / OMEGA, v), atol=1e-9)
    steps = 1e-5 * np.eye(2)
    return np.column_stack([(bounced(at + step) - bounced(at - step)) / 2e-5 for step in steps])


def growth(e: float, acceleration: float) -> float:
    return float(np.abs(np.linalg.eigvals(passive(e, acceleration))).max())


# e, least acceleration at impact, upper end of the band where |lambda| = e; Schaal, Atkeson & Sternad, J. Motor Behav.
# 28(2) (1996) 165; Dijkstra et al., Nonlinear Studies 11(3) (2004) 319 (formulas from memory; recomputed).
WINDOWS = [(0.5, -10.900, -1.090), (0.8, -9.931, -0.121), (0.7, -10.116, -0.306), (0.9, -9.837, -0.027)]
GROWTHS = [
    (0.5, ((-11.009, 1.033), (-10.791, 0.966), (-9.81, 0.5), (-3.0, 0.5), (0.05, 1.015))),
    (0.8, ((-10.03, 1.081), (-9.832, 0.880), (-3.0, 0.8))),
]


@pytest.mark.parametrize(("e", "least", "fastest"), WINDOWS)
def test_a_passive_bounce_is_stable_in_the_published_window(e: float, least: float, fastest: float) -> None:
    assert brentq(lambda a: growth(e, a) - 1, least - 0.2, least + 0.05) == pytest.approx(least, abs=1e-3)
    assert growth(e, -1e-3) < 1 < growth(e, 1e-3)
    assert growth(e, 1.02 * fastest) == pytest.approx(e, abs=1e-4)
    assert growth(e, 0.95 * fastest) > e + 1e-3
    assert np.linalg.det(passive(e, -3.0)) == pytest.approx(e * e, abs=1e-5)


@pytest.mark.parametrize(("e", "rows"), GROWTHS)
def test_a_passive_bounce_grows_as_tabled(e: float, rows: tuple[tuple[float, float], ...]) -> None:
    for acceleration, expected in rows:
        # Where the two eigenvalues meet they go as the root of the differences' error.
        assert growth(e, acceleration) == pytest.approx(expected, abs=2e-3)


def holmes(alpha: float, gamma: float, state: tuple[float, float]) -> tuple[float, float]:
    """P. J. Holmes, J. Sound Vib. 84 (1982) 173 (from memory): a table that moves and is not displaced."""
    phase, v = state
    return phase + v, alpha * v - gamma * math.cos(phase + v)


@pytest.mark.parametrize(("alpha", "low", "high"), [(0.5, 3.14159, 4.34392), (0.8, 1.25664, 3.81302)])
def test_the_map_of_holmes_has_a_window_of_its_own(alpha: float, low: float, high: float) -> None:
    def left(gamma: float) -> float:
        """How far from one bounce a cycle after 3000 bounces, from next to it."""
        cosine = max(-1.0, -2 * math.pi * (1 - alpha) / gamma)
        state = (-math.acos(cosine), 2 * math.pi + 1e-4)
        for _ in range(3000):
            state = holmes(alpha, gamma, state)
        return abs(state[1] - 2 * math.pi)

    assert low == pytest.approx(2 * math.pi * (1 - alpha), abs=1e-5)
    assert left(1.005 * low) < 1e-6 > left(0.995 * high)
    assert left(0.995 * low) > 1e-2 < left(1.005 * high)
    a, b = (holmes(alpha, high, (-2.0 + d, 6.0)) for d in (1e-5, -1e-5))
    c, d = (holmes(alpha, high, (-2.0, 6.0 + d)) for d in (1e-5, -1e-5))
    slopes = np.array([np.subtract(a, b), np.subtract(c, d)]) / 2e-5
    assert np.linalg.det(slopes) == pytest.approx(alpha, abs=1e-6)  # and not its square


def test_the_two_windows_are_not_the_same() -> None:
    """Holmes: stable down to -g; with the table's own motion, farther."""
    e, acceleration = 0.5, -10.4
    assert growth(e, acceleration) < 1
    turn = 2 * (1 + e) * acceleration / GRAVITY  # gamma sin(phase) of that acceleration
    in_holmes = np.linalg.eigvals(np.array([[1.0, 1.0], [turn, e + turn]]))
    assert np.abs(in_holmes).max() > 1
