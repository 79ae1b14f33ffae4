"""A small invented study for the checks: its records come from the law itself, its posterior draws from the whitened optimum."""

from __future__ import annotations

from dataclasses import replace

import numpy as np
from numpy.typing import NDArray

from perdure.checks.fitted import FittedStudy
from perdure.inference.density import Density
from perdure.inference.gate import Attempt, Diagnosis
from perdure.inference.priors import build_priors, lay_out
from perdure.inference.start import find_start
from perdure.inference.structure import build_structure
from perdure.inference.whitening import WhitenedDensity
from perdure.rheology.history import History, ramp_and_hold
from perdure.rheology.maxwell import GeneralisedMaxwell
from perdure.study.duty import Duty, Limit
from perdure.study.records import Instrument, Record, RecordSet, Uncertainty
from perdure.study.study import LawChoice, PriorRange, SamplerSettings, Study

Array = NDArray[np.float64]

RAMP, END = 2.0, 2e4
LEVEL = -0.1
NOISE = 0.003
CANDIDATES = 2000
HELD_OUT = 4
TRUTH = GeneralisedMaxwell(10.0 ** np.arange(-1.0, 8.0), equilibrium=True, reference_time=10.0)
SHAPE = np.full(len(TRUTH.shape_names), np.log(0.06))


DIAGNOSIS = Diagnosis(
    rhat=1.002, ess_bulk=1500.0, ess_tail=1300.0, divergences=0, ebfmi=0.9, worst_rhat="level_3", worst_ess="level_4", steps=9.0
)


def attempt(change: str) -> Attempt:
    return Attempt(SamplerSettings(), change, DIAGNOSIS, 20.0)


def times() -> Array:
    return np.concatenate([np.linspace(0.5, RAMP, 4), np.geomspace(2.5, END, 36)])


def record(name: str, specimen: str, batch: str, instrument: str, *, level: float = LEVEL, stiffness: float = 0.0, seed: int = 0) -> Record:
    history = ramp_and_hold(level, RAMP, END).with_knots(times())
    natural = TRUTH.natural(SHAPE, np.array([[np.log(4.0) + stiffness, 0.0, 0.0]]))
    stress = np.interp(times(), history.time, TRUTH.simulate(natural, history)[0])
    response = stress * (1.0 + NOISE * np.random.default_rng(seed).standard_normal(stress.size))
    rows = np.arange(2, 2 + stress.size, dtype=np.int64)
    return Record(
        name=name,
        specimen=specimen,
        batch=batch,
        method="stress relaxation",
        instrument=instrument,
        sense="compression",
        state="virgin",
        temperature=296.15,
        history=history,
        compliance=np.zeros(history.time.size),
        time=times(),
        response=response,
        count=np.ones(stress.size, dtype=np.int64),
        first_row=rows,
        last_row=rows,
        held_out=np.zeros(stress.size, dtype=np.bool_),
        reference_time=None,
        missing=0,
        file=f"records/{name}.csv",
        sha256="0" * 64,
        uncertainty=Uncertainty(area=0.003, length=0.002, mounting=0.003),
    )


def instrument(name: str) -> Instrument:
    return Instrument(
        name,
        u_force=0.003,
        u_strain=0.002,
        has_compliance=False,
        u_temperature=0.5,
        noise_absolute=(1e-5, 1e-3),
        noise_relative=(5e-4, 0.02),
    )


def record_set(*, stiffening: float = 0.0, batches: int = 5) -> RecordSet:
    """Two specimens a batch, the first tested twice; ``stiffening`` is the change of log stiffness from 8 % to 12 % strain.

    Second records come last, so specimens are interleaved; the last readings of the first record are held out.
    """
    rng = np.random.default_rng(5)
    records = []
    for b in range(batches):
        own = 0.04 * rng.standard_normal()
        for s in range(2):
            stiffness = own + 0.02 * rng.standard_normal()
            frame = "north" if (b + s) % 2 else "south"
            for repeat in range(2 if s == 0 else 1):
                level = (-0.08, -0.12)[repeat] if s == 0 else LEVEL
                shift = stiffening * (abs(level) - 0.1) / 0.04
                name = f"B{b + 1}-{s + 1}{'ab'[repeat]}"
                seed = 100 * b + 10 * s + repeat
                records.append(record(name, f"B{b + 1}-{s + 1}", f"B{b + 1}", frame, level=level, stiffness=stiffness + shift, seed=seed))
    records.sort(key=lambda one: one.name[-1])
    held_out = np.arange(records[0].time.size) >= records[0].time.size - HELD_OUT
    records[0] = replace(records[0], held_out=held_out)
    return RecordSet(tuple(records), (instrument("north"), instrument("south")))


def changed(records: RecordSet, place: int, **changes: object) -> RecordSet:
    """``records`` with fields of the record at ``place`` replaced."""
    own = list(records.records)
    own[place] = replace(own[place], **changes)  # type: ignore[arg-type] # the tests name fields of a record
    return RecordSet(tuple(own), records.instruments)


def duty(name: str = "short hold", **changes: object) -> Duty:
    """A hold within the tests in every respect, but for ``changes``."""
    plain = Duty(
        name=name,
        about="A pad held for an hour.",
        history=History(np.array([0.0, 3.0, 3600.0]), np.array([0.0, LEVEL, LEVEL])),
        sense="compression",
        temperature=296.15,
        state="virgin",
        limits=(Limit("contact", "at least", "stress", 0.2, 3600.0, 3600.0, 0.9, 0.95),),
    )
    return replace(plain, **changes)  # type: ignore[arg-type] # the tests name fields of a duty


def study(*duties: Duty) -> Study:
    def scatter(mode: str, level: str, high: float) -> PriorRange:
        return PriorRange(f"{mode} {level} scatter", 0.0, high, 0.9, "invented", "study")

    return Study(
        name="pads",
        title="Pads",
        about="Invented.",
        family="filled rubber",
        law=LawChoice(terms_per_decade=1.0),
        clock="isothermal",
        horizon=1e7,
        reference_time=10.0,
        reference_temperature=296.15,
        priors=(
            PriorRange("modulus", 1.5, 15.0, 0.9, "invented", "study"),
            PriorRange("loss per decade", 0.02, 0.15, 0.9, "invented", "study"),
            scatter("stiffness", "batch", 0.15),
            scatter("stiffness", "specimen", 0.08),
        ),
        modes=("stiffness",),
        duties=duties or (duty(),),
    )


def fit(records: RecordSet, chosen: Study, size: int = 300) -> FittedStudy:
    """Draws from the normal approximation in whitened coordinates, resampled by their density: no sampler is needed.

    The whitening makes all but the scatter sds nearly standard normal, and resampling sees to these.
    """
    layout = lay_out(chosen, records)
    density = Density(build_structure(layout, build_priors(chosen, records, layout), records, chosen.modes))
    whitened = WhitenedDensity(density, find_start(density, 1).quadratic)
    rng = np.random.default_rng(11)
    proposed = rng.standard_normal((CANDIDATES, whitened.size))
    weight = np.array([whitened(u)[0] + 0.5 * float(u @ u) for u in proposed])
    weight = np.exp(weight - weight.max())
    chosen_rows = rng.choice(CANDIDATES, size, p=weight / weight.sum())
    draws = np.stack([density.packing.join(whitened.state(proposed[row])) for row in chosen_rows])
    return FittedStudy(chosen, records, layout, density, draws, DIAGNOSIS, (attempt("first attempt, settings as declared"),))
