"""The PyMC statement of the model: what a reviewer reads, and what an extender changes first.

    population         (ln E_ref, shape coordinates of the law) ~ MvNormal(handbook)
    instrument effects ~ Normal(0, 1)      force, strain and compliance of each instrument, in standard uncertainties
    batch sd           ~ HalfNormal(handbook), one a mode;   batch offset ~ Normal(0, batch sd)
    specimen sd        ~ HalfNormal(handbook), one a mode;   specimen offset ~ Normal(0, specimen sd)
    local effects      ~ Normal(0, 1)      area, length, mounting and reference reading, in standard uncertainties
    log noise          ~ Normal(handbook), each instrument's own
    readings           ~ the law's response to each record's strain history, with the noise term about it

Sampling uses the same density compiled (``perdure.inference.density``). Nothing is integrated out of either face, so the
two agree up to one constant; a contract test holds them together. Prior predictive, posterior predictive and log-likelihood
come from PyMC itself. Operations of ``perdure.inference.response`` run in Python: pass ``compile_kwargs={"mode": MODE}`` to
PyMC's functions and nothing is compiled that is used once.
"""

from __future__ import annotations

from collections.abc import Callable, Mapping
from types import MappingProxyType
from typing import Any

import numpy as np
import pymc as pm  # type: ignore[import-untyped]
import pytensor.tensor as pt
from numpy.typing import NDArray
from pytensor.compile.mode import Mode

from perdure.inference.noise import NOISE
from perdure.inference.response import NaturalOp, respond
from perdure.inference.state import State
from perdure.inference.structure import Structure, Weights

Array = NDArray[np.float64]

MODE = Mode(linker="py", optimizer="fast_compile")
"""How to compile what is used a few times: in a second, without a compiler."""


def _white(predicted: Any, log_noise: Any, structure: Structure) -> None:
    """Independent readings, each the mean of ``count`` raw ones with an absolute and a relative part."""
    readings = structure.readings
    absolute, relative = (pt.exp(log_noise[readings.instrument, p]) for p in range(2))
    sd = pt.sqrt((absolute**2 + (relative * predicted) ** 2) / readings.count)
    pm.Normal("readings", predicted, sd, observed=readings.observed, dims="reading")


# how each noise term of ``NOISE`` states its readings: (predicted (N,), log noise (instruments, P), structure)
READINGS: Mapping[str, Callable[[Any, Any, Structure], None]] = MappingProxyType({"white": _white})


def _on_records(weights: Weights, effects: list[Any]) -> Any:
    """Weighted sum of the effects of each record, (R,); zeros where there are none."""
    return weights.dense() @ pt.concatenate(effects) if effects else pt.zeros(weights.records)  # type: ignore[no-untyped-call]


def _coordinates(structure: Structure, noise: str) -> dict[str, tuple[str, ...]]:
    """Names along each dimension."""
    law, readings = structure.law, structure.readings
    first = np.searchsorted(readings.run, np.arange(len(structure.records)))
    within = np.arange(readings.run.size) - first[readings.run] + 1
    return {
        "shape": law.shape_names,
        "coordinate": ("stiffness", *law.shape_names),
        "instrument": structure.instruments,
        "instrument_effect": tuple(effect.name for effect in structure.root_effects),
        "batch": structure.batches,
        "specimen": structure.specimens,
        "mode": structure.modes,
        "law_mode": law.mode_names,
        "local_effect": tuple(effect.name for own in structure.local_effects for effect in own),
        "noise": NOISE[noise].parameter_names,
        "natural": law.natural_names,
        "record": structure.records,
        "reading": tuple(f"{structure.records[r]}, {k}" for r, k in zip(readings.run, within, strict=True)),
    }


def build_model(structure: Structure, noise: str = "white") -> pm.Model:
    """State the model of a study in PyMC.

    Args:
        structure: who shares what; its readings, held-out ones excepted, are what the model is conditioned on.
        noise: key in ``NOISE`` and in :data:`READINGS`.

    Returns:
        The model, with named dimensions; readings are numbered from 1 within their record, records ordered by specimen.
        Dimensions of length 0 (no scatter mode in use, no instrument effect declared) have no variable.
    """
    law, priors = structure.law, structure.priors
    batch, specimen = structure.batch, structure.specimen
    with pm.Model(coords=_coordinates(structure, noise)) as model:
        # what all batches share
        population = pm.MvNormal("population", priors.mean, cov=priors.covariance, dims="coordinate")
        shape = pm.Deterministic("shape_coordinates", population[1:], dims="shape")

        # type B effects, in standard uncertainties; each acts on the records that share it
        effects = []
        if structure.root_effects:
            effects.append(pm.Normal("instrument_effects", 0.0, 1.0, dims="instrument_effect"))
        if structure.local_start[-1]:
            effects.append(pm.Normal("local_effects", 0.0, 1.0, dims="local_effect"))

        # material scatter; modes not in use are the same for all specimens, at the law's zero, stiffness at the population's
        modes: Any = pt.zeros((len(structure.specimens), len(law.mode_names)))
        modes = modes[:, 0].set(population[0])
        if structure.modes:
            batch_sd = pm.HalfNormal("batch_sd", priors.batch_scale, dims="mode")
            specimen_sd = pm.HalfNormal("specimen_sd", priors.specimen_scale, dims="mode")
            batch_offset = pm.Normal("batch_offset", 0.0, batch_sd, dims=("batch", "mode"))
            specimen_offset = pm.Normal("specimen_offset", 0.0, specimen_sd, dims=("specimen", "mode"))
            modes = modes[:, structure.mode_index].inc(batch_offset[batch] + specimen_offset)
        modes = pm.Deterministic("modes", modes, dims=("specimen", "law_mode"))

        # the law: logarithms of each specimen's natural parameters, then the response of each record
        natural = pm.Deterministic("natural_parameters", NaturalOp(law)(shape, modes), dims=("specimen", "natural"))
        log_gain = pm.Deterministic("log_gain", _on_records(structure.gain, effects), dims="record")
        coefficient = pm.Deterministic("coefficient", _on_records(structure.coefficient, effects), dims="record")
        response = respond(law, structure.readings, natural[specimen], log_gain, coefficient)
        predicted = pm.Deterministic("predicted", response, dims="reading")

        # the readings
        log_noise = pm.Normal("log_noise", priors.noise_location, priors.noise_scale, dims=("instrument", "noise"))
        READINGS[noise](predicted, log_noise, structure)
    return model


def point_of(model: pm.Model, structure: Structure, state: State) -> dict[str, Array]:
    """The values of the model's free variables at ``state``: by variable, in natural coordinates, not transformed.

    The keys are the value variables of ``remove_value_transforms(model)``, and the posterior variables of PyMC's predictive
    and log-likelihood functions.
    """
    count = len(structure.modes)
    local = [state.specimen[s, count : count + len(own)] for s, own in enumerate(structure.local_effects)]
    values = {
        "population": state.root[: 1 + structure.shape_size],
        "instrument_effects": state.root[1 + structure.shape_size :],
        "local_effects": np.concatenate(local),
        "batch_sd": state.batch_sd,
        "specimen_sd": state.specimen_sd,
        "batch_offset": state.batch_offset,
        "specimen_offset": state.specimen[:, :count],
        "log_noise": state.log_noise,
    }
    return {variable.name: values[variable.name] for variable in model.free_RVs}
