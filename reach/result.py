"""The frozen results of the commands: the question, the evidence, the verdict and what would help."""

from __future__ import annotations

from abc import ABC, abstractmethod
from dataclasses import dataclass
from typing import ClassVar

from reach.cell import Cell, Input
from reach.evidence.items import Item
from reach.evidence.points import SurveyEvidence
from reach.evidence.rallies import RallyEvidence
from reach.evidence.record import Evidence, Need, Reason, Remedy, SolverCount
from reach.evidence.trials import TrialEvidence
from reach.verdict import Verdict


@dataclass(frozen=True, eq=False, kw_only=True)
class Result(ABC):
    """What every command's answer has.

    Attributes
    ----------
    command : the command's own name
    cell : Cell, the question
    verdict : Verdict
    without_margins : the verdict with the margins at zero
    reasons : deciding ones first
    needs, remedies : in the order in which a user can act on them
    headroom_share : how much all limits but position could shrink together beyond the margins and still deliver;
        negative where they must grow; None where no factor tried does
    headroom_text : the same in words
    not_checked : names of what was not checked at all
    failed : whether a solver failed, so that the verdict can't be trusted
    notes : what else is worth saying, a line each
    """

    command: ClassVar[str]

    cell: Cell
    verdict: Verdict
    without_margins: str
    reasons: tuple[Reason, ...]
    needs: tuple[Need, ...]
    remedies: tuple[Remedy, ...]
    headroom_share: float | None
    headroom_text: str
    notes: tuple[str, ...]

    @property
    @abstractmethod
    def not_checked(self) -> tuple[str, ...]:
        """Names of what was not checked at all."""

    @property
    def failed(self) -> bool:
        """Whether a solver failed, so that the verdict can't be trusted."""
        return False


@dataclass(frozen=True, eq=False, kw_only=True)
class FollowResult(Result):
    """The answer on a command log, the log in its cell.

    Attributes
    ----------
    reading : how frame, point and interpolation of the log were read, in words
    evidence : Evidence
    without_pose_gain : the verdict of a plain replay where the cell asks for pose feedback, else None
    solver : SolverCount
    """

    command: ClassVar[str] = "follow"

    reading: str
    evidence: Evidence
    without_pose_gain: str | None
    solver: SolverCount

    @property
    def not_checked(self) -> tuple[str, ...]:
        """Names of what was not checked at all."""
        return self.evidence.not_checked

    @property
    def failed(self) -> bool:
        """Whether a step was answered by no solver."""
        return self.evidence.failed_steps > 0


@dataclass(frozen=True, eq=False, kw_only=True)
class SurveyResult(Result):
    """The answer on where the arm can strike, and how fast.

    Attributes
    ----------
    evidence : SurveyEvidence
    """

    command: ClassVar[str] = "survey"

    evidence: SurveyEvidence

    @property
    def not_checked(self) -> tuple[str, ...]:
        """Names of what was not checked at all."""
        return self.evidence.not_checked


@dataclass(frozen=True, eq=False, kw_only=True)
class RallyResult(Result):
    """The answer on how large the usable juggling envelope is.

    Attributes
    ----------
    evidence : RallyEvidence
    """

    command: ClassVar[str] = "rally"

    evidence: RallyEvidence

    @property
    def not_checked(self) -> tuple[str, ...]:
        """Names of what was not checked at all."""
        return self.evidence.not_checked


@dataclass(frozen=True, eq=False, kw_only=True)
class TrialResult(Result):
    """The answer on whether a law, on this arm, keeps the ball up.

    Attributes
    ----------
    evidence : TrialEvidence
    """

    command: ClassVar[str] = "trial"

    evidence: TrialEvidence

    @property
    def not_checked(self) -> tuple[str, ...]:
        """Names of what was not checked at all."""
        return self.evidence.not_checked

    @property
    def failed(self) -> bool:
        """Whether a trial ended because no solver answered."""
        return any(run.outcome == "solver failed" for run in self.evidence.runs)


@dataclass(frozen=True, eq=False, kw_only=True)
class RecheckResult:
    """The second opinion on a folder of results.

    Attributes
    ----------
    folder : that was looked at; of : the command that wrote it; stored : its verdict
    items : every claim looked at, in the order in which it was
    verdict : "agree", "differ" or "not checkable"
    engine : the second engine and its version, None without one
    files : what was read, with the digests found
    notes : what rests on a search and can't be decided anew, a line each
    versions : of what wrote the folder, by name
    """

    command: ClassVar[str] = "recheck"

    folder: str
    of: str
    stored: str
    items: tuple[Item, ...]
    verdict: Verdict
    engine: str | None
    files: tuple[Input, ...]
    notes: tuple[str, ...]
    versions: dict[str, str | None]

    @property
    def failed(self) -> bool:
        """Whether a solver failed; there is none here."""
        return False


Answer = Result | RecheckResult  # of any command
