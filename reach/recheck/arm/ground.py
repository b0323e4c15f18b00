"""What every command's check stands on: the arm in two forms of its own, stated limits, margins, what is accepted."""

from __future__ import annotations

import hashlib
import math
from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

import numpy as np
from numpy.typing import NDArray

from reach.formats.files import MAX_TEXT_BYTES, Reading
from reach.recheck.arm.chain import SLIDING, TURNING, Array, Chain, sensible
from reach.recheck.arm.engine import Engine, NoEngine
from reach.recheck.arm.limits import KINDS, TOOL, Limits
from reach.recheck.stored import CELL, BadFolder, Stored

SHORTEST_S, LONGEST_S = 1e-5, 0.1  # of a control period


@dataclass(frozen=True, eq=False)
class Ground:
    """The arm and what counts.

    Attributes
    ----------
    names : the joints', in the user's words, from the root on
    sliding : (n,) bool
    period_s : control period
    chain : kinematics
    engine : dynamics, None where there is none; then `why_no_engine` is a sentence
    limits : as stated in cell.json
    damping N·m·s/rad, friction N·m, armature kg·m² : (n,), 0 where unknown
    tool_m_s : cap on the strike point's speed, infinite without one
    margins, accept : as in cell.json
    source : the robot file that chain and engine are read from; `cell.json` where the user's is not there
    """

    names: tuple[str, ...]
    sliding: NDArray[np.bool_]
    period_s: float
    chain: Chain
    engine: Engine | None
    why_no_engine: str
    limits: Limits
    damping: Array
    friction: Array
    armature: Array
    tool_m_s: float
    margins: dict[str, Any]
    accept: dict[str, Any]
    source: str

    @property
    def unknown(self) -> frozenset[str]:
        """Limit kinds that nothing is known of for some joint, or for the tool."""
        tool = (TOOL,) if math.isinf(self.tool_m_s) else ()
        return frozenset((*(kind for kind in KINDS if np.isnan(self.limits.hi[kind]).any()), *tool))


@dataclass(frozen=True)
class _Robot:
    """A robot file with the names that it has for the chain's joints, the tip link and held joints."""

    xml: bytes
    file: str
    names: tuple[str, ...]
    tip: str
    held: dict[str, float]


def ground(stored: Stored) -> Ground:
    """The ground of a stored run.

    Raises
    ------
    BadFolder
        Where cell.json does not describe an arm.
    """
    joints = stored.tables("arm", "joints")
    if not joints:
        raise BadFolder("arm.joints", "is empty", f"{stored.folder}/{CELL}")
    names = tuple(stored.word("arm", "joints", i, "name") for i in range(len(joints)))
    kinds = [stored.word("arm", "joints", i, "kind") for i in range(len(joints))]
    if any(kind not in (*TURNING, *SLIDING) for kind in kinds) or len(set(names)) < len(names):
        raise BadFolder("arm.joints", "has a kind that is none, or a name twice", f"{stored.folder}/{CELL}")
    sliding = np.array([kind in SLIDING for kind in kinds])
    period = _number(stored, "period_s")
    if not SHORTEST_S <= period <= LONGEST_S:
        raise BadFolder("period_s", f"is not from {SHORTEST_S} to {LONGEST_S} s", f"{stored.folder}/{CELL}")
    limits = Limits.of(joints)
    robot, base, mount = (
        _robot(stored, names),
        stored.table("arm", "base"),
        stored.table("paddle", "mount"),
    )
    chain = Chain.read(robot.xml, robot.file, robot.names, robot.tip, robot.held, base, mount)
    if (chain.sliding != sliding).any():
        told = f"has another kind of joint than {robot.file}"
        raise BadFolder("arm.joints", told, f"{stored.folder}/{CELL}")
    drive = {key: _own(joints, key) for key in ("armature", "damping", "friction")}
    engine, why = _engine(stored, robot, sliding, drive)
    return Ground(
        names=names,
        sliding=sliding,
        period_s=period,
        chain=chain,
        engine=engine,
        why_no_engine=why,
        limits=limits,
        **drive,
        tool_m_s=math.inf if stored.at("tool") is None else _number(stored, "tool", "speed_m_s"),
        margins=dict(stored.table("margins")),
        accept=dict(stored.table("accept")),
        source=robot.file,
    )


def _engine(
    stored: Stored, robot: _Robot, sliding: NDArray[np.bool_], drive: Mapping[str, Array]
) -> tuple[Engine | None, str]:
    """The engine, or None and why there is none."""
    gravity = [_number(stored, "arm", "gravity_m_s2", i) for i in range(3)]
    try:
        engine = Engine(
            robot.xml,
            robot.names,
            robot.tip,
            robot.held,
            stored.table("arm", "base"),
            gravity,
            stored.table("paddle"),
            **drive,
            sliding=sliding,
            file=robot.file,
        )
    except NoEngine as error:
        return None, str(error)
    return engine, ""


def _robot(stored: Stored, names: tuple[str, ...]) -> _Robot:
    """The user's robot file where it still is what was read, else the one in cell.json.

    Raises
    ------
    BadFolder
        Where the user's file has changed since.
    """
    held: dict[str, dict[str, float]] = {"name": {}, "model_name": {}}
    for i in range(len(stored.tables("arm", "held"))):
        for key, by_name in held.items():
            value = _number(stored, "arm", "held", i, "value")
            by_name[stored.word("arm", "held", i, key)] = value
    path, digests = stored.word("arm", "urdf_path"), stored.inputs()
    if path in digests:
        content = Reading().read(path, MAX_TEXT_BYTES)
        if content is not None:
            if hashlib.sha256(content).hexdigest() != digests[path]:
                raise BadFolder("file", "has changed since the run; run the command again", path)
            tip = stored.word("arm", "tip")
            return _Robot(content, path, names, tip, held["name"])
    xml = stored.word("arm", "model_xml").encode("utf-8", "replace")
    chain = tuple(f"chain_{i}" for i in range(len(names)))
    return _Robot(xml, f"{stored.folder}/{CELL}", chain, "tip", held["model_name"])


def _own(joints: list[dict[str, Any]], key: str) -> Array:
    """Armature, damping or friction (n,) of the joints, 0 where unknown."""
    out = np.zeros(len(joints))
    for i, joint in enumerate(joints):
        value = joint["limits"].get(key)
        if value is not None:
            where = f"arm.joints.{i}.limits.{key}"
            out[i] = sensible(value, where)
            if out[i] < 0:
                raise BadFolder(where, "is below 0", CELL)
    return out


def _number(stored: Stored, *keys: str | int) -> float:
    return sensible(stored.at(*keys), ".".join(map(str, keys)))
