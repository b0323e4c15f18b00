"""The second opinion on trials of a law: flights, bounces, limits and outcome of every start decided anew."""

from __future__ import annotations

import math
from collections.abc import Callable
from dataclasses import dataclass

import numpy as np

from reach.evidence.items import Check, Item, same
from reach.recheck import allowed
from reach.recheck.arm.ground import Ground
from reach.recheck.arm.limits import TOOL, TORQUE_KINDS, kept, overshoot, torques, values
from reach.recheck.arm.trace import FINE, Trace, fine
from reach.recheck.ball import refused
from reach.recheck.shares import verdict_checks, word_of
from reach.recheck.stored import VERDICT, BadFolder, Stored, largest, number_in
from reach.recheck.trial.bounces import (
    RUNS,
    Asked,
    Bounces,
    Gaps,
    Met,
    begun,
    contact_item,
    flight_item,
    impact_item,
)

FAILED = ("solver failed", "law failed")
MISSED = ("missed past the edge", "too fast to catch")
LOST = (*MISSED, "limit", *FAILED)
QUANTILE = 1.959963984540054  # of a normal distribution, 0.975: an interval of 95 %
MOST_STARTS = 1_000_000
NOT_KEPT = "its motion is not kept"
SAME_PLACE = 9  # digits to which two starts of the grid count as one

Progress = Callable[[str], None]
Array = np.ndarray


@dataclass(frozen=True, eq=False)
class Claim:
    """One start as stored: its number from 0, name, bounces, motion, and the limits that the motion passes."""

    number: int
    where: str
    offset: Array
    lateral: Array
    outcome: str
    recovered: bool
    bounces: Bounces
    trace: Trace | None
    broken: tuple[str, ...]


@dataclass(frozen=True)
class Word:
    """What a start counts as: `open` where no solver answered, `sure` unless it rests on what could not be checked."""

    recovered: bool
    open: bool
    sure: bool


def items(stored: Stored, ground: Ground, progress: Progress) -> list[Item]:
    """Every claim of a run of trials.

    Raises
    ------
    BadFolder
    """
    with np.errstate(all="ignore"):  # what overflows is no number, and differs
        return _items(stored, ground, progress)


def _items(stored: Stored, ground: Ground, progress: Progress) -> list[Item]:
    asked, words = Asked.of(stored), []
    count = len(stored.array(RUNS, "moved", (None,), "b")) if RUNS in stored.arrays else 0
    found = [_starts(stored, asked, count)]
    for number in range(count):
        progress(f"recheck: start {number + 1} of {count}")
        claim = _claim(stored, ground, number, count)
        checked, word = _start(stored, ground, asked, claim)
        found += checked
        words.append(word)
    return [*found, _verdict(stored, ground, asked, words)]


def notes(stored: Stored) -> list[str]:
    """What of it rests on a search or was not stored."""
    found = [
        "what the law saw and answered is not stored: bounces and motion are checked, not why they were so"
    ]
    if stored.cell.get("ready") is None:
        found.append("that no posture puts a level face at the centre rests on a search")
    else:
        found.append("the posture that the trials start from rests on a search; any other is another trial")
    if RUNS in stored.arrays:
        found.append(
            "whether a limit or the law lost a ball rests on the multipliers of each step, not stored"
        )
    return found


def _claim(stored: Stored, ground: Ground, i: int, count: int) -> Claim:
    offset, lateral = (stored.finite(RUNS, name, (count, 2))[i] for name in ("offset", "lateral"))
    broken = stored.at("broken", i)
    if not isinstance(broken, list) or not all(isinstance(name, str) for name in broken):
        raise refused(f"broken.{i}", "is no list of limits", stored)
    trace = None
    if stored.array(RUNS, "moved", (count,), "b")[i]:
        n = len(ground.names)
        q = stored.finite(RUNS, f"q_{i}", (None, n))
        v, a = (stored.finite(RUNS, f"{name}_{i}", q.shape) for name in "va")
        if len(q) < 2:
            raise BadFolder(f"q_{i}", "has less than two rows", f"{stored.folder}/evidence/{RUNS}")
        trace = fine(q, v, a, ground.period_s, float(stored.finite(RUNS, f"start_s_{i}", ())))
    return Claim(
        number=i,
        where=f"start {i + 1}",
        offset=offset,
        lateral=lateral,
        outcome=str(stored.array(RUNS, "outcome", (count,), "U")[i]),
        recovered=bool(stored.array(RUNS, "recovered", (count,), "b")[i]),
        bounces=Bounces.of(stored, i),
        trace=trace,
        broken=tuple(broken),
    )


def _start(stored: Stored, ground: Ground, asked: Asked, claim: Claim) -> tuple[list[Item], Word]:
    """All of one start, and what it counts as."""
    c, trace, where = claim.bounces, claim.trace, claim.where
    ending, over = asked.ended(c, ground.period_s)
    if trace is None:
        flights = begun(asked, claim.offset, claim.lateral, c, largest(c.t_s[-1:]))
        found = [flight_item(where, asked, c, flights)]
        found += [impact_item(where, asked, ground, c, None)] if len(c.t_s) else []
        if len(c.t_s) or claim.outcome not in FAILED:  # a law that can't be made moves nothing
            found += [Item(kind, where, (), NOT_KEPT) for kind in ("contact", "limits", "torque")]
        outcome, word = _outcome(stored, asked, claim, ending, over, claim.broken, NOT_KEPT, None)
        return [*found, outcome], word
    end = float(trace.t_s[-1]) - ground.period_s  # the last period comes after what ends a trial
    end = min(end, asked.longest_s)
    flights = begun(asked, claim.offset, claim.lateral, c, max(end, largest(c.t_s[-1:])))
    met, seen = Met.of(ground, asked, c, trace), ground.chain.seen(trace.q, trace.v)
    gaps = Gaps.of(asked, c, flights, trace, seen, end)
    last = len(c.t_s) - 1 if ending else len(c.t_s)
    found = [flight_item(where, asked, c, flights), _motion(stored, ground, claim)]
    found += [impact_item(where, asked, ground, c, met)] if len(c.t_s) else []
    found.append(contact_item(where, asked, c, met, gaps.missed(last), end))
    limits, passed, unsure = _limits(ground, claim, np.linalg.norm(seen.linear, axis=1))
    outcome, word = _outcome(stored, asked, claim, ending, over, passed, unsure, gaps)
    return [*found, *limits, outcome], word


def _motion(stored: Stored, ground: Ground, claim: Claim) -> Item:
    """The motion as one of constant accelerations, from rest in the ready posture."""
    assert claim.trace is not None
    trace, dt = claim.trace, ground.period_s
    q, v, a = (rows[::FINE] for rows in (trace.q, trace.v, trace.a))
    ready = np.array([stored.number("ready", i) for i in range(q.shape[1])])
    period = float(stored.finite(RUNS, f"period_s_{claim.number}", ()))
    slip, gone = np.diff(v, axis=0) - a[:-1] * dt, np.diff(q, axis=0) - (v[1:] + v[:-1]) * (dt / 2)
    checks = (
        Check("start", abs(float(trace.t_s[0])), 0.0, "s"),
        Check("period", abs(period - dt), 0.0, "s"),
        Check("start posture", largest(q[0] - ready), allowed.JOINT, "rad or m"),
        Check("at rest", largest(v[0]), allowed.JOINT, "per s"),
        Check("velocity integrated", largest(slip), allowed.STATE_SHARE * max(largest(v), 1.0), "per s"),
        Check(
            "position integrated", largest(gone), allowed.STATE_SHARE * max(largest(q), 1.0) * dt, "rad or m"
        ),
    )
    return Item("motion", claim.where, checks)


def _limits(ground: Ground, claim: Claim, speed: Array) -> tuple[list[Item], tuple[str, ...], str]:
    """Items "limits" and "torque": what the motion passes is what was said to be passed.

    Returns
    -------
    The items, the names of limits passed, and why some of these are those stored.
    """
    assert claim.trace is not None
    engine = ground.engine is not None
    found = values(claim.trace, *(torques(ground, claim.trace) if engine else (None, None)))
    past = overshoot(ground.limits, found)
    checks: dict[str, list[Check]] = {"limits": [], "torque": []}
    passed: list[str] = []
    for kind, sizes in past.items():
        if not ground.limits.known(kind):
            continue
        over = np.flatnonzero(~(sizes <= ground.limits.leeway(kind)))
        names = [f"{kind} of {ground.names[i]}" for i in over]
        told = [name for name in claim.broken if name.startswith(f"{kind} of ")]
        check = (
            same(f"{kind} passed", sorted(names), sorted(told)) if told else kept(ground.limits, kind, sizes)
        )
        checks["torque" if kind in TORQUE_KINDS else "limits"].append(check)
        passed += names
    cap = ground.tool_m_s
    excess = max(largest(speed) - cap, 0.0)
    fast = not excess <= allowed.LIMIT_SHARE * cap
    if TOOL in claim.broken:
        checks["limits"].append(same(f"{TOOL} passed", fast, True))
    elif math.isfinite(cap):
        checks["limits"].append(Check(TOOL, excess, allowed.LIMIT_SHARE * cap, "m/s"))
    passed += [TOOL] * fast
    known = [kind for kind in TORQUE_KINDS if ground.limits.known(kind)]
    why = ground.why_no_engine if known and not engine else ""
    if why:
        passed += [name for name in claim.broken if name.split(" of ")[0] in TORQUE_KINDS]
    items = [
        Item(kind, claim.where, tuple(made), why if kind == "torque" else "") for kind, made in checks.items()
    ]
    return [item for item in items if item.checks or item.left_out], tuple(passed), why


def _outcome(
    stored: Stored,
    asked: Asked,
    claim: Claim,
    ending: str,
    over: Array,
    passed: tuple[str, ...],
    unsure: str,
    gaps: Gaps | None,
) -> tuple[Item, Word]:
    """How the start ended and whether it is recovered, by its bounces and what its motion passes."""
    c, told = claim.bounces, claim.outcome
    failed, at = told in FAILED, asked.recovered_at(c)
    own = "limit" if ending == "held" and passed else ending
    recovered = ending == "held" and at is not None and not passed and not failed
    lost = told if told in LOST else "a ball lost"
    entries = stored.entries("outcome")
    entry = entries[claim.number] if claim.number < len(entries) else {}
    listed = tuple(entry.get(key) for key in ("outcome", "recovered", "recovered_at", "bounces"))
    checks = [
        same("outcome", told if failed else own or lost, told),
        same("recovered", recovered, claim.recovered),
        same("ends with its last bounce", bool(over[:-1].any()), False),
        same(f"in {VERDICT}", (told, claim.recovered, at, len(c.t_s)), listed),
    ]
    if gaps is not None and told in MISSED and not ending:
        over_m = float(np.maximum(gaps.gap[-1], 0.0)) if len(gaps.gap) else math.nan
        checks.append(Check("ball over the face", over_m, allowed.PLACE_M, "m"))
    why = "that no solver answered leaves no trace" if told == FAILED[0] else ""
    if told == FAILED[1] and ending:
        why = "that the law failed after the last bounce leaves no trace"
    why = why or (unsure if ending == "held" and at is not None else "")
    word = Word(recovered, told == FAILED[0], not why)
    return Item("outcome", claim.where, tuple(checks), why), word


def _starts(stored: Stored, asked: Asked, count: int) -> Item:
    """The starts that were asked for against those tried, and the ball that they stand for."""
    grid, most = _grid(stored)
    total = len(grid) + int(stored.number("trial", "starts", "random"))
    left = stored.at("stopped") is True or stored.at("ready") is None
    centre, place = stored.at("trial", "centre_m"), stored.at("centre_m")
    checks = [
        same("starts", total, stored.at("starts")),
        same("all tried", count == total or (left and count < total), True),
        same("apex", asked.apex_m, stored.number("apex_m")),
        *([] if centre is None else [same("centre", centre, place)]),
    ]
    if count:
        tried = np.hstack([stored.finite(RUNS, name, (count, 2)) for name in ("offset", "lateral")])
        planned = min(count, len(grid))
        checks.append(Check("grid", largest(tried[:planned] - grid[:planned]), allowed.PLACE_M, "m"))
        sizes = np.hypot(tried[planned:, ::2], tried[planned:, 1::2])
        past = float(np.max(sizes - most, initial=0.0))
        checks.append(Check("random starts past their disc", past, allowed.PLACE_M, "m"))
        if math.isfinite(asked.flight_s):
            off = abs(asked.flight_s - stored.number("flight_s"))
            checks.append(Check("flight", off, allowed.TIME_S, "s"))
    return Item("starts", "", tuple(checks))


def _grid(stored: Stored) -> tuple[Array, Array]:
    """Offset and lateral velocity (g, 4) of the starts asked for, each once, and the largest size of both (2,)."""
    keys = ("offsets_m", "bearings_rad", "lateral_m_s")
    listed = [stored.at("trial", "starts", key) for key in keys]
    if not all(isinstance(values, list) and values for values in listed):
        raise refused("trial.starts", "has a list that is none", stored)
    if math.prod(len(values) for values in listed) > MOST_STARTS:
        raise refused("trial.starts", f"has more than {MOST_STARTS} starts", stored)
    numbers = [
        [stored.number("trial", "starts", key, i) for i in range(len(values))]
        for key, values in zip(keys, listed, strict=True)
    ]
    offset, bearing, speed = (part.ravel() for part in np.meshgrid(*numbers, indexing="ij"))
    way = np.array([np.cos(bearing), np.sin(bearing)])
    whole = np.vstack([offset * way, speed * way]).T
    first = np.unique(whole.round(SAME_PLACE) + 0.0, axis=0, return_index=True)[1]
    return whole[np.sort(first)], np.array([largest(numbers[0]), largest(numbers[2])])


def _verdict(stored: Stored, ground: Ground, asked: Asked, words: list[Word]) -> Item:
    """The verdict by the share of starts recovered, and that share with its interval."""
    total = int(stored.number("starts"))
    require = ground.accept.get("require")
    if not isinstance(require, list) or not all(isinstance(kind, str) for kind in require):
        raise refused("accept.require", "is no list of limits", stored)
    blind = any(kind in ground.unknown for kind in require)
    if not words and stored.at("ready") is None:
        own, why = "not deliverable", "that no posture puts a level face at the centre rests on a search"
    else:
        own = _judged(asked, total, blind, words)
        best = [Word(word.recovered or not word.sure, False, True) for word in words]
        worst = [Word(word.recovered and word.sure, False, True) for word in words]
        sure = all(_judged(asked, total, blind, case) == own for case in (best, worst))
        why = "" if sure else "it hangs on starts that could not be checked"
    good, count = sum(word.recovered for word in words), len(words)
    shares = zip(
        ("recovered_share", "recovered_low_share", "recovered_high_share"), _shares(good, count), strict=True
    )
    checks = verdict_checks(stored, own)
    checks += [
        Check(name.replace("_", " "), abs(share - number_in(stored.verdict, name)), allowed.PEAK_SHARE, "")
        for name, share in shares
    ]
    return Item("verdict", "", tuple(checks), why)


def _judged(asked: Asked, total: int, blind: bool, words: list[Word]) -> str:
    """The verdict on starts, those not tried undecided."""
    good = 0 if blind else sum(word.recovered and not word.open for word in words)
    bad = sum(not word.recovered and not word.open for word in words)
    return word_of(total, good, bad, asked.required_share)


def _shares(good: int, count: int) -> tuple[float, float, float]:
    """Share of the starts that are recovered, and the ends of its interval of 95 %.

    The ends p solve (p - share)² = z² p (1 - p) / count (E. B. Wilson, J. Am. Stat. Assoc. 22 (1927) 209).
    """
    if not count:
        return 0.0, 0.0, 1.0
    share, z = good / count, QUANTILE**2 / count
    half = math.sqrt((2 * share + z) ** 2 - 4 * (1 + z) * share**2)
    ends = [(2 * share + z + sign * half) / (2 * (1 + z)) for sign in (-1, 1)]
    return share, max(0.0, ends[0]), min(1.0, ends[1])
