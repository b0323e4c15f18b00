"""Torques by another dynamics engine, which reads the arm and adds the paddle by a way of its own.

The engine is MuJoCo: E. Todorov, T. Erez and Y. Tassa, MuJoCo: A physics engine for model-based control, IROS 2012. It
gets links, joints and inertias of the URDF alone, under plain names; joints off the chain are held at their values.
Paddle and parts are bodies on the tip.
"""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from importlib.util import find_spec
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reach.errors import ReachError
from reach.formats.xml_tree import Element
from reach.recheck.arm.chain import (
    STILL,
    Array,
    UrdfJoint,
    joints_of,
    numbers,
    only,
    placement,
    root_of,
    sensible,
    way,
)
from reach.recheck.stored import CELL, BadFolder
from reach.recheck.turns import from_rpy

FRICTION_WIDTH_RAD_S = 0.1  # dry friction is smoothed, tanh(v / width), so that a reversal is no step
FRICTION_WIDTH_M_S = 0.05

OLDEST = [3, 3]  # release of MuJoCo; earlier ones read models in another way
MOST_LINKS = 500  # a humanoid with hands has 60; the engine walks the tree by recursion
LEAST_MASS_KG = 1e-12  # the engine wants some in every body that moves; 1e-12 kg weigh 1e-11 N
LEAST_INERTIA_KG_M2 = 1e-14  # at 1000 rad/s² 1e-11 N·m
ROUND = 1e-9  # share by which moments must keep what every solid does, for the engine to read them itself

_MOMENTS = ("ixx", "iyy", "izz", "ixy", "ixz", "iyz")
_SIX = [0, 1, 2, 0, 0, 1], [0, 1, 2, 1, 2, 2]  # where a matrix has them
_ORIGIN = (0.0, 0.0, 0.0)


INSTALL = "pip install 'strikecheck[second-opinion]'"


class NoEngine(ReachError):
    """The engine is not installed, or can't take the arm; the text is a sentence for the report."""


def available() -> bool:
    """Whether the engine is installed."""
    return find_spec("mujoco") is not None


class Engine:
    """One arm with its paddle in the engine.

    Parameters
    ----------
    xml, file : a URDF and the name that faults call it by
    names : the chain's joints from the root on
    tip : link that carries the paddle
    held : value of joints off the chain in rad or m, 0 where none is given
    base : root link in the world, `xyz_m` and `rpy_rad`
    gravity_m_s2 : (3,) in world axes
    paddle : as cell.json has it
    armature, damping, friction : (n,)
    sliding : (n,) bool

    Raises
    ------
    BadFolder
        Where an input is none.
    NoEngine
        Where the engine is not installed or refuses the arm.
    """

    def __init__(
        self,
        xml: bytes,
        names: Sequence[str],
        tip: str,
        held: Mapping[str, float],
        base: Mapping[str, Any],
        gravity_m_s2: Sequence[float],
        paddle: Mapping[str, Any],
        armature: Array,
        damping: Array,
        friction: Array,
        sliding: NDArray[np.bool_],
        file: str = "robot",
    ):
        try:
            import mujoco
        except (ImportError, OSError) as error:
            raise NoEngine(f"the second engine is not installed ({error}); {INSTALL}") from None
        if [int(part) for part in mujoco.__version__.split(".")[:2]] < OLDEST:
            raise NoEngine(f"MuJoCo {mujoco.__version__} is too old; {INSTALL}")
        self._mujoco = mujoco
        root = root_of(xml, file)
        joints = joints_of(root, file)
        bodies = _Bodies(root, joints, tip, file)
        spec = self._spec(bodies, base, gravity_m_s2)
        mount = self._pose(paddle.get("mount"), "paddle.mount")
        face = spec.body(bodies.names[tip]).add_body(name="face", **mount)
        for name, mass, centre, moments in _paddle_bodies(paddle):
            self._add(face, bodies, name, mass, centre, moments)
        self._model = model = self._compiled(spec)
        for name, moments in bodies.moments.items():
            self._check(model, model.body(name).id, moments)
        self._data = mujoco.MjData(model)
        self._face = model.body("face").id
        self._still = np.zeros(model.nq)
        at = {joint.name: model.joint(f"j{i}") for i, joint in enumerate(joints) if joint.moves}
        missing = [name for name in names if name not in at]
        if missing:
            raise BadFolder("joints", f"do not include {missing[0][:80]}", file)
        for name, joint in at.items():
            self._still[joint.qposadr[0]] = held.get(name, 0.0)
        self._places = np.array([int(at[name].qposadr[0]) for name in names])
        self._lanes = np.array([int(at[name].dofadr[0]) for name in names])
        self._armature, self._damping, self._friction = armature, damping, friction
        self._width = np.where(sliding, FRICTION_WIDTH_M_S, FRICTION_WIDTH_RAD_S)

    @property
    def name(self) -> str:
        """The engine with its version."""
        return f"MuJoCo {self._mujoco.__version__}"

    def torque(self, q: Array, v: Array, a: Array) -> Array:
        """Torque (f, n) in N·m, N of sliding joints, of states (f, n); rotor inertia, damping and friction included."""
        model, data, f = self._model, self._data, len(q)
        states = np.tile(self._still, (f, 1)), np.zeros((f, model.nv)), np.zeros((f, model.nv))
        states[0][:, self._places], states[1][:, self._lanes], states[2][:, self._lanes] = q, v, a
        force = np.empty((f, model.nv))
        qpos, qvel, qacc = data.qpos, data.qvel, data.qacc
        place, centre = self._mujoco.mj_kinematics, self._mujoco.mj_comPos
        speed, newton_euler = self._mujoco.mj_comVel, self._mujoco.mj_rne
        for position, velocity, acceleration, out in zip(*states, force, strict=True):
            qpos[:], qvel[:], qacc[:] = position, velocity, acceleration
            place(model, data)
            centre(model, data)
            speed(model, data)
            newton_euler(
                model, data, 1, out
            )  # what mj_inverse does for rigid bodies; no contact, no constraint
        with np.errstate(over="ignore", invalid="ignore"):  # numbers that mean nothing show as nan
            own = self._armature * a + self._damping * v + self._friction * np.tanh(v / self._width)
        return np.asarray(force[:, self._lanes] + own)

    def stands(self, q: Array) -> tuple[Array, Array]:
        """Place (3,) in m and axes (3, 3) of the face in a posture (n,), by the engine's own kinematics."""
        self._data.qpos[:] = self._still
        self._data.qpos[self._places] = q
        self._mujoco.mj_kinematics(self._model, self._data)
        return self._data.xpos[self._face].copy(), self._data.xmat[self._face].reshape(3, 3).copy()

    def _spec(self, bodies: _Bodies, base: Mapping[str, Any], gravity: Sequence[float]) -> Any:
        try:
            spec = self._mujoco.MjSpec.from_string(bodies.xml)
        except (ValueError, RuntimeError) as error:
            raise NoEngine(f"the second engine refuses the arm: {_line(error)}") from None
        spec.compiler.fusestatic = False
        spec.compiler.boundmass, spec.compiler.boundinertia = LEAST_MASS_KG, LEAST_INERTIA_KG_M2
        for body in spec.worldbody.bodies:
            for key, value in self._pose(base, "arm.base").items():
                setattr(body, key, value)
        spec.option.gravity = [float(part) for part in gravity]
        return spec

    def _compiled(self, spec: Any) -> Any:
        try:
            return spec.compile()
        except (ValueError, RuntimeError) as error:
            raise NoEngine(f"the second engine refuses the arm: {_line(error)}") from None

    def _pose(self, pose: Any, where: str) -> dict[str, Any]:
        """Place and unit quaternion (w, x, y, z) of a placement: turns about the fixed axes x, y, z in that order."""
        whole, part, product = np.array([1.0, 0, 0, 0]), np.empty(4), np.empty(4)
        xyz, rpy = placement(pose, where)
        for axis, angle in zip(np.eye(3), rpy, strict=True):
            self._mujoco.mju_axisAngle2Quat(part, axis, angle)
            self._mujoco.mju_mulQuat(product, part, whole)
            whole = product.copy()
        return {"pos": xyz, "quat": whole}

    def _add(
        self, face: Any, bodies: _Bodies, name: str, mass: float, centre: Sequence[float], moments: Any
    ) -> None:
        """A body on the face: a solid shape behind it, or mass and moments about a centre."""
        if isinstance(moments, dict):
            kinds = self._mujoco.mjtGeom
            kind = kinds.mjGEOM_BOX if moments["box"] else kinds.mjGEOM_CYLINDER
            face.add_body(name=name).add_geom(type=kind, size=moments["size"], pos=list(centre), mass=mass)
            return
        body = face.add_body(name=name, mass=mass, ipos=list(centre), explicitinertial=True)
        body.fullinertia = bodies.told(name, np.eye(3), moments)

    def _check(self, model: Any, body: int, moments: Array) -> None:
        """Give a body its moments (3, 3), body axes, as they are stated where the engine did not read them so.

        It takes none that no solid can have, as rounded digits and points have; releases of MuJoCo up to 3.3 at least
        leave out the rpy of an <inertial>.
        """
        turn = np.empty(9)
        self._mujoco.mju_quat2Mat(turn, model.body_iquat[body])
        own = turn.reshape(3, 3) * model.body_inertia[body] @ turn.reshape(3, 3).T
        if np.abs(own - moments).max() <= max(ROUND * np.abs(moments).max(), LEAST_INERTIA_KG_M2):
            return
        values, axes = np.linalg.eigh(moments)
        quat = np.empty(4)
        self._mujoco.mju_mat2Quat(quat, (axes * np.sign(np.linalg.det(axes))).ravel())
        model.body_inertia[body], model.body_iquat[body] = values, quat
        model.body_sameframe[body] = 0  # mjSAMEFRAME_NONE: its inertia has axes of its own


class _Bodies:
    """The URDF for the engine.

    Attributes
    ----------
    xml : links, joints and inertias under plain names, continuous joints without limits
    names : of each link in `xml`
    moments : by plain name, moments (3, 3) in kg·m² about the centre of mass, axes of the body
    """

    def __init__(self, root: Element, joints: Sequence[UrdfJoint], tip: str, file: str):
        links = root.all("link")
        if len(links) > MOST_LINKS:
            raise NoEngine(f"the second engine takes at most {MOST_LINKS} links; the arm has {len(links)}")
        self.names = {link.attributes["name"]: f"b{i}" for i, link in enumerate(links)}
        if tip not in self.names:
            raise BadFolder("arm.tip", f'link "{tip[:80]}" does not exist', file)
        if len(joints) != len(links) - 1:
            raise BadFolder("joints", "do not join all links to one tree", file)
        for name in self.names:
            way(joints, name, file)
        self.moments: dict[str, Array] = {}
        lines = ['<robot name="arm">', *(self._link(link, file) for link in links)]
        lines += [self._joint(joint, f"j{i}") for i, joint in enumerate(joints)]
        self.xml = "\n".join([*lines, "</robot>"])

    def told(self, name: str, turn: Array, moments: Array) -> Array:
        """The six of the moments (3, 3) in axes `turn` (3, 3) of a body; some solid's where no solid has those."""
        self.moments[name] = turn @ moments @ turn.T
        low, middle, high = (float(value) for value in np.linalg.eigvalsh(moments))
        solid = low > ROUND * high and high < (1 - ROUND) * (low + middle)
        return np.asarray((moments if solid else np.eye(3))[_SIX])

    def _link(self, link: Element, file: str) -> str:
        name = self.names[link.attributes["name"]]
        where = f"line {link.line}, link {link.attributes['name'][:80]}"
        own = only(link, "inertial", where, file)
        if own is None:
            return f'<link name="{name}"/>'
        origin, mass, inertia = (only(own, tag, where, file) for tag in ("origin", "mass", "inertia"))
        xyz, rpy = (numbers(origin, key, _ORIGIN, where, file) for key in ("xyz", "rpy"))
        (kilograms,) = numbers(mass, "value", (0.0,), where, file)
        six = [numbers(inertia, key, (0.0,), where, file)[0] for key in _MOMENTS]
        if kilograms < 0:
            raise BadFolder(where, f"its mass {kilograms:g} kg is negative", file)
        told = self.told(name, from_rpy(np.array(rpy)), _symmetric(six))
        moments = " ".join(f'{key}="{float(value)!r}"' for key, value in zip(_MOMENTS, told, strict=True))
        return (
            f'<link name="{name}"><inertial><origin xyz="{_text(xyz)}" rpy="{_text(rpy)}"/>'
            f'<mass value="{kilograms!r}"/><inertia {moments}/></inertial></link>'
        )

    def _joint(self, joint: UrdfJoint, name: str) -> str:
        kind = "fixed" if joint.kind in STILL else "prismatic" if joint.slides else "continuous"
        axis = "" if kind == "fixed" else f'<axis xyz="{_text(joint.axis)}"/>'
        return (
            f'<joint name="{name}" type="{kind}"><parent link="{self.names[joint.parent]}"/>'
            f'<child link="{self.names[joint.child]}"/>'
            f'<origin xyz="{_text(joint.xyz)}" rpy="{_text(joint.rpy)}"/>{axis}</joint>'
        )


def _paddle_bodies(paddle: Mapping[str, Any]) -> list[tuple[str, float, list[float], Any]]:
    """Name, mass in kg, centre (3,) in m and moments (3, 3) about it of each body of the paddle, in the face frame.

    A disc or plate with some thickness is told as a shape, whose moments the engine knows. Flat ones have those of a
    thin plate: J. L. Meriam and L. G. Kraige, Engineering Mechanics: Dynamics, table D/4 (from memory).
    """
    mass, shape = _number(paddle, "mass_kg"), paddle.get("shape")
    half = _number(paddle, "thickness_m") / 2
    centre: list[float] = [0.0, 0.0, -half]
    moments: Any
    if shape == "disc":
        radius = _number(paddle, "radius_m")
        thin = mass * radius**2 / 4 * np.diag([1.0, 1.0, 2.0])
        moments = (
            {"box": False, "size": [radius, half, 0.0]} if half > 0 and mass > 0 and radius > 0 else thin
        )
    elif shape == "plate":
        x, y = _numbers(paddle, "size_m", 2)
        thin = mass / 12 * np.diag([y * y, x * x, x * x + y * y])
        solid = half > 0 and mass > 0 and x > 0 and y > 0
        moments = {"box": True, "size": [x / 2, y / 2, half]} if solid else thin
    elif shape == "given":
        centre, moments = _numbers(paddle, "com_m", 3), _symmetric(_numbers(paddle, "inertia_kg_m2", 6))
    else:
        raise BadFolder("paddle.shape", "is no shape known here", CELL)
    found = [("paddle", mass, centre, moments)]
    parts = paddle.get("parts", [])
    if not isinstance(parts, list | tuple) or not all(isinstance(part, Mapping) for part in parts):
        raise BadFolder("paddle.parts", "is no list of parts", CELL)
    for i, part in enumerate(parts):
        tensor = _symmetric(_numbers(part, "inertia_kg_m2", 6))
        found.append((f"part{i}", _number(part, "mass_kg"), _numbers(part, "com_m", 3), tensor))
    if any(body[1] < 0 for body in found):
        raise BadFolder("paddle", "has a mass below 0", CELL)
    return found


def _number(entry: Mapping[str, Any], key: str) -> float:
    return sensible(entry.get(key), f"paddle.{key}")


def _numbers(entry: Mapping[str, Any], key: str, count: int) -> list[float]:
    found = entry.get(key)
    if not isinstance(found, list | tuple) or len(found) != count:
        raise BadFolder(f"paddle.{key}", f"is not {count} numbers", CELL)
    return [sensible(value, f"paddle.{key}") for value in found]


def _symmetric(six: Sequence[float]) -> Array:
    """Matrix (3, 3) from xx, yy, zz, xy, xz, yz."""
    xx, yy, zz, xy, xz, yz = six
    return np.array([[xx, xy, xz], [xy, yy, yz], [xz, yz, zz]])


def _text(values: Sequence[float]) -> str:
    return " ".join(repr(float(value)) for value in values)


def _line(error: Exception) -> str:
    return " ".join(str(error).split())[:200]
