"""Ranges become distributions whose quantiles are the ranges' ends; what cannot be one is refused."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray
from scipy.stats import halfnorm, lognorm

from perdure.errors import StudyError
from perdure.inference.priors import (
    QUANTITIES,
    SPECTRUM_COMMON_SHARE,
    SPECTRUM_CORRELATION_DECADES,
    build_priors,
    distribution,
    lay_out,
    resolved_times,
)
from perdure.study.records import RecordSet
from perdure.study.study import LawChoice, PriorRange, Study
from tests.inference.invented import RAMP, Plan, history, invented

Array = NDArray[np.float64]


def prior(quantity: str = "modulus", low: float = 2.0, high: float = 10.0, coverage: float = 0.9) -> PriorRange:
    return PriorRange(quantity, low, high, coverage, "invented", "study")


@pytest.mark.parametrize("coverage", [0.5, 0.9, 0.99])
@pytest.mark.parametrize("quantity", [name for name, quantity in QUANTITIES.items() if quantity.family == "log-normal"])
def test_quantiles_of_a_log_normal_are_the_ends(quantity: str, coverage: float) -> None:
    made = distribution(prior(quantity, 0.02, 0.5, coverage))
    tail = 0.5 * (1 - coverage)
    assert made.quantile(tail) == pytest.approx(0.02, rel=1e-12)
    assert made.quantile(1 - tail) == pytest.approx(0.5, rel=1e-12)
    outside = lognorm(made.scale, scale=np.exp(made.location))
    assert outside.cdf(0.5) - outside.cdf(0.02) == pytest.approx(coverage, rel=1e-12)
    assert "log-normal" in made.text


@pytest.mark.parametrize("coverage", [0.5, 0.9, 0.99])
@pytest.mark.parametrize("quantity", [name for name, quantity in QUANTITIES.items() if quantity.family == "half-normal"])
def test_quantile_of_a_half_normal_is_the_upper_end(quantity: str, coverage: float) -> None:
    made = distribution(prior(quantity, 0.0, 0.3, coverage))
    assert made.quantile(coverage) == pytest.approx(0.3, rel=1e-12)
    assert halfnorm(scale=made.scale).cdf(0.3) == pytest.approx(coverage, rel=1e-12)
    assert "half-normal" in made.text


@pytest.mark.parametrize(
    ("bad", "got", "expected"),
    [
        (prior("hardness"), "hardness", "modulus"),
        (prior(coverage=0.0), "coverage 0", "between 0 and 1"),
        (prior(coverage=1.0), "coverage 1", "between 0 and 1"),
        (prior(coverage=float("nan")), "coverage nan", "between 0 and 1"),
        (prior(low=10.0, high=2.0), "10 to 2", "0 < low < high"),
        (prior(low=2.0, high=2.0), "2 to 2", "0 < low < high"),
        (prior(low=0.0), "0 to 10", "0 < low < high"),
        (prior(low=-1.0), "-1 to 10", "0 < low < high"),
        (prior(high=float("inf")), "2 to inf", "0 < low < high"),
        (prior(low=float("nan")), "nan to 10", "0 < low < high"),
        (prior("pace batch scatter", 0.1, 0.3), "0.1 to 0.3", "from 0"),
        (prior("pace batch scatter", 0.0, 0.0), "0 to 0", "positive end"),
        (prior("pace batch scatter", 0.0, float("inf")), "0 to inf", "positive end"),
    ],
)
def test_refused_ranges_say_what_to_do(bad: PriorRange, got: str, expected: str) -> None:
    with pytest.raises(StudyError) as raised:
        distribution(bad)
    (found,) = raised.value.problems
    assert bad.quantity in found.where
    assert found.got == got
    assert expected in found.expected
    assert found.remedy


@pytest.fixture(scope="module")
def study() -> Study:
    return invented(Plan()).study


@pytest.fixture(scope="module")
def records() -> RecordSet:
    return invented(Plan()).records


def test_every_missing_range_is_named_at_once(study: Study, records: RecordSet) -> None:
    kept = tuple(item for item in study.priors if not item.quantity.startswith("pace") and item.quantity != "modulus")
    bare = replace(study, priors=kept)
    with pytest.raises(StudyError) as raised:
        build_priors(bare, records, lay_out(bare, records))
    text = str(raised.value)
    assert len(raised.value.problems) == 3
    for quantity in ("modulus", "pace batch scatter", "pace specimen scatter"):
        assert f'"{quantity}"' in text


def test_scatter_of_unused_modes_needs_no_range(study: Study, records: RecordSet) -> None:
    kept = tuple(item for item in study.priors if not item.quantity.startswith("pace"))
    bare = replace(study, priors=kept, modes=("stiffness", "strength"))
    priors = build_priors(bare, records, lay_out(bare, records))
    assert priors.batch_scale.shape == priors.specimen_scale.shape == (2,)
    assert halfnorm(scale=priors.specimen_scale[1]).cdf(0.2) == pytest.approx(0.9)


@pytest.mark.parametrize("equilibrium", [True, False])
def test_spectrum_is_correlated_over_a_decade_and_has_the_declared_width(study: Study, records: RecordSet, equilibrium: bool) -> None:
    chosen = replace(study, law=LawChoice(equilibrium=equilibrium, terms_per_decade=2.0))
    layout = lay_out(chosen, records)
    priors = build_priors(chosen, records, layout)
    levels = layout.law.strength_levels
    block = priors.covariance[1 : 1 + levels, 1 : 1 + levels]
    width = priors.distributions["loss per decade"].scale
    np.testing.assert_allclose(np.diag(block), width**2)
    decades = 0.5 * np.abs(np.subtract.outer(np.arange(levels), np.arange(levels)))
    expected = SPECTRUM_COMMON_SHARE + (1 - SPECTRUM_COMMON_SHARE) * np.exp(-decades / SPECTRUM_CORRELATION_DECADES)
    np.testing.assert_allclose(block / width**2, expected)
    assert np.linalg.eigvalsh(priors.covariance).min() > 0
    assert priors.mean[0] == pytest.approx(0.5 * np.log(2.0 * 10.0))
    np.testing.assert_allclose(priors.mean[1 : 1 + levels], 0.5 * np.log(0.03 * 0.15))
    assert not priors.covariance[0, 1:].any()


def test_prior_of_the_modulus_hardly_depends_on_the_number_of_terms(study: Study, records: RecordSet) -> None:
    """Median and 90 % width of ln E(t) over the tests and the horizon, one to three terms a decade: within 5 %.

    Nothing is random here: the same normal scores are given to the common part and to each decade's part.
    """
    time = np.geomspace(30.0, 3e3, 4)
    quantiles = []
    for terms in (1.0, 2.0, 3.0):
        chosen = replace(study, law=LawChoice(terms_per_decade=terms))
        layout = lay_out(chosen, records)
        priors = build_priors(chosen, records, layout)
        scores = np.random.default_rng(7).normal(size=(6000, priors.mean.size))
        draws = priors.mean + scores @ np.linalg.cholesky(priors.covariance).T
        modes = np.zeros((draws.shape[0], 3))
        modes[:, 0] = draws[:, 0]
        natural = np.concatenate([layout.law.natural(row[1:], mode[None]) for row, mode in zip(draws, modes, strict=True)])
        quantiles.append(np.quantile(np.log(layout.law.modulus(natural, time)), [0.05, 0.5, 0.95], axis=0))
    low, median, high = np.moveaxis(np.array(quantiles), 1, 0)
    # the median of E within 5 % (a difference of its logarithm); widths relative to one another
    assert np.ptp(median, axis=0).max() < 0.05
    width = high - low
    assert (np.ptp(width, axis=0) / width.mean(axis=0)).max() < 0.05


def test_free_times_have_priors_that_keep_their_order(study: Study, records: RecordSet) -> None:
    chosen = replace(study, law=LawChoice(free_times=4))
    layout = lay_out(chosen, records)
    priors = build_priors(chosen, records, layout)
    names = layout.law.shape_names
    times = layout.law.natural(priors.mean[1:], np.zeros((1, 3)))[0, -4:]
    edges = np.geomspace(layout.shortest, layout.horizon, 5)
    np.testing.assert_allclose(times, 0.5 * (np.log(edges[1:]) + np.log(edges[:-1])))
    first = 1 + names.index("ln_tau_1")
    assert np.sqrt(priors.covariance[first, first]) == pytest.approx(np.log(10) / 1.645)
    assert np.linalg.eigvalsh(priors.covariance).min() > 0


def test_noise_ranges_are_quantiles_of_each_instrument(study: Study, records: RecordSet) -> None:
    priors = build_priors(study, records, lay_out(study, records))
    assert priors.noise_location.shape == (2, 2)
    low, high = (np.exp(priors.noise_location[0] + sign * 1.6448536269514722 * priors.noise_scale[0]) for sign in (-1, 1))
    np.testing.assert_allclose([low, high], [[2e-4, 5e-4], [5e-3, 1e-2]])


def test_grid_covers_tests_and_horizon(study: Study, records: RecordSet) -> None:
    layout = lay_out(study, records)
    times = np.exp(layout.law.natural(np.zeros(len(layout.law.shape_names)), np.zeros((1, 3)))[0])[-len(layout.law.shape_names) :]
    assert times[0] <= layout.shortest
    assert times[-1] >= layout.horizon == 3e4
    assert layout.longest == pytest.approx(RAMP + 3e3)
    undeclared = lay_out(replace(study, horizon=None), records)
    assert undeclared.horizon == pytest.approx(1e3 * layout.longest)


def test_horizon_inside_the_tests_is_refused(study: Study, records: RecordSet) -> None:
    with pytest.raises(StudyError) as raised:
        lay_out(replace(study, horizon=100.0), records)
    (found,) = raised.value.problems
    assert "horizon" in found.where
    assert found.got == "100 s"
    assert "3002 s" in found.expected


def test_unknown_law_is_refused_with_those_that_exist(study: Study, records: RecordSet) -> None:
    with pytest.raises(StudyError) as raised:
        lay_out(replace(study, law=LawChoice(name="spring")), records)
    assert "maxwell" in raised.value.problems[0].expected


def test_resolved_times_see_fitted_readings_only() -> None:
    complete, held = invented(Plan()), invented(Plan(held_out=True))
    assert resolved_times(held.records)[1] < resolved_times(complete.records)[1] == pytest.approx(RAMP + 3e3)
    record = complete.records.records[0]
    steep = replace(record, history=history((0.0, 0.0), (0.01, -0.1), (3e3 + RAMP, -0.1)).with_knots(record.time))
    # relaxation faster than the first reading is not told apart from stiffness either
    assert resolved_times(RecordSet((steep,), complete.records.instruments))[0] <= record.time[0]
