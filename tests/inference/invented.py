"""Small invented studies with a known truth, for the tests of the statistics."""

from __future__ import annotations

from dataclasses import dataclass, field, replace

import numpy as np
from numpy.typing import NDArray

from perdure.inference.density import Density
from perdure.inference.priors import build_priors, lay_out
from perdure.inference.state import State
from perdure.inference.structure import Structure, build_structure
from perdure.rheology.history import History, ramp_and_hold
from perdure.study.records import Instrument, Record, RecordSet, Uncertainty
from perdure.study.study import LawChoice, PriorRange, Study

Array = NDArray[np.float64]

RAMP = 2.0  # s
RANGES = (
    ("modulus", 2.0, 10.0),
    ("loss per decade", 0.03, 0.15),
    ("stiffness batch scatter", 0.0, 0.15),
    ("stiffness specimen scatter", 0.0, 0.1),
    ("strength batch scatter", 0.0, 0.3),
    ("strength specimen scatter", 0.0, 0.2),
    ("pace batch scatter", 0.0, 0.6),
    ("pace specimen scatter", 0.0, 0.4),
)


@dataclass(frozen=True)
class Plan:
    """What is invented; ``specimens`` a batch, ``records`` a specimen, ``readings`` a record.

    ``normalised``: none, some (every second record) or all. ``held_out``: the last third of each record, and the whole of the
    last one. ``noise`` multiplies the noise of the readings, ``scatter`` that of batches and specimens.
    """

    batches: int = 2
    specimens: int = 2
    records: int = 1
    readings: int = 12
    instruments: int = 2
    modes: tuple[str, ...] = ("stiffness", "strength", "pace")
    law: LawChoice = field(default_factory=lambda: LawChoice(terms_per_decade=1.0))
    normalised: str = "none"
    held_out: bool = False
    compliance: bool = True
    type_b: bool = True
    noise: float = 1.0
    scatter: float = 1.0
    duration: float = 3e3
    seed: int = 1


@dataclass(frozen=True)
class Invented:
    """A study, its records, its model and the state that made the readings."""

    study: Study
    records: RecordSet
    structure: Structure
    density: Density
    truth: State


def study_of(plan: Plan) -> Study:
    priors = tuple(PriorRange(quantity, low, high, 0.9, "invented", "study") for quantity, low, high in RANGES)
    return Study("tiny", "Tiny", "", "filled rubber", plan.law, "isothermal", 3e4, 10.0, 296.0, priors, plan.modes, ())


def _blank_record(plan: Plan, batch: int, specimen: int, number: int, rng: np.random.Generator) -> Record:
    index = (batch * plan.specimens + specimen) * plan.records + number
    instrument = "AB"[index % plan.instruments]
    normalised = plan.normalised == "all" or (plan.normalised == "some" and index % 2 == 1)
    level = -rng.uniform(0.08, 0.16)
    time = np.concatenate([[0.5 * RAMP, RAMP], RAMP + np.geomspace(0.5, plan.duration, plan.readings - 2)])
    history = ramp_and_hold(level, RAMP, float(time[-1])).with_knots(time)
    compliance = np.where(history.time > 0, -level * 4e-3 * (1 + 0.3 * np.exp(-history.time / 50)), 0.0) if instrument == "A" else 0.0
    uncertainty = Uncertainty(0.004, 0.003, 0.004, 0.003) if plan.type_b else Uncertainty()
    return Record(
        name=f"r{batch}{specimen}{number}",
        specimen=f"s{batch}{specimen}",
        batch=f"b{batch}",
        method="stress relaxation",
        instrument=instrument,
        sense="compression",
        state="virgin",
        temperature=296.0,
        history=history,
        compliance=compliance * np.ones(history.time.size) * float(plan.compliance),
        time=time,
        response=np.ones(time.size),
        count=np.arange(time.size) % 3 + 1,
        first_row=np.arange(time.size),
        last_row=np.arange(time.size),
        held_out=np.zeros(time.size, dtype=bool),
        reference_time=RAMP + 60.0 if normalised else None,
        missing=0,
        file="invented.csv",
        sha256="",
        uncertainty=uncertainty,
    )


def structure_of(study: Study, records: RecordSet) -> Structure:
    layout = lay_out(study, records)
    return build_structure(layout, build_priors(study, records, layout), records, study.modes)


def true_state(density: Density, plan: Plan, rng: np.random.Generator) -> State:
    """A draw of the prior with typical sds and noise."""
    packing, structure = density.packing, density.structure
    priors = structure.priors
    sd_b, sd_s = 0.6745 * priors.batch_scale * plan.scatter, 0.6745 * priors.specimen_scale * plan.scatter
    root = density.root_mean + 0.5 * rng.normal(size=structure.root_size) / np.sqrt(np.diag(density.root_precision))
    specimen = rng.normal(size=packing.mask.shape) * packing.mask
    specimen[:, : packing.modes] *= sd_s
    return State(
        root, sd_b * rng.normal(size=(packing.batches, packing.modes)), specimen, sd_b + 1e-12, sd_s + 1e-12, priors.noise_location.copy()
    )


def invented(plan: Plan) -> Invented:
    """Invent everything; readings come from the law and the noise term themselves."""
    rng = np.random.default_rng(plan.seed)
    # records of one specimen stand apart on purpose: the model orders them by specimen
    blank = [
        _blank_record(plan, batch, specimen, number, rng)
        for number in range(plan.records)
        for batch in range(plan.batches)
        for specimen in range(plan.specimens)
    ]
    instruments = tuple(
        Instrument(
            name,
            0.005 if plan.type_b else 0.0,
            0.003 if plan.type_b else 0.0,
            name == "A" and plan.compliance,
            0.5,
            (2e-4, 5e-3),
            (5e-4, 1e-2),
        )
        for name in "AB"[: plan.instruments]
    )
    study = study_of(plan)
    complete = structure_of(study, RecordSet(tuple(blank), instruments))
    density = Density(complete)
    truth = true_state(density, plan, rng)
    predicted = density.forward(truth).predicted.value
    readings = complete.readings
    sd = density.noise.standard_deviation(predicted, readings.count, readings.instrument, truth.log_noise)
    observed = predicted + plan.noise * sd * rng.normal(size=sd.size)
    records = []
    for record in blank:
        response = observed[readings.run == complete.records.index(record.name)]
        held_out = np.arange(response.size) >= (2 * response.size) // 3 if plan.held_out else np.zeros(response.size, dtype=bool)
        if plan.held_out and record is blank[-1]:
            held_out[:] = True
        records.append(replace(record, response=response, held_out=held_out))
    accepted = RecordSet(tuple(records), instruments)
    structure = structure_of(study, accepted)
    return Invented(study, accepted, structure, Density(structure), truth)


def random_state(density: Density, seed: int, spread: float = 0.3) -> State:
    """A state of the order of the prior, away from any optimum."""
    rng = np.random.default_rng(seed)
    packing, priors = density.packing, density.structure.priors
    specimen = spread * rng.normal(size=packing.mask.shape) * packing.mask
    specimen[:, : packing.modes] *= 0.3
    return State(
        density.root_mean + spread * rng.normal(size=density.root_mean.size),
        0.3 * spread * rng.normal(size=(packing.batches, packing.modes)),
        specimen,
        priors.batch_scale * rng.uniform(0.2, 1.5, packing.modes),
        priors.specimen_scale * rng.uniform(0.2, 1.5, packing.modes),
        priors.noise_location + 1.0 + spread * rng.normal(size=priors.noise_location.shape),
    )


def history(*knots: tuple[float, float]) -> History:
    time, value = zip(*knots, strict=True)
    return History(np.array(time), np.array(value))
