"""evidence/ of an envelope: what an independent engine needs to check each demonstrated motion again."""

from __future__ import annotations

from dataclasses import fields

import numpy as np

from reach.evidence.rallies import Knots, LegProof, Proof, RallyPoints, SpeedProof
from reach.report.rally.document import settings
from reach.report.stored import archive, ball_and_contact, cell_file
from reach.result import RallyResult

APART = ("reason", "motions", "proof")  # fields of RallyPoints that are no numbers; reasons are in rally.csv
CUTS = tuple(name.name for name in fields(LegProof) if name.name.startswith("cut_"))


def evidence_files(result: RallyResult) -> dict[str, bytes | None]:
    """Return the content of the files by name; None for one that must not be there."""
    evidence = result.evidence
    own = {
        "rally": settings(result.cell.rally),
        **ball_and_contact(result.cell),
        "drag": evidence.drag,
        "lift": evidence.lift,
        "nominal_only": evidence.nominal_only,
        "kinds": evidence.kinds,
        "unknown": [{"limit": limit, "joint": joint} for limit, joint in evidence.unknown],
        "not_checked": evidence.not_checked,
        "stopped": evidence.stopped,
    }
    return {
        "points.npz": _points(evidence.points),
        "motions.npz": _motions(evidence.points.motions, result.cell.period_s),
        "proofs.npz": _proofs(evidence.points.proofs),
        "cell.json": cell_file(result, own),
    }


def _points(points: RallyPoints) -> bytes:
    """Return every array of the points under its own name; texts are of fixed width. SI units, world axes."""
    return archive(
        **{item.name: getattr(points, item.name) for item in fields(RallyPoints) if item.name not in APART}
    )


def _motions(motions: dict[int, Knots], period_s: float) -> bytes | None:
    """Return t_s (k,), q, v and a (k, n) of the knots of each motion by its row, as q_12 and so on.

    `rows` names the motions, `strike_s_12` the instants of a motion's contacts; `period_s` is the control period.
    None without a motion.
    """
    if not motions:
        return None
    arrays = {"rows": np.array(sorted(motions), dtype=np.int64), "period_s": np.array(period_s)}
    for row, knots in sorted(motions.items()):
        arrays |= {f"{name}_{row}": getattr(knots, name) for name in ("t_s", "q", "v", "a")}
        arrays[f"strike_s_{row}"] = np.array(knots.strike_s, dtype=np.float64)
    return archive(**arrays)


def _proofs(proofs: dict[int, Proof]) -> bytes | None:
    """Return what proves each refusal by its row, as q_12 and so on; `rows` and `kind` name them all.

    A refusal by time has a row in its arrays for each stance compared, and its cuts one after the other, with
    `cut_leg_12` saying whose they are. None without a proof.
    """
    if not proofs:
        return None
    kinds = ["speed" if isinstance(proof, SpeedProof) else "time" for proof in proofs.values()]
    arrays = {"rows": np.array(list(proofs), dtype=np.int64), "kind": np.array(kinds, dtype=str)}
    for row, proof in proofs.items():
        if isinstance(proof, SpeedProof):
            own = {item.name: np.array(getattr(proof, item.name)) for item in fields(SpeedProof)}
        else:
            own = _legs(proof.legs)
        arrays |= {f"{name}_{row}": array for name, array in own.items()}
    return archive(**arrays)


def _legs(legs: tuple[LegProof, ...]) -> dict[str, np.ndarray]:
    whole = {
        item.name: np.array([getattr(leg, item.name) for leg in legs])
        for item in fields(LegProof)
        if item.name not in CUTS
    }
    cuts = {name: np.concatenate([getattr(leg, name) for leg in legs]) for name in CUTS}
    owner = np.repeat(np.arange(len(legs)), [len(leg.cut_joint) for leg in legs])
    return whole | {"cut_leg": owner} | cuts
