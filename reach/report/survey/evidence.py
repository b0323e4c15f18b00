"""evidence/ of a survey: what an independent engine needs to check each strike again."""

from __future__ import annotations

from dataclasses import fields

import numpy as np

from reach.evidence.points import Points, Profiles
from reach.report.stored import archive, cell_file
from reach.report.survey.document import settings
from reach.result import SurveyResult

APART = ("reason", "profiles", "motions")  # fields of Points that are no arrays; reasons are in survey.csv
ABOUT_STROKES = ("q", "v", "a")


def evidence_files(result: SurveyResult) -> dict[str, bytes | None]:
    """Return the content of points.npz, motions.npz and cell.json; None for a file that must not be there."""
    evidence = result.evidence
    own = {
        "survey": settings(result.cell.survey),
        "shape": evidence.shape,
        "families": evidence.families,
        "kinds": evidence.kinds,
        "unknown": [{"limit": limit, "joint": joint} for limit, joint in evidence.unknown],
        "not_checked": evidence.not_checked,
        "stopped": evidence.stopped,
    }
    return {
        "points.npz": _points(evidence.points),
        "motions.npz": _motions(evidence.points),
        "cell.json": cell_file(result, own),
    }


def _points(points: Points) -> bytes:
    """Return every array of the points under its own name, and the profiles' as `profile_first` and so on.

    Texts are of fixed width. SI units, world axes.
    """
    arrays = {item.name: getattr(points, item.name) for item in fields(Points) if item.name not in APART}
    arrays |= {f"profile_{item.name}": getattr(points.profiles, item.name) for item in fields(Profiles)}
    return archive(**arrays)


def _motions(points: Points) -> bytes | None:
    """Return q, v and a (k, n) of each straight stroke by its row, as q_12 and so on, and their common period_s.

    `rows` names the strokes, `start_s_12` the time of the first row. None without a straight stroke.
    """
    if not points.motions:
        return None
    arrays = {"rows": np.array(sorted(points.motions), dtype=np.int64)}
    for row, motion in sorted(points.motions.items()):
        arrays |= {f"{name}_{row}": getattr(motion, name) for name in ABOUT_STROKES}
        arrays[f"start_s_{row}"] = np.array(motion.start_s)
        arrays["period_s"] = np.array(motion.period_s)
    return archive(**arrays)
