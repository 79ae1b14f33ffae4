"""White reading noise: independent, with variance (a² + r² y²) / n for the mean of n raw readings of response y."""

from __future__ import annotations

import math

import numba as nb
import numpy as np
from numpy.typing import NDArray

from perdure.rheology.maxwell import CompileFlags

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

COMPILE: CompileFlags = {"cache": True, "nogil": True, "error_model": "numpy", "fastmath": set()}
HALF_LOG_TWO_PI = 0.5 * math.log(2.0 * math.pi)


@nb.njit(**COMPILE)
def _log_likelihood(  # noqa: PLR0917 - a kernel takes flat arrays, in and out
    predicted: Array, observed: Array, count: Array, instrument: Ints, log_parameters: Array, by_predicted: Array, by_parameters: Array
) -> float:
    total = 0.0
    by_parameters[:] = 0.0
    for n in range(observed.size):
        k = instrument[n]
        absolute = math.exp(2.0 * log_parameters[k, 0])
        relative = math.exp(2.0 * log_parameters[k, 1])
        y = predicted[n]
        variance = (absolute + relative * y * y) / count[n]
        residual = observed[n] - y
        z2 = residual * residual / variance
        total -= 0.5 * (math.log(variance) + z2) + HALF_LOG_TWO_PI
        # d total / d ln variance = (z² − 1) / 2
        slope = 0.5 * (z2 - 1.0) / (variance * count[n])
        by_predicted[n] = residual / variance + slope * 2.0 * relative * y
        by_parameters[k, 0] += slope * 2.0 * absolute
        by_parameters[k, 1] += slope * 2.0 * relative * y * y
    return total


class WhiteNoise:
    """See the module's text. Parameters: ln a (MPa or ratio) and ln r."""

    name = "white"
    parameter_names = ("absolute", "relative")

    def log_likelihood(
        self, predicted: Array, observed: Array, count: Array, instrument: Ints, log_parameters: Array
    ) -> tuple[float, Array, Array]:
        """See :meth:`perdure.inference.noise.term.NoiseTerm.log_likelihood`."""
        by_predicted = np.empty_like(predicted)
        by_parameters = np.empty_like(log_parameters)
        value = _log_likelihood(predicted, observed, count, instrument, log_parameters, by_predicted, by_parameters)
        return value, by_predicted, by_parameters

    def standard_deviation(self, predicted: Array, count: Array, instrument: Ints, log_parameters: Array) -> Array:
        """sqrt((a² + r² y²) / n)."""
        scale = np.exp(2.0 * log_parameters)
        variance: Array = (scale[instrument, 0] + scale[instrument, 1] * predicted**2) / count
        return np.sqrt(variance)

    def information(self, predicted: Array, count: Array, instrument: Ints, log_parameters: Array) -> Array:  # noqa: ARG002 - the contract
        """½ Σ (∂ ln variance / ∂ parameter)(…)ᵀ of a Gaussian with known mean."""
        scale = np.exp(2.0 * log_parameters)
        absolute = scale[instrument, 0]
        total = absolute + scale[instrument, 1] * predicted**2
        share = 2.0 * np.stack([absolute / total, 1.0 - absolute / total], axis=1)
        out = np.zeros((log_parameters.shape[0], 2, 2))
        for k in range(out.shape[0]):
            rows = share[instrument == k]
            out[k] = 0.5 * rows.T @ rows
        return out

    def typical_variance(self, mean_square: Array, log_parameters: Array) -> tuple[Array, Array]:
        """ln(a² + r² m) of the mean square m."""
        scale = np.exp(2.0 * log_parameters)
        absolute, relative = scale[:, 0], scale[:, 1] * mean_square
        total = absolute + relative
        return np.log(total), 2.0 * np.stack([absolute / total, relative / total], axis=1)
