"""The contract of a limit kind, and the state that its rows are made for."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import ClassVar, Literal, NamedTuple

import numpy as np
from numpy.typing import NDArray

from reach.arm import State
from reach.cell import Array, Cell

Family = Literal["joint", "torque", "tool", "none"]

# What a plan keeps for the drift inside one period, where the margin keeps less: rows hold the torque of one phase of
# the period (arm.State.inertia), gravity and Coriolis torque move on. Measured over the tests' roll-outs.
DRIFT_SHARE = 0.01


SIGNS = np.array([[1.0], [-1.0]])  # turns values (n,) into both directions (2, n)


class Brake(NamedTuple):
    """What the joints can do at a state; (n,) each.

    deceleration (per s²) and its rate (per s³) that all joints can have together; top: the acceleration that one
    may have by itself.
    """

    deceleration: Array
    rate: Array
    top: Array


class Now(NamedTuple):
    """What a step knows: q, v (n,), velocity change and torque (n,) of the period before, the arm's state."""

    q: Array
    v: Array
    change: Array
    torque: Array
    state: State
    brake: Brake


class Caution(NamedTuple):
    """A braking ability α, β (n,) that holds for some periods dt, as factors of what `Ahead` and its users need.

    gain : 1/(2 β dt²); ramp : 1/(β dt); base : α/β + dt; stop : 1/(2 α)
    """

    gain: Array
    ramp: Array
    base: Array
    stop: Array


class Ahead(NamedTuple):
    """Where a step would lead, by a cautious braking ability; (n,) each.

    q : the joints' positions before it; change : size of its change of velocity; speed : the most that a joint still
    gains to while the acceleration is taken back
    """

    q: Array
    change: Array
    speed: Array
    caution: Caution


@dataclass(frozen=True, eq=False)
class Fine:
    """A finished motion on the fine grid, with what its limits are measured from.

    Attributes
    ----------
    t_s : (f,) ; q, v, a, torque : (f, n) ; speed : (f,) of the strike point, m/s
    per_period : fine samples a control period
    a_before, torque_before : (n,) in the period before the first
    period_s : control period
    """

    t_s: Array
    q: Array
    v: Array
    a: Array
    torque: Array
    speed: Array
    per_period: int
    a_before: Array
    torque_before: Array
    period_s: float

    def change(self, values: Array, before: Array) -> Array:
        """Change (f, n) of values (f, n) over one control period, per second; the first period against `before`."""
        out = np.empty_like(values)
        first = self.per_period
        np.subtract(values[:first], before, out=out[:first])
        np.subtract(values[first:], values[:-first], out=out[first:])
        out /= self.period_s
        return out


class Limit(ABC):
    """One limit kind for all joints of an arm.

    A kind must

    1. set `name`, `family` and `field` (its field in JointLimits; empty for one of the tool), `margin` (its field in
       Margins) and `units` (of a turning and of a sliding joint);
    2. read what is stated in `__init__`: arrays `lo`, `hi` (n,), ±inf where nothing is known, and `known`
       (n,) bool; `keep` takes the margin off and leaves the result in `kept_lo`, `kept_hi`;
    3. in `rows`, write into `most` (2, n) how far a step may go: the largest value in each joint's positive
       direction, then in its negative one. The value is, for the family "joint", the change of each joint's
       velocity over the period, for "torque" its torque in the period. A kind whose rows never change sets
       `constant`; one whose rows seldom matter sets `seldom` and says in `clear` when they surely don't. The
       family "tool" gives rows on the change of all joints instead (see tool_speed.py);
    4. in `measure`, give the exact values (f, n) of a finished motion in the limit's own unit, lo <= value <= hi
       being what the limit means; whatever `rows` allows must lie inside.

    Attributes
    ----------
    sources : where each joint's limit was stated
    joints, joint_units : a name (None: the tool) and a unit for each column of `measure`
    """

    name: ClassVar[str]
    family: ClassVar[Family]
    field: ClassVar[str] = ""
    margin: ClassVar[str] = ""
    units: ClassVar[tuple[str, str]]
    constant: ClassVar[bool] = False
    seldom: ClassVar[bool] = False
    least_margin: ClassVar[float] = 0.0

    lo: Array
    hi: Array
    known: NDArray[np.bool_]
    kept_lo: Array
    kept_hi: Array
    sources: tuple[str, ...]

    def __init__(self, cell: Cell):
        joints = cell.arm.joints
        bounds = [getattr(joint.limits, self.field) for joint in joints]
        self.known = np.array([bound is not None for bound in bounds])
        self.lo = np.array([bound.lo if bound else -np.inf for bound in bounds])
        self.hi = np.array([bound.hi if bound else np.inf for bound in bounds])
        self.sources = tuple(bound.source if bound else "unknown" for bound in bounds)
        self.joints: tuple[str | None, ...] = tuple(joint.name for joint in joints)
        self.joint_units = tuple(self.units[joint.sliding] for joint in joints)
        self.keep(cell)
        self.kept = np.array([self.kept_hi, -self.kept_lo])  # (2, n), as in `rows`
        self.period_s = cell.period_s

    def keep(self, cell: Cell) -> None:
        """Take the cell's margin off the stated limit, but at least what the drift inside a period needs."""
        share = max(getattr(cell.margins, self.margin) if self.margin else 0.0, self.least_margin)
        self.kept_lo, self.kept_hi = self.lo * (1 - share), self.hi * (1 - share)

    @property
    def tighter(self) -> Array:
        """The lesser side (n,) of each kept-back limit, inf where unknown."""
        return np.minimum(-self.kept_lo, self.kept_hi)

    @abstractmethod
    def rows(self, now: Now, most: Array) -> None:
        """Write how far a step from `now` may go into most (2, n)."""

    def clear(self, ahead: Ahead) -> bool:
        """Whether a step made without this kind's rows surely keeps them."""
        return False

    @abstractmethod
    def measure(self, fine: Fine) -> Array:
        """Values (f, n) of a finished motion, in the limit's own unit."""

    def percent(self) -> Array:
        """How far (n,) one per cent more of the limit loosens a step's rows (for reasons)."""
        span = np.where(self.known, np.minimum(np.abs(self.lo), np.abs(self.hi)), 0.0)
        return np.asarray(0.01 * np.where(np.isfinite(span), span, 0.0))

    def utilisation(self, values: Array) -> Array:
        """Share (f, n) of the limit that values (f, n) use; 1 is at the limit, nan where it is unknown."""
        with np.errstate(divide="ignore", invalid="ignore"):
            above, below = 1 / self.hi, 1 / self.lo
            share = np.where(values >= 0, values * above, values * below)
        share[values == 0] = 0.0
        share[:, ~self.known] = np.nan
        return share
