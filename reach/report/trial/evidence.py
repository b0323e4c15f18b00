"""evidence/ of trials: what an independent engine needs to check each motion and each bounce again."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import fields

import numpy as np

from reach.evidence.trials import Contacts, Run
from reach.report.stored import archive, ball_and_contact, cell_file
from reach.report.trial.document import settings
from reach.result import TrialResult


def evidence_files(result: TrialResult) -> dict[str, bytes | None]:
    """Return the content of runs.npz and cell.json; None for a file that must not be there."""
    evidence = result.evidence
    own = {
        "trial": settings(result.cell.trial),
        **ball_and_contact(result.cell),
        "law": evidence.law,
        "gains": dict(evidence.gains),
        "centre_m": evidence.centre,
        "apex_m": evidence.apex_m,
        "flight_s": evidence.flight_s,
        "ready": None if evidence.ready is None else evidence.ready.tolist(),
        "starts": evidence.asked,
        "broken": [run.broken for run in evidence.runs],
        "kinds": evidence.kinds,
        "unknown": [{"limit": limit, "joint": joint} for limit, joint in evidence.unknown],
        "not_checked": evidence.not_checked,
        "stopped": evidence.stopped,
    }
    return {"runs.npz": _runs(evidence.runs), "cell.json": cell_file(result, own)}


def _runs(runs: Sequence[Run]) -> bytes | None:
    """Return each trial's contacts by its index from 0, and the motions that were kept; None without a trial.

    offset (r, 2), lateral (r, 2), outcome, recovered, moved (r,), whether a trial's motion is here; of trial 12 the
    arrays of its k contacts by their own names, t_s_12 (k,), ball_12 (k, 3) and so on; of a motion q_12, v_12 and
    a_12 (m, n), start_s_12 and period_s_12. SI units, world axes.
    """
    if not runs:
        return None
    arrays: dict[str, np.ndarray] = {
        "offset": np.array([run.offset for run in runs], dtype=np.float64),
        "lateral": np.array([run.lateral for run in runs], dtype=np.float64),
        "outcome": np.array([run.outcome for run in runs], dtype=np.str_),
        "recovered": np.array([run.recovered for run in runs], dtype=bool),
        "moved": np.array([run.motion is not None for run in runs], dtype=bool),
    }
    for place, run in enumerate(runs):
        arrays |= {f"{item.name}_{place}": getattr(run.contacts, item.name) for item in fields(Contacts)}
        if run.motion is not None:
            arrays |= {f"{name}_{place}": getattr(run.motion, name) for name in ("q", "v", "a")}
            arrays[f"start_s_{place}"] = np.array(run.motion.start_s)
            arrays[f"period_s_{place}"] = np.array(run.motion.period_s)
    return archive(**arrays)
