"""What one key of a cell file means for another: shapes, presets, either-or, room for margins."""

from __future__ import annotations

from collections.abc import Container, Mapping
from typing import Any

from reach.cell import Joint, Margins
from reach.errors import FaultList
from reach.formats import inertia
from reach.formats.presets import BALLS

_SHAPES: dict[str, tuple[tuple[str, ...], tuple[str, ...]]] = {
    "disc": (("radius_m",), ("thickness_m",)),
    "plate": (("size_m",), ("thickness_m",)),
    "given": (("com_m", "inertia_kg_m2"), ()),
}
"""Shape -> (keys it needs, keys it may have)."""

_FACE_KEYS = ("normals", "face_tilts_deg", "bearings_deg")
_BALL_KEYS = ("ball_in_m_s", "ball_out_m_s")
_IN_STRIKES_FILE = ("spacing_m", *_FACE_KEYS, "direction", "paddle_speed_m_s", *_BALL_KEYS)
"""Keys of [survey] that a file of strikes stands in place of."""

_SHAPE_KEYS = ("radius_m", "size_m", "thickness_m", "com_m", "inertia_kg_m2")


def check_paddle(
    paddle: Mapping[str, Any], given: Mapping[str, Any], faults: FaultList, notes: list[str]
) -> None:
    """Each shape has its keys and no other's; given inertias are those of solids."""
    shape = paddle["shape"]
    needs, may = _SHAPES[shape]
    for key in _SHAPE_KEYS:
        if key in needs and key not in given:
            faults.add(f"paddle.{key}", f'missing; shape "{shape}" needs it')
        elif key in given and key not in (*needs, *may):
            faults.add(f"paddle.{key}", f'does not belong to shape "{shape}"; drop it, or change the shape')
    bodies = [("paddle", paddle)] + [(f"paddle.part[{i}]", part) for i, part in enumerate(paddle["part"])]
    for where, body in bodies:
        mass, six = body["mass_kg"], body["inertia_kg_m2"]
        if mass is None or six is None:
            continue
        if not any(six):
            if body is paddle:
                faults.add(f"{where}.inertia_kg_m2", "is zero, as of a point; give the paddle's own inertia")
            continue
        fault, note = inertia.judge(mass, inertia.matrix(six))
        if fault:
            faults.add(f"{where}.inertia_kg_m2", fault)
        if note:
            notes.append(f"{faults.file}: {where}.inertia_kg_m2: {note}")


def check_ball(ball: Mapping[str, Any], given: Mapping[str, Any], faults: FaultList) -> None:
    """Without a preset mass and radius must be given."""
    if "preset" in given:
        return
    for key in ("mass_kg", "radius_m"):
        if key not in given:
            presets = ", ".join(f'"{name}"' for name in BALLS)
            faults.add(f"ball.{key}", f"missing; give it, or a preset: one of {presets}")


def check_contact(contact: Mapping[str, Any], given: Mapping[str, Any], faults: FaultList) -> None:
    """Restitution stays in (0, 1] with its spread; a table of it goes up in speed."""
    restitution, spread = contact["restitution"], contact["restitution_spread"]
    if "restitution_spread" in given and "restitution_at" in given:
        faults.add("contact.restitution_at", "stands beside restitution_spread; keep one")
    if restitution is not None and not spread < restitution <= 1 - spread:
        faults.add(
            "contact.restitution_spread",
            f"{restitution:g} ± {spread:g} leaves the range above 0 and at most 1; narrow the spread",
        )
    before = -1.0
    for row, (speed, value) in enumerate(contact["restitution_at"]):
        where = f"contact.restitution_at[{row}]"
        if speed < 0 or speed <= before:
            faults.add(where, f"speed {speed:g} m/s; speeds must be at least 0 and go up")
        if not 0 < value <= 1:
            faults.add(where, f"restitution {value:g}; it must be above 0 and at most 1")
        before = max(before, speed)


def check_accept(accept: Mapping[str, Any], faults: FaultList) -> None:
    """No name stands twice in accept.require."""
    names = accept["require"]
    for name in sorted({name for name in names if names.count(name) > 1}):
        faults.add("accept.require", f'"{name}" stands twice; keep one')


def check_survey(written: Container[str], has_contact: bool, faults: FaultList) -> None:
    """One way to say where, and one to say how to strike: by face and speed, or by the ball."""
    if "strikes" in written:
        for key in ("box_m", *_IN_STRIKES_FILE):
            if key in written:
                faults.add(f"survey.{key}", "stands beside strikes, whose file says it; keep one")
        return
    if "box_m" not in written:
        told = "missing; give two corners, [[x, y, z], [x, y, z]], or name a file in strikes"
        faults.add("survey.box_m", told)
    by_ball = [key for key in _BALL_KEYS if key in written]
    if by_ball:
        _check_ball_keys(by_ball, written, has_contact, faults)
        return
    if not any(key in written for key in _FACE_KEYS):
        faults.add(
            "survey.normals",
            "missing; give normals, face_tilts_deg and bearings_deg, or ball_in_m_s and ball_out_m_s; there is "
            "no default because the verdict depends on it",
        )
    if "normals" in written and any(key in written for key in _FACE_KEYS[1:]):
        faults.add("survey.normals", "stands beside face_tilts_deg or bearings_deg; keep one way")
    elif "bearings_deg" in written and "face_tilts_deg" not in written:
        faults.add("survey.bearings_deg", "needs face_tilts_deg")
    if "paddle_speed_m_s" not in written:
        faults.add(
            "survey.paddle_speed_m_s",
            "missing; give the speed needed along the normal, or ball_in_m_s and ball_out_m_s",
        )


def _check_ball_keys(
    by_ball: list[str], written: Container[str], has_contact: bool, faults: FaultList
) -> None:
    where = f"survey.{by_ball[0]}"
    if len(by_ball) == 1:
        faults.add(where, "needs both ball_in_m_s and ball_out_m_s")
    beside = [key for key in (*_FACE_KEYS, "paddle_speed_m_s", "direction") if key in written]
    if beside:
        told = "fixes normal, direction and paddle speed; drop"
        faults.add(where, f"{told} {', '.join(beside)}, or the ball's velocities")
    if not has_contact:
        faults.add(where, "needs the restitution of ball and face; give it in a table [contact]")


def check_room(joints: tuple[Joint, ...], margins: Margins, cell: FaultList) -> None:
    """A joint's travel must exceed what the margins take from its two ends."""
    for joint in joints:
        bound = joint.limits.position
        key = "position_m" if joint.sliding else "position_rad"
        margin = getattr(margins, key)
        if bound is not None and bound.hi - bound.lo <= 2 * margin:
            cell.add(
                f"margins.{key}",
                f"{margin:g} from both ends leaves joint {joint.name} no room in "
                f"[{bound.lo:g}, {bound.hi:g}] ({bound.source}); lower the margin, or make the joint fixed",
            )
