"""The arm with its welded paddle: placement, Jacobian, mass matrix and torques. The only importer of Pinocchio."""

from __future__ import annotations

from typing import NamedTuple

import numpy as np
import pinocchio as pin

from reach.cell import ArmSpec, Array, Paddle
from reach.paddle import paddle_mass

WORLD_AXES = pin.LOCAL_WORLD_ALIGNED

# Dry friction is smoothed over this speed, tanh(v / width), so that a reversal is no torque step. At 3 N·m and
# 10 rad/s² it costs 300 N·m/s; a width of 0.02 would cost 1,500, more than most joints may change by.
FRICTION_WIDTH_RAD_S = 0.1
FRICTION_WIDTH_M_S = 0.05


class State(NamedTuple):
    """What the arm is at one posture and joint velocity; arrays belong to the arm until its next call.

    Attributes
    ----------
    jacobian : (6, n) linear then angular rows, world axes, about the strike point
    drift : (6,) J̇ v, classical acceleration of the strike point at zero joint acceleration
    mass : (n, n) joint-space inertia with reflected rotor inertia, kg·m²
    slope : (n, n) how the torque at zero acceleration grows with joint velocity, N·m·s/rad: twice the Coriolis
        matrix of Christoffel symbols, damping and dry friction on its diagonal
    bias : (n,) torque at zero joint acceleration: Coriolis, gravity, damping, dry friction, N·m
    """

    jacobian: Array
    drift: Array
    mass: Array
    slope: Array
    bias: Array


class Arm:
    """A serial chain with the paddle added to its tip body, base pose and gravity as the cell says.

    Parameters
    ----------
    spec : ArmSpec
    paddle : Paddle

    Attributes
    ----------
    n : number of joints of the chain
    names : their names, in the user's words, from base to tip
    """

    def __init__(self, spec: ArmSpec, paddle: Paddle):
        self.spec = spec
        self.n = len(spec.joints)
        self._jacobian_shape = (6, self.n)  # Pinocchio drops an axis for an arm of one joint
        self.names = tuple(joint.name for joint in spec.joints)
        self.sliding = np.array([joint.sliding for joint in spec.joints])
        limits = [joint.limits for joint in spec.joints]
        self.damping = np.array([item.damping or 0.0 for item in limits])
        self.friction = np.array([item.friction or 0.0 for item in limits])
        self._rub_slope = self.friction / np.where(self.sliding, FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S)
        self._rubs = bool(self.friction.any())
        self._friction_width = np.where(self.sliding, FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S)
        self._model = _reduced_model(spec)
        self._model.armature = np.array([item.armature or 0.0 for item in limits])
        tip = self._model.frames[self._model.getFrameId("tip", pin.BODY)]
        face = tip.placement * pin.SE3(paddle.mount.rotation, np.array(paddle.mount.xyz_m))
        body = paddle_mass(paddle)
        self._model.appendBodyToJoint(
            tip.parentJoint, pin.Inertia(body.mass_kg, body.com_m, body.inertia_kg_m2), face
        )
        self._frame = self._model.addFrame(pin.Frame("strike", tip.parentJoint, 0, face, pin.OP_FRAME))
        self._slope = np.empty((self.n, self.n))
        self._slope_diagonal = self._slope.reshape(-1)[:: self.n + 1]
        self._data = self._model.createData()
        self._scratch = self._model.createData()  # keeps the arrays of `at` untouched
        self._floating: pin.Model | None = None

    def at(self, q: Array, v: Array) -> State:
        """Everything a control step needs at posture q (n,) and joint velocity v (n,)."""
        model, data, frame = self._model, self._data, self._frame
        pin.computeAllTerms(model, data, q, v)
        pin.updateFramePlacement(model, data, frame)
        bias, own = data.nle + self.damping * v, self.damping
        if self._rubs:
            rub = np.tanh(v / self._friction_width)
            bias += self.friction * rub
            rub *= rub
            own = own + self._rub_slope * (1 - rub)
        slope = self._slope
        np.multiply(pin.computeCoriolisMatrix(model, self._scratch, q, v), 2.0, out=slope)
        self._slope_diagonal += own
        shape = self._jacobian_shape
        change = pin.getFrameJacobianTimeVariation(model, data, frame, WORLD_AXES).reshape(shape)
        return State(
            pin.getFrameJacobian(model, data, frame, WORLD_AXES).reshape(shape),
            change.dot(v),
            data.M,
            slope,
            bias,
        )

    def pose(self, q: Array) -> tuple[Array, Array]:
        """Strike point (3,) in m and paddle axes (3, 3) in the world at posture q (n,)."""
        pin.forwardKinematics(self._model, self._scratch, q)
        placement = pin.updateFramePlacement(self._model, self._scratch, self._frame)
        return placement.translation.copy(), placement.rotation.copy()

    def placement(self) -> tuple[Array, Array]:
        """Strike point (3,) and paddle axes (3, 3) of the last call of `at`, as views that its next call changes."""
        placement = self._data.oMf[self._frame]
        return placement.translation, placement.rotation

    def pose_error(self, position: Array, rotation: Array, q: Array | None = None) -> Array:
        """Offset (3,) in m and rotation vector (3,) in rad, world axes, from the strike frame to a wanted pose.

        The strike frame is that of posture q (n,), or of the last call of `at`.
        """
        if q is None:
            placement = self._data.oMf[self._frame]
        else:
            pin.forwardKinematics(self._model, self._scratch, q)
            placement = pin.updateFramePlacement(self._model, self._scratch, self._frame)
        error = np.empty(6)
        np.subtract(position, placement.translation, out=error[:3])
        error[3:] = pin.log3(rotation.dot(placement.rotation.T))
        return error

    def jacobian(self, q: Array) -> tuple[Array, Array, Array]:
        """Strike point (3,), paddle axes (3, 3) and Jacobian (6, n) at posture q (n,)."""
        pin.computeJointJacobians(self._model, self._scratch, q)
        placement = pin.updateFramePlacement(self._model, self._scratch, self._frame)
        matrix = pin.getFrameJacobian(self._model, self._scratch, self._frame, WORLD_AXES)
        return placement.translation.copy(), placement.rotation.copy(), matrix.reshape(self._jacobian_shape)

    def twist_terms(self, q: Array, v: Array) -> tuple[Array, Array]:
        """Jacobian (6, n) and its drift J̇ v (6,) at posture q (n,) and joint velocity v (n,)."""
        pin.computeJointJacobiansTimeVariation(self._model, self._scratch, q, v)
        pin.updateFramePlacement(self._model, self._scratch, self._frame)
        at = (self._model, self._scratch, self._frame, WORLD_AXES)
        change = pin.getFrameJacobianTimeVariation(*at).reshape(self._jacobian_shape)
        return pin.getFrameJacobian(*at).reshape(self._jacobian_shape), change.dot(v)

    def torque(self, q: Array, v: Array, a: Array) -> Array:
        """Joint torques (m, n) in N·m of m states at once, friction, damping and rotor inertia included.

        Parameters
        ----------
        q, v, a : (m, n)
        """
        out = np.zeros((self.n, len(q)), order="F")
        columns = [np.asfortranarray(x.T) for x in (q, v, a)]
        pin.rneaInParallel(1, pin.ModelPool(self._model, 1), *columns, out)
        return np.asarray(out.T + self.losses(v))

    def base_wrench(self, q: Array, v: Array, a: Array) -> Array:
        """The wrench (m, 6) that the stand must give to the arm's moving part in m states (m, n).

        Force in N, then moment in N·m about the base origin, base axes. The base is made a body
        on a six-axis joint that is held still; its first six generalised forces are the wrench.
        """
        if self._floating is None:
            self._floating = _on_held_base(self._model)
        m = len(q)
        rest = np.zeros((6, m))
        still = np.zeros((7, m))
        still[6] = 1.0
        out = np.zeros((self.n + 6, m), order="F")
        columns = [
            np.asfortranarray(np.vstack([head, x.T])) for head, x in ((still, q), (rest, v), (rest, a))
        ]
        pin.rneaInParallel(1, pin.ModelPool(self._floating, 1), *columns, out)
        force, base = out[:3].T, self.spec.base
        moment = out[3:6].T - np.cross(np.array(base.xyz_m), force)
        return np.hstack([force @ base.rotation, moment @ base.rotation])

    def static_torque(self, q: Array) -> Array:
        """Torque (n,) in N·m that holds posture q (n,) still."""
        return np.asarray(pin.rnea(self._model, self._scratch, q, np.zeros(self.n), np.zeros(self.n))).copy()

    def inertia_diagonals(self, q: Array) -> Array:
        """What each joint feels by itself (m, n), kg·m², in postures (m, n), rotor inertia included."""
        return np.array([np.diagonal(self.inertia(x)) for x in q]).reshape(q.shape)

    def inertia(self, q: Array) -> Array:
        """Joint-space inertia (n, n) in kg·m² at posture q (n,), reflected rotor inertia included."""
        upper = np.triu(pin.crba(self._model, self._scratch, q))
        return np.asarray(upper + np.triu(upper, 1).T)

    def chain(self) -> list[tuple[Array, Array, Array]]:
        """For each joint: rotation (3, 3) and offset (3,) from the joint before, and its axis (3,)."""
        pin.computeJointJacobians(self._model, self._scratch, np.zeros(self.n))
        links = []
        for i in range(self.n):
            placement = self._model.jointPlacements[i + 1]
            local = pin.getJointJacobian(self._model, self._scratch, i + 1, pin.LOCAL)
            column = local.reshape(self._jacobian_shape)[:, i]
            axis = column[:3] if self.sliding[i] else column[3:]
            links.append((placement.rotation.copy(), placement.translation.copy(), axis.copy()))
        return links

    def face_placement(self) -> tuple[Array, Array]:
        """Rotation (3, 3) and offset (3,) of the strike frame from the last joint."""
        placement = self._model.frames[self._frame].placement
        return placement.rotation.copy(), placement.translation.copy()

    def masses(self) -> tuple[float, float]:
        """Mass in kg of all that moves, and of what the last joint carries, paddle included."""
        inertias = [inertia.mass for inertia in self._model.inertias][1:]
        return float(sum(inertias)), float(inertias[-1])

    def losses(self, v: Array) -> Array:
        """Damping and dry friction (m, n) in N·m at joint velocities (m, n)."""
        losses = self.damping * v
        if self._rubs:
            losses += self.friction * np.tanh(v / self._friction_width)
        return losses


def _reduced_model(spec: ArmSpec) -> pin.Model:
    """Chain alone, the joints off it held, the base pose in its first placement."""
    full = pin.buildModelFromXML(spec.model_xml)
    reference = pin.neutral(full)
    held = []
    for joint in spec.held:
        index = full.getJointId(joint.model_name)
        reference[full.joints[index].idx_q] = joint.value
        held.append(index)
    model = pin.buildReducedModel(full, held, reference) if held else full
    expected = [f"chain_{i}" for i in range(len(spec.joints))]
    found = list(model.names)[1:]
    assert found == expected, f"the reader's chain {expected} came out as {found}: please report this"
    base = pin.SE3(spec.base.rotation, np.array(spec.base.xyz_m))
    model.jointPlacements[1] = base * model.jointPlacements[1]
    model.gravity.linear = np.array(spec.gravity_m_s2)
    return model


def _on_held_base(arm: pin.Model) -> pin.Model:
    base = pin.Model()
    base.gravity = arm.gravity
    joint = base.addJoint(0, pin.JointModelFreeFlyer(), pin.SE3.Identity(), "stand")
    frame = base.addFrame(pin.Frame("stand", joint, 0, pin.SE3.Identity(), pin.BODY))
    whole = pin.appendModel(base, arm, frame, pin.SE3.Identity())
    whole.gravity = arm.gravity
    whole.inertias[1] = pin.Inertia.Zero()  # of what does not move
    armature = np.zeros(whole.nv)
    armature[6:] = arm.armature
    whole.armature = armature
    return whole
