"""The terminal summary: plain text, no line wider than 100 columns."""

from __future__ import annotations

import math

from reach.evidence.record import Use
from reach.report import summary
from reach.report.columns import shorten, table, wrap
from reach.report.follow.document import cautions, tracking
from reach.report.follow.wording import demand_note, solver_line, stated, strike_cells, tilt_meaning
from reach.report.summary import NAME_COLUMNS, bullets
from reach.report.wording import NOTHING, fixed, force_unit, number, owner, percent, plain
from reach.result import FollowResult

FIRST_STRIKES = 3  # delivered strikes shown
MISSED_STRIKES = 20  # missed strikes shown
WORST_LIMITS = 8


def write(result: FollowResult) -> str:
    """Return the summary; the verdict's sentence comes first."""
    unknown, bare = result.evidence.unknown, result.without_pose_gain
    return summary.written(
        result,
        (
            ("", summary.standing(result, [] if bare is None else [f"without pose feedback: {bare}"])),
            ("Strikes", _strikes(result)),
            summary.deciding(result),
            summary.other_reasons(result),
            ("Limits used most", _limits(result)),
            summary.unknown_list(unknown),
            summary.needed(result, unknown),
            summary.remedies(result),
            ("The motion", _motion(result)),
            ("How the log was read", bullets([result.reading])),
            summary.notes(result),
            ("Caution", bullets(cautions(result))),
        ),
    )


def _strikes(result: FollowResult) -> list[str]:
    strikes = result.evidence.strikes
    if not strikes:
        return []
    missed = [strike for strike in strikes if not strike.delivered]
    hit = [strike for strike in strikes if strike.delivered]
    # Near the whole list, leaving a few out saves nothing.
    shown = hit if len(hit) <= FIRST_STRIKES + 1 else hit[:FIRST_STRIKES]
    listed = sorted([*shown, *missed[:MISSED_STRIKES]], key=lambda strike: strike.time_s)
    header = ("at s", "commanded", "delivered", "worst %", "lateral", "tilt °", "off mm", "next mm", "result")
    lines = table(header, [strike_cells(strike) for strike in listed])
    for count, word in ((len(missed) - MISSED_STRIKES, "missed"), (len(hit) - len(shown), "delivered")):
        if count > 0:
            lines.append(f"  … and {count} more {word}")
    lines += wrap(
        "speeds in m/s; worst: delivered over commanded where they differ most in the window; next: how far "
        "the tilt error moves the next contact",
        "  ",
    )
    if any(not strike.marked for strike in strikes):
        lines += wrap("contacts guessed from the command's peaks", "  ")
    meaning = tilt_meaning(result)
    return lines + (wrap(meaning, "  ") if meaning else [])


def _limits(result: FollowResult) -> list[str]:
    used = [
        (use.utilisation, use)
        for use in result.evidence.uses
        if use.utilisation is not None and not math.isnan(use.utilisation)
    ]
    worst = [use for _, use in sorted(used, key=lambda pair: -pair[0])[:WORST_LIMITS]]
    if not worst:
        return []
    header = ("limit", "joint", "peak", "limit", "%", "at s", "asked for", "unit")
    note = demand_note(result)
    return table(header, [_use(use) for use in worst], left=2) + (wrap(note, "  ") if note else [])


def _use(use: Use) -> tuple[str, ...]:
    return (
        use.limit,
        shorten(owner(use.joint), NAME_COLUMNS),
        number(use.peak),
        stated(use),
        percent(use.utilisation),
        fixed(use.time_s, 3),
        number(use.demand_peak),
        use.unit,
    )


def _motion(result: FollowResult) -> list[str]:
    evidence = result.evidence
    if evidence.track is None:
        lines = bullets(["There is no motion.", *(reason.text for reason in evidence.blocked)])
    else:
        errors = tracking(evidence.track)
        tilt = errors["tilt_peak_deg"]
        lines = wrap(
            f"tracking error: velocity {number(errors['velocity_rms_m_s'])} m/s RMS, "
            f"{number(errors['velocity_peak_m_s'])} m/s peak; "
            f"position {_millimetres(errors['position_peak_m'])} mm; tilt {fixed(tilt, 2)}°",
            "  ",
            "    ",
        )
    if evidence.base_load is not None:
        load = evidence.base_load
        lines += wrap(
            f"peak load on the stand, of the moving part: {number(load.force_peak_n)} N, "
            f"{number(load.moment_peak_nm)} N·m about the base origin",
            "  ",
            "    ",
        )
    if evidence.rms_torque is not None:
        values = zip(result.cell.arm.joints, evidence.rms_torque, strict=True)
        each = (f"{shorten(plain(j.name), NAME_COLUMNS)} {number(x, 3)} {force_unit(j)}" for j, x in values)
        lines += wrap(f"RMS torque: {', '.join(each)}", "  ", "    ")
    return lines + wrap(f"solver: {solver_line(result)}", "  ", "    ")


def _millimetres(value_m: float | None) -> str:
    return NOTHING if value_m is None else number(1000 * value_m)
