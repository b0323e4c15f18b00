"""A survey decided anew from its files: every stroke, both bounds, every proof, and the verdict by the share."""

from __future__ import annotations

import math
from collections.abc import Callable

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.bounds import FACE_RAD, WAYS, bound_item, reach_item, speed_item
from reach.recheck.arm.chain import Array
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.limits import KINDS, TOOL, motion_items
from reach.recheck.arm.trace import FINE, Trace
from reach.recheck.demands import check_demands
from reach.recheck.shares import DELIVERABLE, NOT_DELIVERABLE, UNDECIDED, claimed, word_of
from reach.recheck.stored import Stored, largest
from reach.recheck.survey.strikes import Strikes, own_way, strikes_item
from reach.recheck.survey.swing import POINTS, stroke
from reach.recheck.turns import between

DEMONSTRATED, PROVED, SEARCHED = "demonstrated", "proved", "searched"
REACH, DUTY = "reach", "duty"
EVERY = 100  # strikes between two lines of progress


def items(stored: Stored, ground: Ground, progress: Callable[[str], None]) -> list[Item]:
    """Every strike, one after the other, and the whole.

    Raises
    ------
    BadFolder
        Where what is stored can't be a survey's.
    """
    check_demands(stored)
    strikes = Strikes.of(stored, len(ground.names))
    unknown = unknown_required(ground)
    with np.errstate(all="ignore"):
        found, words = [strikes_item(stored, strikes)], []
        for row in range(len(strikes)):
            if row and row % EVERY == 0:
                progress(f"recheck: strike {row} of {len(strikes)}")
            found += strike_items(stored, ground, strikes, row)
            word = verdict_of(stored, strikes, row, bool(unknown))
            found.append(_verdict_item(strikes, row, word))
            words.append(word)
    return [*found, _whole(stored, ground, words, strikes)]


def notes(stored: Stored) -> list[str]:
    """What rests on a search and can't be decided anew."""
    verdict, basis = (stored.array(POINTS, name, (None,), "U") for name in ("verdict", "basis"))
    refused = verdict == NOT_DELIVERABLE
    count = int((refused & (basis[: len(verdict)] == SEARCHED)).sum())
    if not count:
        return []
    told = f"{count} of {int(refused.sum())} refusals rest on a search: no posture among those that were compared"
    return [f"{told} delivers the strike, and others are not stored"]


def strike_items(stored: Stored, ground: Ground, strikes: Strikes, row: int) -> list[Item]:
    """The items of one strike but for its verdict: its stroke, its bounds, its proof; none where it has nothing."""
    where, found = f"strike {row + 1}", []
    if strikes.text(row, "stroke"):
        trace, checks = stroke(
            stored,
            ground,
            strikes.pieces,
            row,
            strikes.text(row, "stroke"),
            strikes.columns["q"][row],
            strikes.columns["tangent"][row],
        )
        found.append(Item("motion", where, (*checks, *_motion_checks(stored, ground, strikes, row, trace))))
        found += motion_items(ground, where, trace, duty=False)
    if not all(math.isnan(strikes.bound(row, way)) for way in WAYS):
        proofs = {
            way: (
                strikes.columns[f"q_{way}"][row],
                strikes.columns[f"dual_{way}"][row],
                strikes.bound(row, way),
            )
            for way in WAYS
        }
        disc = stored.at("paddle", "shape") == "disc"
        found.append(bound_item(ground, where, disc, strikes.where(row), proofs))
    if strikes.text(row, "basis") == PROVED:
        if strikes.text(row, "limit") == REACH:
            found.append(reach_item(ground, where, strikes.columns["position"][row]))
        else:
            required = float(strikes.columns["required_m_s"][row])
            found.append(speed_item(ground, where, strikes.where(row), required))
    return found


def verdict_of(stored: Stored, strikes: Strikes, row: int, lacking: bool) -> str:
    """The verdict that follows from both sides of a strike's speed.

    Parameters
    ----------
    lacking : whether a limit that has to be known is not
    """
    required = strikes.columns["required_m_s"][row]
    if strikes.text(row, "stroke") and strikes.columns["demonstrated_m_s"][row] >= required:
        return UNDECIDED if lacking else DELIVERABLE
    bound, basis = strikes.bound(row, own_way(stored)), strikes.text(row, "basis")
    refused = strikes.text(row, "limit") == REACH and basis in (PROVED, SEARCHED)
    if bound < required or (math.isnan(bound) and refused):
        return NOT_DELIVERABLE
    return UNDECIDED


def unknown_required(ground: Ground) -> list[str]:
    """Limit kinds that have to be known and are not, of every joint. One stroke is no cycle: duty never is."""
    lacking = [kind for kind in KINDS if kind == DUTY or np.isnan(ground.limits.hi[kind]).any()]
    if math.isinf(ground.tool_m_s):
        lacking.append(TOOL)
    return [kind for kind in ground.accept["require"] if kind in lacking]


def _motion_checks(stored: Stored, ground: Ground, strikes: Strikes, row: int, trace: Trace) -> list[Check]:
    """What a stroke does at the strike and around it, and how far it goes."""
    position, normal, direction = strikes.where(row)
    columns, at = strikes.columns, trace.strike
    assert at is not None
    speed = columns["demonstrated_m_s"][row] / (direction @ normal)
    seen = ground.chain.seen(trace.q, trace.v)
    faces, angular = seen.axes[:, :, 2], seen.angular[at]
    if stored.at("paddle", "shape") == "disc":  # it may spin about its normal
        angular = angular - (angular @ faces[at]) * faces[at]
    still = own_way(stored) == "still"
    past = columns["demonstrated_m_s"][row] - strikes.bound(row, own_way(stored))
    rates = trace.v[at] - speed * columns["tangent"][row]
    found = [
        Check("strike point", largest(seen.place[at] - position), allowed.PLACE_M, "m"),
        Check("face normal", float(between(faces[at : at + 1], normal[None])[0]), FACE_RAD, "rad"),
        Check("strike speed", largest(seen.linear[at] - speed * direction), allowed.STRIKE_M_S, "m/s"),
        Check("posture", largest(trace.q[at] - columns["q"][row]), allowed.TURN_RAD, "rad or m"),
        Check("joint speeds", largest(rates), allowed.RATE_RAD_S, "rad/s or m/s"),
        Check("turning", largest(angular) if still else 0.0, allowed.STRIKE_RAD_S, "rad/s"),
        Check("above the bound", float(np.maximum(past, 0.0)), allowed.SPEED_M_S, "m/s"),
    ]
    run_up = stored.at("survey", "run_up_m")
    if run_up is not None:
        steps = np.linalg.norm(np.diff(seen.place, axis=0), axis=1)
        over = max(float(steps[:at].sum()), float(steps[at:].sum())) - stored.number("survey", "run_up_m")
        found.append(Check("run-up", float(np.maximum(over, 0.0)), allowed.PLACE_M, "m"))
    return [*found, *_window_checks(stored, ground, trace, float(speed), normal, direction)]


def _window_checks(
    stored: Stored, ground: Ground, trace: Trace, speed: float, normal: Array, direction: Array
) -> list[Check]:
    """How far speed, direction and tilt pass what is accepted, over the window around the strike."""
    assert trace.strike is not None
    half = round(stored.number("accept", "strike_window_s") / 2 / ground.period_s * FINE)
    near = slice(max(trace.strike - half, 0), trace.strike + half + 1)
    seen = ground.chain.seen(trace.q[near], trace.v[near])
    error = seen.linear - speed * direction
    along = error @ normal
    aside = np.linalg.norm(error - along[:, None] * normal, axis=1)
    tilt = between(seen.axes[:, :, 2], np.broadcast_to(normal, seen.place.shape))
    share = stored.number("accept", "strike_speed_error_share") * speed * float(direction @ normal)
    return [
        Check(f"strike window, {name}", float(np.maximum(largest(size) - most, 0.0)), rounding, unit)
        for name, size, most, rounding, unit in (
            ("speed", along, share, allowed.SPEED_M_S, "m/s"),
            ("aside", aside, stored.number("accept", "strike_lateral_m_s"), allowed.SPEED_M_S, "m/s"),
            ("tilt", tilt, stored.number("accept", "strike_tilt_error_rad"), allowed.TURN_RAD, "rad"),
        )
    ]


def _verdict_item(strikes: Strikes, row: int, word: str) -> Item:
    """A strike's verdict against ours, and whether its basis can be the one of that verdict."""
    basis = strikes.text(row, "basis")
    fits = {DELIVERABLE: (DEMONSTRATED,), NOT_DELIVERABLE: (PROVED, SEARCHED), UNDECIDED: (SEARCHED, "")}[
        word
    ]
    checks = (
        same("verdict", word, strikes.text(row, "verdict")),
        same("basis", basis if basis in fits else " or ".join(fits), basis),
    )
    return Item("verdict", f"strike {row + 1}", checks)


def _whole(stored: Stored, ground: Ground, words: list[str], strikes: Strikes) -> Item:
    """The verdict by the share of strikes, and the counts that the verdict's file gives."""
    total, done, lost = len(words), words.count(DELIVERABLE), words.count(NOT_DELIVERABLE)
    word = word_of(total, done, lost, stored.between(0.0, 1.0, "survey", "required_share"))
    pairs: list[tuple[str, str | None]] = [
        (kind, name)
        for kind in KINDS
        if kind != DUTY
        for name, side in zip(ground.names, ground.limits.hi[kind], strict=True)
        if math.isnan(side)
    ]
    pairs += [(TOOL, None)] if math.isinf(ground.tool_m_s) else []
    told = [(entry.get("limit"), entry.get("joint")) for entry in stored.tables("unknown")]
    away = int((strikes.columns["limit"] == REACH).sum())
    figures = {"strikes": total, "deliverable": done, "not_deliverable": lost, "unreachable": away}
    told_alike = same("unknown limits", sorted(map(str, pairs)), sorted(map(str, told)))
    return Item("verdict", "", (told_alike, *claimed(stored, word, figures)))
