"""Kinds of value a TOML key can hold; each reads one value, or notes a fault at its dotted key.

The contract of a kind: `read(value, where, faults)` returns the value in plain Python types, or None after
adding a fault. A boolean is no number, and NaN and infinity are no numbers either.
"""

from __future__ import annotations

import json
import math
import re
from collections.abc import Mapping
from dataclasses import dataclass, field
from typing import Any, Protocol

from reach.errors import FaultList, nearest
from reach.formats.capped import MAX_SHOWN
from reach.formats.magnitude import DUST, LARGEST, LEAST_POSITIVE, misfit, without_dust

INF = math.inf
MAX_ITEMS_SHOWN = 6  # of a list that stands where it must not
LONGEST_WHOLE_BITS = 200  # a longer whole number is not printed
_BARE_KEY = re.compile(r"[A-Za-z0-9_-]+")


class Kind(Protocol):
    """What every kind of value can do."""

    def read(self, value: Any, where: str, faults: FaultList) -> Any:
        """Return the checked value, or None after noting a fault."""
        ...


def dotted(where: str, key: str) -> str:
    """Dotted TOML key of `key` in the table at `where`, quoted where TOML would quote it."""
    shown = key if _BARE_KEY.fullmatch(key) else json.dumps(key, ensure_ascii=False)
    return f"{where}.{shown}" if where else shown


def shown(value: Any) -> str:
    """A TOML value as a user would know it again, cut to a sane length."""
    if isinstance(value, bool):
        return "true" if value else "false"
    if isinstance(value, dict):
        return "a table"
    if isinstance(value, list):
        return _shown_list(value)
    if isinstance(value, int) and value.bit_length() > LONGEST_WHOLE_BITS:
        return "a number with too many digits"
    text = json.dumps(value, ensure_ascii=False) if isinstance(value, str) else str(value)
    return text if len(text) <= 60 else text[:57] + "..."


def _shown_list(value: list[Any]) -> str:
    if value and all(isinstance(item, dict) for item in value):
        return "an array of tables"
    items = ["[…]" if isinstance(item, list) else shown(item) for item in value[:MAX_ITEMS_SHOWN]]
    return f"[{', '.join([*items, '…'] if len(value) > MAX_ITEMS_SHOWN else items)}]"


@dataclass(frozen=True)
class Number:
    """A finite number in a range; `above` and `below` exclude their end, `hint` tells the likely slip.

    Unless `least` says it, the smallest size other than 0 follows from the range. Where both signs may
    stand, what rounding leaves of a zero is read as 0.
    """

    lo: float = -INF
    hi: float = INF
    above: float = -INF
    below: float = INF
    hint: str = ""
    least: float | None = None

    def read(self, value: Any, where: str, faults: FaultList) -> float | None:
        """Return the number as a float."""
        if isinstance(value, bool) or not isinstance(value, (int, float)):
            faults.add(where, f"is {shown(value)}; give a number")
            return None
        try:
            number = float(value)
        except OverflowError:
            number = INF
        if not math.isfinite(number):
            faults.add(where, f"is {shown(value)}; give a finite number")
            return None
        if not (self.lo <= number <= self.hi and self.above < number < self.below):
            hint = f" ({self.hint})" if self.hint else ""
            faults.add(where, f"is {number:g}; it must be {self.range_text()}{hint}")
            return None
        if self.lo < 0 and self.above < 0 and self.least is None:
            number = without_dust(number)
        wrong = misfit(number, self.smallest)
        if wrong:
            faults.add(where, wrong)
            return None
        return number

    @property
    def smallest(self) -> float:
        """Smallest size of a number that is not 0."""
        if self.least is not None:
            return self.least
        return LEAST_POSITIVE if self.above >= 0 else DUST

    def range_text(self) -> str:
        """The range in words, empty without one."""
        words = []
        if self.above > -INF:
            words.append(f"above {self.above:g}")
        if self.lo > -INF:
            words.append(f"at least {self.lo:g}")
        if self.below < INF:
            words.append(f"below {self.below:g}")
        if self.hi < INF:
            words.append(f"at most {self.hi:g}")
        return " and ".join(words)


@dataclass(frozen=True)
class Integer:
    """A whole number from `lo` to `hi`."""

    lo: int = 0
    hi: int = int(LARGEST)

    def read(self, value: Any, where: str, faults: FaultList) -> int | None:
        """Return the whole number."""
        if isinstance(value, bool) or not isinstance(value, int):
            faults.add(where, f"is {shown(value)}; give a whole number")
            return None
        if not self.lo <= value <= self.hi:
            faults.add(where, f"is {shown(value)}; it must be a whole number {self.range_text()}")
            return None
        return value

    def range_text(self) -> str:
        """The range in words."""
        return f"of at least {self.lo} and at most {self.hi}"


@dataclass(frozen=True)
class Flag:
    """true or false."""

    def read(self, value: Any, where: str, faults: FaultList) -> bool | None:
        """Return the truth value."""
        if not isinstance(value, bool):
            faults.add(where, f"is {shown(value)}; give true or false")
            return None
        return value


@dataclass(frozen=True)
class Text:
    """A string that is not empty."""

    def read(self, value: Any, where: str, faults: FaultList) -> str | None:
        """Return the string."""
        if not isinstance(value, str) or not value.strip():
            faults.add(where, f'is {shown(value)}; give a text in quotes, such as "…"')
            return None
        return value


@dataclass(frozen=True)
class OneOf:
    """One of a few words; `why` is added to the message for a wrong one."""

    words: tuple[str, ...]
    why: str = ""

    def read(self, value: Any, where: str, faults: FaultList) -> str | None:
        """Return the word."""
        if isinstance(value, str) and value in self.words:
            return value
        choices = ", ".join(f'"{word}"' for word in self.words)
        close = nearest(value, self.words) if isinstance(value, str) else ""
        hint = close if "did you mean" in close else ""
        faults.add(where, f"is {shown(value)}; it must be one of {choices}{self.why}{hint}")
        return None


@dataclass(frozen=True)
class ListOf:
    """A list of one kind, of a fixed length or between a least and a greatest."""

    item: Kind
    length: int | None = None
    least: int = 0
    what: str = "values"
    most: int | None = None

    def read(self, value: Any, where: str, faults: FaultList) -> tuple[Any, ...] | None:
        """Return the items as a tuple."""
        if not isinstance(value, list):
            size = f" {self.length}" if self.length is not None else ""
            faults.add(where, f"is {shown(value)}; give a list of{size} {self.what} in brackets")
            return None
        if self.length is not None and len(value) != self.length:
            faults.add(where, f"has {len(value)} {self.what}; it must have {self.length}")
            return None
        if len(value) < self.least:
            faults.add(where, f"has {len(value)} {self.what}; it must have at least {self.least}")
            return None
        if self.most is not None and len(value) > self.most:
            faults.add(where, f"has {len(value)} {self.what}; it must have at most {self.most}")
            return None
        items = [self.item.read(item, f"{where}[{i}]", faults) for i, item in enumerate(value)]
        return None if any(item is None for item in items) else tuple(items)


@dataclass(frozen=True)
class Either:
    """A word of a few, or another kind when the value is no string."""

    words: OneOf
    other: Kind

    def read(self, value: Any, where: str, faults: FaultList) -> Any:
        """Return the word or the other kind's value."""
        return (self.words if isinstance(value, str) else self.other).read(value, where, faults)


@dataclass(frozen=True)
class ByName:
    """A table whose keys are the user's own names, all values of one kind."""

    item: Kind

    def read(self, value: Any, where: str, faults: FaultList) -> dict[str, Any]:
        """Return name -> value for every sound value; the names are judged by whoever knows them."""
        if not isinstance(value, dict):
            faults.add(where, f"is {shown(value)}; give a table, such as {{ name = value }}")
            return {}
        read = {name: self.item.read(item, dotted(where, name), faults) for name, item in value.items()}
        return {name: item for name, item in read.items() if item is not None}


@dataclass(frozen=True)
class Key:
    """One key of a table: its kind and default; `required` says, for a missing one, what to give."""

    kind: Kind
    default: Any = None
    required: str = ""


@dataclass(frozen=True)
class Table:
    """A table with known keys. Missing or faulty values read as the default, so that reading can go on."""

    keys: Mapping[str, Key] = field(default_factory=dict)

    def read(self, value: Any, where: str, faults: FaultList) -> dict[str, Any]:
        """Return a value for every known key."""
        if not isinstance(value, dict):
            faults.add(where, f"is {shown(value)}; give a table, such as [{where}]")
            return {key: spec.default for key, spec in self.keys.items()}
        unknown = [key for key in value if key not in self.keys]
        for key in unknown[:MAX_SHOWN]:
            faults.add(dotted(where, key), f"unknown key{nearest(key, self.keys)}")
        if len(unknown) > MAX_SHOWN:
            faults.add(where or "file", f"… and {len(unknown) - MAX_SHOWN} more unknown keys")
        read: dict[str, Any] = {}
        for key, spec in self.keys.items():
            if key in value:
                item = spec.kind.read(value[key], dotted(where, key), faults)
                read[key] = spec.default if item is None else item
                continue
            read[key] = spec.default
            if spec.required:
                faults.add(dotted(where, key), f"missing; {spec.required}")
        return read
