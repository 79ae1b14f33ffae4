"""Shares, bounds and verdicts, against normal theory and against brute force."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest
from scipy.stats import norm

from perdure.predictions.draws import LEVELS, PosteriorDraws, Subject, normal_scores
from perdure.predictions.margins import Margin, decide, margin, parts_for, probability_error, tolerance_bound
from perdure.predictions.response import band, curve_times, limited_response
from perdure.rheology.history import ramp_and_hold
from perdure.rheology.maxwell import GeneralisedMaxwell
from perdure.study.duty import Duty, Limit

DRAWS = 400


def _posterior(
    batch_sd: float = 0.08, specimen_sd: float = 0.05, spread: float = 0.02, modes: tuple[str, ...] = ("stiffness",)
) -> PosteriorDraws:
    """Draws about a law with two arms; only the stiffness varies, so that stresses are log-normal."""
    law = GeneralisedMaxwell(np.array([1.0, 1e3]), reference_time=10.0)
    rng = np.random.default_rng(3)
    size = len(modes)
    return PosteriorDraws(
        law=law,
        modes=modes,
        mode_index=np.array([law.mode_names.index(mode) for mode in modes], dtype=np.int64),
        batches=("b1", "b2"),
        specimens=("s1", "s2", "s3"),
        batch=np.array([0, 0, 1], dtype=np.int64),
        stiffness=math.log(4.0) + spread * rng.standard_normal(DRAWS),
        shape=np.tile([-3.0, -3.0], (DRAWS, 1)),
        batch_offset=np.tile(np.array([[0.03], [-0.05]]), (DRAWS, 1, size)),
        specimen_offset=np.tile(np.array([[0.01], [0.02], [0.0]]), (DRAWS, 1, size)),
        batch_sd=np.full((DRAWS, size), batch_sd),
        specimen_sd=np.full((DRAWS, size), specimen_sd),
        chains=4,
    )


def _duty(sense: str = "compression", **limit: object) -> Duty:
    level = -0.1 if sense == "compression" else 0.1
    given: dict[str, object] = {
        "name": "contact",
        "kind": "at least",
        "quantity": "stress",
        "value": 0.3,
        "start": 1e4,
        "end": 1e4,
        "share": 0.9,
        "confidence": 0.95,
    }
    return Duty("hold", "", ramp_and_hold(level, 10.0, 1e5), sense, 296.0, "virgin", (Limit(**{**given, **limit}),))  # type: ignore[arg-type]


def _log_stress(posterior: PosteriorDraws, time: float) -> float:
    """ln of the magnitude of the population's stress at ``time``, less the stiffness."""
    duty = _duty()
    natural = posterior.natural(posterior.centre(Subject("population median")))
    stress = posterior.law.simulate(natural[:1], duty.history.with_knots(np.array([time])))
    return float(np.log(-stress[0, np.searchsorted(duty.history.with_knots(np.array([time])).time, time)]) - posterior.stiffness[0])


@pytest.mark.parametrize(
    ("level", "name", "offset", "sd"), [("new batch", "", 0.0, math.hypot(0.08, 0.05)), ("known batch", "b2", -0.05, 0.05)]
)
def test_share_follows_the_normal_distribution(level: str, name: str, offset: float, sd: float) -> None:
    posterior, duty = _posterior(), _duty(value=0.36)
    found = margin(posterior, duty, duty.limits[0], Subject(level, name), 1)  # type: ignore[arg-type]
    centre = posterior.stiffness + offset + _log_stress(posterior, 1e4)
    exact = norm.sf((math.log(0.36) - centre) / sd)
    assert found.share_mean == pytest.approx(exact.mean(), abs=0.006)
    assert found.share_low == pytest.approx(np.quantile(exact, 0.05), abs=0.01)
    bound = np.quantile(np.exp(centre + norm.ppf(0.1) * sd), 0.05)
    assert found.bound == pytest.approx(bound, rel=0.004)
    assert found.difference == pytest.approx(found.bound - 0.36)
    assert found.ratio == pytest.approx(found.bound / 0.36)
    assert found.probability == np.mean(exact >= 0.9) or abs(found.probability - np.mean(exact >= 0.9)) < 0.05


def test_bound_and_verdict_agree() -> None:
    """Kept exactly when the tolerance bound keeps the limit: two ways of saying one thing."""
    posterior = _posterior()
    for value in np.linspace(0.25, 0.45, 21):
        duty = _duty(value=float(value))
        found = margin(posterior, duty, duty.limits[0], Subject("new batch"), 1)
        assert (found.verdict == "kept") == (found.ratio >= 1.0) or abs(found.ratio - 1.0) < 0.01


def test_at_most_mirrors_at_least() -> None:
    posterior = _posterior()
    duty = _duty(kind="at most", value=0.6)
    found = margin(posterior, duty, duty.limits[0], Subject("new batch"), 1)
    assert found.verdict == "kept"
    assert found.bound < 0.6
    assert found.ratio == pytest.approx(0.6 / found.bound)
    tight = _duty(kind="at most", value=0.3)
    assert margin(posterior, tight, tight.limits[0], Subject("new batch"), 1).verdict == "not kept"


def test_levels_without_new_scatter_have_one_part_a_draw() -> None:
    posterior, duty = _posterior(), _duty()
    scores = normal_scores(256, 1, 1)
    for subject in posterior.subjects():
        values = limited_response(posterior, duty, duty.limits[0], subject, scores)
        assert values.shape == (DRAWS, 256 if subject.spreads else 1)
        assert (values > 0).all(), "compression is shown as a magnitude"
    assert {subject.level for subject in posterior.subjects()} == set(LEVELS)


def test_an_interval_looks_at_its_worst_moment() -> None:
    posterior = _posterior()
    point, interval = _duty(), _duty(start=10.0, end=1e4)
    none = np.zeros((1, 1))
    last = limited_response(posterior, point, point.limits[0], Subject("population median"), none)
    np.testing.assert_allclose(
        limited_response(posterior, interval, interval.limits[0], Subject("population median"), none), last, rtol=1e-12
    )
    highest = _duty(start=1.0, end=1e4, kind="at most")
    peak = limited_response(posterior, highest, highest.limits[0], Subject("population median"), none)
    at_ramp_end = _duty(start=10.0, end=10.0)
    np.testing.assert_allclose(
        peak, limited_response(posterior, at_ramp_end, at_ramp_end.limits[0], Subject("population median"), none), rtol=1e-12
    )


def test_retained_stress_is_free_of_stiffness() -> None:
    posterior = _posterior()
    duty = _duty(quantity="retained", value=0.8, reference=100.0)
    values = limited_response(posterior, duty, duty.limits[0], Subject("new batch"), normal_scores(256, 1, 1))
    assert np.ptp(values) < 1e-12
    assert 0 < values[0, 0] < 1


def test_a_tension_duty_keeps_its_sign() -> None:
    posterior = _posterior()
    duty = _duty(sense="tension")
    values = limited_response(posterior, duty, duty.limits[0], Subject("population median"), np.zeros((1, 1)))
    compressed = _duty()
    np.testing.assert_allclose(
        values, limited_response(posterior, compressed, compressed.limits[0], Subject("population median"), np.zeros((1, 1)))
    )


def test_bands_widen_from_known_to_new_batch() -> None:
    posterior, duty = _posterior(), _duty()
    width = {}
    for subject in (Subject("population median"), Subject("known batch", "b1"), Subject("new batch")):
        found = band(posterior, duty, subject, 5)
        assert (found.low[1] <= found.low[0]).all()
        assert (found.low[0] <= found.median).all()
        assert (found.median <= found.high[0]).all()
        assert found.time[0] > 0
        width[subject.level] = float((found.high[1] - found.low[1])[-1])
    assert width["population median"] < width["known batch"] < width["new batch"]
    # 90 % of a log-normal whose spread comes from the population, a batch and a specimen
    sd = math.sqrt(0.02**2 + 0.08**2 + 0.05**2)
    found = band(posterior, duty, Subject("new batch"), 5)
    assert np.log(found.high[1][-1] / found.low[1][-1]) == pytest.approx(2 * 1.645 * sd, rel=0.12)


def test_curves_follow_the_knots_of_a_short_history() -> None:
    duty = _duty()
    assert np.isin(duty.history.time[1:], curve_times(duty)).all()


@pytest.mark.parametrize(
    ("probability", "verdict"), [(0.95, "kept"), (0.949, "undecided"), (0.051, "undecided"), (0.05, "not kept"), (0.0, "not kept")]
)
def test_verdicts(probability: float, verdict: str) -> None:
    assert decide(probability, 0.95) == verdict


def test_a_probability_at_its_threshold_settles_nothing() -> None:
    posterior = _posterior(spread=0.05)

    def found_at(value: float) -> Margin:
        duty = _duty(value=value)
        return margin(posterior, duty, duty.limits[0], Subject("new batch"), 1)

    low, high = 0.25, 0.5
    for _ in range(30):
        middle = 0.5 * (low + high)
        low, high = (middle, high) if found_at(middle).probability > 0.95 else (low, middle)
    found = found_at(low)
    assert abs(found.probability - 0.95) < 0.02
    assert not found.settled
    assert found_at(0.1).settled


def test_certainty_has_an_error_too() -> None:
    assert 0 < probability_error(np.ones(400, dtype=np.bool_), 4) < 0.01
    rng = np.random.default_rng(1)
    independent = rng.random(4000) < 0.5
    assert probability_error(independent, 4) == pytest.approx(0.5 / math.sqrt(4000), rel=0.2)
    stuck = np.repeat(rng.random(40) < 0.5, 100)
    assert probability_error(stuck, 4) > 4 * probability_error(independent, 4)


def test_parts_reach_beyond_the_content() -> None:
    for share in (0.5, 0.9, 0.99, 0.999):
        parts = parts_for(share)
        assert parts & (parts - 1) == 0
        assert parts * (1 - share) >= 4


def test_bound_needs_more_confidence_to_be_lower() -> None:
    values = _posterior(spread=0.1).stiffness[:, None] + 0.1 * normal_scores(256, 1, 2)[:, 0]
    assert tolerance_bound(values, "at least", 0.9, 0.99) < tolerance_bound(values, "at least", 0.9, 0.9)
    assert tolerance_bound(values, "at most", 0.9, 0.99) > tolerance_bound(values, "at most", 0.9, 0.9)


def test_thinning_keeps_every_chain() -> None:
    posterior = _posterior()
    marked = replace(posterior, stiffness=np.repeat(np.arange(4.0), DRAWS // 4))
    thinned = marked.thinned(100)
    assert thinned.count == 100
    assert np.bincount(thinned.stiffness.astype(int)).tolist() == [25, 25, 25, 25]
