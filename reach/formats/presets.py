"""Balls by name, each with the rule its numbers come from."""

from __future__ import annotations

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
}
