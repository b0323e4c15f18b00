"""Balls by name, and how high published drop tests have them rebound, each with the rule its numbers come from."""

from __future__ import annotations

import math
from dataclasses import dataclass

from reach.cell import Ball

BALLS: dict[str, Ball] = {
    "table tennis": Ball(
        mass_kg=0.0027,
        radius_m=0.020,
        source="ITTF Technical Leaflet T3: 2.7 g, 40 mm diameter",
    ),
    "tennis": Ball(
        mass_kg=0.0577,
        radius_m=0.0335,
        source="ITF Rules of Tennis, Appendix I: 56.0 to 59.4 g, 6.54 to 6.86 cm diameter; mid-range",
    ),
    "squash": Ball(
        mass_kg=0.0240,
        radius_m=0.020,
        source="WSF specification of the squash ball, from memory: 23 to 25 g, 39.5 to 40.5 mm diameter; mid-range",
    ),
}


@dataclass(frozen=True)
class Rebound:
    """A drop test: least and greatest height of rebound as a share of the drop, onto what, and whose rule says it."""

    ball: str
    low_share: float
    high_share: float
    onto: str
    source: str

    @property
    def restitution(self) -> tuple[float, float]:
        """Least and greatest restitution, the root of the share of height; drag would add to it."""
        return math.sqrt(self.low_share), math.sqrt(self.high_share)


REBOUND = (
    Rebound(
        "table tennis",
        240 / 305,
        265 / 305,
        "a steel block",
        "ITTF Technical Leaflet T3, B.7: 240 to 265 mm from 305 mm, plastic balls",
    ),
    Rebound(
        "tennis",
        135 / 254,
        147 / 254,
        "granite",
        "ITF Rules of Tennis, Appendix I: 135 to 147 cm from 254 cm",
    ),
    Rebound(
        "squash",
        0.26,
        0.33,
        "a rigid floor, at 45 °C",
        "WSF specification of the squash ball, from memory: 26 to 33 % from 254 cm",
    ),
)
"""No defaults: restitution belongs to the pair of ball and face, and a rubber or a soft face has another."""
