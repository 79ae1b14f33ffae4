"""Reading-level posterior predictive: what the fitted model says of every reading, noise and type B effects included."""

from __future__ import annotations

from dataclasses import dataclass, replace
from typing import TYPE_CHECKING

import numpy as np
from numpy.typing import NDArray

from perdure.inference.density import Density
from perdure.inference.structure import pack_readings

if TYPE_CHECKING:
    from perdure.checks.fitted import FittedStudy

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

DRAWS_AT_MOST = 400
# noise costs little beside the response: several of it a draw steady the quantiles
NOISE_A_DRAW = 5
QUANTILES = (0.05, 0.25, 0.5, 0.75, 0.95)
# simulated values held in memory at once
BLOCK = 20_000_000


@dataclass(frozen=True, slots=True, eq=False)
class Predictive:
    """One entry a reading, held-out ones too, record by record in the order of the record set; responses in MPa or as ratios.

    Attributes:
        record: index into the record set, (N,).
        reading: index within the record, (N,).
        time, strain: s and ratio, (N,).
        observed, count, held_out: as recorded, (N,).
        mean, sd: of the posterior predictive, (N,).
        median, low50, high50, low90, high90: its quantiles, (N,).
        z: (observed − mean) / sd, (N,).
        noise: root mean square over the posterior of the reading noise's standard deviation, (N,).
    """

    record: Ints
    reading: Ints
    time: Array
    strain: Array
    observed: Array
    count: Ints
    held_out: Flags
    mean: Array
    sd: Array
    median: Array
    low50: Array
    high50: Array
    low90: Array
    high90: Array
    z: Array
    noise: Array

    @property
    def inside90(self) -> Flags:
        """Whether each reading lies within its 90 % band, (N,)."""
        return (self.observed >= self.low90) & (self.observed <= self.high90)


def thinned(draws: Array, at_most: int = DRAWS_AT_MOST) -> Array:
    """At most ``at_most`` rows of ``draws`` (S, n), evenly spaced."""
    if draws.shape[0] <= at_most:
        return draws
    return draws[np.linspace(0, draws.shape[0] - 1, at_most).round().astype(np.int64)]


def every_reading(fitted: FittedStudy) -> tuple[Density, Ints]:
    """The model conditioned on all readings, held-out ones too, and the place of each of its records in the record set."""
    records, structure = fitted.records, fitted.density.structure
    # the model orders records by specimen
    order = np.array(
        [place for name in records.specimens for place, record in enumerate(records.records) if record.specimen == name], dtype=np.int64
    )
    ordered = [records.records[place] for place in order]
    readings = pack_readings(ordered, structure.instruments, [np.ones(record.time.size, dtype=np.bool_) for record in ordered])
    return Density(replace(structure, readings=readings), fitted.density.noise.name), order


def predictive(fitted: FittedStudy, seed: int) -> Predictive:
    """Simulate every reading from at most 400 draws; deterministic in ``seed``."""
    records = fitted.records.records
    density, order = every_reading(fitted)
    readings = density.structure.readings
    draws = thinned(fitted.draws)
    size = readings.knot.size
    response, noise = np.empty((draws.shape[0], size)), np.empty((draws.shape[0], size))
    for row, draw in enumerate(draws):
        state = density.packing.split(draw)
        response[row] = density.forward(state).predicted.value
        noise[row] = density.noise.standard_deviation(response[row], readings.count, readings.instrument, state.log_noise)
    rng = np.random.default_rng(seed)
    quantiles = np.empty((len(QUANTILES), size))
    width = max(1, BLOCK // (NOISE_A_DRAW * draws.shape[0]))
    for start in range(0, size, width):
        part = slice(start, start + width)
        noisy = response[:, part] + noise[:, part] * rng.standard_normal((NOISE_A_DRAW, *response[:, part].shape))
        quantiles[:, part] = np.quantile(noisy.reshape(-1, noisy.shape[2]), QUANTILES, axis=0)
    mean = response.mean(axis=0)
    noise_sd = np.sqrt(np.square(noise).mean(axis=0))
    sd = np.hypot(response.std(axis=0), noise_sd)
    record = order[readings.run]
    back = np.argsort(record, kind="stable")
    return Predictive(
        record=record[back],
        reading=np.concatenate([np.arange(one.time.size) for one in records]),
        time=np.concatenate([one.time for one in records]),
        strain=np.concatenate([one.history.at(one.time) for one in records]),
        observed=readings.observed[back],
        count=np.concatenate([one.count for one in records]),
        held_out=np.concatenate([one.held_out for one in records]),
        mean=mean[back],
        sd=sd[back],
        median=quantiles[2, back],
        low50=quantiles[1, back],
        high50=quantiles[3, back],
        low90=quantiles[0, back],
        high90=quantiles[4, back],
        z=((readings.observed - mean) / sd)[back],
        noise=noise_sd[back],
    )
