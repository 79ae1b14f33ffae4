"""The compiled density in natural coordinates: its gradient, and its terms against SciPy."""

from __future__ import annotations

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import halfnorm, multivariate_normal, norm

from tests.inference.invented import Plan, invented, random_state

Array = NDArray[np.float64]


@pytest.mark.parametrize("plan", [Plan(), Plan(records=2, readings=6, normalised="some", modes=("strength", "pace")), Plan(modes=())])
def test_gradient_equals_finite_differences(plan: Plan) -> None:
    density = invented(plan).density
    packing = density.packing
    flat = packing.join(random_state(density, 0))
    exact = packing.join(density.log_density(packing.split(flat))[1])

    def difference(step: float) -> Array:
        ahead, behind = (
            np.array([density.log_density(packing.split(flat + sign * step * unit))[0] for unit in np.eye(flat.size)]) for sign in (1, -1)
        )
        slope: Array = (ahead - behind) / (2 * step)
        return slope

    numeric = (4 * difference(1e-4) - difference(2e-4)) / 3
    np.testing.assert_allclose(exact, numeric, rtol=1e-6, atol=1e-7 * np.abs(exact).max())


def test_density_is_the_sum_of_its_named_terms() -> None:
    """Every prior and the likelihood, written again with SciPy: normalising constants included."""
    made = invented(Plan(records=2, readings=6, normalised="some"))
    density, priors, modes = made.density, made.structure.priors, len(made.structure.modes)
    state = random_state(density, 3)
    readings = made.structure.readings
    forward = density.forward(state)
    shaped = priors.mean.size
    local = state.specimen[:, modes:][density.packing.mask[:, modes:]]
    sd = density.noise.standard_deviation(forward.predicted.value, readings.count, readings.instrument, state.log_noise)
    terms = [
        multivariate_normal(priors.mean, priors.covariance).logpdf(state.root[:shaped]),
        norm.logpdf(state.root[shaped:]).sum(),
        norm.logpdf(local).sum(),
        norm(0, state.batch_sd).logpdf(state.batch_offset).sum(),
        norm(0, state.specimen_sd).logpdf(state.specimen[:, :modes]).sum(),
        halfnorm(scale=priors.batch_scale).logpdf(state.batch_sd).sum(),
        halfnorm(scale=priors.specimen_scale).logpdf(state.specimen_sd).sum(),
        norm(priors.noise_location, priors.noise_scale).logpdf(state.log_noise).sum(),
        norm(forward.predicted.value, sd).logpdf(readings.observed).sum(),
    ]
    assert density.log_density(state)[0] == pytest.approx(float(np.sum(terms)), rel=1e-12)


def test_modes_of_specimens_add_up() -> None:
    made = invented(Plan(modes=("pace", "stiffness")))
    state = random_state(made.density, 2)
    modes = made.density.modes_of(state)
    for s, j in enumerate(made.structure.batch):
        assert modes[s, 0] == pytest.approx(state.root[0] + state.batch_offset[j, 1] + state.specimen[s, 1])
        assert modes[s, 1] == 0.0
        assert modes[s, 2] == pytest.approx(state.batch_offset[j, 0] + state.specimen[s, 0])
