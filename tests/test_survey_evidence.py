"""What a survey stores, checked again from the files alone: own timing, another engine's kinematics and dynamics."""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any, NamedTuple

import mujoco
import numpy as np
import pytest

from reach import load_cell, survey_strikes, write_results

EXAMPLE = Path(__file__).parents[1] / "examples" / "wear_bench" / "cell.toml"
KINDS = ("position", "velocity", "acceleration", "jerk", "torque", "torque_rate")
FINE = 4  # samples a control period
FRICTION_WIDTH_RAD_S = 0.1  # dry friction is friction · tanh(v / width)

# What each check may come to, at most. Shares of a stated limit are 1 at the limit and get no tolerance at all. Both
# programs work in double precision, so what should be equal is so to far better than a micrometre or a microradian.
LEGAL = {
    **dict.fromkeys((*KINDS, "tool speed", "strike window", "run-up"), 1.0),
    **dict.fromkeys(("strike point", "face normal", "strike speed", "turning", "rest"), 1e-6),
    **dict.fromkeys(("bound still", "bound free", "bound posture", "dual", "above the bound"), 1e-6),
    **dict.fromkeys(("proof of reach", "verdict"), 0.0),
}


class Stored(NamedTuple):
    """The files of evidence/, as read."""

    cell: dict[str, Any]
    points: dict[str, np.ndarray]
    motions: dict[str, np.ndarray]

    def part(self, change: Callable[[dict[str, np.ndarray], dict[str, Any]], None]) -> Stored:
        """The same with something changed in a copy of it."""
        points, cell = (
            {name: array.copy() for name, array in self.points.items()},
            json.loads(json.dumps(self.cell)),
        )
        change(points, cell)
        return Stored(cell, points, self.motions)


class Trace(NamedTuple):
    """One stroke, a row each quarter of a control period, the strike at row `strike`."""

    q: np.ndarray
    v: np.ndarray
    a: np.ndarray
    strike: int


class Seen(NamedTuple):
    """What the engine says of one stroke: torque (f, n), place (f, 3), face normal (f, 3), linear and angular rates."""

    torque: np.ndarray
    place: np.ndarray
    normal: np.ndarray
    linear: np.ndarray
    angular: np.ndarray


def stored(folder: Path) -> Stored:
    """Read evidence/."""
    evidence = folder / "evidence"
    archives = []
    for name in ("points.npz", "motions.npz"):
        path = evidence / name
        archives.append(dict(np.load(path, allow_pickle=False)) if path.exists() else {})
    return Stored(json.loads((evidence / "cell.json").read_text("utf-8")), *archives)


def turned(rpy: list[float]) -> np.ndarray:
    """Unit quaternion of roll, pitch and yaw about fixed axes."""
    out, quat = np.array([1.0, 0, 0, 0]), np.empty(4)
    for axis, angle in zip(np.eye(3), rpy, strict=True):
        mujoco.mju_axisAngle2Quat(quat, axis, angle)
        product = np.empty(4)
        mujoco.mju_mulQuat(product, quat, out)
        out = product
    return out


class Engine:
    """The stored arm and paddle in the other engine."""

    def __init__(self, cell: dict[str, Any]):
        arm, paddle = cell["arm"], cell["paddle"]
        spec = mujoco.MjSpec.from_string(arm["model_xml"])
        spec.compiler.fusestatic = False
        for body in spec.worldbody.bodies:
            body.pos, body.quat = arm["base"]["xyz_m"], turned(arm["base"]["rpy_rad"])
        mount = paddle["mount"]
        face = spec.body("tip").add_body(name="face", pos=mount["xyz_m"], quat=turned(mount["rpy_rad"]))
        assert paddle["shape"] == "disc" and all(
            part["inertia_kg_m2"] == [0.0] * 6 for part in paddle["parts"]
        )
        half = paddle["thickness_m"] / 2
        face.add_geom(
            type=mujoco.mjtGeom.mjGEOM_CYLINDER,
            size=[paddle["radius_m"], half, 0],
            pos=[0, 0, -half],
            mass=paddle["mass_kg"],
        )
        for part in paddle["parts"]:
            point = face.add_body(pos=part["com_m"])
            point.mass, point.ipos, point.inertia = part["mass_kg"], [0.0] * 3, [1e-15] * 3
            point.explicitinertial = True
        spec.option.gravity = arm["gravity_m_s2"]
        self._model = spec.compile()
        self._model.opt.disableflags |= mujoco.mjtDisableBit.mjDSBL_CONSTRAINT
        self._data = mujoco.MjData(self._model)
        for held in arm["held"]:
            self._data.qpos[self._model.joint(held["model_name"]).qposadr[0]] = held["value"]
        assert all(joint["kind"] == "revolute" for joint in arm["joints"])
        self._joints = [self._model.joint(f"chain_{i}") for i in range(len(arm["joints"]))]
        self._places = [int(joint.qposadr[0]) for joint in self._joints]
        self._lanes = [int(joint.dofadr[0]) for joint in self._joints]
        self._face = self._model.body("face").id
        limits = [joint["limits"] for joint in arm["joints"]]
        self._armature, self._damping, self._friction = (
            np.array([limit[name] or 0.0 for limit in limits]) for name in ("armature", "damping", "friction")
        )

    def seen(self, q: np.ndarray, v: np.ndarray, a: np.ndarray) -> Seen:
        """A motion (f, n), sample by sample."""
        model, data, f = self._model, self._data, len(q)
        torque, place, normal, twist = np.empty(q.shape), np.empty((f, 3)), np.empty((f, 3)), np.empty((f, 6))
        for k in range(f):
            data.qpos[self._places], data.qvel[self._lanes], data.qacc[self._lanes] = q[k], v[k], a[k]
            mujoco.mj_inverse(model, data)
            torque[k] = data.qfrc_inverse[self._lanes]
            place[k], normal[k] = data.xpos[self._face], data.xmat[self._face][2::3]
            mujoco.mj_objectVelocity(model, data, mujoco.mjtObj.mjOBJ_XBODY, self._face, twist[k], 0)
        torque += self._armature * a + self._damping * v + self._friction * np.tanh(v / FRICTION_WIDTH_RAD_S)
        return Seen(torque, place, normal, twist[:, 3:], twist[:, :3])

    def stands(self, q: np.ndarray) -> tuple[np.ndarray, np.ndarray, np.ndarray]:
        """Place, face normal, and Jacobian (6, n) of the strike point in one posture."""
        data, rows = self._data, np.zeros((2, 3, self._model.nv))
        data.qpos[self._places] = q
        mujoco.mj_kinematics(self._model, data)
        mujoco.mj_comPos(self._model, data)
        mujoco.mj_jacBody(self._model, data, rows[0], rows[1], self._face)
        jacobian = rows.reshape(6, -1)[:, self._lanes]
        return data.xpos[self._face].copy(), data.xmat[self._face][2::3].copy(), jacobian

    def extent(self) -> tuple[np.ndarray, float]:
        """First joint's place, and the sum of the distances from joint to joint and on to the strike point."""
        place, _, _ = self.stands(np.zeros(len(self._lanes)))
        anchors = np.array([self._data.xanchor[joint.id] for joint in self._joints])
        steps = np.diff(np.vstack([anchors, place]), axis=0)
        return anchors[0], float(np.linalg.norm(steps, axis=1).sum())


def bounds_of(cell: dict[str, Any], kind: str) -> tuple[np.ndarray, np.ndarray]:
    """Stated limits (n,) of a kind; infinite where there are none or nothing is known."""
    stated = [joint["limits"][kind] or {"lo": None, "hi": None} for joint in cell["arm"]["joints"]]
    lo, hi = ([bound[side] for bound in stated] for side in ("lo", "hi"))
    return (
        np.array([-np.inf if x is None else x for x in lo]),
        np.array([np.inf if x is None else x for x in hi]),
    )


def swing(points: dict[str, np.ndarray], row: int, period: float) -> tuple[Trace, float]:
    """The swing q + tangent · s(t) on the control grid, acceleration constant in a period; and how far its pieces are
    from rest at their end (m/s, and m/s² by the period)."""
    pieces = slice(*points["profile_first"][row : row + 2])
    jerk, lasts = points["profile_jerk_m_s3"][pieces], points["profile_duration_s"][pieces]
    starts, states = np.append(0.0, np.cumsum(lasts)), np.zeros((len(jerk) + 1, 3))
    for k, (j, h) in enumerate(zip(jerk, lasts, strict=True)):
        x, v, a = states[k]
        states[k + 1] = x + v * h + a * h**2 / 2 + j * h**3 / 6, v + a * h + j * h**2 / 2, a + j * h
    ahead = points["profile_before"][pieces]
    struck = int(ahead.sum())
    before, after = starts[struck], starts[-1] - starts[struck]
    rows = [int(np.ceil(side / period - 1e-9)) for side in (before, after)]
    t = before + period * np.arange(-rows[0], rows[1] + 1)
    k = np.clip(np.searchsorted(starts, t, side="right") - 1, 0, len(jerk) - 1)
    since = np.clip(t, 0.0, starts[-1]) - starts[k]
    (x, v, a), j = states[k].T, jerk[k]
    s = x + v * since + a * since**2 / 2 + j * since**3 / 6 - states[struck, 0]
    speed = v + a * since + j * since**2 / 2
    speed[[0, -1]] = 0.0  # the first and last rows are outside the pieces, or on their ends
    q, tangent = points["q"][row], points["tangent"][row]
    trace = fine(q + s[:, None] * tangent, speed[:, None] * tangent, period, rows[0])
    unrest = float(np.abs(states[-1, 1:] * (1.0, period)).max())
    return trace, unrest if ahead[:struck].all() else np.inf  # the pieces before the strike come first


def fine(q: np.ndarray, v: np.ndarray, period: float, strike: int) -> Trace:
    """Rows of a motion (m, n), and between them at FINE times the rate; the last one once."""
    a = np.vstack([np.diff(v, axis=0) / period, np.zeros((1, q.shape[1]))])
    row = np.append(np.repeat(np.arange(len(q) - 1), FINE), len(q) - 1)
    ahead = (np.arange(len(row)) % FINE * period / FINE)[:, None]
    return Trace(
        q[row] + v[row] * ahead + a[row] * ahead**2 / 2, v[row] + a[row] * ahead, a[row], strike * FINE
    )


def trace_of(files: Stored, row: int) -> tuple[Trace, float]:
    """The stroke of a row."""
    period = files.cell["period_s"]
    if files.points["stroke"][row] == "swing":
        return swing(files.points, row, period)
    q, v = files.motions[f"q_{row}"], files.motions[f"v_{row}"]
    strike = round(-float(files.motions[f"start_s_{row}"]) / period)
    # Its rows belong together, from rest to rest.
    off = np.abs(np.diff(q, axis=0) - (v[1:] + v[:-1]) / 2 * period).max()
    uneven = np.abs(np.diff(v, axis=0) - files.motions[f"a_{row}"][:-1] * period).max()
    return fine(q, v, period, strike), float(max(off, uneven, np.abs(v[[0, -1]]).max()))


def shares(files: Stored, trace: Trace, seen: Seen, standing: np.ndarray) -> dict[str, float]:
    """The largest share of each stated limit; a position's is of the way from mid-range to its end."""
    period = files.cell["period_s"]

    def rate(values: np.ndarray, start: np.ndarray) -> np.ndarray:
        earlier = np.vstack([np.repeat(start[None], FINE, axis=0), values])[: len(values)]
        return np.asarray((values - earlier) / period)

    values = {
        "velocity": trace.v,
        "acceleration": trace.a,
        "jerk": rate(trace.a, 0.0 * standing),
        "torque": seen.torque,
        "torque_rate": rate(seen.torque, standing),
    }
    lo, hi = bounds_of(files.cell, "position")
    out = {"position": float((np.abs(trace.q - (hi + lo) / 2) / ((hi - lo) / 2)).max())}
    for kind, value in values.items():
        lo, hi = bounds_of(files.cell, kind)
        out[kind] = float(np.maximum(value / hi, value / lo).max())
    out["tool speed"] = float(np.linalg.norm(seen.linear, axis=1).max() / files.cell["tool"]["speed_m_s"])
    return out


def motion_checks(files: Stored, engine: Engine, row: int) -> dict[str, float]:
    """Every check of one stroke."""
    points, accept, period = files.points, files.cell["accept"], files.cell["period_s"]
    normal, direction = points["normal"][row], points["direction"][row]
    trace, unrest = trace_of(files, row)
    seen, at = engine.seen(*trace[:3]), trace.strike
    # Before the first row the arm stands still under its own load.
    standing = engine.seen(trace.q[:1], trace.v[:1] * 0.0, trace.a[:1] * 0.0).torque[0]
    found = shares(files, trace, seen, standing)
    speed = points["demonstrated_m_s"][row] / (direction @ normal)
    angular = seen.angular[at]
    turning = angular - (angular @ normal) * normal
    steps = np.linalg.norm(np.diff(seen.place, axis=0), axis=1)
    half = round(accept["strike_window_s"] / 2 / period * FINE)
    near = slice(at - half, at + half + 1)
    error = seen.linear[near] - speed * direction
    along = error @ normal
    aside = np.linalg.norm(error - along[:, None] * normal, axis=1)
    tilt = np.linalg.norm(np.cross(seen.normal[near], normal), axis=1)
    window = [
        np.abs(along).max() / (accept["strike_speed_error_share"] * speed * (direction @ normal)),
        aside.max() / accept["strike_lateral_m_s"],
        np.arcsin(tilt.max()) / accept["strike_tilt_error_rad"],
    ]
    found |= {
        "strike point": float(np.abs(seen.place[at] - points["position"][row]).max()),
        "face normal": float(np.abs(seen.normal[at] - normal).max()),
        "strike speed": float(np.abs(seen.linear[at] - speed * direction).max()),
        "turning": float(np.abs(turning).max()) if files.cell["survey"]["rotation"] == "still" else 0.0,
        "rest": unrest,
        "run-up": float(max(steps[:at].sum(), steps[at:].sum()) / files.cell["survey"]["run_up_m"]),
        "strike window": float(max(window)),
    }
    return found


def velocity_box(cell: dict[str, Any], q: np.ndarray) -> tuple[np.ndarray, np.ndarray]:
    """Joint velocities (n,) that a motion from rest to rest can have in a posture, margins kept back."""
    margins = cell["margins"]
    (low, high), (slow, fast) = bounds_of(cell, "position"), bounds_of(cell, "velocity")
    brake, push = (side * (1 - margins["acceleration_share"]) for side in bounds_of(cell, "acceleration"))
    down, up = q - (low + margins["position_rad"]), high - margins["position_rad"] - q
    travel = np.sqrt(2 * np.maximum(np.minimum(push * down, -brake * up), 0.0))
    keep = 1 - margins["velocity_share"]
    return np.maximum(slow * keep, -travel), np.minimum(fast * keep, travel)


def bound_checks(files: Stored, engine: Engine, row: int) -> dict[str, float]:
    """Both bounds of one strike: that the stored dual vectors prove them in the stored postures."""
    points = files.points
    normal, direction = points["normal"][row], points["direction"][row]
    cap = files.cell["tool"]["speed_m_s"] * (1 - files.cell["margins"]["velocity_share"])
    found = {"bound posture": 0.0, "dual": 0.0}
    for kind in ("still", "free"):
        q, dual, bound = (
            points[f"q_{kind}"][row],
            points[f"dual_{kind}"][row],
            points[f"bound_{kind}_m_s"][row],
        )
        place, face, jacobian = engine.stands(q)
        y = jacobian.T @ dual
        lo, hi = velocity_box(files.cell, q)
        value = np.maximum(hi * y, lo * y).sum()
        found[f"bound {kind}"] = float(abs(min(value, cap) * (direction @ normal) - bound))
        away = max(np.abs(place - points["position"][row]).max(), np.abs(face - normal).max())
        found["bound posture"] = float(np.maximum(found["bound posture"], away))
        # A disc may turn about its normal, and with "free" about any axis: no proof rests on those rates.
        loose = dual[3:] if kind == "free" else dual[3:] @ normal
        found["dual"] = float(
            np.maximum(found["dual"], max(abs(dual[:3] @ direction - 1), np.abs(loose).max()))
        )
    own = points[f"bound_{files.cell['survey']['rotation']}_m_s"][row]
    done = points["demonstrated_m_s"][row]
    found["above the bound"] = float(max(done - own, 0.0)) if points["stroke"][row] else 0.0
    return found


def word(points: dict[str, np.ndarray], cell: dict[str, Any], row: int) -> str:
    """The verdict that follows from the two sides; every limit that the cell requires is known."""
    done, required = points["demonstrated_m_s"][row], points["required_m_s"][row]
    bound = points[f"bound_{cell['survey']['rotation']}_m_s"][row]
    if done >= required:
        return "deliverable"
    return "undecided" if bound >= required else "not deliverable"


def checked(files: Stored, rows: list[int] | None = None) -> dict[str, np.ndarray]:
    """Every check (m,) of every row, or of some; 0 where it does not apply."""
    points, engine = files.points, Engine(files.cell)
    unknown = {pair["limit"] for pair in files.cell["unknown"]}
    assert not unknown & set(files.cell["accept"]["require"])
    out = {name: np.zeros(len(points["verdict"])) for name in LEGAL}
    first, longest = engine.extent()
    for row in range(len(points["verdict"])) if rows is None else rows:
        found: dict[str, float] = {}
        if points["stroke"][row]:
            found |= motion_checks(files, engine, row)
        if points["limit"][row] != "reach":
            found |= bound_checks(files, engine, row)
        elif points["basis"][row] == "proved":
            gap = float(np.linalg.norm(points["position"][row] - first)) - longest
            found["proof of reach"] = max(-gap, 0.0)
        found["verdict"] = float(points["verdict"][row] != word(points, files.cell, row))
        for name, value in found.items():
            out[name][row] = value
    return out


def faults(found: dict[str, np.ndarray]) -> set[tuple[str, int]]:
    """Checks that fail, with their rows."""
    return {(name, int(row)) for name in LEGAL for row in np.flatnonzero(~(found[name] <= LEGAL[name]))}


def surveyed(folder: Path, spacing_m: float = 0.25, window_s: float | None = None, **asked: Any) -> Stored:
    """Survey the example's cell with some things asked otherwise, and read back what is stored."""
    cell = load_cell(EXAMPLE)
    assert cell.survey is not None
    accept = replace(cell.accept, strike_window_s=window_s or cell.accept.strike_window_s)
    cell = replace(cell, accept=accept, survey=replace(cell.survey, spacing_m=spacing_m, **asked))
    write_results(survey_strikes(cell, advice=False), folder)
    return stored(folder)


@pytest.fixture(scope="module")
def coarse(tmp_path_factory) -> Stored:
    return surveyed(tmp_path_factory.mktemp("coarse"))


def unit(x: float, y: float, z: float) -> np.ndarray:
    """One direction (1, 3)."""
    return np.array([[x, y, z]]) / np.linalg.norm([x, y, z])


def test_the_example_is_right_by_its_files_alone(coarse):
    strokes = coarse.points["stroke"]
    assert (strokes == "swing").sum() >= 12 and set(strokes) == {"swing", ""}
    found = checked(coarse)
    assert not faults(found)
    # The checks look at something: motions go to what the margins leave, and strikes to their bounds.
    assert found["tool speed"].max() > 0.97 and found["torque_rate"].max() > 0.5


@pytest.mark.campaign
def test_straight_strokes_are_right_by_their_files_alone(tmp_path):
    # A long strike window asks for strokes that hold speed and attitude: some go straight.
    files = surveyed(tmp_path, spacing_m=0.4, window_s=0.08, speeds_m_s=np.array([1.0]))
    straight = np.flatnonzero(files.points["stroke"] == "straight")
    assert len(straight) and set(files.motions["rows"]) == set(straight)
    assert not faults(checked(files))


@pytest.mark.campaign
def test_slanting_strikes_of_a_turning_paddle_are_right_by_their_files_alone(tmp_path):
    asked = {"normals": unit(0.2, 0.1, 1.0), "directions": unit(0.0, -0.3, 1.0), "rotation": "free"}
    files = surveyed(tmp_path, spacing_m=0.4, **asked)
    assert (files.points["stroke"] == "swing").sum() >= 8
    assert not faults(checked(files))


ROW = 5  # a strike of the coarse survey with a swing and both bounds


def nudged(name: str, place: int | tuple[int, ...], by: float) -> Callable[..., None]:
    """Add to one number of points.npz."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        points[name][place] += by

    return change


def in_swing(name: str, piece: int, factor: float) -> Callable[..., None]:
    """Scale one piece of the row's swing."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        points[name][points["profile_first"][ROW] + piece] *= factor

    return change


def stated(kind: str, joint: int, hi: float) -> Callable[..., None]:
    """Put another limit of a joint into cell.json."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        cell["arm"]["joints"][joint]["limits"][kind] |= {"lo": -hi, "hi": hi}

    return change


def said(name: str, *keys: Any) -> Callable[..., None]:
    """Put another text or number into a row of points.npz, or at a place of cell.json."""

    def change(points: dict[str, np.ndarray], cell: dict[str, Any]) -> None:
        *path, value = keys
        if not path:
            points[name][ROW] = value
            return
        inside = cell[name]
        for key in path[:-1]:
            inside = inside[key]
        inside[path[-1]] = value

    return change


@pytest.mark.parametrize(
    ("check", "change"),
    [
        pytest.param("strike point", nudged("q", (ROW, 2), 1e-5), id="posture"),
        pytest.param("strike point", nudged("position", (ROW, 0), 1e-5), id="place of the strike"),
        pytest.param("face normal", nudged("q", (ROW, 4), 1e-5), id="posture of the wrist"),
        pytest.param("strike speed", nudged("tangent", (ROW, 1), 1e-5), id="tangent"),
        pytest.param("turning", nudged("tangent", (ROW, 5), 1e-5), id="tangent of the wrist"),
        pytest.param("strike speed", nudged("demonstrated_m_s", ROW, 1e-5), id="demonstrated speed"),
        pytest.param(
            "verdict", nudged("demonstrated_m_s", ROW, -1.0), id="demonstrated speed below the required"
        ),
        pytest.param("verdict", nudged("required_m_s", ROW, 1.0), id="required speed"),
        pytest.param("verdict", said("verdict", "undecided"), id="verdict"),
        pytest.param("bound still", nudged("bound_still_m_s", ROW, 1e-5), id="bound, still"),
        pytest.param("bound free", nudged("bound_free_m_s", ROW, 1e-5), id="bound, turning"),
        pytest.param("above the bound", nudged("bound_still_m_s", ROW, -0.5), id="bound below the motion"),
        pytest.param("dual", nudged("dual_still", (ROW, 2), 1e-5), id="dual vector"),
        pytest.param("dual", nudged("dual_free", (ROW, 3), 1e-5), id="dual vector on a rate that is free"),
        pytest.param("dual", nudged("dual_still", (ROW, 5), 1e-5), id="dual vector on a disc's spin"),
        pytest.param("bound posture", nudged("q_still", (ROW, 3), 1e-5), id="posture of the bound"),
        pytest.param("rest", in_swing("profile_jerk_m_s3", 0, 1.001), id="jerk of a piece"),
        pytest.param("rest", in_swing("profile_duration_s", 1, 1.001), id="length of a piece"),
        pytest.param("rest", in_swing("profile_before", 1, 0), id="side of a piece"),
        pytest.param("velocity", stated("velocity", 3, 0.5), id="stated velocity"),
        pytest.param("acceleration", stated("acceleration", 3, 2.0), id="stated acceleration"),
        pytest.param("jerk", stated("jerk", 3, 50.0), id="stated jerk"),
        pytest.param("torque", stated("torque", 1, 5.0), id="stated torque"),
        pytest.param("torque_rate", stated("torque_rate", 1, 50.0), id="stated torque rate"),
        pytest.param("position", stated("position", 3, 1.0), id="stated travel"),
        pytest.param("tool speed", said("tool", "speed_m_s", 1.0), id="cap of the tool"),
        pytest.param("run-up", said("survey", "run_up_m", 0.05), id="run-up"),
        pytest.param("strike window", said("accept", "strike_speed_error_share", 1e-4), id="strike window"),
        pytest.param("torque", said("paddle", "mass_kg", 40.0), id="mass of the paddle"),
        pytest.param("torque", said("arm", "gravity_m_s2", [0.0, 0.0, -60.0]), id="gravity"),
        pytest.param("torque", said("arm", "joints", 1, "limits", "friction", 300.0), id="friction"),
        pytest.param("strike point", said("paddle", "mount", "xyz_m", [0.0, 0.0, 0.1201]), id="mount"),
    ],
)
def test_a_changed_number_shows(coarse, check, change):
    files = coarse.part(change)
    assert (check, ROW) in faults(checked(files, [ROW]))


def test_reach_is_proved_by_the_links_alone(coarse, tmp_path):
    # Two strikes that no length of link gets to; a proof for one that is near shows as false.
    far = surveyed(tmp_path, box_m=((2.0, 0.0, 0.3), (2.2, 0.0, 0.3)), spacing_m=0.2)
    assert set(far.points["basis"]) == {"proved"} and not faults(checked(far))
    near = far.part(nudged("position", (0, 0), -1.4))
    assert faults(checked(near)) == {("proof of reach", 0)}


@pytest.mark.campaign
def test_every_strike_of_the_example_is_right_by_its_files_alone(tmp_path):
    files = surveyed(tmp_path, spacing_m=0.1)
    assert len(files.points["verdict"]) == 270 and (files.points["stroke"] != "").sum() >= 220
    found = checked(files)
    for name, values in found.items():
        print(f"{name:16s} {values.max():.3g} of at most {LEGAL[name]:g}")
    assert not faults(found)
