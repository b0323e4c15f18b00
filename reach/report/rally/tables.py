"""The rows of an envelope's tables, the same for terminal and page."""

from __future__ import annotations

import math

import numpy as np

from reach.evidence.rallies import ApexEdge, Bounce, Centre, OffsetEdge, RallyPoints
from reach.report.rally import numbers
from reach.report.rally.numbers import ApexRow, Range
from reach.report.rally.wording import bounded_by, share_interval
from reach.report.wording import NOTHING, degrees, limit_of, millimetres, milliseconds, number, percent, plain
from reach.result import RallyResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE

Row = tuple[str, ...]

RANGES_HEADER = (
    *("#offset mm", "#lowest mm", "#at bearing °", "bounded by"),
    *("#highest mm", "#at bearing °", "bounded by"),
)
APEXES_HEADER = (
    *("#apex mm", "#points held", "#flight ms", "#cycle ms", "#margin ms"),
    *("#recovers from mm", "#at bearing °", "bounded by"),
)
BOUNCES_HEADER = (
    *("#apex mm", "#paddle m/s", "#acceleration m/s²", "#stable by itself m/s²", "#drift mm", "#left mm"),
    "stability",
)
MORE_BOUNCES_HEADER = (
    *("#apex mm", "#flight ms", "#restitution", "#ball meets face m/s", "#settles fastest m/s²"),
    *("#least m/s²", "#tolerated m/s²", "#drift mm/°", "#apex error mm", "#face left mm"),
)
TOLERANCES_HEADER = ("what", "#median", "#least", "unit")
EDGES_HEADER = ("#offset mm", "#bearing °", "#lowest mm", "bounded by", "#highest mm", "bounded by")
OFFSETS_HEADER = ("#apex mm", "#bearing °", "#largest mm", "bounded by")
CENTRES_HEADER = (
    "#x m",
    "#y m",
    "#z m",
    "#deliverable",
    "#undecided",
    "#of",
    "apexes at the centre mm",
    "bounded by",
)
HITS_HEADER = ("joint", "#velocity jump, free", "unit", "#impulse, locked", "unit")
POINTS_HEADER = (
    *("#apex mm", "#offset mm", "#bearing °", "#paddle m/s", "#margin ms", "verdict", "basis"),
    *("bounded by", "reason"),
)
SHARES_HEADER = ("#apex mm", "#offset mm", "#bearing °", "#share %", "#interval %")
BEARINGS = 4  # without any apex that are named
UNITS = {"time": "ms", "angle": "°", "length": "mm", "number": ""}


def range_row(found: Range) -> Row:
    """Return the cells under RANGES_HEADER."""
    offset = millimetres(found.offset_m)
    if found.low is None or found.high is None:
        where, stop = _empty(found.empty)
        return offset, "none", where, stop, "none", where, NOTHING
    low, high = found.low, found.high
    crossed = "; none held at all bearings" if found.crossed else ""
    return (
        offset,
        _edge(low.low_m, low.low_open, "≤"),
        degrees(low.bearing_rad),
        bounded_by(low.low_limit, low.low_joint, low.low_open),
        _edge(high.high_m, high.high_open, "≥"),
        degrees(high.bearing_rad),
        bounded_by(high.high_limit, high.high_joint, high.high_open) + crossed,
    )


def apex_row(points: RallyPoints, found: ApexRow) -> Row:
    """Return the cells under APEXES_HEADER."""
    row, edge = found.row, found.offset
    return (
        millimetres(found.apex_m),
        f"{found.deliverable}/{found.points}",
        milliseconds(found.flight_s),
        NOTHING if row is None else milliseconds(float(points.cycle_s[row])),
        NOTHING if row is None else milliseconds(float(points.margin_s[row])),
        *((NOTHING, NOTHING, NOTHING) if edge is None else _offset(edge)),
    )


def stability(bounce: Bounce) -> str:
    """Return whether the steady bounce needs feedback, in words."""
    if not bounce.held:
        return "cycle not held"
    if numbers.stable_by_itself(bounce):
        return "by itself"
    if numbers.could_be_stable(bounce):
        return "feedback; braking possible"
    return "feedback alone"


def bounce_row(bounce: Bounce) -> Row:
    """Return the cells under BOUNCES_HEADER."""
    return (
        millimetres(bounce.apex_m),
        number(bounce.speed_m_s, 3),
        number(bounce.impact_m_s2, 3),
        _window(bounce.window_m_s2),
        millimetres(bounce.tilt_drift_m),
        millimetres(bounce.offset_left_m),
        stability(bounce),
    )


def more_bounce_row(bounce: Bounce) -> Row:
    """Return the cells under MORE_BOUNCES_HEADER."""
    return (
        millimetres(bounce.apex_m),
        milliseconds(bounce.flight_s),
        number(bounce.restitution, 3),
        number(bounce.approach_m_s, 3),
        _window(bounce.fastest_m_s2),
        number(bounce.least_m_s2, 3),
        _tolerated(bounce.tolerated_m_s2),
        millimetres(bounce.tilt_drift_m_per_deg),
        millimetres(bounce.place_apex_error_m),
        millimetres(bounce.face_left_m),
    )


def tolerance_rows(points: RallyPoints) -> list[Row]:
    """Return the cells under TOLERANCES_HEADER, none where no such error was looked at."""
    rows = []
    for field, name, kind in numbers.TOLERANCES:
        values = numbers.borne(points, field)
        if any(math.isfinite(value) for value in values):
            rows.append((name, *(_in_unit(value, kind) for value in values), UNITS[kind]))
    return rows


def edge_row(edge: ApexEdge) -> Row:
    """Return the cells under EDGES_HEADER."""
    return (
        millimetres(edge.offset_m),
        degrees(edge.bearing_rad),
        _edge(edge.low_m, edge.low_open, "≤"),
        bounded_by(edge.low_limit, edge.low_joint, edge.low_open),
        _edge(edge.high_m, edge.high_open, "≥"),
        bounded_by(edge.high_limit, edge.high_joint, edge.high_open),
    )


def offset_row(edge: OffsetEdge) -> Row:
    """Return the cells under OFFSETS_HEADER."""
    largest, bearing, stop = _offset(edge)
    return millimetres(edge.apex_m), bearing, largest, stop


def centre_row(centre: Centre) -> Row:
    """Return the cells under CENTRES_HEADER."""
    return (
        *(f"{x + 0.0:.3f}" for x in centre.position),
        *(str(count) for count in (centre.deliverable, centre.undecided, centre.points)),
        ", ".join(millimetres(apex) for apex in centre.apexes_m) or "none",
        limit_of(centre.limit, centre.joint),
    )


def hit_rows(result: RallyResult) -> list[Row]:
    """Return the cells under HITS_HEADER for the hardest hit at the centre; none where it is not known."""
    evidence = result.evidence
    if not np.isfinite(evidence.velocity_jump).any() and not np.isfinite(evidence.joint_impulse).any():
        return []
    return [
        (
            plain(joint.name),
            number(float(jump), 3),
            "m/s" if joint.sliding else "rad/s",
            number(float(impulse), 3),
            "N·s" if joint.sliding else "N·m·s",
        )
        for joint, jump, impulse in zip(
            result.cell.arm.joints, evidence.velocity_jump, evidence.joint_impulse, strict=True
        )
    ]


def point_rows(points: RallyPoints, most: int) -> list[Row]:
    """Return the cells under POINTS_HEADER for so many points, those not deliverable first."""
    rank = np.select([points.verdict == NOT_DELIVERABLE, points.verdict == DELIVERABLE], [0, 2], 1)
    chosen = np.argsort(rank, kind="stable")[:most]
    return [
        (
            *_where(points, k),
            number(float(points.paddle_speed_m_s[k]), 3),
            milliseconds(float(points.margin_s[k])),
            str(points.verdict[k]),
            str(points.basis[k]) or NOTHING,
            limit_of(str(points.limit[k]), str(points.joint[k])),
            points.reason[k],
        )
        for k in np.sort(chosen).tolist()
    ]


def share_rows(points: RallyPoints, most: int) -> list[Row]:
    """Return the cells under SHARES_HEADER for so many points, the least share first."""
    rows = np.flatnonzero(np.isfinite(points.feasible_share))
    chosen = rows[np.argsort(points.feasible_share[rows], kind="stable")][:most]
    return [
        (*_where(points, k), percent(float(points.feasible_share[k])), share_interval(points, k))
        for k in chosen.tolist()
    ]


def _where(points: RallyPoints, row: int) -> Row:
    return (
        millimetres(float(points.apex_m[row])),
        millimetres(float(points.offset_m[row])),
        degrees(float(points.bearing_rad[row])),
    )


def _edge(value_m: float | None, unbounded: bool, sign: str) -> str:
    """An edge in mm, with a sign where it was looked no further."""
    if value_m is None:
        return "none"
    return f"{sign} {millimetres(value_m)}" if unbounded else millimetres(value_m)


def _offset(edge: OffsetEdge) -> tuple[str, str, str]:
    """The largest offset, its bearing and what bounds it."""
    return (
        _edge(edge.largest_m, edge.open, "≥"),
        degrees(edge.bearing_rad),
        bounded_by(edge.limit, edge.joint, edge.open),
    )


def _empty(edges: tuple[ApexEdge, ...]) -> tuple[str, str]:
    """At which bearings no apex is held, and what bounds the first of them."""
    where = ", ".join(degrees(edge.bearing_rad) for edge in edges[:BEARINGS])
    first = edges[0]
    bound = (first.low_limit, first.low_joint) if first.low_limit else (first.high_limit, first.high_joint)
    return where + (" …" if len(edges) > BEARINGS else ""), limit_of(*bound)


def _in_unit(value: float, kind: str) -> str:
    put = {"time": milliseconds, "angle": degrees, "length": millimetres}.get(kind)
    return number(value, 3) if put is None else put(value)


def _tolerated(size: float) -> str:
    """An acceleration either way; any where the strike window is an instant."""
    return "any" if math.isinf(size) else f"±{number(size, 3)}" if math.isfinite(size) else NOTHING


def _window(window: tuple[float, float]) -> str:
    return " to ".join(number(x, 3) for x in window) if all(map(math.isfinite, window)) else NOTHING
