"""The terminal summary: plain text, no line wider than 100 columns."""

from __future__ import annotations

import math

from reach.evidence.record import Reason, Use
from reach.report import needs
from reach.report.alike import alike, with_count
from reach.report.cautions import cautions
from reach.report.columns import shorten, table, wrap
from reach.report.document import tracking
from reach.report.wording import (
    NOTHING,
    all_notes,
    demand_note,
    fixed,
    force_unit,
    number,
    owner,
    percent,
    plain,
    remedy_line,
    solver_line,
    stated,
    strike_cells,
    tilt_meaning,
    unknown_limits,
)
from reach.result import FollowResult

FIRST_STRIKES = 3  # delivered strikes shown
MISSED_STRIKES = 20  # missed strikes shown
OTHER_REASONS = 5
WORST_LIMITS = 8
NOTE_LINES = 8
NAME_COLUMNS = 24

Section = tuple[str, list[str]]


def write(result: FollowResult) -> str:
    """Return the summary; the verdict's sentence comes first."""
    lines = wrap(plain(result.verdict.sentence))
    for heading, content in (
        ("", _standing(result)),
        ("Strikes", _strikes(result)),
        ("What decides", _reasons([reason for reason in result.reasons if reason.decides])),
        ("What else fell short", _other_reasons(result)),
        ("Limits used most", _limits(result)),
        ("Limits unknown", _unknown(result)),
        ("What the limits would have to be", _needs(result)),
        ("What would help", _remedies(result)),
        ("The motion", _motion(result)),
        ("How the log was read", _bullets([result.reading])),
        ("Notes", _notes(result)),
        ("Caution", _bullets(cautions(result))),
    ):
        if content:
            lines += ["", *([heading] if heading else []), *content]
    return "\n".join(lines) + "\n"


def _standing(result: FollowResult) -> list[str]:
    lines = wrap(f"without margins: {result.without_margins}", rest="  ")
    if result.without_pose_gain is not None:
        lines += wrap(f"without pose feedback: {result.without_pose_gain}", rest="  ")
    return lines + wrap(f"headroom: {plain(result.headroom_text)}", rest="  ")


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


def _reasons(reasons: list[Reason]) -> list[str]:
    return _bullets([reason.text for reason in reasons])


def _other_reasons(result: FollowResult) -> list[str]:
    others = [reason for reason in result.reasons if not reason.decides]
    left = len(others) - OTHER_REASONS
    return _reasons(others[:OTHER_REASONS]) + ([f"  … and {left} more in verdict.json"] if left > 0 else [])


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
        shorten(owner(use), NAME_COLUMNS),
        number(use.peak),
        stated(use),
        percent(use.utilisation),
        fixed(use.time_s, 3),
        number(use.demand_peak),
        use.unit,
    )


def _unknown(result: FollowResult) -> list[str]:
    return _bullets([f"{limit}: {joints}" for limit, joints in unknown_limits(result)])


def _needs(result: FollowResult) -> list[str]:
    sought, beyond = needs.split(result)
    lines = []
    if sought:
        cells = [
            (limit, shorten(joint, NAME_COLUMNS), *rest) for limit, joint, *rest in needs.rows(result, sought)
        ]
        lines = table(needs.HEADER, cells, left=2) + wrap(needs.meaning(sought), "  ")
    return lines + _bullets([*needs.remarks(sought), needs.not_searched(beyond)])


def _notes(result: FollowResult) -> list[str]:
    """As many notes as a few lines hold, those that are alike told once."""
    notes = all_notes(result)
    lines: list[str] = []
    told = 0
    for note, count in alike(notes, [joint.name for joint in result.cell.arm.joints]):
        more = _bullets([with_count(note, count)])
        if lines and len(lines) + len(more) > NOTE_LINES:
            break
        lines += more
        told += count
    return lines + ([f"  … and {len(notes) - told} more in verdict.json"] if told < len(notes) else [])


def _remedies(result: FollowResult) -> list[str]:
    lines = []
    for place, remedy in enumerate(result.remedies, start=1):
        lines += wrap(plain(remedy_line(remedy)), f"  {place}. ")
    return lines


def _motion(result: FollowResult) -> list[str]:
    evidence = result.evidence
    if evidence.track is None:
        lines = _bullets(["There is no motion.", *(reason.text for reason in evidence.blocked)])
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


def _bullets(texts: list[str] | tuple[str, ...]) -> list[str]:
    return [line for text in texts if text for line in wrap(plain(text), "  - ")]
