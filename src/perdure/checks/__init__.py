"""Checks: each looks at a study from one side and leaves findings. One file each, listed in :data:`BEFORE` or :data:`AFTER`."""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType

from perdure.checks import (
    confounding,
    convergence,
    coverage,
    drift,
    extrapolation,
    few_batches,
    linearity,
    missing,
    one_record,
    prior_dominance,
    repeats,
    residuals,
    saturation,
    scatter_sensitivity,
    state,
    time_order,
    uncertainties,
)
from perdure.checks.fitted import FittedStudy
from perdure.inference.priors import Layout, lay_out
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from perdure.study.study import Study

BEFORE: Mapping[str, Callable[[RecordSet, Study, Layout], list[Finding]]] = MappingProxyType(
    {
        time_order.NAME: time_order.check,
        saturation.NAME: saturation.check,
        repeats.NAME: repeats.check,
        drift.NAME: drift.check,
        missing.NAME: missing.check,
        confounding.NAME: confounding.check,
        few_batches.NAME: few_batches.check,
        one_record.NAME: one_record.check,
        uncertainties.NAME: uncertainties.check,
        state.NAME: state.check,
    }
)
"""Checks of the records and the study, before sampling."""

AFTER: Mapping[str, Callable[[FittedStudy], list[Finding]]] = MappingProxyType(
    {
        convergence.NAME: convergence.check,
        coverage.NAME: coverage.check,
        residuals.NAME: residuals.check,
        linearity.NAME: linearity.check,
        scatter_sensitivity.NAME: scatter_sensitivity.check,
        prior_dominance.NAME: prior_dominance.check,
        extrapolation.NAME: extrapolation.check,
    }
)
"""Checks of a fitted study."""


def before_sampling(records: RecordSet, study: Study) -> list[Finding]:
    """Run every check that needs no posterior, in the order of :data:`BEFORE`.

    Raises:
        StudyError: when the law cannot be laid out over the records.
    """
    layout = lay_out(study, records)
    return [finding for check in BEFORE.values() for finding in check(records, study, layout)]


def after_sampling(fitted: FittedStudy) -> list[Finding]:
    """Run every check of a fitted study, in the order of :data:`AFTER`."""
    return [finding for check in AFTER.values() for finding in check(fitted)]
