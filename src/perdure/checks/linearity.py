"""Is the response proportional to strain, as a linear law takes it to be?

For each record and each draw a log stiffness is formed: the specimen's mode, the mounting of the record and what its
residuals leave on average. Its slope over strain level is estimated by least squares within specimens where specimens
were tested at several levels, else within batches, else between batches, so that scatter between the groups compared
is not taken for an effect of strain; the residual scatter about the line gives the slope's own uncertainty (Student's t).
"""

from __future__ import annotations

from collections.abc import Callable, Hashable
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.checks.fitted import FittedStudy
from perdure.checks.posterior_predictive import thinned
from perdure.checks.words import percent
from perdure.inference.readings import predict_readings
from perdure.study.finding import Finding
from perdure.study.records import Record

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

NAME = "linearity"
EFFECT_AT_MOST = 0.03
# levels closer than this share of the largest are one level
LEVELS_APART = 0.05


@dataclass(frozen=True, slots=True, eq=False)
class _Slope:
    """Change of log stiffness from the lowest to the highest level, (draws,), and how it was estimated."""

    change: Array
    compared: str


def log_stiffness(fitted: FittedStudy, draws: Array) -> dict[str, Array]:
    """Log stiffness of every fitted record that is a stress, by name: (draws,) each."""
    density, structure = fitted.density, fitted.density.structure
    readings, runs = structure.readings, len(structure.records)
    # calibration of instruments and dimensions of specimens stay out of the stiffness; mounting is what tells records apart
    kinds = [effect.kind for effect in structure.root_effects]
    kinds += [effect.kind for effects in structure.local_effects for effect in effects]
    mounting = np.array([kind == "mounting" for kind in kinds], dtype=np.bool_)
    out = np.empty((draws.shape[0], runs))
    for row, draw in enumerate(draws):
        state = density.packing.split(draw)
        effects = density.effects_of(state)
        modes = density.modes_of(state)
        natural = structure.law.natural(state.root[1 : 1 + structure.shape_size], modes)
        predicted = predict_readings(
            structure.law,
            readings,
            natural[structure.specimen],
            structure.gain.on_records(effects),
            structure.coefficient.on_records(effects),
        ).value
        weight = density.noise.standard_deviation(predicted, readings.count, readings.instrument, state.log_noise) ** -2.0
        fit = np.bincount(readings.run, weight * predicted * readings.observed, minlength=runs)
        norm = np.bincount(readings.run, weight * predicted**2, minlength=runs)
        # records without a fitted reading are dropped below
        left = np.log(np.where(norm > 0, fit, 1.0) / np.where(norm > 0, norm, 1.0))
        out[row] = modes[structure.specimen, 0] + structure.gain.on_records(np.where(mounting, effects, 0.0)) + left
    seen = {record.name for record in fitted.records.records if not record.normalised and not record.held_out.all()}
    return {name: out[:, place] for place, name in enumerate(structure.records) if name in seen}


def _means(values: Array, labels: list[Hashable]) -> tuple[Array, list[Hashable]]:
    """Means of the columns of ``values`` (draws, n) that share a label, and the labels in order of first appearance."""
    names = list(dict.fromkeys(labels))
    return np.stack([values[:, [label == name for label in labels]].mean(axis=1) for name in names], axis=1), names


def _within(level: Array, stiffness: Array, group: list[Hashable], rng: np.random.Generator) -> Array | None:
    """Slope within groups, (draws,), its own uncertainty drawn in; None where the levels or their number do not allow it."""
    place = np.unique([str(name) for name in group], return_inverse=True)[1]
    number = np.bincount(place)
    freedom = level.size - number.size - 1
    apart = level - (np.bincount(place, level) / number)[place]
    if freedom < 1 or np.ptp(apart) < LEVELS_APART * level.max():
        return None
    centred = stiffness - np.stack([stiffness[:, place == g].mean(axis=1) for g in range(number.size)], axis=1)[:, place]
    spread = float(apart @ apart)
    slope: Array = centred @ apart / spread
    residual = centred - slope[:, None] * apart
    error = np.sqrt(np.square(residual).sum(axis=1) / freedom / spread)
    return slope + error * rng.standard_t(freedom, slope.size)


def _slope(records: list[Record], stiffness: Array, rng: np.random.Generator) -> _Slope | None:
    """Try the comparisons from the one that confounds least to the one that confounds most."""
    levels = np.array([abs(record.strain_level) for record in records])
    unit_of: tuple[tuple[str, Callable[[Record], Hashable], Callable[[Record], Hashable]], ...] = (
        ("within specimens", lambda record: record.name, lambda record: record.specimen),
        ("between specimens of a batch", lambda record: record.specimen, lambda record: record.batch),
        ("between batches", lambda record: record.batch, lambda _record: "all"),
    )
    for compared, unit, group in unit_of:
        labels = [unit(record) for record in records]
        values, names = _means(stiffness, labels)
        level = _means(levels[None, :], labels)[0][0]
        owner = {unit(record): group(record) for record in records}
        slope = _within(level, values, [owner[name] for name in names], rng)
        if slope is not None:
            return _Slope(slope * float(np.ptp(levels)), compared)
    return None


def _not_testable(subject: str, why: str) -> Finding:
    return Finding(
        check=NAME, subject=subject, outcome="pass", value=None, threshold=EFFECT_AT_MOST, unit="", message=f"Not testable: {why}."
    )


def _verdict(subject: str, records: list[Record], stiffness: dict[str, Array], rng: np.random.Generator) -> Finding:
    levels = [abs(record.strain_level) for record in records]
    low, high = min(levels), max(levels)
    if high - low < LEVELS_APART * high:
        return _not_testable(subject, f"all records reach about the same strain, {percent(high)}, so proportionality is taken on trust")
    slope = _slope(records, np.stack([stiffness[record.name] for record in records], axis=1), rng)
    if slope is None:
        return _not_testable(subject, "too few records to tell an effect of strain from scatter between specimens")
    change = np.expm1(slope.change)
    lower, middle, upper = (float(value) for value in np.quantile(change, (0.025, 0.5, 0.975)))
    beyond = (lower > 0 or upper < 0) and abs(middle) > EFFECT_AT_MOST
    seen = (
        f"From {percent(low)} to {percent(high)} strain the stiffness changes by {percent(middle)} "
        f"(95 % interval {percent(lower)} to {percent(upper)}; compared {slope.compared})"
    )
    return Finding(
        check=NAME,
        subject=subject,
        outcome="caution" if beyond else "pass",
        value=abs(middle),
        threshold=EFFECT_AT_MOST,
        unit="",
        message=f"{seen}: {'a linear law takes this for scatter' if beyond else 'no effect that is both certain and large'}.",
        remedy="Fit only records near the strain of the duty, or test specimens at that strain." if beyond else "",
    )


def check(fitted: FittedStudy) -> list[Finding]:
    """One finding for each sense and state in which stresses were measured; caution for an effect that is certain and above 3 %."""
    if not fitted.layout.law.linear:
        return [_not_testable("all records", f'the law "{fitted.layout.law.name}" is not linear, so no proportionality is assumed')]
    draws = thinned(fitted.draws)
    stiffness = log_stiffness(fitted, draws)
    if not stiffness:
        return [_not_testable("all records", "all responses are ratios, in which stiffness drops out")]
    groups: dict[str, list[Record]] = {}
    for record in fitted.records.records:
        if record.name in stiffness:
            groups.setdefault(f"{record.sense}, {record.state}", []).append(record)
    rng = np.random.default_rng(fitted.study.sampler.seed)
    return [_verdict(subject, records, stiffness, rng) for subject, records in groups.items()]
