"""Does the law miss a specimen systematically at some time scale?"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from perdure.checks.fitted import FittedStudy
from perdure.checks.posterior_predictive import Predictive
from perdure.checks.words import percent, span
from perdure.study.finding import Finding

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

NAME = "residuals over time"
BINS_A_DECADE = 2
# sum of n standardised residuals over √n: about standard normal where the law holds and the noise is white
SCORE_AT_MOST = 4.0


def _scores(predictive: Predictive, rows: Ints) -> tuple[Array, Array]:
    """Bin of each of ``rows`` (half decades of time), and the score of each bin in order of :func:`numpy.unique`."""
    bins = np.floor(BINS_A_DECADE * np.log10(predictive.time[rows]))
    unique, place = np.unique(bins, return_inverse=True)
    number = np.bincount(place, minlength=unique.size)
    return place.astype(np.float64), np.bincount(place, predictive.z[rows], minlength=unique.size) / np.sqrt(number)


def check(fitted: FittedStudy) -> list[Finding]:
    """One finding a specimen with its worst half decade; caution where the score there is beyond 4 in magnitude."""
    predictive = fitted.predictive
    names = np.array([record.specimen for record in fitted.records.records])[predictive.record]
    found = []
    for specimen in fitted.records.specimens:
        rows = np.flatnonzero((names == specimen) & ~predictive.held_out & (predictive.time > 0))
        if rows.size == 0:
            continue
        place, scores = _scores(predictive, rows)
        worst = int(np.argmax(np.abs(scores)))
        inside = rows[place == worst]
        first, last = float(predictive.time[inside].min()), float(predictive.time[inside].max())
        when = f"between {span(first)} and {span(last)}" if last > first else f"at {span(first)}"
        # relative to the typical response there: single readings may be near 0
        miss = float((predictive.observed - predictive.mean)[inside].mean() / np.abs(predictive.mean[inside]).mean())
        missed = bool(abs(scores[worst]) > SCORE_AT_MOST)
        found.append(
            Finding(
                check=NAME,
                subject=specimen,
                outcome="caution" if missed else "pass",
                value=float(abs(scores[worst])),
                threshold=SCORE_AT_MOST,
                unit="",
                message=(
                    f"The law misses systematically: {when} the readings lie on average {percent(miss)} off the prediction, "
                    "more than their noise explains, and bands that take residuals as independent are too narrow."
                    if missed
                    else f"No systematic miss: the largest is {percent(miss)} on average, {when}."
                ),
                remedy=(
                    "Compare this specimen's record with its prediction in the report; allow more relaxation times or scatter modes."
                    if missed
                    else ""
                ),
            )
        )
    return found
