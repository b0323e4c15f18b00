"""report.html: one file that needs no network and no script."""

from __future__ import annotations

from reach.evidence.record import Reason, Use
from reach.report import needs
from reach.report.alike import once
from reach.report.cautions import cautions
from reach.report.document import tracking, versions
from reach.report.page import bullets, details, esc, page, paragraph, picture, section, table
from reach.report.pictures import pictures
from reach.report.wording import (
    NOTHING,
    all_notes,
    both_sides,
    demand_note,
    fixed,
    force_unit,
    number,
    owner,
    percent,
    remedy_line,
    solver_line,
    span,
    strike_cells,
    tilt_meaning,
    unknown_limits,
)
from reach.result import FollowResult
from reach.verdict import DELIVERABLE, NOT_DELIVERABLE, broken_limits


def write(result: FollowResult) -> str:
    """Return the report as one HTML page."""
    deciding = [reason for reason in result.reasons if reason.decides]
    others = [reason for reason in result.reasons if not reason.decides]
    return page(
        f"{result.verdict.verdict}: {result.cell.path}",
        (
            f"<h1>Can this arm deliver these paddle commands? {esc(result.cell.path)}</h1>",
            _verdict(result),
            section("What decides", _reasons(deciding)),
            section("What would help", _remedies(result)),
            section("What the limits would have to be", _needs(result)),
            section("Strikes", _strikes(result), paragraph(tilt_meaning(result) or "")),
            section("Figures", *_pictures(result)),
            section("Limits", _limits(result), paragraph(demand_note(result)), _unknown(result)),
            section("What else fell short", _reasons(others)),
            section("The motion", _motion(result)),
            section("How the log was read", paragraph(result.reading)),
            section("Not checked", bullets(result.evidence.not_checked)),
            section("Notes", _notes(result)),
            section("Inputs", table(("file", "SHA-256"), [(i.path, i.sha256) for i in result.cell.inputs])),
            section("Versions", table(("program", "version"), _versions())),
            section("Caution", f'<div class="caution">{bullets(cautions(result))}</div>'),
        ),
    )


def _verdict(result: FollowResult) -> str:
    verdict = result.verdict.verdict
    look = {DELIVERABLE: "good", NOT_DELIVERABLE: "bad"}.get(verdict, "open")
    lines = [result.verdict.sentence, f"Without margins: {result.without_margins}."]
    if result.without_pose_gain is not None:
        lines.append(f"Without pose feedback: {result.without_pose_gain}.")
    lines.append(f"Headroom: {result.headroom_text}")
    content = "".join(paragraph(line) for line in lines)
    return f'<div class="verdict {look}"><strong>{esc(verdict)}</strong>{content}</div>'


def _reasons(reasons: list[Reason]) -> str:
    header = ("what", "limit", "phase", "#when s", "#value", "#bound", "unit", "basis")
    rows = [
        (
            reason.text,
            f"{reason.limit} of {reason.joint}" if reason.joint else reason.limit,
            reason.phase or NOTHING,
            span(reason),
            number(reason.value),
            number(reason.bound),
            reason.unit,
            reason.basis,
        )
        for reason in reasons
    ]
    return table(header, rows)


def _remedies(result: FollowResult) -> str:
    return bullets((remedy_line(remedy) for remedy in result.remedies), "ol")


def _needs(result: FollowResult) -> str:
    sought, beyond = needs.split(result)
    header = [f"#{name}" if name in ("now", "necessary", "sufficient") else name for name in needs.HEADER]
    found = table(header, needs.rows(result, sought))
    if found:
        found += paragraph(f"{needs.meaning(sought)}.") + bullets(needs.remarks(sought))
    return found + details(needs.not_searched(beyond), bullets(need.text for need in beyond))


def _notes(result: FollowResult) -> str:
    """The notes, those that are alike told once, and all of them behind a click where that leaves some out."""
    notes = all_notes(result)
    short = once(notes, [joint.name for joint in result.cell.arm.joints])
    return bullets(short) + (
        details(f"all {len(notes)} notes", bullets(notes)) if len(short) < len(notes) else ""
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


def _pictures(result: FollowResult) -> list[str]:
    drawn = pictures(result)
    if not drawn:
        return [paragraph("There is no motion to draw.")]
    return [picture(*drawing.caption, drawing.svg) for drawing in drawn]


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
        owner(use),
        both_sides(use.lo, use.hi),
        both_sides(use.kept_lo, use.kept_hi),
        use.unit,
        number(use.peak),
        percent(use.utilisation) + (" broken" if broken else ""),
        fixed(use.time_s, 3),
        number(use.demand_peak),
        use.source,
    )


def _unknown(result: FollowResult) -> str:
    found = unknown_limits(result)
    if not found:
        return ""
    texts = (f"{kind}: {joints}" for kind, joints in found)
    return paragraph("Unknown, because nobody stated them:") + bullets(texts)


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


def _versions() -> list[tuple[str, str]]:
    return [(name, version or "not installed") for name, version in versions().items()]
