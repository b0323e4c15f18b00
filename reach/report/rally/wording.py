"""How the numbers of an envelope are put into words, the same for terminal and page."""

from __future__ import annotations

import math
from typing import Any

from reach.evidence.rallies import Centre, OffsetEdge, RallyPoints
from reach.report.rally import numbers
from reach.report.rally.document import figures
from reach.report.wording import between, degrees, limit_of, millimetres, milliseconds, number, percent
from reach.result import RallyResult

READING = (
    "A point is a ball that falls from an apex onto a place off the centre, in a direction, and is returned to the "
    "centre within the bounces allowed. It is deliverable where the arm strikes so and is ready for the next strike "
    "in time, in a motion that keeps every limit.",
    "Cycle time: the fastest motion found that keeps every limit, from one strike to the next. Margin: the flight less "
    "the latency less that.",
    "The edges lie between the points and were found by bisection: what is deliverable inside may have holes that lie "
    "between the points looked at.",
    "Steady bounce: with the paddle's acceleration at impact inside the window, a bounce that is off dies out by "
    "itself; outside it only feedback keeps the ball (Schaal, Atkeson & Sternad 1996).",
    "Drift: a face tilted by an angle θ sends the ball about 8hθ away at apex h, every bounce again.",
    "Basis: proved follows from the arm's lengths and limits alone; demonstrated is a motion that was found and "
    "checked; searched holds for the postures that were compared, and others may exist.",
)


def figure_rows(result: RallyResult) -> list[tuple[str, str]]:
    """Return the numbers that compare two cells, each with its name; no text where there is nothing to say."""
    f, evidence = figures(result), result.evidence
    return [
        ("points", _points(f)),
        (
            "without margins",
            f"{percent(f['deliverable_without_margins_share'])} % deliverable" if f["points"] else "",
        ),
        ("paddle at a strike", _paddle(f)),
        ("time left, where held", _margin(result)),
        ("returns from off-centre", _recovered(evidence.offsets)),
        ("flight", _flight(f)),
        ("uncertainty", uncertainty(result)),
        ("the centre may stand", standing(evidence.centres)),
        ("a hit's effective mass", _mass(evidence.effective_mass_kg)),
    ]


def place(points: RallyPoints, row: int) -> str:
    """Return which point it is, in short."""
    return (
        f"apex {millimetres(float(points.apex_m[row]))} mm, offset {millimetres(float(points.offset_m[row]))} mm, "
        f"bearing {degrees(float(points.bearing_rad[row]))}°"
    )


def uncertainty(result: RallyResult) -> str:
    """Return which share of the cases within the spreads is still deliverable."""
    evidence, f = result.evidence, figures(result)
    if evidence.nominal_only:
        return "nominal only: no spread stated"
    points = evidence.points
    row = numbers.lowest_row(points.feasible_share, numbers.held(points))
    if row is None:
        return "not known: no point is deliverable" if not f["deliverable"] else "not known"
    return (
        f"of the cases within the spreads {percent(f['feasible_share_least'])} % are still deliverable at least "
        f"(95 % interval {share_interval(points, row)}; {place(points, row)}), "
        f"median {percent(f['feasible_share_median'])} %"
    )


def share_interval(points: RallyPoints, row: int) -> str:
    """Return the interval of a point's share in %, without the sign."""
    return f"{percent(float(points.feasible_low[row]))} to {percent(float(points.feasible_high[row]))}"


def standing(centres: tuple[Centre, ...]) -> str:
    """Return where the centre may stand, in words; nothing without a grid."""
    best = numbers.best_centre(centres)
    if best is None:
        return ""
    full, some = numbers.full_centres(centres), sum(centre.deliverable > 0 for centre in centres)
    at = ", ".join(f"{x:.3f}" for x in best.position)
    word = "the first" if full else "the best"
    return (
        f"at {full} of {len(centres)} places every point is deliverable, at {some} some; {word}: ({at}) m with "
        f"{best.deliverable} of {best.points}"
    )


def bounces_meaning(result: RallyResult) -> str:
    """Return what the columns of the steady bounces say."""
    tilt = degrees(result.cell.accept.strike_tilt_error_rad)
    return (
        f"drift: shift of the next contact, a bounce, for the accepted tilt of {tilt}° (about 8hθ); left: offset "
        "still recovered at every bearing, less that drift and the accepted error of place"
    )


def bounded_by(limit: str, joint: str, unbounded: bool) -> str:
    """Return what bounds an edge, in words."""
    return "nothing, as far as looked" if unbounded else limit_of(limit, joint)


def _points(f: dict[str, Any]) -> str:
    if not f["points"]:
        return "none"
    return (
        f"{f['points']}: {f['deliverable']} deliverable ({percent(f['deliverable_share'])} %), "
        f"{f['not_deliverable']} not ({percent(f['not_deliverable_share'])} %), "
        f"{f['undecided']} undecided ({percent(f['undecided_share'])} %)"
    )


def _paddle(f: dict[str, Any]) -> str:
    if not math.isfinite(f["paddle_speed_most_m_s"]):
        return ""
    speeds = between(f["paddle_speed_least_m_s"], f["paddle_speed_most_m_s"])
    return f"{speeds} m/s along its normal, face tilted up to {number(f['face_tilt_most_deg'], 3)}°"


def _margin(result: RallyResult) -> str:
    points = result.evidence.points
    row = numbers.lowest_row(points.margin_s, numbers.held(points))
    if row is None:
        return ""
    latency = 0.0 if result.cell.rally is None else result.cell.rally.latency_s
    off = f", latency of {milliseconds(latency)} ms taken off" if latency else ""
    return (
        f"{milliseconds(float(points.margin_s[row]))} ms of {milliseconds(float(points.flight_s[row]))} ms of flight "
        f"at least ({place(points, row)}){off}"
    )


def _recovered(offsets: tuple[OffsetEdge, ...]) -> str:
    """The offset recovered at every bearing, at the apex where it is largest and where it is least."""
    best, worst = numbers.best_offset(offsets), numbers.smallest_offset(offsets)
    if best is None or worst is None:
        return ""
    if best.largest_m is None:
        return f"none: not even the centre is held at every bearing ({bounded_by(best.limit, best.joint, best.open)})"
    told = f"{_offset_told(best)}, at every bearing"
    return told if best == worst else f"{told}; least {_offset_told(worst)}"


def _offset_told(edge: OffsetEdge) -> str:
    sign = "≥ " if edge.open else ""
    largest = "none" if edge.largest_m is None else f"{sign}{millimetres(edge.largest_m)} mm"
    stop = bounded_by(edge.limit, edge.joint, edge.open)
    return f"{largest} at apex {millimetres(edge.apex_m)} mm (bearing {degrees(edge.bearing_rad)}°, bounded by {stop})"


def _flight(f: dict[str, Any]) -> str:
    parts = [name for name in ("drag", "lift") if f[name]]
    return f"with {' and '.join(parts)} of the air" if parts else "without drag and lift of the air"


def _mass(mass_kg: float) -> str:
    return f"{number(mass_kg, 3)} kg along the normal, joints free" if math.isfinite(mass_kg) else ""
