"""The second opinion as plain data: every item in full."""

from __future__ import annotations

import math
from dataclasses import asdict
from typing import Any

from reach.evidence.items import AGREE, DIFFER, NOT_CHECKABLE, Check, Item, counts
from reach.report.document import strict, versions
from reach.report.recheck.numbers import Found, Kind, kinds, left_out
from reach.report.recheck.wording import cautions, install_hint, left_text
from reach.report.wording import plain
from reach.result import RecheckResult

SCHEMA = "strikecheck/recheck/1"


def document(result: RecheckResult) -> dict[str, Any]:
    """Return the result as dicts, lists, strings, numbers and None, in the order of the published schema.

    Control characters of texts, which come out of the folder, are escapes.
    """
    found = counts(result.items)
    hint = install_hint(result)
    content = {
        "schema": SCHEMA,
        "verdict": result.verdict.verdict,
        "sentence": result.verdict.sentence,
        "folder": result.folder,
        "of": result.of,
        "stored_verdict": result.stored,
        "engine": result.engine,
        "counts": {
            "items": len(result.items),
            "agree": found[AGREE],
            "differ": found[DIFFER],
            "not_checkable": found[NOT_CHECKABLE],
        },
        "kinds": [_kind(kind) for kind in kinds(result.items)],
        "not_checked": [*map(left_text, left_out(result.items)), *([hint] if hint else [])],
        "notes": result.notes,
        "cautions": cautions(),
        "inputs": [asdict(source) for source in result.files],
        "versions": now(),
        "versions_stored": result.versions,
        "items": [_item(item) for item in result.items],
    }
    tidy: dict[str, Any] = _shown(strict(content))
    return tidy


def now() -> dict[str, str | None]:
    """Return the versions of what gives the second opinion."""
    return versions()


def text_of(check: Check) -> str:
    """Return what a comparison has in words, with what its numbers can't say in JSON."""
    told = [check.text] if check.text else []
    for name, value in (("difference", check.difference), ("allowed", check.allowed)):
        if not math.isfinite(value):
            told.append(f"{name} is {'no number' if math.isnan(value) else 'infinite'}")
    return "; ".join(told)


def _item(item: Item) -> dict[str, Any]:
    return {
        "kind": item.kind,
        "where": item.where,
        "status": item.status,
        "left_out": item.left_out,
        "checks": [_check(check) for check in item.checks],
    }


def _check(check: Check) -> dict[str, Any]:
    return {
        "name": check.name,
        "difference": check.difference,
        "allowed": check.allowed,
        "unit": check.unit,
        "agrees": check.agrees,
        "text": text_of(check),
    }


def _kind(kind: Kind) -> dict[str, Any]:
    return {**asdict(kind), "worst": _worst(kind.worst)}


def _worst(found: Found | None) -> dict[str, Any] | None:
    return None if found is None else {"where": found.item.where, **_check(found.check)}


def _shown(value: Any) -> Any:
    """The value with every text, names of keys too, safe for a terminal."""
    if isinstance(value, dict):
        return {plain(name): _shown(item) for name, item in value.items()}
    if isinstance(value, list):
        return [_shown(item) for item in value]
    return plain(value) if isinstance(value, str) else value
