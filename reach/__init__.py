"""Will this arm deliver these paddle twists?

    import reach

    cell = reach.load_cell("cell.toml")
    result = reach.follow_commands(cell)
    print(result.verdict.sentence)

Nothing heavy is imported until a name is first used.
"""

from __future__ import annotations

from importlib import import_module
from typing import TYPE_CHECKING

if TYPE_CHECKING:
    from reach.api import describe_cell as describe_cell
    from reach.api import follow_commands as follow_commands
    from reach.api import recheck_results as recheck_results
    from reach.api import size_rally as size_rally
    from reach.api import survey_strikes as survey_strikes
    from reach.api import try_law as try_law
    from reach.api import write_results as write_results
    from reach.cell import Cell as Cell
    from reach.errors import InputError as InputError
    from reach.formats import load_cell as load_cell
    from reach.result import FollowResult as FollowResult
    from reach.result import RallyResult as RallyResult
    from reach.result import RecheckResult as RecheckResult
    from reach.result import SurveyResult as SurveyResult
    from reach.result import TrialResult as TrialResult

__version__ = "0.1.0"

_HOMES = {
    "Cell": "reach.cell",
    "FollowResult": "reach.result",
    "InputError": "reach.errors",
    "RallyResult": "reach.result",
    "RecheckResult": "reach.result",
    "SurveyResult": "reach.result",
    "TrialResult": "reach.result",
    "describe_cell": "reach.api",
    "follow_commands": "reach.api",
    "load_cell": "reach.formats",
    "recheck_results": "reach.api",
    "size_rally": "reach.api",
    "survey_strikes": "reach.api",
    "try_law": "reach.api",
    "write_results": "reach.api",
}

__all__ = sorted(_HOMES)


def __getattr__(name: str) -> object:
    if name not in _HOMES:
        raise AttributeError(f"module 'reach' has no attribute {name!r}; it has {', '.join(__all__)}")
    return getattr(import_module(_HOMES[name]), name)
