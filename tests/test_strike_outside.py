"""Strikes against outside engines: path timing by another solver, torques and kinematics by other dynamics."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from pathlib import Path

import mujoco
import numpy as np
import pytest
from builders import FER_READY_RAD, WORKING, fer_cell, robot_cell
from strike_case import (
    Stroke,
    bounded,
    demonstrated,
    near,
    postures,
    rubless,
    straights_of,
    strikable,
    swings_of,
)
from test_torque_mujoco import TORQUE_SHARE, engine, inverse_dynamics
from toppra import SplineInterpolator
from toppra.algorithm import TOPPRA
from toppra.constraint import (
    Constraint,
    DiscretizationType,
    JointAccelerationConstraint,
    JointTorqueConstraint,
    JointVelocityConstraint,
)

from reach.arm import FRICTION_WIDTH_RAD_S
from reach.cell import Array, Cell
from reach.strike.setting import Setting
from reach.strike.stroke import Demonstration

CELLS = ("bench7", "fer")
HOME = {"bench7": np.array(list(WORKING["bench7"].values())), "fer": np.array(FER_READY_RAD)}
GRID = 60  # intervals a side of the other solver; 120 moved none of its answers by more than 1e-4
FINE = 8  # samples a control period


def cell_of(name: str, folder: Path) -> Cell:
    return robot_cell("bench7") if name == "bench7" else fer_cell(folder)


def for_the_engine(cell: Cell, folder: Path) -> Cell:
    """The cell with its model of links, joints and inertias alone as its file: the other engine reads no meshes."""
    file = folder / "model.urdf"
    file.write_text(cell.arm.model_xml, encoding="utf-8")
    joints = tuple(replace(joint, name=f"chain_{i}") for i, joint in enumerate(cell.arm.joints))
    held = tuple(replace(joint, name=joint.model_name) for joint in cell.arm.held)
    return replace(cell, arm=replace(cell.arm, urdf_path=str(file), tip="tip", joints=joints, held=held))


# --- The fastest along the same joint path, without limits on torque rate and jerk
def one_by_one(cell: Cell) -> Callable[[Array, Array, Array], Array]:
    """Inverse dynamics of one state at a time in MuJoCo, rotor inertia included."""
    model = engine(cell)
    data = mujoco.MjData(model)
    for held in cell.arm.held:
        data.qpos[model.joint(held.name).qposadr[0]] = held.value
    at = [model.joint(joint.name) for joint in cell.arm.joints]
    places, lanes = [int(j.qposadr[0]) for j in at], [int(j.dofadr[0]) for j in at]
    armature = np.array([joint.limits.armature or 0.0 for joint in cell.arm.joints])

    def torque(q: Array, v: Array, a: Array) -> Array:
        data.qpos[places], data.qvel[lanes], data.qacc[lanes] = q, v, a
        mujoco.mj_inverse(model, data)
        return np.asarray(data.qfrc_inverse[lanes] + armature * a)

    return torque


def fastest_through(
    setting: Setting,
    stroke: Stroke,
    torque: Callable[[Array, Array, Array], Array],
    scheme: DiscretizationType,
) -> float:
    """The largest speed at the strike of any timing of the stroke's joint path from rest to rest.

    Reachability analysis of Pham & Pham, IEEE T-RO 34(3) 2018, in the authors' own implementation: its answer is the
    largest speed everywhere along the path at once.
    """
    behind, ahead = stroke.path.distance[0, :, -1]
    tangent, limits = stroke.path.slope[0, 0, 0], setting.limits
    path = SplineInterpolator([-behind, ahead], [stroke.q - behind * tangent, stroke.q + ahead * tangent])
    box = {
        name: np.column_stack([limits[name].kept_lo, limits[name].kept_hi])
        for name in ("velocity", "acceleration", "torque")
    }
    rules: list[Constraint] = [JointVelocityConstraint(box["velocity"])]
    if np.isfinite(box["acceleration"]).all():
        rules.append(JointAccelerationConstraint(box["acceleration"], discretization_scheme=scheme))
    rules.append(
        JointTorqueConstraint(torque, box["torque"], np.zeros(setting.arm.n), discretization_scheme=scheme)
    )
    grid = np.concatenate([np.linspace(-behind, 0, GRID + 1), np.linspace(0, ahead, GRID + 1)[1:]])
    solver = TOPPRA(rules, path, gridpoints=grid, solver_wrapper="seidel")
    speeds = solver.compute_parameterization(0.0, 0.0, return_data=True)[1]
    return float(speeds[GRID])


@pytest.mark.parametrize("name", ["bench7", pytest.param("fer", marks=pytest.mark.campaign)])
@pytest.mark.parametrize(
    ("run_up_m", "acceleration"),
    [
        pytest.param(None, True, id="acceleration and torque"),
        pytest.param(0.05, True, id="acceleration and torque, short"),
        pytest.param(0.05, False, id="torque alone, short"),
    ],
)
def test_no_swing_is_faster_than_path_timing_allows(
    name: str, run_up_m: float | None, acceleration: bool, tmp_path: Path
) -> None:
    cell = rubless(cell_of(name, tmp_path))
    cell = bounded(cell, torque_rate=np.inf, jerk=np.inf, torque_continuous=np.inf)
    if not acceleration:
        cell = bounded(cell, acceleration=np.inf)
    cell = replace(cell, accept=replace(cell.accept, strike_window_s=0.0))  # the strike is an instant
    setting, torque = Setting.of(strikable(cell, run_up_m)), one_by_one(for_the_engine(cell, tmp_path))
    strokes = swings_of(setting, postures(setting, 4, seed=7))
    assert len(strokes) == 4
    shares = []
    for stroke in strokes:
        # Collocation forgets the limits between nodes: too fast if anything, as a bound should be. Interpolation keeps
        # them there as well.
        most = fastest_through(setting, stroke, torque, DiscretizationType.Collocation)
        kept = fastest_through(setting, stroke, torque, DiscretizationType.Interpolation)
        assert kept == pytest.approx(most, rel=5e-3)
        ways = [demonstrated(setting, stroke)]
        if not acceleration:
            ways.append(demonstrated(setting, stroke, (20, 40)))
        speed = max(way.speed for way in ways if way is not None)
        assert speed <= most * 1.001
        shares.append(speed / kept)
    # With a constant acceleration limit the double-S has the optimum's form; by torque alone it is less than that.
    assert min(shares) > (0.999 if acceleration else 0.98)


# --- Whole motions, measured from outside
def demonstrations(name: str, kind: str, folder: Path) -> tuple[Cell, list[Demonstration]]:
    """Some strokes about the working posture, and the quick timing of each as a motion."""
    cell = cell_of(name, folder)
    done = []
    for run_up_m in (0.3, 0.05):
        setting = Setting.of(strikable(cell, run_up_m))
        q = near(setting, HOME[name], 0.5, 3, seed=8)
        if kind == "straight":
            done += straights_of(setting, q)
            continue
        made = [demonstrated(setting, stroke) for stroke in swings_of(setting, q)]
        done += [motion for motion in made if motion is not None]
    assert len(done) >= 5
    return cell, done


@pytest.mark.parametrize("name", CELLS)
@pytest.mark.parametrize("kind", ["swing", "straight"])
def test_torques_of_strikes_by_other_dynamics(name: str, kind: str, tmp_path: Path) -> None:
    cell, done = demonstrations(name, kind, tmp_path)
    other = for_the_engine(cell, tmp_path)
    limits = [joint.limits for joint in cell.arm.joints]
    armature, damping, friction = (
        np.array([getattr(item, part) or 0.0 for item in limits])
        for part in ("armature", "damping", "friction")
    )
    stated = np.array([item.torque.hi for item in limits if item.torque])
    rate = np.array([item.torque_rate.hi for item in limits if item.torque_rate])
    top = 0.0
    for item in done:
        motion = item.motion
        count = (len(motion.q) - 1) * FINE
        t = motion.start_s + motion.period_s / FINE * np.arange(count)
        q, v, a = motion.at(t)
        torque = inverse_dynamics(other, q, v, a) + armature * a + damping * v
        torque += friction * np.tanh(v / FRICTION_WIDTH_RAD_S)
        assert (np.abs(torque) <= stated * (1 + TORQUE_SHARE)).all()
        # The change over a control period, and that of the first one from standing still.
        hold = inverse_dynamics(other, motion.q[[0, -1]], *np.zeros((2, 2, len(stated))))
        first = np.abs(torque[:FINE] - hold[0]).max(axis=0)
        change = np.abs(torque[FINE:] - torque[:-FINE]).max(axis=0)
        last = np.abs(torque[-FINE:] - hold[1]).max(axis=0)
        steps = np.maximum.reduce([first, change, last]) / motion.period_s
        assert (steps <= rate * (1 + TORQUE_SHARE)).all()
        at = np.arange(0, count, FINE)
        assert np.abs(item.measured.torque[:-1] - torque[at]).max() < TORQUE_SHARE * np.abs(torque).max()
        top = max(top, float((steps / rate).max()))
    assert top > 0.8  # torque rate is what holds some of them


@pytest.mark.parametrize("name", CELLS)
@pytest.mark.parametrize("kind", ["swing", "straight"])
def test_strikes_keep_every_other_limit_by_differences(name: str, kind: str, tmp_path: Path) -> None:
    cell, done = demonstrations(name, kind, tmp_path)
    limits = [joint.limits for joint in cell.arm.joints]
    lo, hi = (
        {
            part: np.array([getattr(getattr(item, part), side) for item in limits])
            for part in ("position", "velocity", "acceleration", "jerk")
        }
        for side in ("lo", "hi")
    )
    for item in done:
        motion = item.motion
        h = motion.period_s / FINE
        t = motion.start_s + h * np.arange((len(motion.q) - 1) * FINE + 1)
        q = motion.at(t)[0]
        rest = np.repeat(q[:1], 3 * FINE, axis=0), np.repeat(q[-1:], 3 * FINE, axis=0)
        whole = np.vstack([rest[0], q, rest[1]])  # standing still before and after
        velocity = np.diff(whole, axis=0) / h
        acceleration = np.diff(velocity, axis=0) / h
        jerk = (acceleration[FINE:] - acceleration[:-FINE]) / motion.period_s
        values = {"position": whole, "velocity": velocity, "acceleration": acceleration, "jerk": jerk}
        # Double precision leaves 1e-16 / h² of a second difference, and that over a period of the jerk.
        slack = {"position": 1e-9, "velocity": 1e-9, "acceleration": 1e-6, "jerk": 1e-3}
        for part, value in values.items():
            assert (value <= hi[part] * (1 + slack[part])).all(), part
            assert (value >= lo[part] * (1 + slack[part])).all(), part
