"""Deliberate bugs: each is put into the program, and the second opinion or a witness must catch it.

A witness is a fact about an honest run that needs no second opinion: a log made from a legal joint motion is
deliverable, and no followed motion passes a stated limit.
"""

from __future__ import annotations

import json
from collections.abc import Callable
from dataclasses import replace
from pathlib import Path
from typing import Any

import numpy as np
import pinocchio as pin
import pytest
from recheck_case import differing
from test_recheck_follow import LIMITS, ran

from reach.cell import Pose
from reach.paddle import RigidMass

Patch = Callable[[pytest.MonkeyPatch], None]
# Bumps that the arm delivers with ease, and that take it to its limits, torque too where the shoulder is weaker.
RUNS = {"calm": (0.5, LIMITS), "pressed": (2.5, LIMITS.replace("torque_nm = 120.0", "torque_nm = 45.0"))}


def swapped(place: str, change: Callable[[Any], Any]) -> Patch:
    """Put change(what stands there) in a place named "module:attribute" or "module:Class.attribute"."""

    def patch(monkeypatch: pytest.MonkeyPatch) -> None:
        module, _, path = place.partition(":")
        target: Any = __import__(module, fromlist=["_"])
        *owners, name = path.split(".")
        for owner in owners:
            target = getattr(target, owner)
        monkeypatch.setattr(target, name, change(getattr(target, name)))

    return patch


def after(change: Callable[..., Any]) -> Callable[[Any], Any]:
    """A function whose answer is changed: change(answer, *its arguments)."""

    def wrap(function: Any) -> Any:
        return lambda *given, **named: change(function(*given, **named), *given)

    return wrap


def wider(init: Any) -> Any:
    """A limit kind that takes what is stated for a tenth more."""

    def made(self: Any, cell: Any) -> None:
        init(self, cell)
        self.lo, self.hi = self.lo * 1.1, self.hi * 1.1
        self.keep(cell)
        self.kept = np.array([self.kept_hi, -self.kept_lo])

    return made


def forgetful(rows: Any) -> Any:
    """Rows of torque rate from the torque at rest, not from the last one."""
    return lambda self, now, most: rows(self, now._replace(torque=now.state.bias), most)


def weightless(torque: Any) -> Any:
    """Torques less what holds the posture still."""
    return lambda self, q, v, a: torque(self, q, v, a) - torque(self, q, 0 * v, 0 * a)


def flipped(xml: tuple[str, dict[str, str]], *_: Any) -> tuple[str, dict[str, str]]:
    """The third joint's axis the other way round."""
    head, mark, tail = xml[0].partition('<joint name="chain_2"')
    assert '<axis xyz="0.0 0.0 1.0"/>' in tail
    return head + mark + tail.replace('<axis xyz="0.0 0.0 1.0"/>', '<axis xyz="0.0 0.0 -1.0"/>', 1), xml[1]


def massless(body: RigidMass, *_: Any) -> RigidMass:
    return replace(body, mass_kg=1e-9, inertia_kg_m2=body.inertia_kg_m2 * 1e-9)


def no_base(cell: Any, *_: Any, **__: Any) -> Any:
    return replace(cell, arm=replace(cell.arm, base=Pose()))


BUGS = {
    "a limit off by its margin": swapped("reach.limits.base:Limit.__init__", wider),
    "the Jacobian in the paddle's axes, in the step": swapped("reach.arm:WORLD_AXES", lambda _: pin.LOCAL),
    "the Jacobian about the wrong point, in the measure": swapped(
        "reach.kinematics:Chain.twists", after(lambda found, *_: (found[0] * 1.001, *found[1:]))
    ),
    "torque without gravity, in the measure": swapped("reach.arm:Arm.torque", weightless),
    "torque without gravity, in the step": swapped(
        "reach.arm:Arm.at",
        after(lambda state, self, q, v: state._replace(bias=state.bias - self.static_torque(q))),
    ),
    "the last torque forgotten": swapped("reach.limits.torque_rate:TorqueRate.rows", forgetful),
    "the sign of an axis": swapped("reach.formats.toml_arm:write_model", after(flipped)),
    "the paddle's mass dropped": swapped("reach.arm:paddle_mass", after(massless)),
    "dry friction dropped": swapped("reach.arm:Arm.losses", lambda _: lambda self, v: self.damping * v),
    "gravity the other way round": swapped(
        "reach.arm:_reduced_model", after(lambda model, *_: _turned_over(model))
    ),
    "torque rate over a quarter of a period": swapped(
        "reach.limits.base:Fine.change",
        lambda _: lambda self, values, before: np.gradient(values, axis=0) * 4e3,
    ),
    "the strike window forgotten": swapped(
        "reach.evidence.strikes:window_times", lambda _: lambda time_s, half_s, period_s: np.array([time_s])
    ),
    "the axes of the twists mistaken": swapped(
        "reach.follow.bench:build_reference", lambda build: lambda cell, *rest: build(no_base(cell), *rest)
    ),
    "the point of the twists forgotten": swapped(
        "reach.follow.reference:_point_offset", lambda _: lambda cell, follow: np.zeros(3)
    ),
    "a log read as held, not as drawn": swapped(
        "reach.follow.bench:build_reference",
        lambda build: lambda cell, follow, *rest: build(cell, replace(follow, interpolation="hold"), *rest),
    ),
}


def _turned_over(model: Any) -> Any:
    model.gravity.linear = -model.gravity.linear
    return model


def verdict_of(folder: Path) -> dict[str, Any]:
    """What a run says."""
    return json.loads((folder / "verdict.json").read_text("utf-8"))


def symptoms(folder: Path) -> list[str]:
    """What speaks against a run of both logs: differences, a legal log not delivered, a limit passed."""
    found = []
    for name, (peak, limits) in RUNS.items():
        (folder / name).mkdir()
        out = ran(folder / name, "base", "[0.01, 0.02, -0.05]", "linear", peak, limits)
        found += [f"{name}: {item.kind} {item.where} differs" for item in differing(out)]
        said = verdict_of(out)
        if name == "calm" and said["verdict"] != "deliverable":
            found.append("a legal log is not delivered")
        uses = [limit["utilisation"] for limit in said["limits"] if limit["utilisation"] is not None]
        found += ["a limit is passed"] * (max(uses, default=0.0) > 1 + 1e-6)
    return found


def test_the_honest_program_shows_none_of_it_and_is_pressed(tmp_path):
    assert symptoms(tmp_path) == []
    most: dict[str, float] = {}
    for limit in verdict_of(tmp_path / "pressed" / "out")["limits"]:
        most[limit["limit"]] = max(most.get(limit["limit"], 0.0), limit["utilisation"])
    # Each is used up to its margin, so a bug in its rows or its measure can show.
    assert most["acceleration"] > 0.97 and most["torque"] > 0.89 and most["torque rate"] > 0.94


@pytest.mark.parametrize("bug", BUGS)
def test_a_deliberate_bug_is_caught(tmp_path, monkeypatch, bug):
    BUGS[bug](monkeypatch)
    assert symptoms(tmp_path)
