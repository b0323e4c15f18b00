"""A second opinion stores no evidence of its own."""

from __future__ import annotations

from reach.result import RecheckResult


def evidence_files(result: RecheckResult) -> dict[str, bytes | None]:
    """Return no file: what was looked at is in the folder that was."""
    del result
    return {}
