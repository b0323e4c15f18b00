"""Laws of control by name, and the gains that a trial gives them."""

from __future__ import annotations

from reach.cell import Trial
from reach.errors import FaultList, nearest
from reach.trial.laws.base import Law, Seen, Setup, Twist
from reach.trial.laws.mirror import Mirror
from reach.trial.laws.planning import Planning
from reach.trial.laws.user import LawFault, aside, asked, load, made, own_gains

__all__ = [
    "LAWS",
    "Law",
    "LawFault",
    "Seen",
    "Setup",
    "Twist",
    "aside",
    "asked",
    "gains_of",
    "law_class",
    "made",
]

LAWS: dict[str, type[Law]] = {"mirror": Mirror, "planning": Planning}


def law_class(trial: Trial, path: str = "cell") -> type:
    """The class of a trial's law; `path` is the cell file's, for the message.

    A class of the user's is loaded, which runs the user's file. The caller decides before whether that is allowed.
    """
    if trial.law_file is not None:
        return load(trial.law_file, trial.law)
    faults = FaultList(path)
    if trial.law not in LAWS:
        faults.add("trial.law", f'there is no law "{trial.law}"{nearest(trial.law, LAWS)}')
    faults.raise_if_any()
    return LAWS[trial.law]


def gains_of(cls: type, trial: Trial, path: str) -> dict[str, float]:
    """Every gain of a law: its own, changed by those of the trial; InputError for a name that it does not have."""
    gains = own_gains(cls, trial.law_file)
    faults = FaultList(path)
    for name, value in trial.gains:
        if name not in gains:
            known = nearest(name, gains) if gains else "; it has none"
            faults.add(f"trial.gains.{name}", f'"{name}" is no gain of the law "{trial.law}"{known}')
        else:
            gains[name] = value
    faults.raise_if_any()
    return gains
