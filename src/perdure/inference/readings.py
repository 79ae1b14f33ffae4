"""Predicted readings on the record axis: kernels, effects and reference readings put together, without PyTensor.

A reading of record r is

    y = exp(γ_r) σ(t; natural parameters of its specimen, strain history of r with coefficient c_r)

for a stress, and exp(γ_r) σ(t) / σ(t_ref) for a normalised response; γ_r collects the calibration, geometry and
mounting effects. The law is linear in strain here, so a relative error of strain acts as one of the response.
"""

from __future__ import annotations

from dataclasses import dataclass

import numba as nb
import numpy as np
from numpy.typing import NDArray

from perdure.inference.structure import Readings
from perdure.rheology.law import Law
from perdure.rheology.maxwell import CompileFlags

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

COMPILE: CompileFlags = {"cache": True, "nogil": True, "error_model": "numpy", "fastmath": set()}


@dataclass(frozen=True, slots=True, eq=False)
class Predicted:
    """Predicted readings with their derivatives.

    Attributes:
        value: (N,).
        by_natural: (N, K), to the natural parameters of the reading's record.
        by_coefficient: (N,), to the coefficient of its second strain history.
        The derivative to γ is ``value`` itself.
    """

    value: Array
    by_natural: Array
    by_coefficient: Array


@nb.njit(**COMPILE)
def _readings(  # noqa: PLR0913, PLR0917 - a kernel takes flat arrays, in and out
    stress: Array,
    by_natural: Array,
    by_coefficient: Array,
    knot: Ints,
    run: Ints,
    reference: Ints,
    log_gain: Array,
    value: Array,
    value_by_natural: Array,
    value_by_coefficient: Array,
) -> None:
    parameters = by_natural.shape[1]
    for n in range(knot.size):
        q = knot[n]
        r = run[n]
        gain = np.exp(log_gain[r])
        ref = reference[r]
        if ref < 0:
            value[n] = gain * stress[q]
            value_by_coefficient[n] = gain * by_coefficient[q]
            for k in range(parameters):
                value_by_natural[n, k] = gain * by_natural[q, k]
        else:
            scale = gain / stress[ref]
            ratio = stress[q] / stress[ref]
            value[n] = gain * ratio
            value_by_coefficient[n] = scale * (by_coefficient[q] - ratio * by_coefficient[ref])
            for k in range(parameters):
                value_by_natural[n, k] = scale * (by_natural[q, k] - ratio * by_natural[ref, k])


@nb.njit(**COMPILE)
def sum_by_run(
    cotangent: Array, value: Array, by_natural: Array, by_coefficient: Array, run: Ints, runs: int
) -> tuple[Array, Array, Array]:
    """Pull (N,) cotangents of the readings back to the runs: natural (R, K), log gain (R,), coefficient (R,)."""
    parameters = by_natural.shape[1]
    natural = np.zeros((runs, parameters))
    gain = np.zeros(runs)
    coefficient = np.zeros(runs)
    for n in range(run.size):
        r = run[n]
        c = cotangent[n]
        gain[r] += c * value[n]
        coefficient[r] += c * by_coefficient[n]
        for k in range(parameters):
            natural[r, k] += c * by_natural[n, k]
    return natural, gain, coefficient


def predict_readings(law: Law, readings: Readings, natural: Array, log_gain: Array, coefficient: Array) -> Predicted:
    """Predicted readings for ``natural`` (R, K), ``log_gain`` (R,) and ``coefficient`` (R,)."""
    response = law.respond(natural, readings.drives, coefficient)
    size = readings.knot.size
    value, by_natural, by_coefficient = np.empty(size), np.empty((size, natural.shape[1])), np.empty(size)
    _readings(
        response.stress,
        response.by_natural,
        response.by_coefficient,
        readings.knot,
        readings.run,
        readings.reference_knot,
        log_gain,
        value,
        by_natural,
        by_coefficient,
    )
    return Predicted(value, by_natural, by_coefficient)
