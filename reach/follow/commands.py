"""What a roll is told to do, one control period after the other."""

from __future__ import annotations

from abc import ABC, abstractmethod
from collections.abc import Callable

import numpy as np

from reach.arm import Arm, State
from reach.cell import Array
from reach.follow.reference import Reference

GiveUp = Callable[[int, Array, Array], bool]


class Commands(ABC):
    """Twists for a roll.

    1. `target` is called once a control period, in order, with what the joints do at its start; it returns the twist
       (6,) that the strike point is to have at the period's end, world axes.
    2. `steps` periods are commanded; after them the arm comes to a stand.
    3. `back_to` is called when a step is found bad afterwards: `target` will be asked from that period on again.
    4. `over` is asked before every period; true ends the roll there.

    Attributes
    ----------
    begin_s : time of the first period's start
    steps : commanded periods
    """

    begin_s: float
    steps: int

    @abstractmethod
    def target(self, k: int, q: Array, v: Array, state: State | None) -> Array:
        """Twist (6,) for period k.

        Parameters
        ----------
        q, v : (n,) of the joints, behind the drive where there is one
        state : the arm's at (q, v), just worked out; None where the joints lag behind what was sent
        """

    @abstractmethod
    def back_to(self, k: int) -> None:
        """Forget what was asked from period k on."""

    def over(self, k: int, q: Array, v: Array) -> bool:
        """Whether nothing after the start of period k, with joints at (q, v), is of interest."""
        return False


class Replay(Commands):
    """A reference replayed: its twists, with the pose error fed back where there is a gain.

    Parameters
    ----------
    gain_per_s : 0 replays the log as sent
    give_up : called with the row and the joints' state (q, v) at its start; True ends the roll there (for searches
        that only ask whether the verdict holds)
    """

    def __init__(
        self,
        reference: Reference,
        arm: Arm,
        period_s: float,
        gain_per_s: float,
        give_up: GiveUp | None = None,
    ):
        self.begin_s = float(reference.t_s[0])
        self.steps = int(np.ceil((reference.end_s - reference.t_s[0]) / period_s - 1e-6))
        self._arm, self._gain, self._give_up = arm, gain_per_s, give_up
        self._targets = list(reference.targets(period_s, self.steps))
        if gain_per_s > 0:
            instants = reference.t_s[0] + period_s * np.arange(self.steps)
            _, self._position, self._rotation = reference.at(instants)

    def target(self, k: int, q: Array, v: Array, state: State | None) -> Array:
        """The command's twist, with the pose error fed back."""
        target: Array = self._targets[k]
        if self._gain > 0:
            error = self._arm.pose_error(self._position[k], self._rotation[k], q if state is None else None)
            error *= self._gain
            error += target
            return error
        return target

    def back_to(self, k: int) -> None:
        """Nothing to forget: a reference does not depend on what the arm did."""

    def over(self, k: int, q: Array, v: Array) -> bool:
        """Whether the search that this is for has seen enough."""
        return self._give_up is not None and self._give_up(k, q, v)
