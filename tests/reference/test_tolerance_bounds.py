"""Tolerance bounds against published one-sided factors (Montgomery & Runger, Table XII; see SOURCES.md).

Under the prior p(μ, σ) ∝ 1/σ the posterior of a normal sample with mean 0 and standard deviation 1 is sampled directly, and
the bound with content P and confidence C must equal −k (Geisser, and common practice in Bayesian tolerance intervals).
"""

from __future__ import annotations

import csv
from pathlib import Path

import numpy as np
import pytest
from scipy.stats import nct, norm

from perdure.predictions.draws import normal_scores
from perdure.predictions.margins import parts_for, tolerance_bound

TABLE = Path(__file__).parent / "one_sided_k_table.csv"
DRAWS = 10_000
SEED = 7


def _factors() -> list[tuple[int, float, float, float]]:
    with TABLE.open(encoding="utf-8", newline="") as handle:
        rows = list(csv.DictReader(handle))
    wanted = {"P0.90_C0.95": (0.90, 0.95), "P0.99_C0.95": (0.99, 0.95)}
    return [(int(row["n"]), *pc, float(row[column])) for row in rows if int(row["n"]) >= 5 for column, pc in wanted.items()]


def _posterior(n: int, seed: int) -> tuple[np.ndarray, np.ndarray]:
    rng = np.random.default_rng(seed)
    sd = np.sqrt((n - 1) / rng.chisquare(n - 1, DRAWS))
    return rng.standard_normal(DRAWS) * sd / np.sqrt(n), sd


@pytest.mark.parametrize(("n", "content", "confidence", "k"), _factors())
def test_bound_equals_the_printed_factor(n: int, content: float, confidence: float, k: float) -> None:
    mean, sd = _posterior(n, SEED + n)
    scores = normal_scores(parts_for(content), 1, SEED)[:, 0]
    lower = tolerance_bound(mean[:, None] + sd[:, None] * scores, "at least", content, confidence)
    upper = tolerance_bound(mean[:, None] + sd[:, None] * scores, "at most", content, confidence)
    # Monte Carlo error of the (1 − C)-quantile over draws, by the density there
    within = mean - norm.ppf(content) * sd
    spread = np.quantile(within, [0.5 * (1 - confidence), 1.5 * (1 - confidence)])
    density = (1 - confidence) / (spread[1] - spread[0])
    error = np.sqrt(confidence * (1 - confidence) / DRAWS) / density
    assert abs(lower + k) < 3 * error + 0.001
    assert abs(upper - k) < 3 * error + 0.001
    assert k == pytest.approx(nct.ppf(confidence, n - 1, norm.ppf(content) * np.sqrt(n)) / np.sqrt(n), abs=1e-3)


def test_a_quantile_of_pooled_draws_is_another_number() -> None:
    """What the bound must never be: pooled predictive draws at the same level are far less demanding."""
    n, content, confidence = 6, 0.90, 0.95
    mean, sd = _posterior(n, SEED)
    values = mean[:, None] + sd[:, None] * normal_scores(256, 1, SEED)[:, 0]
    pooled = float(np.quantile(values, 1 - content))
    assert pooled > tolerance_bound(values, "at least", content, confidence) + 1.0
