"""White reading noise against SciPy."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from perdure.inference.noise.white import WhiteNoise


def test_value_is_a_normal_density_with_absolute_and_relative_parts() -> None:
    rng = np.random.default_rng(0)
    predicted, observed = rng.normal(size=(2, 30))
    count, instrument = rng.integers(1, 6, 30).astype(np.float64), np.arange(30) % 3
    parameters = np.log(rng.uniform(0.05, 0.5, (3, 2)))
    absolute, relative = np.exp(parameters[instrument]).T
    sd = np.sqrt((absolute**2 + (relative * predicted) ** 2) / count)
    term = WhiteNoise()
    np.testing.assert_allclose(term.standard_deviation(predicted, count, instrument, parameters), sd, rtol=1e-14)
    value, _, _ = term.log_likelihood(predicted, observed, count, instrument, parameters)
    assert value == pytest.approx(float(norm(predicted, sd).logpdf(observed).sum()), rel=1e-13)


def test_an_instrument_without_readings_has_no_slope_and_no_information() -> None:
    term = WhiteNoise()
    one = np.ones(4), np.ones(4), np.zeros(4, dtype=np.int64), np.zeros((2, 2))
    assert not term.log_likelihood(one[0], 1.5 * one[0], *one[1:])[2][1].any()
    assert not term.information(*one)[1].any()
    assert term.information(*one)[0].any()
