"""What stands under each figure of an envelope, and what is read out to who can't see it."""

from __future__ import annotations

from reach.evidence.rallies import Shown
from reach.report.caption import Caption
from reach.report.rally import numbers
from reach.report.rally.document import figures
from reach.report.wording import degrees, millimetres, milliseconds, number, percent, plural
from reach.result import RallyResult


def of_envelope(result: RallyResult, shown: int, of: int) -> Caption:
    """Caption of apexes against offsets, a panel a bearing."""
    text = (
        "Each mark is a point that was looked at. The lines are edges found by bisection: the lowest and the highest "
        "apex at each offset, and the largest offset at each apex; above each panel stands what makes them. A triangle "
        "is where it was looked no further."
    )
    if shown < of:
        text += f" {shown} of {of} bearings; verdict.json has every edge."
    f = figures(result)
    return Caption(
        "The envelope", text, f"{percent(f['deliverable_share'])} % of the points are deliverable."
    )


def of_offsets(result: RallyResult, shown: int, of: int) -> Caption:
    """Caption of the recoverable offset by bearing."""
    text = (
        "How far off the centre a ball may come down and still be returned to it, by the direction in which it comes "
        "down (from above, 0° along +x); right, the least over the bearings, with what bounds it. Zero: not even the "
        "centre is held. A triangle is where it was looked no further."
    )
    if shown < of:
        text += f" {shown} of {of} apexes at the left."
    best = numbers.best_offset(result.evidence.offsets)
    alt = "None." if best is None else f"At most {millimetres(best.largest_m)} mm at every bearing."
    return Caption("Recoverable offset", text, alt)


def of_times(result: RallyResult, unknown: int) -> Caption:
    """Caption of cycle time against flight time and of paddle speed against its bound."""
    text = (
        "Left: the fastest cycle found against the flight it has to fit into; below the dashed line it is in time. The "
        "short dashes, of points not held, are the time that no motion undercuts in the postures compared. Right: the "
        "paddle speed that each point needs, as a share of what no motion passes."
    )
    if unknown:
        text += f" {plural(unknown, 'point')} without a cycle time, left out at the left."
    margin = figures(result)["margin_least_s"]
    return Caption("Time and speed", text, f"Least time left: {milliseconds(margin)} ms.")


def of_centres(result: RallyResult, levels: int, of: int) -> Caption:
    """Caption of where the centre may stand."""
    text = (
        "How many of the points asked for are deliverable with the centre there, seen from above, a panel a height: "
        "the brighter, the more. The cross is the cell's own centre."
    )
    if levels < of:
        text += f" {levels} of {of} heights; verdict.json has every place."
    f = figures(result)
    return Caption(
        "Where the centre may stand",
        text,
        f"Every point at {f['centres_with_all']} of {f['centres']} places.",
    )


def of_cycle(shown: Shown) -> Caption:
    """Caption of one cycle."""
    text = (
        f"One demonstrated cycle: a ball from apex {millimetres(shown.apex_m)} mm that comes down "
        f"{millimetres(shown.offset_m)} mm off the centre, at {degrees(shown.bearing_rad)}°. Left: postures at equal "
        "times, the first light, the last dark, seen square to the plane through the base and the strike point; the "
        "short bars are the face. Right: heights over time."
    )
    return Caption("One cycle", text, f"{plural(len(shown.contact_s), 'contact')}.")


def of_windows(result: RallyResult) -> Caption:
    """Caption of the accelerations at impact."""
    text = (
        "Paddle acceleration at impact of the steady bounce. Inside the wide bar a bounce that is off dies out by "
        "itself, in its dark part fastest; right of zero only feedback keeps the ball. The thick line is what the "
        "limits allow by braking, up to the motion demonstrated, with what the accepted speed error tolerates."
    )
    stable = sum(numbers.stable_by_itself(bounce) and bounce.held for bounce in result.evidence.bounces)
    count = len(result.evidence.bounces)
    alt = f"{number(stable)} of {plural(count, 'apex').replace('apexs', 'apexes')} stable by itself."
    return Caption("Acceleration at impact", text, alt)
