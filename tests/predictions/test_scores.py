"""Interval scores by hand and by their defining property."""

from __future__ import annotations

import numpy as np
import pytest
from scipy.stats import norm

from perdure.predictions.scores import inside, interval_score


def test_by_hand() -> None:
    observed = np.array([0.5, -1.0, 2.0])
    low, high = np.zeros(3), np.ones(3)
    assert inside(observed, low, high).tolist() == [True, False, False]
    # width 1; outside by 1 costs 2/0.1 each
    np.testing.assert_allclose(interval_score(observed, low, high, 0.9), [1.0, 21.0, 21.0])


def test_the_true_interval_scores_best() -> None:
    """The score is proper: quantiles of the truth do better than narrower or wider ones."""
    observed = np.random.default_rng(1).standard_normal(200_000)
    scores = {}
    for factor in (0.7, 1.0, 1.4):
        half = np.full(observed.size, factor * norm.ppf(0.95))
        scores[factor] = float(interval_score(observed, -half, half, 0.9).mean())
    assert scores[1.0] < min(scores[0.7], scores[1.4])
    assert scores[1.0] == pytest.approx(2 * norm.pdf(norm.ppf(0.95)) / 0.05, rel=0.01)
