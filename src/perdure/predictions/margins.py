"""Shares, bounds and verdicts.

For a posterior draw θ let p(θ) be the share of parts of a level that meets the limit. Reported are its mean and credible
interval, Pr(p(θ) ≥ required share), and the one-sided statistical tolerance bound (ISO 16269-6) with content P and
confidence C: in each draw the quantile over parts, then the quantile over draws. A quantile of pooled predictive draws
would mix the two and is never used.
"""

from __future__ import annotations

import math
from dataclasses import dataclass
from typing import Literal

import arviz_stats as az
import numpy as np
from numpy.typing import NDArray

from perdure.predictions.draws import PosteriorDraws, Subject, normal_scores
from perdure.predictions.response import limited_response
from perdure.study.duty import Duty, Limit

Array = NDArray[np.float64]
Verdict = Literal["kept", "not kept", "undecided", "not released"]

# parts simulated within a draw: enough points beyond the quantile that the content asks for
FEWEST_PARTS = 512
MOST_PARTS = 4096
POINTS_BEYOND = 16
CREDIBLE = (0.05, 0.95)
# a probability closer to a verdict's threshold than this many Monte Carlo errors decides nothing
ERRORS_APART = 2.0


@dataclass(frozen=True, slots=True)
class Margin:
    """One limit of one duty at one subject.

    Attributes:
        duty, limit, subject: what.
        share_mean, share_low, share_high: of p(θ), with its 90 % credible interval.
        probability, probability_error: Pr(p(θ) ≥ required share) and its Monte Carlo standard error.
        bound: tolerance bound in the unit of the limit. difference: signed so that > 0 is kept. ratio: > 1 is kept.
        median: median response over draws and parts.
        verdict: see :func:`decide`. settled: False where the Monte Carlo error is too large for a verdict.
    """

    duty: str
    limit: Limit
    subject: Subject
    share_mean: float
    share_low: float
    share_high: float
    probability: float
    probability_error: float
    bound: float
    difference: float
    ratio: float
    median: float
    verdict: Verdict
    settled: bool


def parts_for(share: float) -> int:
    """Number of parts a draw, a power of 2, for a content of ``share``."""
    wanted = POINTS_BEYOND / max(1.0 - share, 1e-9)
    return int(min(MOST_PARTS, max(FEWEST_PARTS, 2 ** math.ceil(math.log2(max(wanted, 2.0))))))


def tolerance_bound(values: Array, kind: str, share: float, confidence: float) -> float:
    """Bound that a share of parts meets with the given confidence, from (draws, parts) responses.

    "at least" gives a lower bound, "at most" an upper one.
    """
    # parts are evenly spread points of a distribution: point i of n stands at (i − ½)/n, which "hazen" means
    if kind == "at least":
        within = np.quantile(values, 1.0 - share, axis=1, method="hazen")
        return float(np.quantile(within, 1.0 - confidence))
    within = np.quantile(values, share, axis=1, method="hazen")
    return float(np.quantile(within, confidence))


def decide(probability: float, confidence: float) -> Verdict:
    """Kept from C on, not kept up to 1 − C, else undecided, which is an answer."""
    if probability >= confidence:
        return "kept"
    return "not kept" if probability <= 1.0 - confidence else "undecided"


def probability_error(meets: NDArray[np.bool_], chains: int) -> float:
    """Monte Carlo standard error of a mean of indicators of correlated draws, never 0.

    Two draws are added, one of each kind, so that "all of them" is not taken for certainty.
    """
    n = meets.size
    effective = float(n)
    if 0 < int(meets.sum()) < n:
        found = float(az.ess(meets.astype(np.float64).reshape(chains, n // chains)))
        effective = min(effective, found) if math.isfinite(found) and found > 0 else 1.0
    p = (float(meets.mean()) * effective + 1.0) / (effective + 2.0)
    return math.sqrt(p * (1.0 - p) / (effective + 2.0))


def margin(posterior: PosteriorDraws, duty: Duty, limit: Limit, subject: Subject, seed: int) -> Margin:
    """Share, bound and verdict of one limit at one subject."""
    scores = normal_scores(parts_for(limit.share), posterior.batch_sd.shape[1], seed)
    values = limited_response(posterior, duty, limit, subject, scores)
    meets = values >= limit.value if limit.kind == "at least" else values <= limit.value
    share = meets.mean(axis=1)
    enough = share >= limit.share
    probability = float(enough.mean())
    error = probability_error(enough, posterior.chains)
    bound = tolerance_bound(values, limit.kind, limit.share, limit.confidence)
    at_least = limit.kind == "at least"
    distance = min(abs(probability - limit.confidence), abs(probability - (1.0 - limit.confidence)))
    low, high = np.quantile(share, CREDIBLE)
    return Margin(
        duty=duty.name,
        limit=limit,
        subject=subject,
        share_mean=float(share.mean()),
        share_low=float(low),
        share_high=float(high),
        probability=probability,
        probability_error=error,
        bound=bound,
        difference=bound - limit.value if at_least else limit.value - bound,
        ratio=bound / limit.value if at_least else limit.value / bound,
        median=float(np.median(values)),
        verdict=decide(probability, limit.confidence),
        settled=distance > ERRORS_APART * error,
    )
