"""A study after sampling: what the checks of a fit look at."""

from __future__ import annotations

from collections.abc import Sequence
from dataclasses import dataclass
from functools import cached_property

import numpy as np
from numpy.typing import NDArray

from perdure.checks.posterior_predictive import Predictive, predictive
from perdure.inference.density import Density
from perdure.inference.gate import Attempt, Diagnosis
from perdure.inference.priors import Layout
from perdure.study.records import RecordSet
from perdure.study.study import Study

Array = NDArray[np.float64]


@dataclass(frozen=True, eq=False)
class FittedStudy:
    """A study, its records and draws from its posterior.

    Attributes:
        study, records, layout: as they were fitted.
        density: of the model, built from the same records.
        draws: flat vectors in the order of ``Packing``, chains joined, (draws, n).
        diagnosis: of the kept attempt.
        attempts: of the sampler, in order.
    """

    study: Study
    records: RecordSet
    layout: Layout
    density: Density
    draws: Array
    diagnosis: Diagnosis
    attempts: Sequence[Attempt]

    @cached_property
    def predictive(self) -> Predictive:
        """Posterior predictive of every reading under the study's own seed, computed once."""
        return predictive(self, self.study.sampler.seed)
