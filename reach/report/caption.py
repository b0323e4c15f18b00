"""What stands with a figure."""

from __future__ import annotations

from typing import NamedTuple


class Caption(NamedTuple):
    """A figure's title, what it shows, and the gist in words for who can't see it."""

    title: str
    text: str
    alt: str
