"""What counts as delivered and what is kept back, as a run stored it: numbers that a cell file can have."""

from __future__ import annotations

import math

from reach.recheck.stored import Stored

BELOW_ONE = math.nextafter(1.0, 0.0)
DEMANDS = {
    "accept": {
        "strike_window_s": 1.0,
        "strike_speed_error_share": 1.0,
        "strike_lateral_m_s": 100.0,
        "strike_tilt_error_rad": math.pi * (1 + 1e-12),  # from degrees
        "strike_position_m": 10.0,
        "strikes_share": 1.0,
    },
    "margins": {
        "velocity_share": BELOW_ONE,
        "acceleration_share": BELOW_ONE,
        "position_rad": 10.0,
        "position_m": 10.0,
    },
}
"""The most that a cell file may say; the least is 0."""


def check_demands(stored: Stored) -> None:
    """Raise BadFolder where cell.json does not say what is accepted and kept back, or what no cell file says."""
    for table, most in DEMANDS.items():
        for name, high in most.items():
            stored.between(0.0, high, table, name)
    if stored.word("accept", "at") not in ("strikes", "throughout"):
        raise stored.refused(("accept", "at"), "is neither strikes nor throughout")
    stored.words("accept", "require")
