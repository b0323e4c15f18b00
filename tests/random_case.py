"""Random cells by files, drawn from a seed alone: arm, limits, paddle, and a command log or a list of strikes."""

from __future__ import annotations

import json
from dataclasses import dataclass, replace
from pathlib import Path as Folder

import numpy as np
from numpy.random import Generator
from random_arm import Arm, Bone, Origin, assembled, direction, draw_bones, urdf_text
from random_cell import arm_table, draw_accept, draw_base, draw_drive, draw_paddle, listed, mount_text
from random_commands import Log, draw_log
from random_limits import (
    Limits,
    draw_limits,
    draw_margins,
    draw_postures,
    draw_rubbing,
    draw_travel,
    limits_text,
    urdf_limits,
)
from scipy.optimize import linprog

from reach.cell import Array

FOLLOW, SURVEY = "follow", "survey"
STREAMS = {FOLLOW: 11, SURVEY: 12}
STYLES = ("aligned", "parallel", "skew")
JOINTS = (2, 3, 4, 5, 6, 7, 8)
# A survey of eight joints costs ten times one of three, so they come seldom.
JOINT_SHARES = {FOLLOW: [1 / 7] * 7, SURVEY: [0.1, 0.22, 0.2, 0.2, 0.18, 0.06, 0.04]}
SHARP = {"primal_feasibility_tolerance": 1e-10, "dual_feasibility_tolerance": 1e-10}
VAST = 1e4  # rad/s or m/s: a joint velocity that nobody limits
COMMAND_COLUMNS = "t_s,vx_m_s,vy_m_s,vz_m_s,wx_rad_s,wy_rad_s,wz_rad_s"
POSE_COLUMNS = "px_m,py_m,pz_m,qw,qx,qy,qz"


@dataclass(frozen=True, eq=False)
class Blow:
    """A strike to be surveyed.

    place, normal, along : (3,) strike point, face normal, direction of the strike ; required along the normal, m/s
    posture : (n,) that makes it, None where it lies out of reach ; bound : m/s along the normal that the joints'
    velocities allow in it
    """

    place: Array
    normal: Array
    along: Array
    required: float
    posture: Array | None
    bound: float


@dataclass(frozen=True, eq=False)
class Case:
    """What was drawn.

    Attributes
    ----------
    command : "follow" or "survey" ; style : of the arm ; commands : style of the log or of the strikes
    kinds : of the joints, a letter each ; weak : a joint was made too weak on purpose
    limits, kept : as stated, and less the margins ; tool_m_s : infinite where there is no cap
    accept, require : numbers of the cell's [accept], defaults included, and what must be known
    disc : the paddle may spin about its normal ; free : it may turn at a strike
    """

    seed: int
    folder: Folder
    command: str
    style: str
    commands: str
    kinds: str
    weak: bool
    arm: Arm
    limits: Limits
    margins: dict[str, float]
    kept: Limits
    tool_m_s: float
    period_s: float
    drive: dict[str, float]
    accept: dict[str, float]
    require: list[str]
    log: Log | None
    blows: tuple[Blow, ...]
    disc: bool
    free: bool
    run_up_m: float | None

    @property
    def n(self) -> int:
        """How many joints."""
        return self.arm.n

    @property
    def file(self) -> Folder:
        """The cell file."""
        return self.folder / "cell.toml"

    @property
    def tool_kept_m_s(self) -> float:
        """The tool's cap less its margin."""
        return self.tool_m_s * (1 - self.margins["velocity_share"])

    @property
    def tag(self) -> str:
        """One line on what it is."""
        return f"{self.command} seed {self.seed}: {self.style} {self.kinds}, {self.commands}"


def case(seed: int, folder: Folder, command: str = FOLLOW) -> Case:
    """Draw a cell and write its files into a folder: arm.urdf, arm.limits.toml, cell.toml, and the log or strikes."""
    rng = np.random.default_rng([seed, STREAMS[command]])
    n, style = int(rng.choice(JOINTS, p=JOINT_SHARES[command])), str(rng.choice(STYLES, p=(0.4, 0.15, 0.45)))
    bones = draw_bones(rng, style, n)
    tip = Origin(rng.uniform(0, 0.08) * direction(rng), rng.uniform(-1, 1, 3)) if rng.random() < 0.5 else None
    base, base_text = draw_base(rng)
    mount_deg = rng.choice((0.0, 90.0, 37.5, -120.0), 3)
    mount = Origin(rng.uniform(-0.08, 0.12, 3).round(4), np.radians(mount_deg))
    paddle, on_face, disc = draw_paddle(rng)
    bare = assembled(bones, tip, mount, base, on_face)
    if rng.random() < 0.6:
        bare = replace(bare, armature=rng.uniform(0, 0.4, n))
    limits, sizes, weak = draw_limits(rng, bare, *draw_travel(rng, bones))
    rubbing = draw_rubbing(rng, sizes)
    arm = replace(bare, **rubbing)
    if bare.armature.any():
        rubbing["armature"] = bare.armature
    margins = draw_margins(rng)
    kept = limits.kept(margins)
    period_s = float(rng.choice((0.0005, 0.001, 0.002, 0.004), p=(0.1, 0.3, 0.35, 0.25)))
    tool_m_s = float(rng.uniform(0.3, 2.5)) if rng.random() < 0.25 else np.inf
    drive = draw_drive(rng) if command == FOLLOW else {}
    accept, require = draw_accept(rng)
    log, blows, free, run_up = None, (), False, None
    if command == FOLLOW:
        log = draw_log(rng, arm, limits, kept, period_s)
        asked, commands = follow_text(log), log.style
    else:
        free, run_up = bool(rng.random() < 0.4), float(rng.uniform(0.03, 0.4)) if rng.random() < 0.5 else None
        blows, commands = draw_blows(
            rng, arm, limits, kept, tool_m_s * (1 - margins["velocity_share"]), disc, free
        )
        asked = survey_text(free, run_up)
    drawn = Case(
        seed, folder, command, style, commands, "".join(bone.kind[0] for bone in bones), weak, arm, limits, margins,
        kept, tool_m_s, period_s, drive, accept, require, log, blows, disc, free, run_up,
    )  # fmt: skip
    arm_text = arm_table(bones, tip, base_text, log)
    whole = [arm_text, mount_text(mount, mount_deg), paddle, control_text(drawn), asked]
    write(drawn, bones, tip, rubbing, urdf_limits(rng, bones, limits), "\n".join(whole))
    return drawn


def allowed_speed(
    arm: Arm,
    kept: Limits,
    q: Array,
    along: Array,
    disc: bool,
    free: bool,
    box: tuple[Array, Array] | None = None,
) -> float:
    """The largest speed along `along` (3,) at a posture (n,) with joint velocities in a box, by HiGHS; the paddle may
    turn where `free`, else only spin about its normal where it is a disc.

    box : (n,), (n,) joint velocities; that of `Limits.travel_box` by default
    """
    jacobian, turn, _ = arm.jacobian(q[None])
    lo, hi = kept.travel_box(q) if box is None else box
    turning = (turn[0, :, :2] if disc else turn[0]).T @ jacobian[0, 3:]
    rows = jacobian[0, :3] if free else np.vstack([jacobian[0, :3], turning])
    target = np.zeros(len(rows))
    target[:3] = along
    sides = [*zip(np.maximum(lo, -VAST), np.minimum(hi, VAST), strict=True), (0.0, None)]
    equal = np.column_stack([rows, -target])
    cost = np.append(np.zeros(arm.n), -1.0)
    answer = linprog(cost, A_eq=equal, b_eq=0 * target, bounds=sides, method="highs", options=SHARP)
    return float(answer.x[-1]) if answer.status == 0 else 0.0


def draw_blows(
    rng: Generator, arm: Arm, limits: Limits, kept: Limits, cap_m_s: float, disc: bool, free: bool
) -> tuple[tuple[Blow, ...], str]:
    """One to three strikes that random postures make, or that lie out of reach; and what they are."""
    found, far, count = [], rng.random() < 0.1, int(rng.choice((1, 2, 3), p=(0.7, 0.2, 0.1)))
    aslant = arm.n < (3 if free else 5 if disc else 6) or rng.random() < 0.15
    length = float(np.linalg.norm(arm.before[1:, :3, 3], axis=1).sum() + np.linalg.norm(arm.face[:3, 3]))
    length += float(np.where(np.isfinite(limits.reach_of_slides()), limits.reach_of_slides(), 0.0).sum())
    for q in draw_postures(rng, kept.lo["position"], kept.hi["position"], count, 0.7):
        jacobian, turn, place = (x[0] for x in arm.jacobian(q[None]))
        normal, along = turn[:, 2], turn[:, 2]
        if aslant:
            along = _direction(rng, jacobian, turn, normal, disc, free)
        bound = min(allowed_speed(arm, kept, q, along, disc, free), cap_m_s) * float(along @ normal)
        share = rng.choice((0.2, 0.5, 0.8, 0.95, 1.1, 1.6))
        required = bound * share if 1e-3 < bound < 60 else rng.uniform(0.1, 2.0)
        posture: Array | None = q
        if far:
            place, posture = arm.before[0, :3, 3] + direction(rng) * length * rng.uniform(1.02, 1.6), None
        found.append(Blow(place, normal, along, float(max(required, 2e-3)), posture, bound))
    return tuple(found), "far" if far else "aslant" if aslant else "normal"


def _direction(rng: Generator, jacobian: Array, turn: Array, normal: Array, disc: bool, free: bool) -> Array:
    """A direction (3,) in which the paddle can move without what it may not do, out of its face; else its normal."""
    turning = (turn[:, :2] if disc else turn).T @ jacobian[3:]
    move = rng.normal(size=jacobian.shape[1])
    if not free:
        _, sizes, right = np.linalg.svd(turning)
        rank = int((sizes > 1e-9 * max(sizes.max(), 1.0)).sum())
        move = right[rank:].T @ (right[rank:] @ move)
    way = jacobian[:3] @ move
    size = float(np.linalg.norm(way))
    if size < 1e-6 or abs(way @ normal) < 0.2 * size:
        return normal
    return np.asarray(way / size * np.sign(way @ normal))


def control_text(drawn: Case) -> str:
    """Period, margins, acceptance, drive and tool."""
    lines = ["[control]", f"period_s = {drawn.period_s!r}", "[margins]"]
    lines += [f"{key} = {value!r}" for key, value in drawn.margins.items()]
    lines += ["[accept]", f"require = {json.dumps(drawn.require)}"]
    lines += [f"{key} = {value!r}" for key, value in drawn.accept.items()]
    if drawn.log is not None:
        lines.append(f'at = "{drawn.log.at}"')
    if drawn.drive:
        lines += ["[drive]", *(f"{key} = {value!r}" for key, value in drawn.drive.items())]
    if np.isfinite(drawn.tool_m_s):
        lines += ["[tool]", f"speed_m_s = {drawn.tool_m_s!r}"]
    return "\n".join(lines)


def follow_text(log: Log) -> str:
    """The [follow] table."""
    point = f'"{log.point}"' if isinstance(log.point, str) else listed(np.array(log.point))
    return f"""[follow]
commands = "commands.csv"
frame = "{log.frame}"
point = {point}
interpolation = "{log.interpolation}"
shortfall = "{log.shortfall}"
pose_gain_per_s = {log.gain!r}
"""


def survey_text(free: bool, run_up_m: float | None) -> str:
    """The [survey] table."""
    lines = ["[survey]", 'strikes = "strikes.csv"', f'rotation = "{"free" if free else "still"}"']
    return "\n".join([*lines, *([f"run_up_m = {run_up_m!r}"] if run_up_m is not None else []), ""])


def write(
    drawn: Case,
    bones: tuple[Bone, ...],
    tip: Origin | None,
    rubbing: dict[str, Array],
    urdf: list[str],
    cell: str,
) -> None:
    """Write the case's files."""
    folder = drawn.folder
    (folder / "arm.urdf").write_text(urdf_text(bones, tip, urdf), encoding="utf-8")
    (folder / "arm.limits.toml").write_text(limits_text(bones, drawn.limits, rubbing), encoding="utf-8")
    drawn.file.write_text(cell, encoding="utf-8")
    if drawn.log is not None:
        log = drawn.log
        columns, header = [log.t_s[:, None], log.sent], COMMAND_COLUMNS
        for values, name in ((log.marks, "strike"), (log.poses, POSE_COLUMNS)):
            if values is not None:
                columns.append(np.asarray(values, dtype=float).reshape(len(log.t_s), -1))
                header += f",{name}"
        rows(folder / "commands.csv", header, np.hstack(columns))
    else:
        blows = drawn.blows
        told = np.array([[*blow.place, *blow.normal, blow.required, *blow.along] for blow in blows])
        rows(folder / "strikes.csv", "x_m,y_m,z_m,nx,ny,nz,paddle_speed_m_s,dx,dy,dz", told)


def rows(path: Folder, header: str, values: Array) -> None:
    """A table by its columns' names, in full precision."""
    lines = [header, *(",".join(repr(float(x)) for x in row) for row in values), ""]
    path.write_text("\n".join(lines), encoding="utf-8")
