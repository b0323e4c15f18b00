"""What [rally] and [trial] ask of the other tables: ball, contact, a face with an outline, gravity straight down."""

from __future__ import annotations

from collections.abc import Container, Mapping, Sequence
from typing import Any

from reach.cell import Accept, Ball
from reach.errors import FaultList

STRAIGHT_M_S2 = 1e-9  # of gravity along the world's x and y: what rounding leaves of zero
_OUTLINE = {"disc": "radius_m", "plate": "size_m"}
"""Shape -> key of the face's outline."""


def check_bouncing(
    asking: Sequence[str],
    document: Container[str],
    read: Mapping[str, Any],
    ball: Ball | None,
    accept: Accept,
    faults: FaultList,
    notes: list[str],
) -> None:
    """Note what a cell lacks for a ball that is to be bounced.

    Parameters
    ----------
    asking : the tables that ask for it, "rally", "trial" or both
    document : the cell file as parsed, to tell what was given
    read : its tables as the schema read them
    ball : None where there is none, or one with faults
    """
    who = f"{' and '.join(f'[{name}]' for name in asking)} need{'s' if len(asking) == 1 else ''} it"
    if "ball" not in document:
        told = "give a preset, or mass_kg and radius_m, in a table [ball]"
        faults.add("ball", f"missing; {who}: {told}")
    if "contact" not in document:
        faults.add("contact", f"missing; {who}: give the restitution of ball and face in a table [contact]")
    if read["paddle"]:
        _check_face(read["paddle"], ball, accept, faults, notes)
    if read["arm"]:
        x, y, z = read["arm"]["gravity_m_s2"]
        if max(abs(x), abs(y)) > STRAIGHT_M_S2 or z >= -STRAIGHT_M_S2:
            told = "rally and trial need gravity straight down the world's z axis, such as [0, 0, -9.80665]"
            faults.add("arm.gravity_m_s2", f"is [{x:g}, {y:g}, {z:g}]; {told}")


def _check_face(
    paddle: Mapping[str, Any], ball: Ball | None, accept: Accept, faults: FaultList, notes: list[str]
) -> None:
    """The face has an outline, no smaller than where an accepted strike may meet it."""
    shape = paddle["shape"]
    if shape not in _OUTLINE:
        told = "rally and trial need the outline of the face: give shape disc or plate"
        faults.add("paddle.shape", f'is "{shape}"; {told}')
        return
    outline = paddle[_OUTLINE[shape]]
    if outline is None:
        return
    where = f"paddle.{_OUTLINE[shape]}"
    half_m = outline if shape == "disc" else min(outline) / 2
    if half_m < accept.strike_position_m:
        faults.add(
            where,
            f"the face reaches {half_m:g} m from its centre, less than accept.strike_position_m = "
            f"{accept.strike_position_m:g}, so an accepted strike may miss it; enlarge the face or lower that",
        )
    if ball is not None and half_m < ball.radius_m:
        told = (
            f"the face reaches {half_m:g} m from its centre, less than the ball's radius {ball.radius_m:g} m"
        )
        notes.append(f"{faults.file}: {where}: {told}")
