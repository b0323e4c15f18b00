"""report.html: one file that needs no network and no script."""

from __future__ import annotations

from reach.evidence.record import Use
from reach.report import sections
from reach.report.follow.document import cautions, tracking
from reach.report.follow.pictures import pictures
from reach.report.follow.wording import both_sides, demand_note, solver_line, strike_cells, tilt_meaning
from reach.report.page import bullets, page, paragraph, section, table
from reach.report.wording import fixed, force_unit, number, owner, percent
from reach.result import FollowResult
from reach.verdict import broken_limits


def write(result: FollowResult) -> str:
    """Return the report as one HTML page."""
    unknown, bare = result.evidence.unknown, result.without_pose_gain
    return page(
        f"{result.verdict.verdict}: {result.cell.path}",
        (
            sections.heading("Can this arm deliver these paddle commands?", result),
            sections.verdict_box(result, [] if bare is None else [f"Without pose feedback: {bare}."]),
            sections.deciding(result),
            sections.advice(result, unknown),
            section("Strikes", _strikes(result), paragraph(tilt_meaning(result) or "")),
            sections.figures(pictures(result), "There is no motion to draw."),
            section(
                "Limits", _limits(result), paragraph(demand_note(result)), sections.unknown_list(unknown)
            ),
            sections.other_reasons(result),
            section("The motion", _motion(result)),
            section("How the log was read", paragraph(result.reading)),
            sections.foot(result, cautions(result)),
        ),
    )


def _strikes(result: FollowResult) -> str:
    strikes = result.evidence.strikes
    header = (
        "#at s",
        "#commanded m/s",
        "#delivered m/s",
        "#worst in window %",
        "#lateral m/s",
        "#tilt off °",
        "#position off mm",
        "#next contact off mm",
        "result",
    )
    missed = [not strike.delivered for strike in strikes]
    guessed = any(not strike.marked for strike in strikes)
    source = paragraph("The contacts are guessed from the command's peaks.") if guessed else ""
    return table(header, [strike_cells(strike) for strike in strikes], missed) + source


def _limits(result: FollowResult) -> str:
    header = (
        "limit",
        "joint",
        "#stated",
        "#planned with",
        "unit",
        "#peak",
        "#use %",
        "#at s",
        "#asked for",
        "stated in",
    )
    uses = result.evidence.uses
    broken = broken_limits(result.evidence)
    return table(header, [_use(use, use in broken) for use in uses], [use in broken for use in uses])


def _use(use: Use, broken: bool) -> tuple[str, ...]:
    return (
        use.limit,
        owner(use.joint),
        both_sides(use.lo, use.hi),
        both_sides(use.kept_lo, use.kept_hi),
        use.unit,
        number(use.peak),
        percent(use.utilisation) + (" broken" if broken else ""),
        fixed(use.time_s, 3),
        number(use.demand_peak),
        use.source,
    )


def _motion(result: FollowResult) -> str:
    evidence = result.evidence
    if evidence.track is None:
        return paragraph("There is no motion.") + bullets(reason.text for reason in evidence.blocked)
    errors = tracking(evidence.track)
    position = errors["position_peak_m"]
    rows = [
        ("velocity error, RMS", number(errors["velocity_rms_m_s"]), "m/s"),
        ("velocity error, peak", number(errors["velocity_peak_m_s"]), "m/s"),
        ("position error, peak", number(None if position is None else 1000 * position), "mm"),
        ("tilt error, peak", number(errors["tilt_peak_deg"]), "°"),
    ]
    load = evidence.base_load
    if load is not None:
        rows += [
            ("peak force of the moving part on the stand", number(load.force_peak_n), "N"),
            ("peak moment on the stand, about the base origin", number(load.moment_peak_nm), "N·m"),
        ]
    if evidence.rms_torque is not None:
        rows += [
            (f"RMS torque of {joint.name}", number(value), force_unit(joint))
            for joint, value in zip(result.cell.arm.joints, evidence.rms_torque, strict=True)
        ]
    return table(("what", "#value", "unit"), rows) + paragraph(f"Solver: {solver_line(result)}.")
