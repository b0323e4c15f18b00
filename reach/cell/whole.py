"""The whole cell."""

from __future__ import annotations

from dataclasses import dataclass

from reach.cell.arm import ArmSpec
from reach.cell.asked import Follow, Rally, Survey, Trial
from reach.cell.basics import Input
from reach.cell.control import Accept, Drive, Margins, SolverSpec
from reach.cell.paddle import Ball, Contact, Paddle, Tool


@dataclass(frozen=True)
class Cell:
    """A whole cell file, checked.

    `follow`, `survey`, `rally` and `trial` are None where the file has no such table. `inputs` are the files read;
    `notes` are things the readers found worth saying that are no faults (a limit ignored, a joint held at zero by
    default).
    """

    path: str
    arm: ArmSpec
    paddle: Paddle
    period_s: float = 0.001
    tool: Tool | None = None
    ball: Ball | None = None
    contact: Contact | None = None
    drive: Drive | None = None
    solver: SolverSpec = SolverSpec()
    margins: Margins = Margins()
    accept: Accept = Accept()
    follow: Follow | None = None
    survey: Survey | None = None
    rally: Rally | None = None
    trial: Trial | None = None
    inputs: tuple[Input, ...] = ()
    notes: tuple[str, ...] = ()
