"""Cost of a survey, step by step, and against a loop over points in the same process.

Run by name: python tests/bench/bench_survey.py [CELL] [fer]

The loop does for one point at a time what the search does for many: scipy's `least_squares` on the same five residuals
from as many starts of the same library, then `linprog` for as many postures as the search compared. It leaves out the
way back to the strike that the search makes for each of its moved postures. CPU seconds of one thread; of a few runs
the best counts.
"""

from __future__ import annotations

import os
import pickle
import platform
import resource
import subprocess
import sys
import tempfile
import time
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

for name in ("OMP_NUM_THREADS", "OPENBLAS_NUM_THREADS", "MKL_NUM_THREADS"):
    os.environ.setdefault(name, "1")
sys.path.insert(0, str(Path(__file__).parents[1]))

import numpy as np  # noqa: E402
import pinocchio as pin  # noqa: E402
import scipy  # noqa: E402
from builders import fer_cell  # noqa: E402
from scipy.optimize import least_squares, linprog  # noqa: E402

from reach import load_cell  # noqa: E402
from reach.cell import Array, Cell  # noqa: E402
from reach.strike.bound import strike_rows  # noqa: E402
from reach.strike.motions import exact  # noqa: E402
from reach.strike.setting import Setting  # noqa: E402
from reach.strike.sides import lower, upper  # noqa: E402
from reach.survey.grid import Strikes, strikes  # noqa: E402
from reach.survey.inverse import STARTS, TOLERANCE, Found, Library  # noqa: E402
from reach.survey.look import Looker, Searched  # noqa: E402
from reach.survey.rows import Judged, joined  # noqa: E402
from reach.survey.sweep import CHUNK, _chunks, _handed_on  # noqa: E402
from reach.survey.weigh import weigh  # noqa: E402

EXAMPLE = Path(__file__).parents[2] / "examples" / "wear_bench" / "cell.toml"
BOX = ((-0.8, -0.8, 0.0), (0.8, 0.8, 1.1))  # about all that either arm reaches, m, and a good deal more
SIZES = (500, 2000, 8000)  # points
LOOP_POINTS = 10
EXACT_STROKES = 16
JUDGED = 128
MANY = 200_000  # points whose results must fit
SEARCHED_FOR_MANY = 256  # points really looked at for that; their results are copied
BOTH_SIDED = 2048  # postures
ROUNDS = 3


def seconds(action: Callable[[], object], rounds: int = ROUNDS) -> float:
    """CPU seconds of one call, the best of a few."""
    best = np.inf
    for _ in range(rounds):
        began = time.process_time()
        action()
        best = min(best, time.process_time() - began)
    return best


def over(cell: Cell, count: int) -> tuple[Cell, Strikes]:
    """The cell with about so many points in the box, and its strikes; points in no order of place."""
    assert cell.survey is not None
    size = np.subtract(BOX[1], BOX[0])
    spacing = float((np.prod(size) / count) ** (1 / 3))
    cell = replace(cell, survey=replace(cell.survey, box_m=BOX, spacing_m=spacing, listed=None))
    assert cell.survey is not None
    grid = strikes(cell.survey)
    return cell, grid.take(np.random.default_rng(0).permutation(len(grid))[:count])


def in_chunks(looker: Looker, grid: Strikes) -> list[Searched]:
    """The search as a sweep does it."""
    return [looker.search(grid.take(chunk)) for chunk in _chunks(len(grid))]


def loop(setting: Setting, library: Library, grid: Strikes, compared: int) -> tuple[float, float, float]:
    """CPU seconds a point of the loop: inverse kinematics, still bounds, free bounds of `compared` postures a point."""
    lo, hi = setting.ends
    near = library.nearest(grid.position, grid.normal, STARTS)
    inverse, programs = 0.0, np.zeros(2)
    for k in range(len(grid)):
        began = time.process_time()
        found = [loop_posture(setting, grid.position[k], grid.normal[k], start, lo, hi) for start in near[k]]
        inverse += time.process_time() - began
        met = [q for q in found if q is not None] or [near[k, 0]]
        for i in range(compared):
            # The postures of the point in turn: a linear program costs alike in those that are near.
            q = met[i % len(met)]
            _, rotation, jacobian = setting.arm.jacobian(q)
            low, high = (side[0] for side in setting.velocities(q[None]))
            fixed = strike_rows(jacobian[None], rotation[None], setting.spin_free, setting.length_m)[0]
            for j, rows in enumerate((fixed, jacobian[:3])):
                began = time.process_time()
                loop_bound(rows, grid.direction[k], low, high)
                programs[j] += time.process_time() - began
    return inverse / len(grid), programs[0] / len(grid), programs[1] / len(grid)


def loop_posture(
    setting: Setting, position: Array, normal: Array, start: Array, lo: Array, hi: Array
) -> Array | None:
    """One posture from one start, None where it misses."""
    length, arm = setting.length_m, setting.arm

    def missing(q: Array) -> Array:
        at, rotation = arm.pose(q)
        axis = np.cross(rotation[:, 2], normal)
        sine = np.linalg.norm(axis)
        turned = axis * (np.arctan2(sine, rotation[:, 2] @ normal) / max(sine, 1e-12))
        return np.concatenate([position - at, length * (rotation[:, :2].T @ turned)])

    def slopes(q: Array) -> Array:
        _, rotation, jacobian = arm.jacobian(q)
        return -np.vstack([jacobian[:3], length * (rotation[:, :2].T @ jacobian[3:])])

    done = least_squares(missing, np.clip(start, lo + 1e-9, hi - 1e-9), slopes, bounds=(lo, hi))
    return done.x if np.sqrt(2 * done.cost) < 1e3 * TOLERANCE else None


def loop_bound(rows: Array, direction: Array, lo: Array, hi: Array) -> float:
    """The largest strike speed of one posture."""
    target = np.zeros(len(rows))
    target[:3] = direction
    done = linprog(
        np.append(np.zeros(len(lo)), -1.0),
        A_eq=np.column_stack([rows, -target]),
        b_eq=np.zeros(len(rows)),
        bounds=[*zip(lo, hi, strict=True), (0.0, None)],
        method="highs",
    )
    return float(-done.fun) if done.status == 0 else np.nan


def look(title: str, cell: Cell) -> None:
    """Print the figures of one arm."""
    cell, grid = over(cell, SIZES[1])
    looker = Looker(cell, 0)
    setting = looker.setting
    print(f"{title}, {setting.arm.n} joints")
    parts = in_chunks(looker, grid)
    met = np.concatenate([np.unique(part.found.owner) + CHUNK * k for k, part in enumerate(parts)])
    reached, away = grid.take(met), grid.take(np.setdiff1d(np.arange(len(grid)), met))
    found = looker.search(reached).found
    q, at = found.q, found.owner
    line = "  {:58s} {:10,.0f} /s".format
    cost = seconds(lambda: upper(setting, q, reached.direction[at])) / len(q)
    print(line("upper bounds, still and free, kinematics included, postures", 1 / cost))
    some = Found(q[:BOTH_SIDED], at[:BOTH_SIDED])
    fast = seconds(lambda: both_sides(setting, reached, some), 2) / len(some.q)
    print(line("both sides, postures", 1 / fast))
    search = seconds(lambda: in_chunks(looker, reached)) / len(reached)
    print(line(f"search, reachable points ({len(reached)})", 1 / search))
    print(
        line(
            f"search, unreachable points ({len(away)})", len(away) / seconds(lambda: in_chunks(looker, away))
        )
    )
    print(line(f"search, all points ({len(grid)})", len(grid) / seconds(lambda: in_chunks(looker, grid))))
    against_loop(looker, reached, parts, search)
    whole(looker, reached)
    for count in SIZES:
        some = over(cell, count)[1]
        each = seconds(lambda some=some: in_chunks(looker, some), 2) / len(some)
        print(f"  search over {count:5d} points{'':38s} {1e3 * each:6.3f} ms a point")


def both_sides(setting: Setting, grid: Strikes, found: Found) -> None:
    """Upper bounds and quick timings of postures, in chunks as a survey has them."""
    for k in range(0, len(found.q), 4 * CHUNK):
        q, at = found.q[k : k + 4 * CHUNK], found.owner[k : k + 4 * CHUNK]
        above = upper(setting, q, grid.direction[at])
        lower(setting, q, grid.normal[at], grid.direction[at], above)


def against_loop(looker: Looker, reached: Strikes, parts: list[Searched], search: float) -> None:
    """Print the search's cost beside the loop's."""
    postures = np.concatenate([part.postures for part in parts])
    compared = round(float(postures[postures > 0].mean()))
    some = reached.take(slice(0, LOOP_POINTS))
    inverse, still, free = loop(looker.setting, looker._library, some, compared)
    own = still if looker.setting.still else free
    print(
        f"  a loop over points: {1e3 * inverse:.0f} ms inverse kinematics ({STARTS} starts), {1e3 * still:.0f} + "
        f"{1e3 * free:.0f} ms still and free bounds ({compared} postures) a point"
    )
    print(
        f"  the loop costs {(inverse + own) / search:.0f} × the search with the one bound that the search has, "
        f"{(inverse + still + free) / search:.0f} × with both"
    )


def whole(looker: Looker, reached: Strikes) -> None:
    """Print what a strike costs from its postures to its row, and what an optimised stroke does."""
    some = reached.take(slice(0, JUDGED))
    chunks = _chunks(len(some))
    parts = in_chunks(looker, some)
    handed = _handed_on(some, parts, chunks)
    tasks = [(some.take(chunk), *pair) for chunk, *pair in zip(chunks, parts, handed, strict=True)]
    cost = seconds(lambda: [looker.judge(*task) for task in tasks], 1) / len(some)
    print(f"  judge, reachable strikes{'':40s} {1e3 * cost:6.1f} ms a strike")
    few = some.take(slice(0, EXACT_STROKES))
    weighed = weigh(looker.setting, looker.folds, few, looker.search(few).found)
    fastest = [int(own[0]) for own in (weighed.own(k) for k in range(len(few))) if len(own)]
    went = [i for i in fastest if weighed.below.speed[i] > 0]
    owners = weighed.found.owner[weighed.pick]

    def optimise() -> None:
        for i in went:
            k = owners[i]
            exact(looker.setting, few.normal[k], few.direction[k], weighed.below, i)

    print(f"  optimisation{'':52s} {1e3 * seconds(optimise, 1) / len(went):6.1f} ms a stroke")


def many() -> None:
    """Print the peak memory of a process that holds what a sweep over MANY points does.

    Really searched and judged chunks are copied as they would come from workers until there are enough.
    """
    own = _peak_mb()
    cell, grid = over(load_cell(EXAMPLE), MANY)
    looker, chunks = Looker(cell, 0), _chunks(len(grid))
    base = _peak_mb()
    real = chunks[: SEARCHED_FOR_MANY // CHUNK]
    searched = in_chunks(looker, grid.take(slice(0, real[-1].stop)))
    rows = [
        looker.judge(grid.take(chunk), part, Found.none(looker.setting.arm.n))
        for chunk, part in zip(real, searched, strict=True)
    ]
    work = _peak_mb()
    found = [_copy(searched[k % len(real)]) for k in range(len(grid) // CHUNK)] + [
        looker.search(grid.take(chunk)) for chunk in chunks[len(grid) // CHUNK :]
    ]
    one = _peak_mb()
    handed = _handed_on(grid, found, chunks)
    tasks = [(grid.take(chunk), *pair) for chunk, *pair in zip(chunks, found, handed, strict=True)]
    two = _peak_mb()
    parts: list[Judged] = [_copy(rows[k % len(real)]) for k in range(len(tasks))]
    three = _peak_mb()
    postures = sum(len(part.found.q) for part in found)
    del found, handed, tasks
    points = joined(parts).points
    peaks = {
        "imports": own,
        "looker": base,
        "a few chunks": work,
        "postures": one,
        "handed on": two,
        "rows": three,
        "put together": _peak_mb(),
    }
    print(f"{len(points.verdict)} points of bench7, {postures} postures found; peak memory, MB, after:")
    print("  " + ", ".join(f"{name} {peak:.0f}" for name, peak in peaks.items()))


def _copy(part: Any) -> Any:
    return pickle.loads(pickle.dumps(part))


def _peak_mb() -> float:
    return resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024


def main() -> None:
    """Print everything; `many` alone the memory, in a process of its own."""
    given = sys.argv[1:]
    if given == ["many"]:
        many()
        return
    print(
        f"{platform.machine()}, {os.cpu_count()} cores, one used; Python {platform.python_version()}, "
        f"numpy {np.__version__}, scipy {scipy.__version__}, pin {pin.__version__}"
    )
    paths = [name for name in given if name != "fer"]
    look("bench7" if not paths else paths[0], load_cell(paths[0] if paths else EXAMPLE))
    if "fer" in given:
        with tempfile.TemporaryDirectory() as folder:
            survey = load_cell(EXAMPLE).survey
            look("FER", replace(fer_cell(Path(folder)), survey=survey))
    subprocess.run([sys.executable, __file__, "many"], check=True)


if __name__ == "__main__":
    main()
