"""verdict.json: strict JSON, the same bytes for the same result."""

from __future__ import annotations

import json

from reach.report.document import document
from reach.result import Answer


def write(result: Answer) -> str:
    """Return the verdict document as JSON text."""
    return json_text(document(result))


def json_text(content: object) -> str:
    """Return plain data as JSON text."""
    return json.dumps(content, ensure_ascii=False, allow_nan=False, indent=1) + "\n"
