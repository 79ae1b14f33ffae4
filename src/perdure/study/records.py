"""Records: accepted test runs in consistent units (MPa, s, K, strain as a ratio, tension positive)."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.rheology.history import History

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
SENSES = ("tension", "compression", "shear")


@dataclass(frozen=True, slots=True, eq=False)
class Uncertainty:
    """Type B relative standard uncertainties (GUM 4.3) that belong to a specimen or to one record; 0 where none is declared.

    Attributes:
        area: of the loaded area, common to all records of the specimen.
        length: of the gauge length, common to all records of the specimen.
        mounting: of the response through mounting, one draw per record.
        reference: of the reference reading of a normalised response, one draw per record.
    """

    area: float = 0.0
    length: float = 0.0
    mounting: float = 0.0
    reference: float = 0.0


@dataclass(frozen=True, slots=True, eq=False)
class Record:
    """One test run on one specimen, ready for inference.

    Attributes:
        name, specimen, batch, method, instrument: as in the register.
        sense: one of :data:`SENSES`.
        state: as the user wrote it (virgin, conditioned, …).
        temperature: K.
        history: strain over time from rest; real ramps are in it, never an ideal step.
        compliance: strain per one standard uncertainty of the frame compliance, shape of ``history.time``;
            zeros where strain comes from an extensometer.
        time: times of the readings in s, shape (n,), strictly increasing and each a knot of ``history``.
        response: readings, shape (n,): nominal stress in MPa, or the ratio stress / stress(reference_time).
        count: number of raw readings averaged into each, shape (n,), ≥ 1.
        first_row, last_row: raw rows of the source file (1 = first line) behind each reading, shape (n,).
        held_out: True where the study's hold-out keeps the reading from the fit, shape (n,).
        reference_time: s, or None when the response is a stress.
        missing: number of readings with a time but no response.
        file, sha256: source file relative to the study folder, and its digest.
        uncertainty: type B uncertainties of specimen and record.
    """

    name: str
    specimen: str
    batch: str
    method: str
    instrument: str
    sense: str
    state: str
    temperature: float
    history: History
    compliance: Array
    time: Array
    response: Array
    count: Ints
    first_row: Ints
    last_row: Ints
    held_out: NDArray[np.bool_]
    reference_time: float | None
    missing: int
    file: str
    sha256: str
    uncertainty: Uncertainty

    @property
    def strain_level(self) -> float:
        """Strain of largest magnitude, with its sign."""
        return self.history.peak

    @property
    def normalised(self) -> bool:
        """True when the response is a ratio to the reading at ``reference_time``."""
        return self.reference_time is not None


@dataclass(frozen=True, slots=True)
class Instrument:
    """What the statistics need to know of one instrument.

    Attributes:
        name: key in ``study.yaml``.
        u_force: relative standard uncertainty of force (or stress) calibration, common to the instrument.
        u_strain: relative standard uncertainty of strain (or displacement) calibration, common to the instrument.
        has_compliance: True where strain comes from the crosshead and a frame compliance with an uncertainty is declared.
        u_temperature: standard uncertainty of temperature in K.
        noise_absolute: range (low, high) of the standard deviation of one reading's absolute noise, MPa (or ratio).
        noise_relative: range (low, high) of the standard deviation of one reading's relative noise.
    """

    name: str
    u_force: float
    u_strain: float
    has_compliance: bool
    u_temperature: float
    noise_absolute: tuple[float, float]
    noise_relative: tuple[float, float]


@dataclass(frozen=True, slots=True, eq=False)
class RecordSet:
    """All accepted records of a study, with the instruments they came from."""

    records: tuple[Record, ...]
    instruments: tuple[Instrument, ...]

    @property
    def specimens(self) -> tuple[str, ...]:
        """Specimens in order of first appearance."""
        return tuple(dict.fromkeys(record.specimen for record in self.records))

    @property
    def batches(self) -> tuple[str, ...]:
        """Batches in order of first appearance."""
        return tuple(dict.fromkeys(record.batch for record in self.records))

    def batch_of(self, specimen: str) -> str:
        """The batch that ``specimen`` belongs to."""
        return next(record.batch for record in self.records if record.specimen == specimen)

    def instrument(self, name: str) -> Instrument:
        """The instrument called ``name``."""
        return next(instrument for instrument in self.instruments if instrument.name == name)
