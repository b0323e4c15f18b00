"""Where trials happen: the ball's centre at contact, and the posture that the arm waits in."""

from __future__ import annotations

from dataclasses import replace

import numpy as np

from reach.arm import Arm
from reach.cell import Array, Cell, Rally, Trial, Vec3
from reach.rally.court import Kit, points_of
from reach.rally.envelope import best_stance


def centre_of(cell: Cell) -> Vec3:
    """The trial's centre: its own, or above the strike point of the start posture."""
    trial = cell.trial
    assert trial is not None and cell.ball is not None
    if trial.centre_m is not None:
        return trial.centre_m
    assert cell.arm.start is not None, "the readers ask for a centre or a start posture"
    point, _ = Arm(cell.arm, cell.paddle).pose(np.array(cell.arm.start))
    x, y, z = (point + np.array([0.0, 0.0, cell.ball.radius_m])).tolist()
    return x, y, z


def rally_of(trial: Trial, centre: Vec3) -> Rally:
    """The points of an envelope that a trial's grid of starts stands for."""
    return Rally(centre, (trial.apex_m,), trial.starts.offsets_m, trial.starts.bearings_rad)


def ready(cell: Cell, centre: Vec3, seed: int) -> Array | None:
    """The posture (n,) from which the arm does best at the trial's points; None where none puts the face there."""
    assert cell.trial is not None
    kit = Kit(replace(cell, rally=rally_of(cell.trial, centre)), seed)
    court = kit.court(centre)
    if not len(court.stances):
        return None
    return np.asarray(court.stances[best_stance(court, points_of(kit.rally))])
