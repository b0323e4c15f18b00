"""The frozen result of `follow`: the question, the evidence, the verdict and what would help."""

from __future__ import annotations

from dataclasses import dataclass

from reach.cell import Cell
from reach.evidence.record import Evidence, Need, Reason, Remedy, SolverCount
from reach.verdict import Verdict


@dataclass(frozen=True, eq=False)
class FollowResult:
    """Everything a report needs.

    Attributes
    ----------
    cell : Cell, the log in it
    reading : how frame, point and interpolation of the log were read, in words
    evidence : Evidence
    verdict : Verdict
    without_margins : the verdict with the margins at zero
    without_pose_gain : the verdict of a plain replay where the cell asks for pose feedback, else None
    reasons : deciding ones first
    needs, remedies : in the order in which a user can act on them
    headroom_share : how much all limits but position could shrink together beyond the margins and still deliver;
        negative where they must grow; None where no factor tried does
    headroom_text : the same in words
    solver : SolverCount
    notes : what else is worth saying, a line each
    """

    cell: Cell
    reading: str
    evidence: Evidence
    verdict: Verdict
    without_margins: str
    without_pose_gain: str | None
    reasons: tuple[Reason, ...]
    needs: tuple[Need, ...]
    remedies: tuple[Remedy, ...]
    headroom_share: float | None
    headroom_text: str
    solver: SolverCount
    notes: tuple[str, ...]
