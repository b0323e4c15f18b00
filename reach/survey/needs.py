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
from reach.variants import with_bounds

QUANTILE = 0.9  # of the strikes, told beside the most that one asks
SAMPLE = 60  # strikes that are timed again
HALVINGS = 12  # of the values tried
RATES = ("torque rate", "jerk")  # kinds that a quick motion uses without bound where nobody limits them


def needs(cell: Cell, evidence: SurveyEvidence, asked: dict[int, Array]) -> tuple[Need, ...]:
    """What unknown limits would have to be, by the motions at the required speed.

    A motion that nothing holds back uses any rate; there the least share of those rates is looked for, all joints
    alike, with which the quick timing of a strike still reaches its required speed. To a factor of two.

    Parameters
    ----------
    asked : by row, what a strike asks of each limit that nobody stated
    """
    points = evidence.points
    done = [k for k in sorted(asked) if points.demonstrated_m_s[k] >= points.required_m_s[k]]
    if not done:
        return ()
    rows = np.array(done, dtype=np.int64)
    table, q = np.array([asked[k] for k in done]), points.q[rows]
    strikes = Strikes(points.position, points.normal, points.direction, points.required_m_s).take(rows)
    most = _shape(cell, evidence, table.max(axis=0))
    shares = _shares(cell, evidence, strikes, most, q)
    found = []
    for column, (limit, joint) in enumerate(evidence.unknown):
        peaks = table[:, column]
        if limit in RATES and shares is not None:
            peaks = shares * most[column]
        unit = _unit(cell, limit, joint)
        some = f"{100 * QUANTILE:.0f} % of {len(peaks)} strikes that the other limits allow"
        whose = f"{limit} of {joint}" if joint else limit
        text = f"{whose}: {float(np.quantile(peaks, QUANTILE)):.4g} {unit} is enough for {some}"
        found.append(Need(joint, limit, None, float(peaks.max()), unit, text))
    return tuple(found)


def _shape(cell: Cell, evidence: SurveyEvidence, most: Array) -> Array:
    """The largest values asked (unknown,), those of torque rate in proportion to the joints' torque where it is stated:
    strong joints are built to change their torque faster."""
    torque = {joint.name: joint.limits.torque for joint in cell.arm.joints}
    out = most.copy()
    columns = [k for k, (limit, _) in enumerate(evidence.unknown) if limit == "torque rate"]
    stated = [torque[evidence.unknown[k][1] or ""] for k in columns]
    if columns and all(bound is not None for bound in stated):
        size = np.array([max(-bound.lo, bound.hi) for bound in stated if bound is not None])
        out[columns] = size * (most[columns] / size).max()
    return out


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
