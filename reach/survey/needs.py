"""What limits that nobody stated would have to be for the strikes that the others allow."""

from __future__ import annotations

import numpy as np

from reach.cell import Array, Cell
from reach.evidence.points import SurveyEvidence
from reach.evidence.record import Need
from reach.limits import LIMITS
from reach.strike.setting import Setting
from reach.strike.sides import lower, upper
from reach.survey.grid import Strikes
from reach.survey.rows import Rows
from reach.variants import with_bounds

QUANTILE = 0.9  # of the strikes, told beside the most that one asks
SAMPLE = 60  # strikes that are timed again
HALVINGS = 12  # of the values tried
RATES = ("torque rate", "jerk")  # kinds that a quick motion uses without bound where nobody limits them


def needs(cell: Cell, evidence: SurveyEvidence, parts: list[Rows]) -> tuple[Need, ...]:
    """What unknown limits would have to be, by the motions at the required speed.

    A motion that nothing holds back uses any rate; there the least share of those rates is looked for, all joints
    alike, with which the quick timing of a strike still reaches its required speed.
    """
    strikes, table, q = _asked(evidence, parts)
    if not len(table):
        return ()
    shares = _shares(cell, evidence, strikes, table.max(axis=0), q)
    found = []
    for column, (limit, joint) in enumerate(evidence.unknown):
        peaks = table[:, column]
        if limit in RATES and shares is not None:
            peaks = shares * peaks.max()
        unit = _unit(cell, limit, joint)
        some = f"{100 * QUANTILE:.0f} % of {len(peaks)} strikes that the other limits allow"
        text = f"{float(np.quantile(peaks, QUANTILE)):.4g} {unit} is enough for {some}"
        found.append(Need(joint, limit, None, float(peaks.max()), unit, text))
    return tuple(found)


def _asked(evidence: SurveyEvidence, parts: list[Rows]) -> tuple[Strikes, Array, Array]:
    """The strikes that known limits allow, what each asks of the unknown ones (m, unknown), and its posture (m, n)."""
    points = evidence.points
    rows, peaks, first = [], [], 0
    for part in parts:
        done = part.values["demonstrated_m_s"] >= part.strikes.required_m_s
        for k, peak in sorted(part.peaks.items()):
            if done[k]:
                rows.append(first + k)
                peaks.append(peak)
        first += len(part)
    strikes = Strikes(points.position, points.normal, points.direction, points.required_m_s)
    chosen = np.array(rows, dtype=np.int64)
    return strikes.take(chosen), np.array(peaks).reshape(len(rows), len(evidence.unknown)), points.q[chosen]


def _shares(cell: Cell, evidence: SurveyEvidence, strikes: Strikes, most: Array, q: Array) -> Array | None:
    """For some of the strikes the least share of the unbounded rates that still delivers; None without such rates."""
    free = [pair for pair in evidence.unknown if pair[0] in RATES]
    if not free:
        return None
    rows = np.linspace(0, len(strikes) - 1, min(SAMPLE, len(strikes))).round().astype(int)
    some, posture = strikes.take(rows), q[rows]
    need = some.required_m_s / np.einsum("mi,mi->m", some.direction, some.normal)
    least = np.ones(len(rows))
    for k in range(1, HALVINGS + 1):
        share = 0.5**k
        values = {pair: share * float(most[evidence.unknown.index(pair)]) for pair in free}
        setting = Setting.of(with_bounds(cell, dict(values), "tried"))
        above = upper(setting, posture, some.direction)
        fast = lower(setting, posture, some.normal, some.direction, above).speed >= need
        least = np.where(fast & (least == 2 * share), share, least)
        if not fast.any():
            break
    return least


def _unit(cell: Cell, limit: str, joint: str | None) -> str:
    sliding = any(one.name == joint and one.sliding for one in cell.arm.joints)
    return LIMITS[limit].units[sliding]
