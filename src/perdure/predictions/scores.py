"""How well intervals did against what was observed."""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


def inside(observed: Array, low: Array, high: Array) -> NDArray[np.bool_]:
    """Whether each observation lies within its interval; same shapes."""
    return (observed >= low) & (observed <= high)


def interval_score(observed: Array, low: Array, high: Array, coverage: float) -> Array:
    """Interval score of central intervals (Gneiting & Raftery 2007, eq. 43): width, plus 2/α for each unit missed by.

    Lower is better; in the unit of the observations. ``coverage`` = 1 − α.
    """
    alpha = 1.0 - coverage
    below = np.maximum(low - observed, 0.0)
    above = np.maximum(observed - high, 0.0)
    return (high - low) + 2.0 / alpha * (below + above)
