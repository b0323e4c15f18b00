"""Cost of a followed step against a floor measured in the same process.

Run by name: python tests/bench/bench_follow.py [CELL]

The floor is what no implementation in Python can do without: `computeAllTerms`, the frame Jacobian and one raw solve
of a quadratic program of the same size by daqp. CPU time in rounds taken in turns, the floor's as long as a roll; of
a round's ratios the median counts, since machines are seldom quiet.
"""

from __future__ import annotations

import ctypes
import os
import sys
import time
from collections.abc import Callable
from pathlib import Path

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")

import daqp  # noqa: E402
import numpy as np  # noqa: E402
import pinocchio as pin  # noqa: E402

from reach import load_cell  # noqa: E402
from reach.advice.answer import answer  # noqa: E402
from reach.advice.demand import demanded_motion  # noqa: E402
from reach.arm import Arm  # noqa: E402
from reach.evidence.measure import measure  # noqa: E402
from reach.follow.bench import run  # noqa: E402
from reach.follow.commands import Replay  # noqa: E402
from reach.follow.roll import roll  # noqa: E402
from reach.kinematics import Chain  # noqa: E402
from reach.limits.build import build_limits  # noqa: E402

EXAMPLE = Path(__file__).parents[2] / "examples" / "wear_bench" / "cell.toml"
ROUNDS = 7
FLOOR_STEPS = 30000


def cpu(action: Callable[[], object]) -> float:
    """CPU seconds of one call."""
    began = time.process_time()
    action()
    return time.process_time() - began


def floor_step(arm: Arm) -> Callable[[], None]:
    """One floor step on random data of the arm's size."""
    rng = np.random.default_rng(1)
    model, data, frame, n = arm._model, arm._data, arm._frame, arm.n
    q, v = rng.standard_normal((2, n)) * 0.3
    root = rng.standard_normal((n, n))
    matrix, vector, rows = root @ root.T + np.eye(n), rng.standard_normal(n), rng.standard_normal((2 * n, n))
    upper, lower = np.full(3 * n, 0.2), np.full(3 * n, -0.2)
    sense = np.zeros(3 * n, dtype=ctypes.c_int)

    def step() -> None:
        pin.computeAllTerms(model, data, q, v)
        pin.getFrameJacobian(model, data, frame, pin.LOCAL_WORLD_ALIGNED)
        daqp.solve(matrix, vector, rows, upper, lower, sense)

    return step


def main() -> None:
    cell = load_cell(sys.argv[1] if len(sys.argv) > 1 else EXAMPLE, need="follow")
    first = run(cell)
    cell = first.cell
    arm, limits = Arm(cell.arm, cell.paddle), build_limits(cell)
    assert first.reference is not None and first.roll is not None and cell.follow is not None
    steps, start, chain = len(first.roll.shortfall), np.array(cell.arm.start), Chain.of(arm)
    gain, reference = cell.follow.pose_gain_per_s, first.reference
    floor = floor_step(arm)
    parts: dict[str, Callable[[], object]] = {
        "floor": lambda: [floor() for _ in range(FLOOR_STEPS)],
        "roll": lambda: roll(cell, arm, limits, Replay(reference, arm, cell.period_s, gain), start),
        "measure": lambda: measure(arm, chain, limits, first.roll.delivered),
        "demand": lambda: demanded_motion(cell, arm, reference, start),
        "one run (roll, measure, strikes)": lambda: run(cell),
        "follow without advice": lambda: answer(cell, advice=False),
    }
    times: dict[str, list[float]] = {name: [] for name in parts}
    for _ in range(ROUNDS):
        for name, action in parts.items():
            times[name].append(cpu(action) / (FLOOR_STEPS if name == "floor" else steps))
    print(
        f"{arm.n} joints, {steps} steps of {1000 * cell.period_s:g} ms, pin {pin.__version__}, numpy {np.__version__}"
    )
    for name, seconds in times.items():
        ratios = np.array(seconds) / np.array(times["floor"])
        print(
            f"  {name:36s} {1e6 * min(seconds):7.1f} µs a step at best   {np.median(ratios):5.2f} × the floor"
        )


if __name__ == "__main__":
    main()
