"""What limits that nobody stated would have to be for the points that the others allow."""

from __future__ import annotations

import numpy as np

from reach.arm import Arm
from reach.cell import Cell
from reach.evidence.measure import measure
from reach.evidence.rallies import RallyEvidence
from reach.evidence.record import Need
from reach.kinematics import Chain
from reach.limits.build import build_limits
from reach.rally.quintic import motion_of

SAMPLE = 60  # motions that are measured again


def needs(cell: Cell, evidence: RallyEvidence) -> tuple[Need, ...]:
    """What demonstrated motions use of each unknown limit at most: enough for those points, no more is known."""
    if not evidence.unknown or not evidence.points.motions:
        return ()
    arm, limits = Arm(cell.arm, cell.paddle), build_limits(cell)
    chain = Chain.of(arm)
    most = dict.fromkeys(evidence.unknown, 0.0)
    units = dict.fromkeys(evidence.unknown, "")
    rows = sorted(evidence.points.motions)
    some = [rows[int(k)] for k in np.linspace(0, len(rows) - 1, min(SAMPLE, len(rows))).round()]
    for knots in (evidence.points.motions[row] for row in some):
        for use in measure(arm, chain, limits, motion_of(knots, cell.period_s)).uses:
            pair = (use.limit, use.joint)
            if pair in most:
                most[pair] = max(most[pair], float(np.abs(use.series).max()))
                units[pair] = use.unit
    count = len(some)
    found = []
    for (limit, joint), value in most.items():
        whose = f"{limit} of {joint}" if joint else limit
        unit = units[limit, joint]
        points = f"{count} of the {len(rows)} points that the other limits allow"
        text = f"{whose}: {value:.4g} {unit} is enough for {points}"
        found.append(Need(joint, limit, None, value, unit, text))
    return tuple(found)
