"""What several steps need: the study's model, built from its files."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np

from perdure.border.posterior_file import PosteriorFile, read_posterior
from perdure.border.store import read_json, read_records, sha256_of
from perdure.border.study_file import load_study
from perdure.checks.fitted import FittedStudy
from perdure.errors import ResultError, problem
from perdure.inference.density import Density
from perdure.inference.gate import Attempt, attempt_from
from perdure.inference.priors import Layout, Priors, build_priors, lay_out
from perdure.inference.structure import build_structure
from perdure.steps.runner import Place, need
from perdure.study.records import RecordSet
from perdure.study.study import Study


@dataclass(frozen=True, slots=True, eq=False)
class Model:
    """A study with its accepted records and the model built from both."""

    study: Study
    records: RecordSet
    records_sha256: str
    layout: Layout
    priors: Priors
    density: Density


def load_model(place: Place) -> Model:
    """Build the model from the study folder and records.nc."""
    path = need(place.file("records.nc"), "intake")
    study, records = load_study(place.study).study, read_records(path)
    layout = lay_out(study, records)
    priors = build_priors(study, records, layout)
    return Model(study, records, sha256_of(path), layout, priors, Density(build_structure(layout, priors, records, study.modes)))


def load_posterior(place: Place) -> PosteriorFile:
    """Read posterior.nc, and refuse one that was sampled from other records than records.nc holds now."""
    posterior = read_posterior(need(place.file("posterior.nc"), "fit"))
    present = sha256_of(need(place.file("records.nc"), "intake"))
    if posterior.records_sha256 != present:
        raise ResultError(
            [
                problem(
                    "posterior.nc",
                    f"draws from records {posterior.records_sha256[:12]}",
                    f"records {present[:12]}",
                    "The records changed since the fit: run the study again.",
                )
            ]
        )
    return posterior


def load_fitted(place: Place) -> FittedStudy:
    """The model with its draws and how the sampler fared, for the checks."""
    model, posterior = load_model(place), load_posterior(place)
    attempts: list[Attempt] = [attempt_from(entry) for entry in read_json(need(place.file("evidence/fit.json"), "fit"))["attempts"]]
    flat = posterior.flat.reshape(-1, posterior.flat.shape[2])
    return FittedStudy(
        model.study, model.records, model.layout, model.density, np.ascontiguousarray(flat), attempts[-1].diagnosis, attempts
    )
