"""How the numbers of a survey are put into words, the same for terminal and page."""

from __future__ import annotations

import math
from typing import Any

import numpy as np

from reach.evidence.points import Points
from reach.report.survey.document import figures
from reach.report.survey.numbers import Count, Family, Hit, bound_in_force, worst_limits
from reach.report.wording import NOTHING, fixed, number, percent, plain
from reach.result import SurveyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE

Row = tuple[str, ...]

OTHER_WAY = {"still": "free", "free": "still"}
STOPS_HEADER = (
    "limit",
    "joint",
    "phase",
    "#not deliverable",
    "#undecided",
    "#all strikes",
    "#share %",
)
FAMILIES_HEADER = ("family", "#delivers alone", "#share %", "#fastest of all", "#median m/s")
HITS_HEADER = ("joint", "#velocity jump", "unit", "#impulse", "unit")
STRIKES_HEADER = (
    *("#x m", "#y m", "#z m", "face normal", "#required m/s", "#demonstrated m/s", "#upper bound m/s"),
    *("verdict", "basis", "stopped by"),
)
READING = (
    "Demonstrated: in simulation a whole motion, from rest to rest through the strike, kept every limit at this speed "
    "along the face normal.",
    "Upper bound: no motion passes this speed in the postures compared, because a joint or the tool may not move "
    "faster, or a joint could not gain and lose its speed within its travel. Another posture may still do better. "
    "Still: the paddle does not turn at the strike. Free: it may turn, so this bound is never the lower one.",
    "Strike window: around contact speed, direction and tilt must hold as [accept] says; where a faster stroke would "
    "turn away too soon, this is what stops it.",
    "Region: each point stands for the part of the box nearest to it, so points at its edge stand for less.",
    "A strike is deliverable where the demonstrated speed reaches the required one, not deliverable where the upper "
    "bound stays below it, undecided in between.",
    "Basis: proved follows from the arm's lengths and limits alone; demonstrated is a motion that was found and "
    "checked; searched holds for the postures that were compared, and others may exist.",
)


def figure_rows(result: SurveyResult) -> list[tuple[str, str]]:
    """Return the numbers that compare two cells, each with its name."""
    f = figures(result)
    rows = [
        ("strikes", _strikes(f)),
        ("within reach", _reach(f)),
        ("without margins", f"{percent(f['deliverable_without_margins_share'])} % deliverable"),
    ]
    if f["region"] is not None:
        rows.append(("region delivered", _region(f["region"], result.evidence.shape)))
    required = between(f["required_min_m_s"], f["required_max_m_s"])
    rows.append(("required", f"{required} m/s along the face normal"))
    rows += [
        (f"{100 * share['strikes_share']:g} % of the strikes", _speeds(share, f["bound"]))
        for share in f["speed_for_share"]
    ]
    if f["unreachable"] < f["strikes"]:
        done, kind, other = f["demonstrated_median_m_s"], f["bound"], OTHER_WAY[f["bound"]]
        bound = _bound(f[f"bound_{kind}_median_m_s"], kind)
        rows.append(("median of those in reach", f"{number(done)} m/s demonstrated, {bound}"))
        rows.append(("the other bound, median", _bound(f[f"bound_{other}_median_m_s"], other)))
        rows.append(("fastest strike", f"{number(f['demonstrated_max_m_s'])} m/s demonstrated"))
    if math.isfinite(f["effective_mass_median_kg"]):
        mass = number(f["effective_mass_median_kg"])
        rows.append(("effective mass, median", f"{mass} kg along the normal, joints free"))
    if math.isfinite(f["approach_median_m_s"]):
        rows.append(("ball meets face, median", f"{number(f['approach_median_m_s'])} m/s"))
    if math.isfinite(f["ball_impulse_max_n_s"]):
        impulse = between(f["ball_impulse_min_n_s"], f["ball_impulse_max_n_s"])
        rows.append(("impulse on the ball", f"{impulse} N·s"))
        rows.append(("worst hit on a joint", worst_hit(f)))
    return rows


def between(low: float, high: float) -> str:
    """Return a range, or one value where both ends read alike."""
    least, most = number(low), number(high)
    return least if least == most else f"{least} to {most}"


def worst_hit(f: dict[str, float]) -> str:
    """Return what one hit does to a turning joint at most."""
    jump, impulse = f["velocity_jump_free_max_rad_s"], f["joint_impulse_locked_max_nm_s"]
    return f"jump of {number(jump)} rad/s (joints free), impulse of {number(impulse)} N·m·s (joints locked)"


def stopper(count: Count) -> str:
    """Return a limit with its joint and phase."""
    whose = f" of {plain(count.joint)}" if count.joint else ""
    return f"{count.limit}{whose}" + (f" ({count.phase})" if count.phase else "")


def stops_rows(result: SurveyResult) -> list[Row]:
    """Return the cells under STOPS_HEADER, what stops most of the strikes not deliverable first."""
    total = len(result.evidence.points.verdict)
    return [
        (
            count.limit,
            plain(count.joint) or NOTHING,
            count.phase or NOTHING,
            str(count.not_deliverable),
            str(count.undecided),
            str(count.all),
            percent(count.all / total),
        )
        for count in worst_limits(result.evidence.points)
    ]


def family_row(family: Family) -> Row:
    """Return the cells under FAMILIES_HEADER."""
    return (
        plain(family.name),
        str(family.delivered),
        percent(family.share),
        str(family.best),
        number(family.median_m_s),
    )


def hit_row(hit: Hit) -> Row:
    """Return the cells under HITS_HEADER."""
    velocity, impulse = ("m/s", "N·s") if hit.sliding else ("rad/s", "N·m·s")
    return plain(hit.joint), number(hit.velocity_jump), velocity, number(hit.impulse), impulse


def strike_rows(result: SurveyResult, most: int) -> list[Row]:
    """Return the cells under STRIKES_HEADER for so many strikes, those not deliverable first."""
    points = result.evidence.points
    bound = bound_in_force(points, result.cell.survey)
    rank = np.select([points.verdict == NOT_DELIVERABLE, points.verdict == DELIVERABLE], [0, 2], 1)
    chosen = np.argsort(rank, kind="stable")[:most]
    return [_strike(points, k, float(bound[k])) for k in np.sort(chosen).tolist()]


def face_text(normal: np.ndarray) -> str:
    """Return a face normal (3,) in short."""
    return f"({', '.join(f'{x + 0.0:.3g}' for x in np.round(normal, 4))})"


def _strike(points: Points, row: int, bound: float) -> Row:
    stop = Count(str(points.limit[row]), str(points.joint[row]), str(points.phase[row]), 0, 0, 0)
    return (
        *(fixed(float(x), 3) for x in points.position[row]),
        _faces(points, row),
        fixed(float(points.required_m_s[row]), 3),
        fixed(float(points.demonstrated_m_s[row]), 3),
        fixed(bound, 3),
        str(points.verdict[row]),
        str(points.basis[row]) or NOTHING,
        stopper(stop) if stop.limit else NOTHING,
    )


def _faces(points: Points, row: int) -> str:
    """The face normal, and where it differs the direction of the strike."""
    normal, direction = (face_text(vector[row]) for vector in (points.normal, points.direction))
    return normal if normal == direction else f"{normal} along {direction}"


def _strikes(f: dict[str, Any]) -> str:
    return (
        f"{f['strikes']}: {f['deliverable']} deliverable ({percent(f['deliverable_share'])} %), "
        f"{f['not_deliverable']} not ({percent(f['not_deliverable_share'])} %), "
        f"{f['undecided']} undecided ({percent(f['undecided_share'])} %)"
    )


def _reach(f: dict[str, Any]) -> str:
    if not f["unreachable"]:
        return f"{percent(f['deliverable_of_reachable_share'])} % deliverable; none is unreachable"
    away = (
        f"{f['unreachable']} unreachable: {f['unreachable_proved']} proved by the links' length, "
        f"{f['unreachable_searched']} by search"
    )
    share = f["deliverable_of_reachable_share"]
    return f"none; {away}" if share is None else f"{percent(share)} % of them deliverable; {away}"


def _speeds(share: dict[str, float], kind: str) -> str:
    return f"{number(share['demonstrated_m_s'])} m/s demonstrated, {_bound(share['bound_m_s'], kind)}"


def _bound(speed_m_s: float, kind: str) -> str:
    """An upper bound with which of the two it is."""
    return f"upper bound ({kind}) {number(speed_m_s)} m/s" if math.isfinite(speed_m_s) else "no upper bound"


def _region(region: dict[str, float], shape: tuple[int, int, int, int] | None) -> str:
    whole, unit = f"{number(region['whole'])} {region['unit']}", region["unit"]
    if shape is None or shape[3] == 1:
        return f"{number(region['every_face'])} of {whole}"
    some = f"{number(region['some_face'])} {unit}"
    return f"{number(region['every_face'])} of {whole} for every face, {some} for one at least"
