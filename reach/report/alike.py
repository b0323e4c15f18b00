"""Texts that differ in names and numbers alone, told once."""

from __future__ import annotations

import re
from collections.abc import Iterable

# What may differ: a line number, a part's name, what stands in brackets, any number.
_VARIABLE = (r"\([^()]*\)", r"\[[^][]*\]", r"(?<=\bjoint )[^:,;]+", r"(?<=\blink )[^:,;]+")
_NUMBER = r"[-+]?\d[\d.,]*(?:e[-+]?\d+)?"


def alike(texts: Iterable[str], names: Iterable[str] = ()) -> list[tuple[str, int]]:
    """Return the first of each group of texts that say the same of different things, and how many they are.

    Parameters
    ----------
    names : what may differ between texts of a group, beside numbers and what is in brackets
    """
    words = [rf"(?<!\w){re.escape(name)}(?!\w)" for name in sorted(set(names), key=len, reverse=True) if name]
    masks = [re.compile("|".join(patterns)) for patterns in (words, _VARIABLE, (_NUMBER,)) if patterns]
    groups: dict[str, list[str]] = {}
    for text in texts:
        key = text
        for mask in masks:
            key = mask.sub("#", key)
        groups.setdefault(key, []).append(text)
    return [(members[0], len(members)) for members in groups.values()]


def once(texts: Iterable[str], names: Iterable[str] = ()) -> list[str]:
    """Return a text for each group of texts that are alike."""
    return [with_count(text, count) for text, count in alike(texts, names)]


def with_count(text: str, count: int) -> str:
    """Return a text with how many it stands for."""
    return text if count == 1 else f"{text} (and {count - 1} more like it)"
