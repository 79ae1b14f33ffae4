"""What every noise term of the registry promises."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import approx_fprime

from perdure.inference.noise import NOISE
from perdure.inference.noise.term import NoiseTerm

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

every_term = pytest.mark.parametrize("term", NOISE.values(), ids=list(NOISE))
INSTRUMENTS = 2


def readings(term: NoiseTerm, size: int = 40, seed: int = 0) -> tuple[Array, Array, Ints, Array]:
    """Predicted values of both signs and one of 0, counts, instruments, log parameters."""
    rng = np.random.default_rng(seed)
    predicted = rng.normal(size=size)
    predicted[0] = 0.0
    parameters = np.log(rng.uniform(0.05, 0.2, (INSTRUMENTS, len(term.parameter_names))))
    return predicted, rng.integers(1, 5, size).astype(np.float64), np.arange(size) % INSTRUMENTS, parameters


def observed_of(term: NoiseTerm, rng: np.random.Generator, predicted: Array, count: Array, instrument: Ints, parameters: Array) -> Array:
    return predicted + term.standard_deviation(predicted, count, instrument, parameters) * rng.normal(size=predicted.size)


@pytest.mark.parametrize("key", NOISE)
def test_name_is_its_key(key: str) -> None:
    assert NOISE[key].name == key


@every_term
def test_derivatives_equal_finite_differences(term: NoiseTerm) -> None:
    predicted, count, instrument, parameters = readings(term)
    observed = observed_of(term, np.random.default_rng(1), predicted, count, instrument, parameters)
    _, by_predicted, by_parameters = term.log_likelihood(predicted, observed, count, instrument, parameters)
    step = 1e-5

    def value(flat: Array) -> float:
        return term.log_likelihood(flat[: predicted.size], observed, count, instrument, flat[predicted.size :].reshape(parameters.shape))[0]

    flat = np.concatenate([predicted, parameters.ravel()])
    numeric = np.array([(value(flat + step * unit) - value(flat - step * unit)) / (2 * step) for unit in np.eye(flat.size)])
    exact = np.concatenate([by_predicted, by_parameters.ravel()])
    np.testing.assert_allclose(exact, numeric, rtol=1e-6, atol=1e-6 * np.max(np.abs(exact)))


@every_term
def test_information_is_the_expected_curvature(term: NoiseTerm) -> None:
    """Mean outer product of the score, and mean negative Hessian, over simulated data sets."""
    predicted, count, instrument, parameters = readings(term)
    rng = np.random.default_rng(2)
    shape = parameters.shape

    def score(flat: Array, observed: Array) -> Array:
        return term.log_likelihood(predicted, observed, count, instrument, flat.reshape(shape))[2].ravel()

    repeats = 4000
    outer, hessian = [], []
    for number in range(repeats):
        observed = observed_of(term, rng, predicted, count, instrument, parameters)
        slope = score(parameters.ravel(), observed)
        outer.append(np.outer(slope, slope))
        if number < 400:
            hessian.append(-approx_fprime(parameters.ravel(), score, 1e-6, observed))
    information = term.information(predicted, count, instrument, parameters)
    expected = np.zeros((parameters.size, parameters.size))
    for k, block in enumerate(information):
        at = slice(k * shape[1], (k + 1) * shape[1])
        expected[at, at] = block
    for samples in (np.array(outer), np.array(hessian)):
        error = samples.std(axis=0) / np.sqrt(len(samples))
        assert np.all(np.abs(samples.mean(axis=0) - expected) < 5 * error + 1e-3 * np.max(expected))


@every_term
def test_log_density_integrates_to_one(term: NoiseTerm) -> None:
    """Over one reading, whatever its sign and count."""
    for predicted, count in ((0.0, 1.0), (-1.3, 3.0)):
        one = np.array([predicted]), np.array([count]), np.zeros(1, dtype=np.int64), np.log(np.full((1, len(term.parameter_names)), 0.1))
        sd = float(term.standard_deviation(*one)[0])
        grid = predicted + sd * np.linspace(-10, 10, 2001)
        density = [np.exp(term.log_likelihood(one[0], np.array([y]), *one[1:])[0]) for y in grid]
        assert np.trapezoid(density, grid) == pytest.approx(1.0, rel=1e-9)
        assert np.trapezoid(density * (grid - predicted) ** 2, grid) == pytest.approx(sd**2, rel=1e-9)


@every_term
def test_order_of_readings_does_not_matter_to_the_total(term: NoiseTerm) -> None:
    predicted, count, instrument, parameters = readings(term)
    observed = observed_of(term, np.random.default_rng(3), predicted, count, instrument, parameters)
    value, by_predicted, by_parameters = term.log_likelihood(predicted, observed, count, instrument, parameters)
    order = np.random.default_rng(4).permutation(predicted.size)
    again = term.log_likelihood(predicted[order], observed[order], count[order], instrument[order], parameters)
    assert again[0] == pytest.approx(value, rel=1e-12)
    np.testing.assert_allclose(again[1], by_predicted[order], rtol=1e-12)
    np.testing.assert_allclose(again[2], by_parameters, rtol=1e-10)
