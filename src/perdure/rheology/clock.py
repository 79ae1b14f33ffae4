"""Clocks: reduced time ξ(t) = ∫ dt / a(T) of a mechanism. One entry of :data:`CLOCKS` each."""

from __future__ import annotations

from collections.abc import Mapping
from types import MappingProxyType
from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]


class Clock(Protocol):
    """Maps a temperature to the logarithm of the time–temperature shift factor."""

    @property
    def name(self) -> str:
        """Key in :data:`CLOCKS` and in ``study.yaml``."""
        ...

    def log_shift(self, temperature: Array) -> Array:
        """ln a(T), natural logarithm, for temperatures in K; same shape."""
        ...


class Isothermal:
    """The clock of a study at one temperature: reduced time is time."""

    name = "isothermal"

    def log_shift(self, temperature: Array) -> Array:
        """Zeros in the shape of ``temperature``."""
        return np.zeros_like(np.asarray(temperature, dtype=np.float64))


CLOCKS: Mapping[str, Clock] = MappingProxyType({"isothermal": Isothermal()})


def reduced_time(clock: Clock, time: Array, temperature: Array) -> Array:
    """ξ at the knots ``time`` (s, shape (n,)) of a history whose temperature (K, shape (n,)) runs linearly between them.

    The rate 1/a is integrated by the trapezoidal rule on the given knots: exact for an isothermal history.
    """
    rate = np.exp(-clock.log_shift(np.asarray(temperature, dtype=np.float64)))
    steps = 0.5 * (rate[1:] + rate[:-1]) * np.diff(time)
    return np.concatenate([[0.0], np.cumsum(steps)])
