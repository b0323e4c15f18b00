"""Cost of an envelope, part by part, and of a closed-loop trial a control step against a replay of the same twists.

Run by name: python tests/bench/bench_rally.py [CELL]

The replay sends the very twists that the law sent, through the same follower: what is left is ball, sensor and law. It
is taken in turns with the trial, in CPU seconds of one thread; of a few rounds the best counts. `follow` on the cell's
own log stands beside them. The envelope has 500 points (10 apexes, 5 offsets, 10 bearings) and runs on two workers, by
the clock.
"""

from __future__ import annotations

import os
import platform
import sys
import time
from collections.abc import Callable
from dataclasses import replace
from functools import partial
from pathlib import Path

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import numpy as np  # noqa: E402
import pinocchio as pin  # noqa: E402

from reach import load_cell  # noqa: E402
from reach.cell import Array, Cell, Rally  # noqa: E402
from reach.follow.bench import run  # noqa: E402
from reach.follow.commands import Commands  # noqa: E402
from reach.follow.roll import roll  # noqa: E402
from reach.rally.court import points_of  # noqa: E402
from reach.rally.envelope import envelope  # noqa: E402
from reach.trial.bout import Ground, play, rolled  # noqa: E402
from reach.trial.ready import centre_of, ready  # noqa: E402
from reach.trial.starts import starts_of  # noqa: E402

EXAMPLE = Path(__file__).parents[2] / "examples" / "wear_bench" / "cell.toml"
ROUNDS = 5
BOUNCES = 12
APEXES = np.geomspace(0.1, 1.0, 10)
OFFSETS = (0.02, 0.04, 0.06, 0.08, 0.1)
BEARINGS = 2 * np.pi * np.arange(10) / 10


class Sent(Commands):
    """Twists (k, 6) that were sent once, sent again."""

    def __init__(self, twists: Array):
        self.begin_s, self.steps, self._twists = 0.0, len(twists), list(twists)

    def target(self, k: int, q: Array, v: Array, state: object) -> Array:
        """The twist of period k."""
        twist: Array = self._twists[k]
        return twist

    def back_to(self, k: int) -> None:
        """Nothing to forget."""

    def over(self, k: int, q: Array, v: Array) -> bool:
        """After the last one: the stop is no part of the comparison."""
        return k >= self.steps


def trial_step(cell: Cell) -> None:
    """A trial's step against the replay of its twists, and with measure against `follow`."""
    assert cell.trial is not None
    cell = replace(cell, trial=replace(cell.trial, bounces=BOUNCES))
    centre = centre_of(cell)
    posture = ready(cell, centre, 0)
    assert posture is not None
    for law in ("planning", "mirror"):
        own = replace(cell, trial=replace(cell.trial, law=law, gains=()))
        ground = Ground.of(own, centre, posture, 0)
        start = starts_of(cell.trial.starts, 0)[0]
        _, first = rolled(ground, start, 0, careful=False)
        steps = len(first.shortfall)
        actions: dict[str, Callable[[], object]] = {
            "loop": partial(rolled, ground, start, 0, careful=False),
            "replay": partial(roll, ground.cell, ground.arm, ground.limits, Sent(first.targets), posture),
            "trial, measured": partial(play, ground, start, 0, False),
        }
        best = dict.fromkeys(actions, np.inf)
        for _ in range(ROUNDS):
            for name, action in actions.items():
                began = time.process_time()
                action()
                best[name] = min(best[name], (time.process_time() - began) / steps)
        told = ", ".join(f"{name} {1e6 * value:.0f} µs" for name, value in best.items())
        print(f"law {law}, {steps} steps: {told}; loop over replay {best['loop'] / best['replay']:.2f}")
    if cell.follow is not None:
        followed = run(cell)
        assert followed.roll is not None
        taken = np.inf
        for _ in range(2):
            began = time.process_time()
            run(cell)
            taken = min(taken, time.process_time() - began)
        print(f"follow, measured: {1e6 * taken / len(followed.roll.shortfall):.0f} µs a step")


def big_envelope(cell: Cell) -> None:
    """500 points on two workers."""
    assert cell.rally is not None
    rally = Rally(
        cell.rally.centre_m,
        tuple(APEXES.tolist()),
        OFFSETS,
        tuple(BEARINGS.tolist()),
        contact_offset_spread_m=0.003,
        velocity_spread_m_s=0.02,
    )
    said: list[str] = []
    began = time.monotonic()
    found = envelope(replace(cell, rally=rally), workers=2, progress=said.append)
    words, counts = np.unique(found.points.verdict, return_counts=True)
    told = ", ".join(f"{count} {word}" for word, count in zip(words, counts, strict=True))
    print(f"envelope of {len(points_of(rally))} points: {time.monotonic() - began:.0f} s ({told})")


def main() -> None:
    """Print the figures."""
    print(f"python {platform.python_version()}, numpy {np.__version__}, pin {pin.__version__}")
    cell = load_cell(sys.argv[1] if len(sys.argv) > 1 else EXAMPLE)
    trial_step(cell)
    big_envelope(cell)


if __name__ == "__main__":
    main()
