"""What stands under each figure of a survey, and what is read out to who can't see it."""

from __future__ import annotations

from reach.report.caption import Caption
from reach.report.survey.document import figures
from reach.report.survey.slices import Slices
from reach.report.wording import number, percent
from reach.result import SurveyResult


def of_slices(cut: Slices, image: bool) -> Caption:
    """Caption of the slices through the box; `image` where cells are drawn as one image a panel."""
    axis = "xyz"[cut.through]
    shown = (
        f"{len(cut.places_m)} of {cut.of} slices across {axis}"
        if cut.of > 1
        else f"The box is flat along {axis}"
    )
    faces = f", {len(cut.faces)} of {cut.whole} faces" if cut.whole > 1 else ""
    text = (
        f"Speed demonstrated at each point, along the face normal: the brighter, the faster. {shown}{faces}; each cell "
        "is the part of the box nearest to its point. Slanted lines: not deliverable at the required speed; dots: "
        "undecided; blank with crosses: unreachable."
    )
    if image:
        text += " The cells are many, so each panel is one image; survey.csv has every point."
    return Caption("Speed through the box", text, "survey.csv has the speed of every point.")


def of_bounds(result: SurveyResult, left_out: int, away: int) -> Caption:
    """Caption of demonstrated speed against upper bound."""
    text = (
        "Each mark is a strike; on the diagonal the demonstrated speed meets its upper bound and nothing is left open. "
        "Above the level dashed line of its required speed a strike is deliverable, left of the upright one it is not, "
        "in between undecided. "
        "Marks that would cover each other are drawn once."
    )
    if away:
        text += f" Unreachable strikes, left out: {away}."
    if left_out:
        text += f" Strikes without an upper bound, left out: {left_out}."
    f = figures(result)
    bound = f[f"bound_{f['bound']}_median_m_s"]
    alt = f"Medians {number(f['demonstrated_median_m_s'])} and {number(bound)} m/s."
    return Caption("Demonstrated speed and upper bound", text, alt)


def of_share(result: SurveyResult) -> Caption:
    """Caption of the share of strikes at each speed."""
    text = (
        "The share of all strikes that reach a speed or more. Read it from the speed a task needs, or from the "
        "share it needs, marked for 95, 90 and 50 %. Between the two lines nothing is settled; unreachable strikes "
        "count as speed zero."
    )
    f = figures(result)
    told = "; ".join(
        f"{100 * s['strikes_share']:g} % at {number(s['demonstrated_m_s'])} m/s" for s in f["speed_for_share"]
    )
    return Caption("Share of the strikes deliverable at each speed", text, f"{told}.")


def of_box(result: SurveyResult, posture: bool) -> Caption:
    """Caption of arm and box; `posture` where one that strikes is drawn."""
    what = "The strikes" if result.evidence.shape is None else "The box"
    text = f"{what}, seen from the side and from above. A mark stands for all strikes that the view shows in its place."
    if posture:
        text += (
            " The arm is in one posture that strikes; the dotted circle is the farthest that the links let the strike "
            "point be from the first joint."
        )
    else:
        text += " No posture was found that strikes, so the arm is not drawn."
    f = figures(result)
    return Caption(
        "Arm and strikes", text, f"{percent(f['deliverable_share'])} % of the strikes are deliverable."
    )
