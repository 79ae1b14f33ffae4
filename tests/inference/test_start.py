"""Where sampling starts: the optimum is found, whatever the study looks like."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.optimize import approx_fprime

from perdure.inference.density import Density
from perdure.inference.start import climb, expand, find_start, quadratic_at, starting_state, with_likely_scatter
from perdure.inference.state import State
from perdure.study.study import LawChoice
from tests.inference.invented import Plan, invented, random_state

Array = NDArray[np.float64]


def test_truth_comes_back_from_readings_almost_without_noise() -> None:
    """Modes of each specimen, and the response to them, from readings with a thousandth of the declared noise."""
    made = invented(Plan(specimens=3, readings=40, noise=1e-3, type_b=False, compliance=False))
    start = find_start(made.density, 1, 1)
    found, true = made.density.forward(start.state), made.density.forward(made.truth)
    np.testing.assert_allclose(found.predicted.value, true.predicted.value, rtol=1e-5)
    np.testing.assert_allclose(found.modes[:, 0], true.modes[:, 0], atol=2e-3)
    # strength and pace are identified up to what the populations' levels take: differences between specimens are
    np.testing.assert_allclose(found.modes - found.modes[0], true.modes - true.modes[0], atol=5e-3)
    noise = np.exp(start.state.log_noise - made.truth.log_noise)
    assert (noise < 0.02).all()


def test_noise_is_estimated() -> None:
    made = invented(Plan(specimens=3, readings=60))
    start = find_start(made.density, 1, 1)
    readings = made.structure.readings
    value = made.density.forward(start.state).predicted.value
    sd = made.density.noise.standard_deviation(value, readings.count, readings.instrument, start.state.log_noise)
    true = made.density.noise.standard_deviation(value, readings.count, readings.instrument, made.truth.log_noise)
    assert np.sqrt(np.mean((sd / true) ** 2)) == pytest.approx(1.0, abs=0.2)


def test_optimum_beats_the_truth_and_its_slope_vanishes() -> None:
    made = invented(Plan(records=2, readings=20))
    density = made.density
    start = find_start(density, 1, 2)
    # scatter and noise stand at the maximum of their marginal density, not of the joint one
    likely = {"batch_sd": start.state.batch_sd, "specimen_sd": start.state.specimen_sd, "log_noise": start.state.log_noise}
    at_truth = replace(made.truth, **likely)
    assert start.log_density > density.core(at_truth)[0]
    assert start.log_density == density.core(start.state)[0]
    # in standard deviations of the quadratic the optimum is within a small step of where the slope is zero
    again, value, _ = climb(density, start.state, settle_noise=False)
    assert value - start.log_density < 1e-3
    np.testing.assert_allclose(density.forward(again).predicted.value, density.forward(start.state).predicted.value, rtol=1e-4)


def test_other_starting_points_lead_to_the_same_optimum() -> None:
    made = invented(Plan(specimens=3, readings=40))
    start = find_start(made.density, 3, 4)
    assert len(start.optima) == 4
    assert list(start.optima) == sorted(start.optima, reverse=True)
    assert start.optima[0] - start.optima[2] < 0.05
    assert find_start(made.density, 3, 4).log_density == start.log_density


@pytest.mark.parametrize(
    "plan",
    [
        Plan(batches=1, specimens=1, instruments=1),
        Plan(batches=1),
        Plan(scatter=0.0),
        Plan(scatter=8.0),
        Plan(noise=30.0),
        Plan(modes=()),
        Plan(modes=("strength",)),
        Plan(held_out=True, records=2),
        Plan(normalised="all"),
        Plan(readings=3),
        Plan(law=LawChoice(free_times=3)),
        Plan(law=LawChoice(equilibrium=False, terms_per_decade=0.6)),
        Plan(law=LawChoice(terms_per_decade=3.0)),
        Plan(type_b=False, compliance=False, instruments=1),
    ],
    ids=lambda plan: ", ".join(f"{k}={v}" for k, v in vars(plan).items() if v != getattr(Plan(), k)),
)
def test_every_kind_of_study_starts(plan: Plan) -> None:
    made = invented(plan)
    start = find_start(made.density, 1, 1)
    value, slope = made.density.core(start.state)
    assert np.isfinite(value)
    assert np.isfinite(made.density.packing.join(slope)).all()
    assert value >= made.density.core(starting_state(made.density, None))[0]
    assert np.isfinite(start.quadratic.own).all()
    assert (start.state.batch_sd > 0).all()
    assert (start.state.specimen_sd > 0).all()


def test_scatter_moves_towards_what_the_specimens_show() -> None:
    small, large = (invented(Plan(batches=4, specimens=4, readings=20, scatter=scatter, seed=4)).density for scatter in (0.05, 2.0))
    found = [find_start(density, 1, 1).state for density in (small, large)]
    assert found[0].specimen_sd[0] < 0.3 * found[1].specimen_sd[0]
    moved = with_likely_scatter(large, climb(large, starting_state(large, None))[0])
    assert moved.specimen_sd[0] > starting_state(large, None).specimen_sd[0]


def test_expand_is_the_derivative_of_the_readings() -> None:
    """Columns of the design matrix against finite differences, own variables and root of a specimen."""
    density = invented(Plan(records=2, readings=6, normalised="some", modes=("strength", "pace"))).density
    state = random_state(density, 0, spread=0.2)
    packing, structure = density.packing, density.structure
    value, design, deviation = expand(density, state)
    np.testing.assert_array_equal(value, density.forward(state).predicted.value)
    assert (deviation > 0).all()
    flat, step = packing.join(state), 1e-6

    def slope(place: int) -> Array:
        unit = np.zeros(flat.size)
        unit[place] = step
        ahead, behind = (density.forward(packing.split(flat + sign * unit)).predicted.value for sign in (1, -1))
        return (ahead - behind) / (2 * step)

    width = packing.mask.shape[1]
    for k in range(packing.root):
        np.testing.assert_allclose(design[:, width + k], slope(k), atol=1e-8)
    first = packing.root + packing.batches * packing.modes
    specimen_of = structure.specimen[structure.readings.run]
    for s, size in enumerate(packing.size):
        rows = specimen_of == s
        for i in range(size):
            numeric = slope(first + i)
            np.testing.assert_allclose(design[rows, i], numeric[rows], atol=1e-8)
            assert not numeric[~rows].any()
        assert not design[rows][:, size:width].any()
        first += size


def test_quadratic_is_the_gauss_newton_model_of_the_log_density() -> None:
    """With noise that does not depend on the response, its slope at the state is that of the log-density."""
    density: Density = invented(Plan(readings=8, specimens=1)).density
    state = random_state(density, 1, spread=0.2)
    state = replace(state, log_noise=np.stack([state.log_noise[:, 0], np.full(2, -40.0)], axis=1))
    q, packing = quadratic_at(density, state), density.packing
    beta = state.root @ density.structure.loads.T + state.batch_offset
    v = state.specimen.copy()
    v[:, : packing.modes] += beta[density.structure.batch]
    root_slope = q.root_linear - q.root @ state.root - np.einsum("sdg,sd->g", q.cross, v)
    own_slope = q.linear - np.einsum("sde,se->sd", q.own, v) - q.cross @ state.root
    # the quadratic in (v, g) as a function of g alone, v = Z g + η + δ
    root_slope = root_slope + own_slope[:, : packing.modes].sum(axis=0) @ density.structure.loads

    def by_root(root: Array) -> float:
        return density.core(State(root, state.batch_offset, state.specimen, state.batch_sd, state.specimen_sd, state.log_noise))[0]

    np.testing.assert_allclose(root_slope, density.core(state)[1].root, rtol=1e-8)
    numeric = approx_fprime(state.root, by_root, 1e-7)
    np.testing.assert_allclose(root_slope, numeric, rtol=1e-3, atol=1e-3 * np.abs(numeric).max())
