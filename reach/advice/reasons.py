"""Why steps fell short: the limits behind each miss, from the multipliers, deciding ones first."""

from __future__ import annotations

from collections import defaultdict
from collections.abc import Iterable
from dataclasses import replace

from reach.advice.attribution import Attribution, Episode
from reach.advice.demand import Demand
from reach.evidence.record import Reason, Strike, Use
from reach.follow.bench import Run
from reach.verdict import broken_limits

NOT_DECIDING_SHOWN = 6


def reasons(run: Run, demand: Demand | None) -> tuple[tuple[Reason, ...], tuple[Strike, ...]]:
    """Reasons of a run, deciding ones first, and its strikes with limit and joint filled in."""
    evidence = run.evidence
    blocked = evidence.blocked
    if run.roll is None or evidence.motion is None:
        return blocked, evidence.strikes
    book = Attribution(run, demand)
    found: list[Reason] = [_broken(use, book) for use in broken_limits(evidence)]
    strikes = []
    for strike in evidence.strikes:
        if strike.delivered:
            strikes.append(strike)
            continue
        mine = book.of_strike(strike)
        found.extend(mine)
        first = next((r for r in mine if r.decides), None)
        limit, joint = (first.limit, first.joint) if first else (None, None)
        strikes.append(replace(strike, limit=limit, joint=joint))
    if evidence.throughout_faults:
        found.extend(
            book.of_episode(Episode(0, run.roll.end_row), True, "; ".join(evidence.throughout_faults))
        )
    decides = bool(blocked or evidence.throughout_faults or broken_limits(evidence)) or any(
        not s.delivered for s in evidence.strikes
    )
    found = _merged(found)
    taken = {(r.limit, r.joint) for r in found} if decides else set()
    others = [r for r in book.others() if (r.limit, r.joint) not in taken]
    return (*blocked, *found, *others[:NOT_DECIDING_SHOWN]), tuple(strikes)


def _broken(use: Use, book: Attribution) -> Reason:
    bound = use.hi if use.peak >= 0 else use.lo
    assert use.utilisation is not None
    text = f"{use.limit} of {use.joint or 'the tool'} reaches {100 * use.utilisation:.1f} % of its limit"
    return Reason(
        True,
        use.limit,
        use.joint,
        None,
        use.time_s,
        use.time_s,
        use.peak,
        bound,
        use.unit,
        "demonstrated",
        text,
    )


def _merged(found: Iterable[Reason]) -> list[Reason]:
    """One reason a limit and joint: the worst one's text, the whole span, how many strikes it is about."""
    groups: dict[tuple[str, str | None], list[Reason]] = defaultdict(list)
    for reason in found:
        groups[(reason.limit, reason.joint)].append(reason)
    merged = []
    for group in groups.values():
        worst = max(group, key=lambda r: abs(r.value) if r.value is not None else 0.0)
        times = [t for r in group for t in (r.time_s, r.until_s) if t is not None]
        text = worst.text if len(group) == 1 else f"{len(group)} strikes, the worst: {worst.text}"
        merged.append(
            replace(
                worst,
                decides=any(r.decides for r in group),
                time_s=min(times, default=None),
                until_s=max(times, default=None),
                text=text,
            )
        )
    return sorted(merged, key=lambda r: not r.decides)


def deciding(found: Iterable[Reason]) -> list[tuple[str, str | None]]:
    """(limit, joint) of the reasons that decide."""
    return [(r.limit, r.joint) for r in found if r.decides]
