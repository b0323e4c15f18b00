"""How a second opinion is put into words, the same in every output."""

from __future__ import annotations

import math

from reach.evidence.items import Check, Item
from reach.report.cautions import with_speed
from reach.report.columns import shorten
from reach.report.recheck.numbers import Found, Kind, Left, left_out, off
from reach.report.wording import NOTHING, number, plain, plural
from reach.result import RecheckResult

INSTALL = "pip install 'strikecheck[second-opinion]'"
EXTRA = "[second-opinion]"  # by which a text is known to say so already
TEXT_COLUMNS = 240  # of one text that comes out of the folder
UNIT_COLUMNS = 12
OFF = 4  # comparisons of one item told

KINDS_HEADER = (
    *("kind", "#items", "#agree", "#differ", "#not checkable"),
    *("#worst difference", "#allowed", "unit", "in what"),
)
DIFFERING_HEADER = ("kind", "where", "what", "#difference", "#allowed", "unit", "in words")
LEFT_HEADER = ("kind", "#items", "why")
VERSIONS_HEADER = ("program", "then", "now")

READING = (
    "The second opinion reads what the run stored, and works out anew what it claims, with code that shares nothing "
    "with what wrote it. Torques come from a second engine.",
    "An item is one claim about one thing. It agrees where every comparison stays within what rounding may leave, and "
    "differs where one does not. It is not checkable where something of it was left out.",
    "A difference is a size, in the unit beside it. Of a limit it is how far the limit is passed.",
    "Where one item differs, one of the two is wrong, and this page can't tell which. Don't rely on the stored verdict "
    "until the difference is explained.",
    "What was found by a search is checked for what it is. That nothing better exists, no second opinion can show; the "
    "notes say where a verdict rests on that.",
)
CAUTION = (
    "Agreement says that the stored numbers follow from the stated limits by a second way. It does not say that the "
    "stated limits are the arm's own."
)


def told(text: str) -> str:
    """Return a text out of the folder, safe to show and no longer than a few lines."""
    return shorten(plain(text), TEXT_COLUMNS)


def is_words(check: Check) -> bool:
    """Whether a comparison is of words, which are equal or not."""
    return not check.unit and check.allowed == 0


def size(check: Check) -> str:
    """Return a difference without its unit."""
    if is_words(check) and math.isfinite(check.difference):
        return "not equal" if check.difference else "equal"
    return _value(check.difference)


def allowance(check: Check) -> str:
    """Return what is allowed, without its unit; a dash for words."""
    return NOTHING if is_words(check) else _value(check.allowed)


def unit(check: Check) -> str:
    """Return the unit; a dash for words and shares."""
    return shorten(plain(check.unit), UNIT_COLUMNS) or NOTHING


def place_text(item: Item) -> str:
    """Return of what an item is."""
    return told(item.where) or "the whole"


def found_text(found: Found) -> str:
    """Return which comparison of what."""
    known = found.check.text in found.item.where
    name = told(found.check.name) if known else check_name(found.check)
    return f"{name}, {told(found.item.where)}" if found.item.where else name


def check_name(check: Check) -> str:
    """Return what was compared, with whose it is where that is told."""
    return told(check.name) + (f" ({told(check.text)})" if check.text and not is_words(check) else "")


def check_text(check: Check) -> str:
    """Return a difference in words."""
    name = check_name(check)
    if is_words(check):
        return f"{name}: {told(check.text) or size(check)}"
    by = f"differs by {size(check)}" if math.isfinite(check.difference) else f"difference is {size(check)}"
    return f"{name} {with_unit(by, check)}, {with_unit(allowance(check), check)} allowed"


def with_unit(value: str, check: Check) -> str:
    """Return a value as it is written, with the unit where it is a number that has one."""
    return f"{value} {unit(check)}" if check.unit and value[-1].isdigit() else value


def item_text(item: Item) -> str:
    """Return a differing item in words: what, and by how much."""
    checks = off(item)
    parts = [check_text(check) for check in checks[:OFF]]
    parts += [f"and {len(checks) - OFF} more"] if len(checks) > OFF else []
    known = not item.where and checks[0].name == item.kind
    return "; ".join(parts) if known else f"{item_name(item)}: {'; '.join(parts)}"


def item_name(item: Item) -> str:
    """Return what is claimed and of what."""
    return f"{told(item.kind)}, {told(item.where)}" if item.where else told(item.kind)


def kind_row(kind: Kind) -> tuple[str, ...]:
    """Return the cells under KINDS_HEADER."""
    found = kind.worst
    last = (
        (NOTHING,) * 4
        if found is None
        else (size(found.check), allowance(found.check), unit(found.check), found_text(found))
    )
    return (
        *(told(kind.kind), str(kind.items), str(kind.agree), str(kind.differ), str(kind.not_checkable)),
        *last,
    )


def differing_rows(item: Item) -> list[tuple[str, ...]]:
    """Return the cells under DIFFERING_HEADER, a row each comparison that differs."""
    return [
        (
            *(told(item.kind), place_text(item), told(check.name)),
            *(size(check), allowance(check), unit(check), told(check.text) or NOTHING),
        )
        for check in off(item)
    ]


def left_row(left: Left) -> tuple[str, str, str]:
    """Return the cells under LEFT_HEADER."""
    return told(left.kind), str(left.items), told(left.why)


def left_text(left: Left) -> str:
    """Return what was left out in words."""
    return f"{told(left.kind)}, {plural(left.items, 'item')}: {told(left.why)}"


def install_hint(result: RecheckResult) -> str:
    """Return how to get the second engine where that may help; nothing where it was used or a reason says it."""
    left = left_out(result.items)
    if result.engine is not None or not left or any(EXTRA in one.why for one in left):
        return ""
    return f"No second engine was used. Where it is not installed: {INSTALL}"


def about(result: RecheckResult) -> list[tuple[str, str]]:
    """Return what was looked at and by what, names with values."""
    program = result.versions.get("strikecheck")
    return [
        ("folder", told(result.folder)),
        ("written by", told(f"strikecheck {result.of}" + (f", version {program}" if program else ""))),
        ("second engine", told(result.engine) if result.engine else "none"),
    ]


def version_rows(then: dict[str, str | None], now: dict[str, str | None]) -> list[tuple[str, str, str]]:
    """Return the cells under VERSIONS_HEADER, the programs of now first."""
    return [(told(name), _version(then, name), _version(now, name)) for name in dict.fromkeys([*now, *then])]


def cautions() -> tuple[str, ...]:
    """Return the cautions for a second opinion."""
    return (CAUTION, *with_speed(None, ""))


def _version(versions: dict[str, str | None], name: str) -> str:
    if name not in versions:
        return NOTHING
    return told(str(versions[name] or "")) or "not installed"


def _value(value: float) -> str:
    if math.isnan(value):
        return "no number"
    return "infinite" if math.isinf(value) else number(value, 3)
