"""Reading-level predictions: every reading in its place, with bands that hold what they claim."""

from __future__ import annotations

from dataclasses import fields, replace

import numpy as np
import pytest
from scipy.stats import binom

from perdure.checks.fitted import FittedStudy
from perdure.checks.posterior_predictive import Predictive, predictive, thinned
from tests.checks.small_study import HELD_OUT, NOISE


def test_readings_stand_in_the_order_of_the_record_set(clean: FittedStudy) -> None:
    bands = clean.predictive
    records = clean.records.records
    assert bands.observed == pytest.approx(np.concatenate([one.response for one in records]))
    assert bands.time == pytest.approx(np.concatenate([one.time for one in records]))
    for place, one in enumerate(records):
        rows = bands.record == place
        assert bands.reading[rows].tolist() == list(range(one.time.size))
        # a prediction of another record would be off by its strain level
        assert bands.median[rows] == pytest.approx(one.response, rel=8 * NOISE)
        assert bands.strain[rows] == pytest.approx(one.history.at(one.time))


def test_held_out_readings_are_predicted_too(clean: FittedStudy) -> None:
    bands = clean.predictive
    assert int(bands.held_out.sum()) == HELD_OUT
    assert np.all(np.isfinite(bands.median[bands.held_out]))
    assert clean.density.structure.readings.observed.size == bands.observed.size - HELD_OUT


def test_bands_are_nested_and_cover(clean: FittedStudy) -> None:
    bands = clean.predictive
    edges = np.stack([bands.low90, bands.low50, bands.median, bands.high50, bands.high90])
    assert np.all(np.diff(edges, axis=0) > 0)
    size = bands.observed.size
    assert 0.0005 < float(binom.cdf(int(bands.inside90.sum()), size, 0.9)) < 0.9995
    assert bands.sd == pytest.approx((bands.high90 - bands.low90) / (2 * 1.645), rel=0.1)
    assert float(bands.z.std()) == pytest.approx(1.0, abs=0.1)


def test_noise_of_averaged_readings_is_smaller(clean: FittedStudy) -> None:
    records = replace(clean.records, records=tuple(replace(one, count=16 * one.count) for one in clean.records.records))
    averaged = predictive(replace(clean, records=records), 1)
    assert averaged.noise == pytest.approx(clean.predictive.noise / 4)


def test_a_seed_fixes_the_bands(clean: FittedStudy) -> None:
    def values(bands: Predictive) -> list[object]:
        return [getattr(bands, field.name).tolist() for field in fields(bands)]

    assert values(predictive(clean, clean.study.sampler.seed)) == values(clean.predictive)
    assert values(predictive(clean, 7)) != values(clean.predictive)


def test_thinning_spans_all_draws() -> None:
    draws = np.arange(1000.0)[:, None]
    kept = thinned(draws, 11)
    assert kept.shape == (11, 1)
    assert (kept[0, 0], kept[-1, 0]) == (0.0, 999.0)
    assert thinned(draws, 2000) is draws
