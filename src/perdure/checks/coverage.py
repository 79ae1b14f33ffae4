"""Do the 90 % bands of readings hold 90 % of the readings that were fitted, specimen by specimen?"""

from __future__ import annotations

import numpy as np
from scipy.stats import binomtest

from perdure.checks.fitted import FittedStudy
from perdure.checks.words import percent
from perdure.study.finding import Finding

NAME = "coverage of readings"
NOMINAL = 0.9
SIGNIFICANCE = 0.001
CORRELATED = "the test takes readings as independent, and neighbours are not, so it is a rough one"


def check(fitted: FittedStudy) -> list[Finding]:
    """One finding a specimen; caution where an exact binomial test at 0.1 % rejects the nominal share."""
    predictive = fitted.predictive
    names = np.array([record.specimen for record in fitted.records.records])[predictive.record]
    found = []
    for specimen in fitted.records.specimens:
        own = (names == specimen) & ~predictive.held_out
        readings = int(own.sum())
        if readings == 0:
            continue
        inside = int(predictive.inside90[own].sum())
        share = inside / readings
        consistent = binomtest(inside, readings, NOMINAL).pvalue >= SIGNIFICANCE
        too_narrow = share < NOMINAL
        seen = f"{inside} of {readings} fitted readings ({percent(share)}) lie within their 90 % bands"
        if consistent:
            meaning, remedy = "consistent with 90 % if readings are taken as independent", ""
        elif too_narrow:
            meaning = "too few: the bands are too narrow, because the law or the noise does not describe this specimen"
            remedy = "Look at its residuals over time; check the record for slips, drift and wrong units."
        else:
            meaning = "too many: the noise is taken too large for this specimen, by its own prior or by other specimens"
            remedy = "Check the noise ranges of the instrument, and whether another record on it is much noisier."
        found.append(
            Finding(
                check=NAME,
                subject=specimen,
                outcome="pass" if consistent else "caution",
                value=share,
                threshold=NOMINAL,
                unit="",
                message=f"{seen}, {meaning}{'' if consistent else f'; {CORRELATED}'}.",
                remedy=remedy,
            )
        )
    return found
