"""Results as plain data: what verdict.json holds and the other reports share."""

from __future__ import annotations

import importlib.metadata
import math
import platform
from collections.abc import Iterable, Mapping
from dataclasses import asdict
from typing import Any

import numpy as np

import reach
from reach.report.wording import all_notes
from reach.report.writers import part
from reach.result import Answer, Result

DIGITS = 9  # significant digits of a value that leaves the program
TIME_DECIMALS = 9  # of an instant: nanoseconds, whatever the log's zero is
TIMES = ("time_s", "until_s")
# Names in versions beside this program's own, and the distributions they come from.
DISTRIBUTIONS = {
    "pinocchio": "pin",
    "qpsolvers": "qpsolvers",
    "numpy": "numpy",
    "scipy": "scipy",
    "daqp": "daqp",
    "piqp": "piqp",
}


def document(result: Answer) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema."""
    content: dict[str, Any] = part(result.command, "document").document(result)
    return content


def whole(
    result: Result,
    version: int,
    own: Mapping[str, Any],
    unknown: Iterable[tuple[str, str | None]],
    cautions: tuple[str, ...],
) -> dict[str, Any]:
    """Return what every command's document has, with what is a command's own between head and foot.

    Parameters
    ----------
    version : of the command's schema
    unknown : (limit, joint) pairs nobody stated
    """
    content = {
        "schema": f"strikecheck/{result.command}/{version}",
        "verdict": result.verdict.verdict,
        "sentence": result.verdict.sentence,
        "without_margins": result.without_margins,
        "reasons": [asdict(reason) for reason in result.reasons],
        "not_checked": result.not_checked,
        "unknown": [{"limit": limit, "joint": joint} for limit, joint in unknown],
        "needs": [asdict(need) for need in result.needs],
        "remedies": [asdict(remedy) for remedy in result.remedies],
        "headroom_share": result.headroom_share,
        "headroom_text": result.headroom_text,
        **own,
        "notes": all_notes(result),
        "cautions": cautions,
        "inputs": [asdict(source) for source in result.cell.inputs],
        "versions": versions(),
    }
    tidy: dict[str, Any] = strict(content)
    return tidy


def strict(value: Any, key: str = "", digits: int | None = DIGITS) -> Any:
    """Return the value as strict JSON allows it: no infinity and no nan (None instead), floats rounded
    to so many significant digits, instants to nanoseconds; with `digits` None nothing is rounded.

    Lone surrogates, which file names may hold and UTF-8 does not, become escapes.
    """
    if isinstance(value, dict):
        return {name: strict(item, name, digits) for name, item in value.items()}
    if isinstance(value, (list, tuple)):
        return [strict(item, key, digits) for item in value]
    if isinstance(value, str):
        return encodable(value)
    if isinstance(value, (bool, np.bool_)):
        return bool(value)
    if isinstance(value, (int, np.integer)):
        return int(value)
    if isinstance(value, (float, np.floating)):
        return _rounded(float(value), key, digits)
    return value


def encodable(text: str) -> str:
    """Return the text with lone surrogates written as escapes."""
    return text.encode("utf-8", "backslashreplace").decode("utf-8")


def versions() -> dict[str, str | None]:
    """Return the versions of what produced the result; None for what is not installed as a distribution."""
    found: dict[str, str | None] = {"strikecheck": reach.__version__}
    for name, distribution in DISTRIBUTIONS.items():
        try:
            found[name] = importlib.metadata.version(distribution)
        except importlib.metadata.PackageNotFoundError:
            found[name] = None
    return {**found, "python": platform.python_version()}


def _rounded(value: float, key: str, digits: int | None) -> float | None:
    if not math.isfinite(value):
        return None
    if digits is None:
        return value
    rounded = round(value, TIME_DECIMALS) if key in TIMES else float(f"{value:.{digits}g}")
    return rounded + 0.0  # no negative zero
