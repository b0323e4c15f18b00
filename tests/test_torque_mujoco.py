"""Torques of whole motions against another dynamics engine, with its own way to the URDF and the paddle."""

from __future__ import annotations

import mujoco
import numpy as np
import pytest
from builders import PADDLE_TOML, following, robot_cell

from reach.arm import FRICTION_WIDTH_RAD_S
from reach.cell import Cell, Pose
from reach.follow.bench import run

# Both engines work in double precision with the same rigid bodies. The other one turns every inertia to principal
# axes, and so loses a few digits to an eigenvalue decomposition: 1e-6 of the largest torque is wide of that, and
# far below any effect of a wrong mass, axis, offset or sign.
TORQUE_SHARE = 1e-6

HANGING = "base = { xyz_m = [0.1, 0.2, 1.5], rpy_deg = [180.0, 0.0, 25.0] }"
BAR_TOML = PADDLE_TOML.replace('shape = "disc"\nradius_m = 0.085', 'shape = "plate"\nsize_m = [0.15, 0.2]')


def swaying(cell: Cell) -> Cell:
    """The cell with a short command: 0.25 s of sway along and about three axes, at 2 to 4 Hz."""
    t = np.arange(0.0, 0.25, 0.004)
    phase = 2 * np.pi * t[:, None] * np.array([4.0, 3.0, 4.0, 2.0, 3.0, 2.0])
    return following(cell, t, np.sin(phase) * np.array([0.3, 0.2, 0.6, 0.8, 0.6, 0.5]))


def engine(cell: Cell) -> mujoco.MjModel:
    """The arm from its URDF, disc or plate and its part as bodies of their own, the stand at the base pose."""
    spec = mujoco.MjSpec.from_file(cell.arm.urdf_path)
    spec.compiler.fusestatic = False
    for body in spec.worldbody.bodies:
        body.pos, body.quat = cell.arm.base.xyz_m, quaternion(cell.arm.base)
    paddle, flange = cell.paddle, spec.body(cell.arm.tip)
    face = flange.add_body(name="face", pos=paddle.mount.xyz_m, quat=quaternion(paddle.mount))
    if paddle.radius_m is not None:
        size = {"type": mujoco.mjtGeom.mjGEOM_CYLINDER, "size": [paddle.radius_m, paddle.thickness_m / 2, 0]}
    else:
        assert paddle.size_m is not None
        half = [paddle.size_m[0] / 2, paddle.size_m[1] / 2, paddle.thickness_m / 2]
        size = {"type": mujoco.mjtGeom.mjGEOM_BOX, "size": half}
    face.add_geom(pos=[0, 0, -paddle.thickness_m / 2], mass=paddle.mass_kg, **size)
    for part in paddle.parts:
        point = face.add_body(pos=part.com_m)
        point.mass, point.ipos, point.inertia = part.mass_kg, [0.0] * 3, [1e-15] * 3
        point.explicitinertial = True
    spec.option.gravity = cell.arm.gravity_m_s2
    model = spec.compile()
    model.opt.disableflags |= mujoco.mjtDisableBit.mjDSBL_CONSTRAINT
    return model


def quaternion(pose: Pose) -> np.ndarray:
    """Unit quaternion (w, x, y, z) of a pose."""
    out = np.empty(4)
    mujoco.mju_mat2Quat(out, pose.rotation.ravel())
    return out


def inverse_dynamics(cell: Cell, q: np.ndarray, v: np.ndarray, a: np.ndarray) -> np.ndarray:
    """Torques (m, n) of the chain's joints in the other engine, rigid bodies alone; other joints stay where held."""
    model = engine(cell)
    data = mujoco.MjData(model)
    for held in cell.arm.held:
        data.qpos[model.joint(held.name).qposadr[0]] = held.value
    at = [model.joint(joint.name) for joint in cell.arm.joints]
    places, lanes = [int(j.qposadr[0]) for j in at], [int(j.dofadr[0]) for j in at]
    out = np.empty(q.shape)
    for k in range(len(q)):
        data.qpos[places], data.qvel[lanes], data.qacc[lanes] = q[k], v[k], a[k]
        mujoco.mj_inverse(model, data)
        out[k] = data.qfrc_inverse[lanes]
    return out


@pytest.mark.parametrize(
    ("robot", "arm", "paddle"),
    [
        pytest.param("bench7", "locked_rad = { wrist_cam = 0.4 }", PADDLE_TOML, id="bench7"),
        pytest.param("bench6", "", BAR_TOML, id="bench6"),
        pytest.param("bench6", HANGING, PADDLE_TOML, id="bench6 hanging"),
    ],
)
def test_torque_of_a_followed_motion(robot, arm, paddle):
    cell = swaying(robot_cell(robot, arm, paddle))
    done = run(cell)
    assert done.measured is not None and done.roll is not None and done.roll.stopped
    motion = done.roll.delivered
    assert np.abs(motion.v).max() > 0.3 and np.abs(motion.a).max() > 3.0
    limits = [joint.limits for joint in cell.arm.joints]
    armature, damping, friction = (
        np.array([getattr(item, name) for item in limits]) for name in ("armature", "damping", "friction")
    )
    # What the URDF does not carry is added by its formula: rotor inertia, damping, friction smoothed at standstill.
    expected = inverse_dynamics(cell, motion.q, motion.v, motion.a)
    expected += armature * motion.a + damping * motion.v
    expected += friction * np.tanh(motion.v / FRICTION_WIDTH_RAD_S)
    off = np.abs(done.measured.torque - expected).max(axis=0) / np.abs(expected).max()
    assert off.max() < TORQUE_SHARE
