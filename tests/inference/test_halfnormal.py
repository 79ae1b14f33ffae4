"""The half-normal through a normal score, against SciPy."""

from __future__ import annotations

import math

import numpy as np
import pytest
from scipy.special import erfinv
from scipy.stats import halfnorm, norm

from perdure.inference.halfnormal import log_half_normal


@pytest.mark.parametrize("score", [*np.linspace(-9.0, 9.0, 37), -1.0, 3.0, np.nextafter(-1.0, -2.0), np.nextafter(3.0, 4.0)])
def test_quantile_and_slope(score: float) -> None:
    log_t, slope = log_half_normal(score)
    # the tail that keeps its digits: P(T < t) = erf(t/√2) = Φ(z) below (halfnorm.ppf rounds 1 + Φ), P(T > t) = Φ(−z) above
    t = math.sqrt(2.0) * erfinv(norm.cdf(score)) if score < 0 else halfnorm.isf(norm.sf(score))
    assert math.exp(log_t) == pytest.approx(float(t), rel=1e-10)
    assert slope == pytest.approx(float(math.exp(norm.logpdf(score) - halfnorm.logpdf(t)) / t), rel=1e-9)


def test_increasing_and_continuous_across_branches() -> None:
    scores = np.linspace(-8.0, 8.0, 4001)
    values = np.array([log_half_normal(score) for score in scores])
    assert (np.diff(values[:, 0]) > 0).all()
    # d ln t / dz integrates to ln t: trapezoid error is of second order in the step
    integral = np.cumsum(0.5 * (values[1:, 1] + values[:-1, 1]) * np.diff(scores))
    np.testing.assert_allclose(values[1:, 0] - values[0, 0], integral, atol=1e-5)


def test_normal_scores_become_half_normal_draws() -> None:
    """A density in z of φ(z) is a half-normal density of t: mean √(2/π), mean square 1."""
    scores = np.linspace(-8.0, 8.0, 4001)
    t = np.exp([log_half_normal(score)[0] for score in scores])
    assert np.trapezoid(norm.pdf(scores) * t, scores) == pytest.approx(math.sqrt(2 / math.pi), rel=1e-9)
    assert np.trapezoid(norm.pdf(scores) * t**2, scores) == pytest.approx(1.0, rel=1e-9)
