"""Parameters at every level: medians, intervals, and how much the readings taught beyond the prior."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.inference.density import Density
from perdure.predictions.draws import PosteriorDraws, Subject

Array = NDArray[np.float64]

INTERVAL = (0.05, 0.5, 0.95)
PRIOR_DRAWS = 2000
# a parameter whose variance the readings cut by less than this share is not identified by them
IDENTIFIED_FROM = 0.2
REPORTED_MODULI = 9


@dataclass(frozen=True, slots=True)
class ParameterRow:
    """One parameter at one level.

    Attributes:
        quantity, label, level, subject, unit: what it is.
        posterior, prior: (5 %, 50 %, 95 %) quantiles; prior None where it is fixed.
        contraction: 1 − posterior variance / prior variance, of the logarithm for positive quantities; None where fixed.
        identified: yes, no or fixed.
    """

    quantity: str
    label: str
    level: str
    subject: str
    unit: str
    posterior: tuple[float, float, float]
    prior: tuple[float, float, float] | None
    contraction: float | None
    identified: str


def _three(values: Array) -> tuple[float, float, float]:
    low, middle, high = (float(value) for value in np.quantile(values, INTERVAL))
    return low, middle, high


def _row(names: tuple[str, str, str, str, str], posterior: Array, prior: Array, *, logarithmic: bool) -> ParameterRow:
    scale = np.log if logarithmic else np.asarray
    before = float(np.var(scale(prior)))
    contraction = 1.0 - float(np.var(scale(posterior))) / before if before > 0 else None
    identified = "fixed" if contraction is None else ("yes" if contraction >= IDENTIFIED_FROM else "no")
    return ParameterRow(*names, _three(posterior), _three(prior), contraction, identified)


def prior_draws(density: Density, posterior: PosteriorDraws, seed: int, count: int = PRIOR_DRAWS) -> PosteriorDraws:
    """Draws of the material's part of the model from its prior, in the layout of ``posterior``."""
    priors, structure = density.structure.priors, density.structure
    rng = np.random.default_rng(seed)
    population = priors.mean + rng.standard_normal((count, priors.mean.size)) @ np.linalg.cholesky(priors.covariance).T
    batch_sd = np.abs(rng.standard_normal((count, len(structure.modes)))) * priors.batch_scale
    specimen_sd = np.abs(rng.standard_normal((count, len(structure.modes)))) * priors.specimen_scale
    return PosteriorDraws(
        law=posterior.law,
        modes=posterior.modes,
        mode_index=posterior.mode_index,
        batches=posterior.batches,
        specimens=posterior.specimens,
        batch=posterior.batch,
        stiffness=population[:, 0],
        shape=population[:, 1:],
        batch_offset=batch_sd[:, None, :] * rng.standard_normal((count, len(structure.batches), len(structure.modes))),
        specimen_offset=specimen_sd[:, None, :] * rng.standard_normal((count, len(structure.specimens), len(structure.modes))),
        batch_sd=batch_sd,
        specimen_sd=specimen_sd,
        chains=1,
    )


def _material(posterior: PosteriorDraws, prior: PosteriorDraws) -> list[ParameterRow]:
    rows: list[ParameterRow] = []
    median = Subject("population median")
    after, before = np.exp(posterior.natural(posterior.centre(median))), np.exp(prior.natural(prior.centre(median)))
    law = posterior.law
    reference = "modulus at the reference time"
    rows.append(
        _row(("modulus", reference, "population", "", "MPa"), np.exp(posterior.stiffness), np.exp(prior.stiffness), logarithmic=True)
    )
    fixed = set() if law.free else {name for name in law.natural_names if name.startswith("tau_")}
    for k, (name, unit) in enumerate(zip(law.natural_names, law.natural_units, strict=True)):
        label = {"E": "strength" if name != "E_inf" else "equilibrium modulus", "t": "relaxation time"}[name[0]]
        if name in fixed:
            value = _three(after[:, k])
            rows.append(ParameterRow(name, label, "population", "", unit, value, None, None, "fixed"))
        else:
            rows.append(_row((name, label, "population", "", unit), after[:, k], before[:, k], logarithmic=True))
    for m, mode in enumerate(posterior.modes):
        for level, sd, sd_prior in (
            ("batch", posterior.batch_sd, prior.batch_sd),
            ("specimen", posterior.specimen_sd, prior.specimen_sd),
        ):
            names = (f"{mode} {level} scatter", f"sd of {mode}, {level} to {level}", "population", "", "1")
            rows.append(_row(names, sd[:, m], sd_prior[:, m], logarithmic=True))
    for level, names_of, kind in (("batch", posterior.batches, "known batch"), ("specimen", posterior.specimens, "tested specimen")):
        for name in names_of:
            subject = Subject(kind, name)  # type: ignore[arg-type]
            offsets, offsets_prior = posterior.centre(subject), prior.centre(subject)
            for m, mode in enumerate(posterior.modes):
                key = (mode, f"{mode} against the population", level, name, "1")
                rows.append(_row(key, offsets[:, m], offsets_prior[:, m], logarithmic=False))
            if "stiffness" in posterior.modes:
                m = posterior.modes.index("stiffness")
                rows.append(
                    _row(
                        ("modulus", reference, level, name, "MPa"),
                        np.exp(posterior.stiffness + offsets[:, m]),
                        np.exp(prior.stiffness + offsets_prior[:, m]),
                        logarithmic=True,
                    )
                )
    return rows


def _measurement(density: Density, flat: Array, seed: int) -> list[ParameterRow]:
    """Calibration and geometry effects and reading noise; ``flat`` is (draws, n)."""
    structure, packing = density.structure, density.packing
    rng = np.random.default_rng(seed)
    standard = rng.standard_normal(PRIOR_DRAWS)
    modes = len(structure.modes)
    rows: list[ParameterRow] = []
    first = 1 + structure.shape_size
    for e, effect in enumerate(structure.root_effects):
        key = (effect.kind, "standardised type B effect", "instrument", effect.subject, "1")
        rows.append(_row(key, flat[:, first + e], standard, logarithmic=False))
    at = packing.root + packing.batches * modes
    for s, effects in enumerate(structure.local_effects):
        for e, effect in enumerate(effects):
            level = "specimen" if effect.subject == structure.specimens[s] else "record"
            key = (effect.kind, "standardised type B effect", level, effect.subject, "1")
            rows.append(_row(key, flat[:, at + modes + e], standard, logarithmic=False))
        at += int(packing.size[s])
    at += 2 * modes
    for k, instrument in enumerate(structure.instruments):
        for p, name in enumerate(density.noise.parameter_names):
            prior = np.exp(structure.priors.noise_location[k, p] + structure.priors.noise_scale[k, p] * standard)
            unit = "MPa" if name == "absolute" else "1"
            key = (f"noise {name}", "sd of one reading", "instrument", instrument, unit)
            rows.append(_row(key, np.exp(flat[:, at]), prior, logarithmic=True))
            at += 1
    return rows


def parameter_rows(density: Density, posterior: PosteriorDraws, flat: Array, seed: int) -> list[ParameterRow]:
    """Every parameter at population, batch, specimen, instrument and record level; ``flat`` is (draws, n)."""
    prior = prior_draws(density, posterior, seed)
    return _material(posterior, prior) + _measurement(density, flat, seed + 1)
