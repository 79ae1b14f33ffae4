"""The contract of a noise term."""

from __future__ import annotations

from typing import Protocol

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


class NoiseTerm(Protocol):
    """Density of readings about the predicted response, with exact derivatives, in time linear in readings."""

    @property
    def name(self) -> str:
        """Key in ``NOISE``."""
        ...

    @property
    def parameter_names(self) -> tuple[str, ...]:
        """Names of the parameters of one instrument, carried as logarithms."""
        ...

    def log_likelihood(
        self, predicted: Array, observed: Array, count: Array, instrument: Ints, log_parameters: Array
    ) -> tuple[float, Array, Array]:
        """Log-density of all readings; its derivatives to ``predicted`` (N,) and to ``log_parameters`` (instruments, P).

        ``count`` (N,) is the number of raw readings averaged into each, ``instrument`` (N,) its instrument's index.
        """
        ...

    def standard_deviation(self, predicted: Array, count: Array, instrument: Ints, log_parameters: Array) -> Array:
        """Standard deviation of each reading, (N,)."""
        ...

    def information(self, predicted: Array, count: Array, instrument: Ints, log_parameters: Array) -> Array:
        """Fisher information of each instrument's parameters, (instruments, P, P)."""
        ...

    def typical_variance(self, mean_square: Array, log_parameters: Array) -> tuple[Array, Array]:
        """Log-variance of one reading of each instrument, (instruments,), and its derivative, (instruments, P).

        ``mean_square`` (instruments,) is the mean square of its predicted readings.
        """
        ...
