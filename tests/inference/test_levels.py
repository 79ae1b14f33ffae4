"""Straightened coordinates: inverse, Jacobian, pullback, and how straight they are."""

from __future__ import annotations

import math

import numpy as np
import pytest
from numpy.typing import NDArray

from perdure.inference.levels import logarithmic_part, unbend, unbend_pullback

Array = NDArray[np.float64]

PART = 0.25


def bent(x: Array, weight: Array) -> Array:
    """y of x: the relation of the module's text, written forwards, with β = PART."""
    rho = np.log(np.sum(weight * np.exp(x)))
    d = x - rho
    y: Array = rho + (np.exp(d) - 1 + PART * d) / (1 + PART)
    return y


@pytest.mark.parametrize("spread", [0.1, 1.0, 5.0])
def test_unbend_inverts_the_relation(spread: float) -> None:
    rng = np.random.default_rng(int(10 * spread))
    weight = rng.dirichlet(np.ones(6))
    x = spread * rng.normal(size=6)
    found, slope, pull, bar = np.empty((4, 6))
    log_det = unbend(bent(x, weight), weight, PART, found, slope, pull, bar)
    np.testing.assert_allclose(found, x, atol=1e-10)
    step = 1e-5 * min(1.0, spread)
    jacobian = np.stack([(bent(x + step * unit, weight) - bent(x - step * unit, weight)) / (2 * step) for unit in np.eye(6)], axis=1)
    assert log_det == pytest.approx(-np.linalg.slogdet(jacobian)[1], rel=1e-6, abs=1e-7)


def test_unbend_leaves_a_common_factor_alone() -> None:
    weight = np.array([0.2, 0.5, 0.3])
    found, slope, pull, bar = np.empty((4, 3))
    for shift in (-3.0, 0.0, 4.0):
        unbend(np.full(3, shift), weight, PART, found, slope, pull, bar)
        np.testing.assert_allclose(found, shift, atol=1e-12)


def test_unbend_pullback_equals_finite_differences() -> None:
    rng = np.random.default_rng(0)
    weight, y, target = rng.dirichlet(np.ones(5)), rng.normal(size=5), rng.normal(size=5)

    def value(at: Array) -> float:
        x, slope, pull, bar = np.empty((4, 5))
        log_det = unbend(at, weight, PART, x, slope, pull, bar)
        return float(-0.5 * ((x - target) ** 2).sum() + log_det)

    x, slope, pull, bar = np.empty((4, 5))
    unbend(y, weight, PART, x, slope, pull, bar)
    exact = unbend_pullback(target - x, slope, pull, bar)
    numeric = [(value(y + 1e-5 * unit) - value(y - 1e-5 * unit)) / 2e-5 for unit in np.eye(5)]
    np.testing.assert_allclose(exact, numeric, rtol=1e-7, atol=1e-8)


@pytest.mark.parametrize("scale", [0.05, 0.3, 0.5, 0.75, 1.2, 3.0])
def test_no_prior_is_squeezed_against_zero(scale: float) -> None:
    """Two standard deviations below the centre a step in y moves the level by at most twice as much as at the centre."""
    part = logarithmic_part(scale)
    assert 0 < part < 1
    assert (math.exp(-2.0 * scale) + part) / (1 + part) >= 0.5 - 1e-12
