"""verdict.json: strict JSON, the same bytes for the same result."""

from __future__ import annotations

import json

from reach.report.document import document
from reach.result import FollowResult


def write(result: FollowResult) -> str:
    """Return the verdict document as JSON text."""
    return json.dumps(document(result), ensure_ascii=False, allow_nan=False, indent=1) + "\n"
