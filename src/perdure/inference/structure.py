"""The structure of one study's model: who shares what, as index arrays and names.

Unknowns of the model, in the order that both faces use:

* root: population stiffness, the law's shape coordinates, then standardised calibration effects of instruments;
* batch offsets (B, M) and specimen offsets (S, M) of the modes in use;
* local effects, standardised: area and length of each specimen, mounting or reference reading of each record;
* scatter sds of batches and specimens (M,) each; noise parameters (instruments, P) as logarithms.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.inference.priors import Layout, Priors
from perdure.rheology.law import Drives, Law
from perdure.study.records import Record, RecordSet

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


# a strain that changes by less than this share of the peak between two readings is held
HELD_WITHIN = 1e-3
# two steps are on one ramp when their rates differ by less than this share
SAME_SLOPE = 0.1


@dataclass(frozen=True, slots=True)
class Effect:
    """A standardised type B effect (prior N(0, 1)).

    Attributes:
        kind: force, strain, compliance (instrument); area, length (specimen); mounting, reference (record); several that
            nothing could tell apart are joined by "and".
        subject: name of the instrument, specimen or record.
        uncertainty: relative standard uncertainty; 1 for compliance, whose strain history carries it.
    """

    kind: str
    subject: str
    uncertainty: float

    @property
    def name(self) -> str:
        """Kind and subject, unique in a study."""
        return f"{self.kind}, {self.subject}"


@dataclass(frozen=True, slots=True, eq=False)
class Readings:
    """The readings that the model is conditioned on, packed.

    Attributes:
        drives: histories of all records, in order.
        knot: index of each reading into the packed knots, (N,).
        run: record of each reading, (N,).
        reference_knot: packed knot of the reference reading of a record, −1 where the response is a stress, (R,).
        observed, count: (N,).
        instrument: index of each reading's instrument, (N,).
    """

    drives: Drives
    knot: Ints
    run: Ints
    reference_knot: Ints
    observed: Array
    count: Array
    instrument: Ints


@dataclass(frozen=True, slots=True, eq=False)
class Weights:
    """A sparse matrix of weights of effects on records: ``value[i]`` at (``record[i]``, ``effect[i]``)."""

    record: Ints
    effect: Ints
    value: Array
    records: int
    effects: int

    @classmethod
    def of(cls, dense: Array) -> Weights:
        """From a dense (R, E) matrix."""
        record, effect = np.nonzero(dense)
        return cls(record.astype(np.int64), effect.astype(np.int64), dense[record, effect], dense.shape[0], dense.shape[1])

    def on_records(self, effects: Array) -> Array:
        """Sum over effects for each record, (R,)."""
        return np.bincount(self.record, self.value * effects[self.effect], minlength=self.records)

    def on_effects(self, records: Array) -> Array:
        """The transpose, (E,)."""
        return np.bincount(self.effect, self.value * records[self.record], minlength=self.effects)

    def dense(self) -> Array:
        """The (R, E) matrix."""
        out = np.zeros((self.records, self.effects))
        out[self.record, self.effect] = self.value
        return out


@dataclass(frozen=True, slots=True, eq=False)
class Structure:
    """Index arrays and names; shapes in the module's text.

    Attributes:
        law: laid out.
        modes: names of the modes in use, (M,); ``mode_index`` their places among the law's modes.
        batches, specimens, instruments, records: names.
        batch: of each specimen, (S,). specimen: of each record, (R,).
        root_effects: instrument effects. local_effects: by specimen, in order.
        local_start: first local effect of each specimen in the flat list, (S + 1,).
        loads: (M, G), root variables that are the means of modes.
        gain, coefficient: weights of all effects (root effects first, then the flat local ones) on the logarithm
            of the response and on the coefficient of the second strain history of each record.
        readings: what is fitted.
        priors: of the study.
    """

    law: Law
    modes: tuple[str, ...]
    mode_index: Ints
    batches: tuple[str, ...]
    specimens: tuple[str, ...]
    instruments: tuple[str, ...]
    records: tuple[str, ...]
    batch: Ints
    specimen: Ints
    root_effects: tuple[Effect, ...]
    local_effects: tuple[tuple[Effect, ...], ...]
    local_start: Ints
    loads: Array
    gain: Weights
    coefficient: Weights
    readings: Readings
    priors: Priors

    @property
    def shape_size(self) -> int:
        """Number of the law's shape coordinates."""
        return len(self.law.shape_names)

    @property
    def root_size(self) -> int:
        """G."""
        return 1 + self.shape_size + len(self.root_effects)


def _together(kinds: list[tuple[str, float]], subject: str) -> list[Effect]:
    """One effect for several that act alike on the same readings: nothing could tell them apart, so they add in quadrature."""
    declared = [(kind, uncertainty) for kind, uncertainty in kinds if uncertainty > 0]
    if not declared:
        return []
    return [Effect(" and ".join(kind for kind, _ in declared), subject, math.hypot(*(uncertainty for _, uncertainty in declared)))]


def _instrument_effects(records: RecordSet) -> tuple[Effect, ...]:
    effects: list[Effect] = []
    for instrument in records.instruments:
        own = [record for record in records.records if record.instrument == instrument.name]
        if not own or all(record.normalised for record in own):
            continue  # calibration drops out of a ratio
        # the law is linear: a relative error of strain acts as one of force
        effects += _together([("force", instrument.u_force), ("strain", instrument.u_strain)], instrument.name)
        if instrument.has_compliance and any(np.any(record.compliance != 0) for record in own):
            effects.append(Effect("compliance", instrument.name, 1.0))
    return tuple(effects)


def _specimen_effects(own: list[Record]) -> tuple[tuple[Effect, ...], list[tuple[str, ...]]]:
    """Effects of a specimen, and the names of the records that each acts on."""
    absolute = [record for record in own if not record.normalised]
    effects: list[Effect] = []
    targets: list[tuple[str, ...]] = []
    shared = [
        ("area", max((record.uncertainty.area for record in absolute), default=0.0)),
        ("length", max((record.uncertainty.length for record in absolute), default=0.0)),
    ]
    if len(absolute) == 1:
        made = _together([*shared, ("mounting", absolute[0].uncertainty.mounting)], own[0].specimen)
    else:
        made = _together(shared, own[0].specimen)
    effects += made
    targets += [tuple(record.name for record in absolute)] * len(made)
    for record in own:
        single = []
        if record.normalised:
            single = _together([("reference", record.uncertainty.reference)], record.name)
        elif len(absolute) > 1:
            single = _together([("mounting", record.uncertainty.mounting)], record.name)
        effects += single
        targets += [(record.name,)] * len(single)
    return tuple(effects), targets


def _without_own_noise(record: Record) -> Array:
    """The compliance's strain history with each reading's value interpolated from its neighbours.

    It was computed from the measured force. With a reading's own noise in it, its coefficient would explain that noise:
    on simulated relaxation records of 150 readings this moved it by three prior standard deviations. Interpolated are
    readings whose neighbours lie in the same hold (in log time) or on the same ramp (in time); the few at corners and
    ends keep their own value.
    """
    direction = record.compliance.copy()
    if not np.any(direction != 0) or record.time.size < 3:
        return direction
    at = np.searchsorted(record.history.time, record.time)
    time, value, strain = record.time, direction[at], record.history.value[at]
    slope = np.diff(strain) / np.diff(time)
    held = np.abs(np.diff(strain)) <= HELD_WITHIN * np.abs(record.history.value).max()
    both_held = held[1:] & held[:-1]
    same_ramp = ~held[1:] & ~held[:-1] & (np.abs(np.diff(slope)) <= SAME_SLOPE * np.abs(slope[1:]))
    position = np.log(time)
    in_hold = (position[1:-1] - position[:-2]) / (position[2:] - position[:-2])
    in_ramp = (time[1:-1] - time[:-2]) / (time[2:] - time[:-2])
    share = np.where(both_held, in_hold, in_ramp)
    smooth = value[:-2] + share * (value[2:] - value[:-2])
    direction[at[1:-1]] = np.where(both_held | same_ramp, smooth, value[1:-1])
    return direction


def pack_readings(records: list[Record], instruments: tuple[str, ...], keep: list[NDArray[np.bool_]]) -> Readings:
    """Pack the readings of ``records`` that ``keep`` marks, (n,) a record."""
    histories, directions, knots, runs, references, observed, count, instrument = [], [], [], [], [], [], [], []
    start = 0
    for r, record in enumerate(records):
        extra = [record.reference_time] if record.reference_time is not None else []
        history = record.history.with_knots(np.concatenate([record.time, np.array(extra, dtype=np.float64)]))
        histories.append(history)
        directions.append(np.interp(history.time, record.history.time, _without_own_noise(record)))
        chosen = keep[r]
        knots.append(start + np.searchsorted(history.time, record.time[chosen]))
        runs.append(np.full(int(chosen.sum()), r))
        references.append(-1 if record.reference_time is None else start + int(np.searchsorted(history.time, record.reference_time)))
        observed.append(record.response[chosen])
        count.append(record.count[chosen])
        instrument.append(np.full(int(chosen.sum()), instruments.index(record.instrument)))
        start += history.time.size
    return Readings(
        drives=Drives.pack(histories, directions),
        knot=np.concatenate(knots).astype(np.int64),
        run=np.concatenate(runs).astype(np.int64),
        reference_knot=np.array(references, dtype=np.int64),
        observed=np.concatenate(observed).astype(np.float64),
        count=np.concatenate(count).astype(np.float64),
        instrument=np.concatenate(instrument).astype(np.int64),
    )


def build_structure(layout: Layout, priors: Priors, records: RecordSet, modes: tuple[str, ...]) -> Structure:
    """Lay out the model of a study; records without a fitted reading stay in it with their specimen's prior."""
    law = layout.law
    specimens, batches = records.specimens, records.batches
    instruments = tuple(instrument.name for instrument in records.instruments)
    root_effects = _instrument_effects(records)
    by_specimen = [[record for record in records.records if record.specimen == name] for name in specimens]
    ordered = [record for own in by_specimen for record in own]
    local = [_specimen_effects(own) for own in by_specimen]
    local_effects = tuple(effects for effects, _ in local)
    local_start = np.concatenate([[0], np.cumsum([len(effects) for effects in local_effects])]).astype(np.int64)
    flat = [*root_effects, *(effect for effects in local_effects for effect in effects)]
    targets = [
        tuple(record.name for record in ordered if record.instrument == effect.subject and not record.normalised) for effect in root_effects
    ]
    targets += [names for _, acts_on in local for names in acts_on]
    specimen = np.array([specimens.index(record.specimen) for record in ordered], dtype=np.int64)
    place = {record.name: r for r, record in enumerate(ordered)}
    gain = np.zeros((len(ordered), len(flat)))
    coefficient = np.zeros((len(ordered), len(flat)))
    for e, (effect, names) in enumerate(zip(flat, targets, strict=True)):
        matrix, weight = (coefficient, 1.0) if effect.kind == "compliance" else (gain, effect.uncertainty)
        for name in names:
            matrix[place[name], e] = weight
    mode_index = np.array([law.mode_names.index(mode) for mode in modes], dtype=np.int64)
    loads = np.zeros((len(modes), 1 + len(law.shape_names) + len(root_effects)))
    if "stiffness" in modes:
        loads[modes.index("stiffness"), 0] = 1.0
    return Structure(
        law=law,
        modes=modes,
        mode_index=mode_index,
        batches=batches,
        specimens=specimens,
        instruments=instruments,
        records=tuple(record.name for record in ordered),
        batch=np.array([batches.index(records.batch_of(name)) for name in specimens], dtype=np.int64),
        specimen=specimen,
        root_effects=root_effects,
        local_effects=local_effects,
        local_start=local_start,
        loads=loads,
        gain=Weights.of(gain),
        coefficient=Weights.of(coefficient),
        readings=pack_readings(ordered, instruments, [~record.held_out for record in ordered]),
        priors=priors,
    )
