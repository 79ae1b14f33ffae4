"""Which parameters does the posterior take from their priors, because the records say nothing of them?"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from perdure.checks.fitted import FittedStudy
from perdure.checks.words import listed, span
from perdure.predictions.table import IDENTIFIED_FROM
from perdure.study.finding import Finding

Array = NDArray[np.float64]

NAME = "prior dominance"
# variance of the logarithm of a half-normal quantity, whatever its scale
LOG_HALF_NORMAL_VARIANCE = math.pi**2 / 8.0


def contractions(fitted: FittedStudy) -> dict[str, float]:
    """1 − var(posterior) / var(prior) of the population's logarithms and scatter sds' logarithms, by name; not of the noise."""
    structure, packing = fitted.density.structure, fitted.density.packing
    priors = structure.priors
    states = [packing.split(draw) for draw in fitted.draws]
    named: list[tuple[str, Array, float]] = [("modulus", np.array([state.root[0] for state in states]), float(priors.covariance[0, 0]))]
    for place, name in enumerate(structure.law.shape_names, start=1):
        named.append((name, np.array([state.root[place] for state in states]), float(priors.covariance[place, place])))
    for place, mode in enumerate(structure.modes):
        for level, sds in (
            ("batch", [state.batch_sd[place] for state in states]),
            ("specimen", [state.specimen_sd[place] for state in states]),
        ):
            named.append((f"{mode} {level} scatter", np.log(sds), LOG_HALF_NORMAL_VARIANCE))
    return {name: 1.0 - float(values.var()) / prior for name, values, prior in named}


def _worded(fitted: FittedStudy, names: list[str]) -> tuple[list[str], list[str]]:
    """``names`` in words: those that tests of this kind could have shown, and those that they could not."""
    layout, law = fitted.layout, fitted.layout.law
    ratios = all(record.normalised for record in fitted.records.records)
    on_grid = {} if law.free else dict(zip(law.shape_names, law.times.tolist(), strict=False))
    matter: list[str] = []
    expected: list[str] = []
    for name in names:
        time = on_grid.get(name)
        word = name if time is None else f"relaxation near {span(time)}"
        unseen = ratios and name.startswith(("modulus", "stiffness")) if time is None else not layout.shortest <= time <= layout.longest
        (expected if unseen else matter).append(word)
    return matter, expected


def check(fitted: FittedStudy) -> list[Finding]:
    """One finding that lists what the tables call not identified; caution where tests of this kind could have shown it."""
    weak = [name for name, contraction in contractions(fitted).items() if contraction < IDENTIFIED_FROM]
    matter, expected = _worded(fitted, weak)
    if matter:
        message = f"Not identified, so taken from the priors: {listed(matter)}"
        message += f"; also, as expected outside of what the tests show, {listed(expected)}." if expected else "."
    elif expected:
        message = f"Only what lies outside of what the tests show is taken from the priors, as expected: {listed(expected)}."
    else:
        message = "The records narrow the prior of every parameter of the population."
    return [
        Finding(
            check=NAME,
            subject="population",
            outcome="caution" if matter else "pass",
            value=float(len(matter)),
            threshold=0.0,
            unit="parameters",
            message=message,
            remedy="Support the ranges of these quantities under priors with evidence, or add tests that show them." if matter else "",
        )
    ]
