"""The [survey] table: points of a box or a file of strikes, faces and speeds, made into one Survey."""

from __future__ import annotations

from collections.abc import Mapping
from typing import Any

import numpy as np

from reach.cell import Array, Contact, Survey
from reach.errors import FaultList, InputError
from reach.formats.cross_checks import check_survey
from reach.formats.files import MAX_LOG_BYTES, Reading, beside
from reach.formats.fixed import read_only
from reach.formats.grid import check_box, fitting_spacing, shown_count
from reach.formats.magnitude import DUST, LEAST_LIMIT
from reach.formats.strikes_csv import LEAST_ALONG, LEAST_LENGTH, Strikes, read_strikes

SAME = 9  # decimals to which two unit normals are compared

_AS_WRITTEN = ("spacing_m", "rotation", "run_up_m", "required_share", "exact", "max_points")


def read_survey(
    survey: Mapping[str, Any],
    written: Mapping[str, Any],
    contact: Contact | None,
    has_contact: bool,
    faults: FaultList,
    reading: Reading,
) -> Survey | None:
    """Read the survey that a checked [survey] table describes.

    Parameters
    ----------
    survey : the table as the schema read it
    written : the table as written, to tell what was given from what is a default
    contact : None where there is none, or one with faults
    has_contact : whether the file has a table [contact]
    faults : those of the cell file
    reading : gathers the faults and inputs of the file of strikes

    Returns
    -------
    Survey, or None after noting why there is none.
    """
    check_survey(written, has_contact, faults)
    made: Survey | None
    if survey["strikes"]:
        made = _listed(survey, faults, reading)
    else:
        strikes = _strikes(survey, written, contact, faults, reading)
        if survey["box_m"] is not None:
            check_box("survey.box_m", survey["box_m"], faults)
        made = None if strikes is None or survey["box_m"] is None else _made(survey, strikes)
    if made is not None:
        _check_size(made, faults)
    return made


def _made(survey: Mapping[str, Any], strikes: Strikes) -> Survey:
    return Survey(
        box_m=None if strikes.points is not None else survey["box_m"],
        listed=strikes.points,
        normals=strikes.normals,
        directions=strikes.directions,
        speeds_m_s=strikes.speeds_m_s,
        ball_in_m_s=survey["ball_in_m_s"],
        **{key: survey[key] for key in _AS_WRITTEN},
    )


def _listed(survey: Mapping[str, Any], faults: FaultList, reading: Reading) -> Survey | None:
    path = beside(faults.file, survey["strikes"])
    content = reading.read(path, MAX_LOG_BYTES, f"survey.strikes in {faults.file}")
    if content is None:
        return None
    try:
        return _made(survey, read_strikes(content, path))
    except InputError as error:
        reading.faults.extend(error.faults)
        return None


def _strikes(
    survey: Mapping[str, Any],
    written: Mapping[str, Any],
    contact: Contact | None,
    faults: FaultList,
    reading: Reading,
) -> Strikes | None:
    """Faces, directions and speeds for every point of the box."""
    if "ball_in_m_s" in written or "ball_out_m_s" in written:
        return _by_ball(survey, contact, faults)
    normals = _normals(survey, faults, reading)
    if normals is None:
        return None
    directions = _directions(survey, normals, faults)
    if directions is None or survey["paddle_speed_m_s"] is None:
        return None
    speeds = np.full(len(normals), survey["paddle_speed_m_s"])
    return Strikes(None, read_only(normals), read_only(directions), read_only(speeds))


def _normals(survey: Mapping[str, Any], faults: FaultList, reading: Reading) -> Array | None:
    """Unit normals (k, 3) by the normals of the cell, or by its tilts and bearings; each once."""
    if survey["normals"] is not None:
        given = np.array(survey["normals"])
        lengths = np.linalg.norm(given, axis=1)
        for row in np.flatnonzero(lengths < LEAST_LENGTH):
            faults.add(f"survey.normals[{row}]", "is zero; give a direction")
        if (lengths < LEAST_LENGTH).any():
            return None
        normals = _each_once(given / lengths[:, None])
        if len(normals) < len(given):
            said = f"{len(given) - len(normals)} of {len(given)} repeat another and count once"
            reading.notes.append(f"{faults.file}: survey.normals: {said}")
        return normals
    if survey["face_tilts_deg"] is None:
        return None
    tilts = np.radians(survey["face_tilts_deg"])
    if survey["bearings_deg"] is None:
        if (np.sin(tilts) > LEAST_ALONG).any():
            told = "missing; a tilted face needs the bearings that it tilts toward"
            faults.add("survey.bearings_deg", told)
            return None
        return _tilted(tilts, np.zeros(1))
    return _tilted(tilts, np.radians(survey["bearings_deg"]))


def _tilted(tilts: Array, bearings: Array) -> Array:
    """World +z tilted by each angle toward each bearing (from +x, counter-clockwise from above), (k, 3)."""
    tilt, bearing = (grid.ravel() for grid in np.meshgrid(tilts, bearings, indexing="ij"))
    flat = np.sin(tilt)
    normals = np.column_stack([flat * np.cos(bearing), flat * np.sin(bearing), np.cos(tilt)])
    return _each_once(np.where(np.abs(normals) < DUST, 0.0, normals))


def _each_once(normals: Array) -> Array:
    """The normals in their order without repetitions."""
    _, first = np.unique(normals.round(SAME) + 0.0, axis=0, return_index=True)
    return np.asarray(normals[np.sort(first)])


def _directions(survey: Mapping[str, Any], normals: Array, faults: FaultList) -> Array | None:
    """Unit direction of the strike at each face: the cell's, or the normal."""
    if survey["direction"] is None:
        return normals
    given = np.array(survey["direction"])
    length = float(np.linalg.norm(given))
    if length < LEAST_LENGTH:
        faults.add("survey.direction", "is zero; give a direction, or drop it to strike along the normal")
        return None
    direction = given / length
    behind = np.flatnonzero(normals @ direction < LEAST_ALONG)
    if len(behind):
        told = f"does not go out of the face with normal {_vector(normals[behind[0]])}"
        faults.add("survey.direction", f"{told}; turn it to have a positive part along every normal")
        return None
    return np.tile(direction, (len(normals), 1))


def _by_ball(survey: Mapping[str, Any], contact: Contact | None, faults: FaultList) -> Strikes | None:
    """The one face and speed that make ball_in_m_s into ball_out_m_s."""
    from reach.ball import NoContact, strike_for  # loaded only where a ball is given

    ball_in, ball_out = survey["ball_in_m_s"], survey["ball_out_m_s"]
    if ball_in is None or ball_out is None or contact is None:
        return None
    try:
        normal, speed = strike_for(ball_in, ball_out, contact)
    except NoContact:
        faults.add("survey.ball_out_m_s", "equals ball_in_m_s; a strike changes the ball's velocity")
        return None
    toward = float(normal @ ball_in)
    face = f"the face that would turn it so, with normal {_vector(normal)}"
    if toward >= 0:
        told = f"the ball does not come toward {face}; give its velocity right before contact"
        faults.add("survey.ball_in_m_s", told)
        return None
    if speed < LEAST_LIMIT:
        told = f"{face}, would have to give way at {-speed:.4g} m/s; give a faster ball after contact"
        faults.add("survey.ball_out_m_s", told)
        return None
    return Strikes(None, read_only(normal[None]), read_only(normal[None]), read_only(np.array([speed])))


def _check_size(survey: Survey, faults: FaultList) -> None:
    """No more strikes than max_points."""
    if survey.size <= survey.max_points:
        return
    if survey.listed is not None:
        told = f"has {survey.size} strikes, more than max_points = {survey.max_points}; cut it or raise that"
        faults.add("survey.strikes", told)
        return
    assert survey.box_m is not None
    most = survey.max_points
    faces = f" for each of {len(survey.normals)} faces" if len(survey.normals) > 1 else ""
    told = f"makes {shown_count(survey.size)} strikes, {' x '.join(map(shown_count, survey.counts))} points{faces}"
    told += f", more than max_points = {most}"
    fitting = fitting_spacing(survey.box_m, survey.spacing_m, most // len(survey.normals))
    change = f"spacing_m = {fitting:g} would fit" if fitting else "the faces alone are too many; list fewer"
    faults.add("survey.spacing_m", f"{told}; {change}, or raise max_points")


def _vector(vector: Array) -> str:
    return f"[{', '.join(f'{x + 0.0:.4g}' for x in vector)}]"
