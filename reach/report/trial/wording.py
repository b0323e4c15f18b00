"""How the numbers of trials are put into words, the same for terminal and page."""

from __future__ import annotations

from typing import Any

import numpy as np

from reach.cell import Array, Recovered, Sensor, Trial
from reach.evidence.record import Use
from reach.evidence.trials import Run, TrialEvidence
from reach.report.trial import numbers
from reach.report.trial.document import figures
from reach.report.trial.numbers import Ending, Loss
from reach.report.wording import (
    NOTHING,
    degrees,
    fixed,
    limit_of,
    millimetres,
    milliseconds,
    number,
    owner,
    percent,
    plain,
    plural,
)
from reach.result import TrialResult

Row = tuple[str, ...]

ENDINGS_HEADER = ("outcome", "#trials", "#recovered", "what it is")
LOSSES_HEADER = ("limit", "joint", "#lost trials")
USES_HEADER = ("limit", "joint", "#peak", "#limit", "unit", "#use %", "#at s")
RUNS_HEADER = (
    *(
        "#start",
        "#off-centre mm",
        "#at °",
        "#lateral m/s",
        "#toward °",
        "#bounces",
        "#recovered at",
        "#oscillation mm",
    ),
    *("outcome", "held back by"),
)
MEANINGS = {
    "held": "every bounce asked for was made",
    "missed past the edge": "the ball went down outside the face's edge",
    "too fast to catch": "the paddle had to cross faster than it can",
    "died on the paddle": "the ball rose too little to be struck again",
    "ran away": "the ball rose far above the wanted apex",
    "limit": "a limit held the paddle back in the flight that was lost, or the motion passed one",
    "law failed": "the law failed, or what it gave is no twist",
    "solver failed": "no solver answered a step",
}
READING = (
    "A trial is one ball and the law in closed loop on the simulated arm, from one start. It counts as recovered by "
    "the measure given above, not by being kept up alone.",
    "Apex: of the flight that follows a contact, above the centre. Offset: of the contact from the centre, horizontal.",
    "Residual oscillation: root mean square of the offsets over the last bounces that are asked for.",
    "The interval is that of a share of so many independent trials at 95 % (Wilson 1927). Starts that were laid out by "
    "hand are no random sample of all starts: it then says how few they are, and no more.",
)


def figure_rows(result: TrialResult) -> list[tuple[str, str]]:
    """Return the numbers that compare two laws, each with its name; no text where there is nothing to say."""
    f, evidence, trial = figures(result), result.evidence, result.cell.trial or Trial()
    return [
        ("law", law(evidence)),
        ("recovered", recovered(result)),
        ("counts as recovered", meaning(trial.recovered, evidence.apex_m)),
        ("ball", _ball(evidence)),
        ("sensor", sensor(trial.sensor)),
        ("bounces made", _bounces(f, trial)),
        ("settled", _settled(f)),
        ("residual oscillation", _oscillation(f)),
        ("most of a limit", _worst(evidence)),
        ("limits broken", broken(evidence)),
        ("steps", _steps(f)),
    ]


def law(evidence: TrialEvidence) -> str:
    """Return the law's name and its gains."""
    gains = ", ".join(f"{plain(name)} = {number(value, 4)}" for name, value in evidence.gains)
    return f"{plain(evidence.law)}, {gains}" if gains else f"{plain(evidence.law)}, no gains"


def recovered(result: TrialResult) -> str:
    """Return how many starts were recovered, with the interval of their share."""
    evidence = result.evidence
    if not evidence.runs:
        return f"none of {plural(evidence.asked, 'start')} tried" + (
            f": {evidence.blocked}" if evidence.blocked else ""
        )
    count, tried = int(evidence.recovered.sum()), len(evidence.runs)
    share = f"{percent(evidence.recovered_share)} %, 95 % interval {percent(evidence.low)} to {percent(evidence.high)}"
    left = evidence.asked - tried
    return f"{count} of {plural(tried, 'start')} ({share})" + (f"; {left} not tried" if left > 0 else "")


def meaning(asked: Recovered, apex_m: float) -> str:
    """Return what counts as recovered, with its figures."""
    return (
        f"contacts within {millimetres(asked.within_m)} mm of the centre and apexes within "
        f"{millimetres(asked.apex_error_m)} mm of {millimetres(apex_m)} mm, from bounce {asked.by_bounce} at the "
        f"latest, and for {plural(asked.then_for, 'bounce')} on; and the ball kept up to the last one asked for"
    )


def sensor(asked: Sensor) -> str:
    """Return how the ball is seen."""
    rate = f"at {number(asked.rate_hz)} Hz" if asked.rate_hz else "at every control period"
    exact = not asked.position_noise_m and not asked.velocity_noise_m_s
    noise = (
        "its true state"
        if exact
        else f"noise of {millimetres(asked.position_noise_m)} mm and {number(asked.velocity_noise_m_s, 3)} m/s "
        "(standard deviation of each axis)"
    )
    late = f"{milliseconds(asked.latency_s)} ms late" if asked.latency_s else "at once"
    return f"{rate}, {late}, {noise}"


def start_text(place: int, run: Run) -> str:
    """Return which start a trial is of, counted from 1."""
    away, bearing, speed, toward = _start(run)
    at = "at the centre" if bearing == NOTHING else f"{away} mm off at {bearing}°"
    return f"start {place}: {at}, lateral {speed} m/s" + ("" if toward == NOTHING else f" toward {toward}°")


def ending_row(ending: Ending) -> Row:
    """Return the cells under ENDINGS_HEADER."""
    return (
        ending.outcome,
        str(ending.trials),
        str(ending.recovered),
        MEANINGS.get(ending.outcome, NOTHING),
    )


def loss_row(loss: Loss) -> Row:
    """Return the cells under LOSSES_HEADER."""
    return loss.limit or "none", plain(loss.joint) or NOTHING, str(loss.trials)


def use_row(use: Use) -> Row:
    """Return the cells under USES_HEADER."""
    bound = use.lo if use.peak < 0 and use.lo is not None else use.hi
    return (
        use.limit,
        owner(use.joint),
        number(use.peak),
        "unknown" if use.hi is None else number(bound),
        use.unit,
        percent(use.utilisation),
        fixed(use.time_s, 3),
    )


def run_row(place: int, run: Run) -> Row:
    """Return the cells under RUNS_HEADER."""
    return (
        str(place),
        *_start(run),
        str(run.bounces),
        NOTHING if run.recovered_at is None else str(run.recovered_at),
        millimetres(run.oscillation_m),
        f"recovered: {run.text}" if run.recovered else run.text,
        limit_of(run.limit, run.joint),
    )


def broken(evidence: TrialEvidence) -> str:
    """Return the stated limits that a motion passes, nothing where none does."""
    names = dict.fromkeys(plain(name) for run in evidence.runs for name in run.broken)
    count = sum(bool(run.broken) for run in evidence.runs)
    return f"{', '.join(names)}; in {plural(count, 'trial')}" if names else ""


def _start(run: Run) -> tuple[str, str, str, str]:
    """How far off, at which bearing, how fast sideways, and toward which bearing."""
    away, at = _polar(run.offset)
    speed, toward = _polar(run.lateral)
    return millimetres(away), at, number(speed, 3), toward


def _polar(vector: Array) -> tuple[float, str]:
    """Size of a vector (2,) and its bearing in degrees, a dash for none."""
    size = float(np.hypot(*vector))
    return size, degrees(float(np.arctan2(vector[1], vector[0]) % (2 * np.pi))) if size else NOTHING


def _ball(evidence: TrialEvidence) -> str:
    centre = ", ".join(f"{x + 0.0:.3f}" for x in evidence.centre)
    return (
        f"kept up {millimetres(evidence.apex_m)} mm above ({centre}) m, a flight of "
        f"{milliseconds(evidence.flight_s)} ms"
    )


def _bounces(f: dict[str, Any], trial: Trial) -> str:
    if f["bounces_least"] is None:
        return ""
    return f"median {number(f['bounces_median'])}, least {f['bounces_least']}, of {trial.bounces} asked for"


def _settled(f: dict[str, Any]) -> str:
    if f["recovered_at_most"] is None:
        return ""
    return f"from bounce {number(f['recovered_at_median'])} (median), {f['recovered_at_most']} at the latest"


def _oscillation(f: dict[str, Any]) -> str:
    if f["oscillation_most_m"] is None:
        return ""
    return (
        f"{millimetres(f['oscillation_median_m'])} mm root mean square (median), "
        f"{millimetres(f['oscillation_most_m'])} mm at most"
    )


def _worst(evidence: TrialEvidence) -> str:
    place = numbers.worst_run(evidence.runs)
    if place is None:
        return ""
    use = numbers.known(evidence.runs[place])[0]
    return f"{percent(use.utilisation)} % of {use.limit} of {owner(use.joint)} (start {place + 1})"


def _steps(f: dict[str, Any]) -> str:
    if not f["elastic_steps"] and not f["failed_steps"]:
        return ""
    return f"{f['elastic_steps']} fell short of what was asked, {f['failed_steps']} answered by no solver"
