"""The gate sees what is wrong with a run, a run can be repeated bit by bit, and retries are told."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
import xarray as xr
from numpy.typing import NDArray

from perdure.inference.density import Density
from perdure.inference.sample import RETRIES, Progress, coordinate_names, diagnose, run_once, sample
from perdure.inference.start import Start, find_start
from perdure.study.study import SamplerSettings
from tests.inference.invented import Plan, invented

Array = NDArray[np.float64]

NAMES = ("modulus", "level", "noise")
TINY = Plan(batches=1, specimens=2, readings=8, modes=("stiffness",), type_b=False, compliance=False, instruments=1)


@cache
def tiny() -> tuple[Density, Start]:
    density = invented(TINY).density
    return density, find_start(density, 1, 1)


def good_run(draws: int = 500) -> tuple[Array, xr.Dataset]:
    rng = np.random.default_rng(0)
    values = {
        "energy": rng.normal(size=(4, draws)),
        "diverging": np.zeros((4, draws), dtype=bool),
        "n_steps": np.full((4, draws), 7.0),
    }
    return rng.normal(size=(4, draws, 3)), xr.Dataset({name: (("chain", "draw"), value) for name, value in values.items()})


def test_independent_draws_pass() -> None:
    draws, statistics = good_run()
    diagnosis = diagnose(draws, statistics, NAMES)
    assert diagnosis.passed
    assert diagnosis.rhat < 1.01
    assert diagnosis.ess_bulk > 1000
    assert diagnosis.steps == 7.0
    assert diagnosis.ebfmi == pytest.approx(2.0, abs=0.3)  # independent energies: E (e' − e)² = 2 var e


def test_a_stuck_chain_fails_and_is_named() -> None:
    draws, statistics = good_run()
    draws[2, :, 1] = 0.7
    diagnosis = diagnose(draws, statistics, NAMES)
    assert not diagnosis.passed
    assert diagnosis.rhat > 1.01
    assert diagnosis.worst_rhat == "level"
    assert diagnosis.worst_ess == "level"


def test_a_chain_elsewhere_fails_and_is_named() -> None:
    draws, statistics = good_run()
    draws[0, :, 2] += 3.0
    diagnosis = diagnose(draws, statistics, NAMES)
    assert not diagnosis.passed
    assert diagnosis.worst_rhat == "noise"
    assert diagnosis.ess_bulk < 400


@pytest.mark.parametrize("value", [1.0, np.nan, np.inf])
def test_a_parameter_that_never_moves_or_is_not_a_number_fails(value: float) -> None:
    draws, statistics = good_run()
    draws[:, :, 0] = value
    with np.errstate(invalid="ignore"):  # R-hat of a constant is 0/0
        diagnosis = diagnose(draws, statistics, NAMES)
    assert not diagnosis.passed
    assert diagnosis.rhat == np.inf
    assert diagnosis.worst_rhat == "modulus"


def test_one_divergence_fails() -> None:
    draws, statistics = good_run()
    statistics["diverging"][1, 17] = True
    diagnosis = diagnose(draws, statistics, NAMES)
    assert diagnosis.divergences == 1
    assert not diagnosis.passed
    assert diagnosis.rhat <= 1.01


def test_slow_energies_fail() -> None:
    draws, statistics = good_run()
    walk = np.cumsum(statistics["energy"].to_numpy(), axis=1)
    diagnosis = diagnose(draws, statistics.assign(energy=(("chain", "draw"), walk)), NAMES)
    assert diagnosis.ebfmi < 0.3
    assert not diagnosis.passed


def test_slow_mixing_fails() -> None:
    draws, statistics = good_run()
    noise = draws[:, :, 0].copy()
    for k in range(1, noise.shape[1]):
        draws[:, k, 0] = 0.97 * draws[:, k - 1, 0] + np.sqrt(1 - 0.97**2) * noise[:, k]
    diagnosis = diagnose(draws, statistics, NAMES)
    assert min(diagnosis.ess_bulk, diagnosis.ess_tail) < 400
    assert diagnosis.worst_ess == "modulus"
    assert not diagnosis.passed


@pytest.mark.parametrize("plan", [Plan(), Plan(records=2, normalised="some", modes=("pace", "stiffness")), Plan(modes=())])
def test_every_coordinate_has_a_name_of_its_own_in_the_order_of_the_flat_vector(plan: Plan) -> None:
    density = invented(plan).density
    names = coordinate_names(density)
    assert len(names) == len(set(names)) == density.packing.total
    # marks in named arrays arrive at the places of those names
    state = density.packing.split(np.zeros(density.packing.total))
    structure = density.structure
    state.log_noise[1, 0] = 1.0
    marked = [f"noise {density.noise.parameter_names[0]}, {structure.instruments[1]}"]
    if structure.modes:
        state.batch_offset[1, 0] = state.specimen[2, 1] = state.batch_sd[0] = state.specimen_sd[1] = 1.0
        first, second = structure.modes[:2]
        marked += [
            f"{first}, batch {structure.batches[1]}",
            f"{second}, specimen {structure.specimens[2]}",
            f"{first} batch scatter",
            f"{second} specimen scatter",
        ]
    flat = density.packing.join(state)
    assert {names[i] for i in np.flatnonzero(flat)} == set(marked)


def test_time_left_is_estimated_from_the_draws_so_far() -> None:
    assert Progress(100, 400, 0, 5.0).seconds_left == pytest.approx(15.0)
    assert Progress(0, 400, 0, 5.0).seconds_left == float("inf")


def test_draws_do_not_depend_on_how_many_chains_run_at_a_time() -> None:
    density, start = tiny()
    settings = SamplerSettings(chains=2, draws=100, tune=100, seed=5)
    seen: list[Progress] = []
    alone, statistics = run_once(density, start, settings, 1, seen.append)
    together, again = run_once(density, start, settings, 2, None)
    np.testing.assert_array_equal(alone, together)
    for name in statistics:
        np.testing.assert_array_equal(statistics[name].to_numpy(), again[name].to_numpy())
    assert alone.shape == (2, 100, density.packing.total)
    assert not np.array_equal(alone[0], alone[1])
    # draws are natural coordinates: sds positive, densities of the order of the optimum's
    packing = density.packing
    assert (alone[:, :, packing.gaussian : packing.gaussian + 2 * packing.modes] > 0).all()
    values = [density.core(packing.split(flat))[0] for flat in alone[0, ::10]]
    assert start.log_density - 60 < min(values)
    assert max(values) <= start.log_density + 30
    assert seen[-1].done == seen[-1].total == 400


def test_failed_attempts_are_retried_with_stated_changes_and_then_not_released() -> None:
    """Thirty draws cannot have an effective sample size of 400: every attempt is made, and told."""
    density, start = tiny()
    settings = SamplerSettings(chains=2, draws=30, tune=60, seed=9)
    fit = sample(density, start, settings, cores=1)
    assert not fit.released
    assert [attempt.change for attempt in fit.attempts] == [change for _, _, change in RETRIES]
    for number, (attempt, (accept, factor, _)) in enumerate(zip(fit.attempts, RETRIES, strict=True)):
        expected = replace(
            settings,
            seed=settings.seed + number,
            target_accept=max(settings.target_accept, accept),
            draws=factor * settings.draws,
            tune=factor * settings.tune,
        )
        assert attempt.settings == expected
        assert not attempt.diagnosis.passed
        assert attempt.seconds > 0
    # the last attempt's draws are kept
    assert fit.draws.shape == (2, fit.attempts[-1].settings.draws, density.packing.total)
    assert fit.statistics.sizes["draw"] == fit.attempts[-1].settings.draws
