"""What an unknown or failing limit would have to be, each value re-run before it is claimed."""

from __future__ import annotations

from collections.abc import Callable, Sequence

from reach.advice.reasons import deciding as deciding_keys
from reach.advice.reasons import reasons
from reach.advice.search import Runner, least_passing
from reach.cell import Cell
from reach.evidence.record import Need
from reach.follow.bench import Run, run
from reach.variants import scaled_limits, with_bounds

Key = tuple[str, str | None]

RESOLUTION = 0.1  # relative, of a needed value
NOTHING = 1e-6  # in any unit: smaller is written as 0
COARSE = 0.2  # the same of what is necessary alone, a figure to ask a maker about
SCAN = (0.02, 0.1, 0.4, 1.02, 2.0, 4.0)  # of a joint's measure (below) that are tried for an unknown limit
GROW_SCAN = (1.0, 1.25, 1.6, 2.0, 2.8, 4.0, 8.0)  # multiples of a stated limit that are tried
# The measure of an unknown limit is the peak of the motion with the limit unknown, but at least this share of the
# largest peak among the joints: a joint that hardly moves still has to brake along with the others.
LEAST_SHARE = 0.2
LAYERS = 3  # how often lifting the limits in the way may bring up others
ALONE = "alone would do"
NEVER_SEARCHED = ("duty", "position")  # measured only, or a question of travel


def needs(
    cell: Cell, base: Run, deciding: Sequence[Key], headroom_share: float | None, runs: Runner
) -> tuple[Need, ...]:
    """Needs of every unknown limit and of every limit that decides the verdict.

    *sufficient*: a motion was planned under it and passed. *necessary*: the least value at which the command still
    passes with the other unknown limits unlimited, or the other failing ones as sufficient here; of failing ones for
    those that decide the verdict.

    Parameters
    ----------
    headroom_share : from the search for all limits together, which tells where to look
    """
    units = {(use.limit, use.joint): use.unit for use in base.evidence.uses}
    found = _unknown_needs(cell, base, runs, units)
    grown = 1.0 if headroom_share is None else max(1.0 - headroom_share, 1.0)
    found += _duty_needs(base, deciding) + _holding_needs(base)
    return (*found, *_failing_needs(cell, deciding, runs, units, base, grown))


def _duty_needs(base: Run, deciding: Sequence[Key]) -> list[Need]:
    """Continuous torques that are passed: what the motion takes, which is measured and not planned."""
    found = []
    for use in base.evidence.uses:
        if (use.limit, use.joint) in deciding and use.limit == "duty":
            text = f"{use.joint}: this motion takes a continuous torque of {_number(use.peak)} {use.unit}"
            found.append(Need(use.joint, use.limit, use.peak, use.peak, use.unit, text))
    return found


def _holding_needs(base: Run) -> list[Need]:
    """Torques that holding the start posture takes where a stated one is below: necessary, and maybe not enough."""
    found = []
    for reason in base.evidence.blocked:
        if reason.limit == "torque" and reason.value is not None:
            least = abs(reason.value)
            text = f"{reason.joint}: holding the start posture alone takes {_number(least)} {reason.unit}"
            found.append(Need(reason.joint, "torque", least, None, reason.unit, text))
    return found


def _unknown_needs(cell: Cell, base: Run, runs: Runner, units: dict[Key, str]) -> list[Need]:
    unknown = [k for k in base.evidence.unknown if k in units and k[0] not in NEVER_SEARCHED and k[1]]
    if not base.passed or not unknown:
        return []
    runs.say("what the unknown limits would need")
    peaks = {(u.limit, u.joint): abs(u.peak) for u in base.evidence.uses}
    wanted = [k for k in unknown if k[0] in cell.accept.require]
    measures = _measures(wanted, peaks)
    common = _least(cell, measures, runs)
    found = []
    for key in wanted:
        limit, joint = key
        unit = units[key]
        least = _least(cell, {key: measures[key]}, runs)
        sufficient = None if common is None else _spared(cell, key, common * measures[key])
        if sufficient is not None:
            text = f"{joint}: deliverable if {limit} is at least {_number(sufficient)} {unit}"
            text += ", with the others named here" if len(wanted) > 1 else ""
        else:
            text = f"{joint}: the motion that passes takes {_number(peaks[key])} {unit} of {limit}"
        tried = least is not None and least > SCAN[0]  # something lower was, and failed
        necessary = _spared(cell, key, least * measures[key]) if least is not None and tried else None
        if necessary is not None:
            text += f"; with less than {_number(necessary)} {unit} it fails even if the others are unlimited"
        found.append(Need(joint, limit, necessary, sufficient, unit, text + ": ask the maker"))
    for key in unknown:
        if key not in wanted:
            limit, joint = key
            text = f"{joint}: the motion takes {_number(peaks[key])} {units[key]} of {limit}"
            text += "; not required, not searched"
            found.append(Need(joint, limit, None, peaks[key], units[key], text))
    return found


def _measures(keys: list[Key], peaks: dict[Key, float]) -> dict[Key, float]:
    """What each unknown limit is tried in multiples of."""
    largest: dict[str, float] = {}
    for limit, joint in keys:
        largest[limit] = max(largest.get(limit, 0.0), peaks[(limit, joint)])
    return {key: max(peaks[key], LEAST_SHARE * largest[key[0]], 1e-9) for key in keys}


def _least(cell: Cell, measures: dict[Key, float], runs: Runner) -> float | None:
    """The least multiple of some limits' measures, all at once, under which the command passes."""

    def passes(shares: Sequence[float]) -> list[bool]:
        stated: list[dict[Key, float | None]] = [
            {k: _spared(cell, k, s * measure) for k, measure in measures.items()} for s in shares
        ]
        return runs.passes([with_bounds(cell, values, "search") for values in stated])

    return least_passing(passes, SCAN, RESOLUTION) if measures else None


def _spared(cell: Cell, key: Key, value: float) -> float:
    """The stated value whose kept-back part is `value`."""
    margins = {
        "velocity": cell.margins.velocity_share,
        "acceleration": cell.margins.acceleration_share,
        "jerk": cell.margins.jerk_share,
        "torque": cell.margins.torque_share,
        "torque rate": cell.margins.torque_rate_share,
    }
    return max(value, 1e-6) / (1 - margins.get(key[0], 0.0))


def _failing_needs(
    cell: Cell, deciding: Sequence[Key], runs: Runner, units: dict[Key, str], base: Run, grown_all: float
) -> list[Need]:
    stated = {
        (u.limit, u.joint): max(abs(u.lo or 0.0), abs(u.hi or 0.0)) for u in base.evidence.uses if u.known
    }
    first = [k for k in deciding if k in stated and k[0] not in NEVER_SEARCHED]
    if not first:
        return []
    runs.say("what the failing limits would need")

    def least(
        keys: Sequence[Key],
        others: dict[Key, float | None],
        resolution: float,
        scan: Sequence[float] = GROW_SCAN,
    ) -> float | None:
        """The least common multiple of some stated limits under which the command passes."""

        def passes(factors: Sequence[float]) -> list[bool]:
            grown = [{**others, **{k: f * stated[k] for k in keys}} for f in factors]
            return runs.passes([with_bounds(cell, values, "search") for values in grown])

        return least_passing(passes, scan, resolution)

    runs.runs += 1
    if grown_all > 1:
        keys = _used_beyond(run(scaled_limits(cell, grown_all)), first, stated)
    else:
        keys = _all_in_the_way(cell, first, stated, runs)
    likely = [grown_all * further for further in (1.0, 1.05, 1.2)] if grown_all > 1 else []
    common = least(keys, {}, RESOLUTION, likely) or least(keys, {}, RESOLUTION)
    if common is None:
        return [_hopeless(key, stated[key], units[key]) for key in first]
    grown = {k: common * stated[k] for k in keys}
    keys = _that_matter(
        keys,
        lambda sets: runs.passes([with_bounds(cell, {k: grown[k] for k in some}, "search") for some in sets]),
    )
    found = []
    for key in keys:
        limit, joint = key
        sufficient, necessary = common * stated[key], None
        if len(keys) == 1:
            factor = least(keys, {}, RESOLUTION)
            sufficient = necessary = (factor or common) * stated[key]
        elif key in first:
            scan = [*(factor for factor in GROW_SCAN if factor < common), common]
            factor = least([key], {k: grown[k] for k in keys if k != key}, COARSE, scan)
            if factor is not None and factor > GROW_SCAN[0]:
                necessary = factor * stated[key]
        name = f"{limit} of {joint}" if joint else limit
        text = f"{name}: {_number(sufficient)} {units[key]} (now {_number(stated[key])}) "
        text += ALONE if len(keys) == 1 else "would do if all limits named here grow alike"
        found.append(Need(joint, limit, necessary, sufficient, units[key], text))
    return found


def _that_matter(keys: list[Key], passes: Callable[[Sequence[Sequence[Key]]], list[bool]]) -> list[Key]:
    """The keys without those that may stay as stated.

    Those that may stay alone are first all left out together; where that is too much, one after the other, the last
    ones to turn up first.
    """
    if len(keys) < 2:
        return keys
    spare = [k for k, ok in zip(keys, passes([[o for o in keys if o != k] for k in keys]), strict=True) if ok]
    needed = [k for k in keys if k not in spare]
    if not spare or (needed and passes([needed])[0]):
        return needed
    kept = list(keys)
    for key in reversed(spare):
        fewer = [k for k in kept if k != key]
        if fewer and passes([fewer])[0]:
            kept = fewer
    return kept


def _hopeless(key: Key, stated: float, unit: str) -> Need:
    limit, joint = key
    name = f"{limit} of {joint}" if joint else limit
    text = f"{name}: up to {GROW_SCAN[-1]:g} times the stated {_number(stated)} {unit} is not enough"
    text += ", nor is it with the limits that bind then grown alike"
    return Need(joint, limit, None, None, unit, text)


def _used_beyond(grown: Run, first: list[Key], stated: dict[Key, float]) -> list[Key]:
    """The deciding limits, and those that a motion which passes with all limits grown uses beyond what is stated."""
    peaks = {(use.limit, use.joint): abs(use.peak) for use in grown.evidence.uses}
    others = [
        k for k in stated if k not in first and k[0] not in NEVER_SEARCHED and peaks.get(k, 0.0) > stated[k]
    ]
    return [*first, *others]


def _all_in_the_way(cell: Cell, first: list[Key], stated: dict[Key, float], runs: Runner) -> list[Key]:
    """The deciding limits, and those that decide once these are lifted."""
    keys = list(first)
    for _ in range(LAYERS):
        lifted = run(with_bounds(cell, {k: GROW_SCAN[-1] * stated[k] for k in keys}, "search"))
        runs.runs += 1
        if lifted.passed:
            break
        found, _ = reasons(lifted, None)
        new = [
            k for k in deciding_keys(found) if k in stated and k not in keys and k[0] not in NEVER_SEARCHED
        ]
        if not new:
            break
        keys += new
    return keys


def _number(value: float | None) -> str:
    if value is None:
        return "an unknown value"
    return f"{value:,.0f}" if abs(value) >= 1000 else f"{value:.3g}" if abs(value) > NOTHING else "0"
