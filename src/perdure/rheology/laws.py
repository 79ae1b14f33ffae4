"""The registry of laws: one file and one line each."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np
from numpy.typing import NDArray

from perdure.rheology.law import Law
from perdure.rheology.maxwell import GeneralisedMaxwell

Array = NDArray[np.float64]

# (relaxation times, with equilibrium term, reference time, free times) -> law laid out
LAWS: Mapping[str, Callable[[Array, bool, float, bool], Law]] = MappingProxyType({"maxwell": GeneralisedMaxwell})


def time_grid(shortest: float, longest: float, terms_per_decade: float) -> Array:
    """Relaxation times in s, log-spaced from ``shortest`` to at least ``longest``, ``terms_per_decade`` of them a decade."""
    count = int(np.ceil(np.log10(longest / shortest) * terms_per_decade)) + 1
    return shortest * 10.0 ** (np.arange(count) / terms_per_decade)
