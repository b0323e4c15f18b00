"""How much of every kept-back limit legs of a motion use, many legs at once.

Legs are looked at where they have gone k / (NODES − 1) of their time. A motion that is to be called demonstrated is
measured once more as a whole, four times a control period, by `evidence.measure`.
"""

from __future__ import annotations

import numpy as np

from reach.arm import FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S
from reach.cell import Array
from reach.rally.quintic import Legs
from reach.strike.setting import Setting

NODES = 49
SHARES = np.linspace(0.0, 1.0, NODES)
NEAR_END = 0.05  # of its travel: nearer to an end, a joint uses its position limit; 0 before, 1 at the end
BATCH = 256  # legs at once: a few MB
KINDS = ("position", "velocity", "acceleration", "jerk", "torque", "torque rate")
TOOL = "tool speed"


class Gauge:
    """Measures legs against the limits of a setting.

    Attributes
    ----------
    setting : Setting
    columns : (limit, joint) of each column that `uses` gives; joint "" is the tool
    """

    def __init__(self, setting: Setting):
        self.setting = setting
        self._kept = {kind: (setting.limits[kind].kept_lo, setting.limits[kind].kept_hi) for kind in KINDS}
        names = setting.arm.names
        self.columns = [(kind, name) for kind in KINDS for name in names] + [(TOOL, "")]
        sliding = setting.arm.sliding
        self._friction_width = np.where(sliding, FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S)

    def uses(self, legs: Legs) -> Array:
        """Largest share (m, c) of each kept-back limit over each leg; 0 where it is unknown, above 1 it is passed."""
        parts = [
            self._uses(Legs(legs.coefficients[k : k + BATCH], legs.duration_s[k : k + BATCH]))
            for k in range(0, len(legs.duration_s), BATCH)
        ]
        return np.concatenate(parts) if parts else np.zeros((0, len(self.columns)))

    def _uses(self, legs: Legs) -> Array:
        q, v, a, jerk = (legs.at(SHARES, order) for order in range(4))
        m, k, n = q.shape
        arm, flat = self.setting.arm, (m * k, n)
        torque = arm.torque(q.reshape(flat), v.reshape(flat), a.reshape(flat)).reshape(q.shape)
        rate = self._torque_rate(torque - arm.losses(v), v, a, legs.duration_s)
        values = dict(zip(KINDS, (q, v, a, jerk, torque, rate), strict=True))
        shares = [self._share(kind, values[kind]).max(axis=1) for kind in KINDS]
        return np.concatenate([*shares, self._tool(q, v)], axis=1)

    def _torque_rate(self, torque: Array, v: Array, a: Array, duration_s: Array) -> Array:
        """Rate (m, k, n) of the torque: its losses by their slope, which peaks where a joint turns around."""
        arm = self.setting.arm
        step = (duration_s / (NODES - 1))[:, None, None]
        rate = np.gradient(torque, axis=1, edge_order=2) / step
        least = np.abs(v)
        turning = v[:, 1:] * v[:, :-1] < 0
        least[:, 1:][turning] = 0.0
        least[:, :-1][turning] = 0.0
        slope = arm.damping + arm.friction / self._friction_width * (
            1 - np.tanh(least / self._friction_width) ** 2
        )
        return np.asarray(rate + slope * a)

    def _share(self, kind: str, values: Array) -> Array:
        lo, hi = self._kept[kind]
        with np.errstate(invalid="ignore", divide="ignore"):
            if kind == "position":
                over = np.maximum(values - hi, lo - values)
                near = np.where(np.isfinite(hi - lo), NEAR_END * (hi - lo), 1.0)
                share = 1 + np.where(over > 0, over, np.maximum(over / near, -1.0))
            else:
                share = np.where(values >= 0, values / hi, values / lo)
        return np.asarray(np.nan_to_num(share, nan=0.0, posinf=np.inf, neginf=0.0))

    def _tool(self, q: Array, v: Array) -> Array:
        cap = self.setting.tool_cap_m_s
        m, k, n = q.shape
        if np.isinf(cap):
            return np.zeros((m, 1))
        twist = self.setting.chain.twists(q.reshape(-1, n), v.reshape(-1, n))[2]
        speed = np.linalg.norm(twist[:, :3], axis=1).reshape(m, k)
        return np.asarray(speed.max(axis=1, keepdims=True) / cap)
