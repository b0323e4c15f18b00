"""Arrays that leave the readers: their own copy, and read-only."""

from __future__ import annotations

from typing import Any

import numpy as np
from numpy.typing import NDArray


def read_only(array: NDArray[Any]) -> NDArray[Any]:
    """A copy of an array of any shape that can't be written to."""
    own = np.array(array, copy=True)
    own.flags.writeable = False
    return own
