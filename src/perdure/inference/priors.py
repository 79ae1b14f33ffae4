"""Priors from ranges: what a handbook says, turned into distributions on the log scale.

A range (low, high, coverage) becomes a normal distribution of the logarithm whose quantiles at (1 ∓ coverage)/2 are
the ends of the range; a scatter standard deviation, whose range starts at 0, becomes a half-normal distribution that
lies below the upper end with probability ``coverage``.
"""

from __future__ import annotations

import math
from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.stats import halfnorm, norm

from perdure.errors import StudyError, problem
from perdure.rheology.law import Law
from perdure.rheology.laws import LAWS, time_grid
from perdure.study.records import RecordSet
from perdure.study.study import PriorRange, Study

Array = NDArray[np.float64]
Family = Literal["log-normal", "half-normal"]

# a horizon that nobody declared: this factor beyond the longest record in reduced time
DEFAULT_HORIZON_FACTOR = 1e3
DEFAULT_REFERENCE_TIME = 10.0
FASTER_THAN_RESOLVED = 10.0
# the log-spectrum is correlated over about a decade, and half of its variance is common to all decades
SPECTRUM_CORRELATION_DECADES = 1.0
SPECTRUM_COMMON_SHARE = 0.5


@dataclass(frozen=True, slots=True)
class Quantity:
    """A quantity that a prior range may speak of.

    Attributes:
        unit: internal unit.
        family: the kind of distribution that its range becomes.
        about: one line for the manual and the report.
    """

    unit: str
    family: Family
    about: str


QUANTITIES: Mapping[str, Quantity] = MappingProxyType(
    {
        "modulus": Quantity("MPa", "log-normal", "relaxation modulus at the reference time, population median"),
        "loss per decade": Quantity("1", "log-normal", "share of the remaining modulus that relaxes in one decade of time"),
        "stiffness batch scatter": Quantity("1", "half-normal", "sd between batches of the log modulus"),
        "stiffness specimen scatter": Quantity("1", "half-normal", "sd within a batch of the log modulus"),
        "strength batch scatter": Quantity("1", "half-normal", "sd between batches of the log relaxing share"),
        "strength specimen scatter": Quantity("1", "half-normal", "sd within a batch of the log relaxing share"),
        "pace batch scatter": Quantity("1", "half-normal", "sd between batches of the log time scale"),
        "pace specimen scatter": Quantity("1", "half-normal", "sd within a batch of the log time scale"),
        "noise absolute share": Quantity("1", "log-normal", "sd of one reading's absolute noise over the record's peak"),
        "noise relative": Quantity("1", "log-normal", "sd of one reading's relative noise"),
    }
)


@dataclass(frozen=True, slots=True)
class Distribution:
    """A prior distribution of one positive quantity.

    Attributes:
        family: "log-normal" (``location`` and ``scale`` of the logarithm) or "half-normal" (``scale``).
        location, scale: parameters; location is 0 for a half-normal.
    """

    family: Family
    location: float
    scale: float

    def quantile(self, probability: float) -> float:
        """Quantile of the quantity."""
        if self.family == "log-normal":
            return math.exp(self.location + self.scale * float(norm.ppf(probability)))
        return float(halfnorm.ppf(probability, scale=self.scale))

    @property
    def text(self) -> str:
        """The distribution in words, for tables."""
        if self.family == "log-normal":
            return f"log-normal(median {math.exp(self.location):.4g}, sd of log {self.scale:.3g})"
        return f"half-normal(scale {self.scale:.4g})"


def distribution(prior: PriorRange) -> Distribution:
    """The distribution whose quantiles match the range.

    Raises:
        StudyError: for a range that no distribution of its kind can have.
    """
    where = f'prior "{prior.quantity}" ({prior.origin})'
    if prior.quantity not in QUANTITIES:
        known = ", ".join(QUANTITIES)
        raise StudyError([problem(where, prior.quantity, f"one of: {known}", "Correct the name of the quantity.")])
    if not 0 < prior.coverage < 1:
        raise StudyError([problem(where, f"coverage {prior.coverage:g}", "a probability between 0 and 1", "Write 0.9 for 90 %.")])
    spread = float(norm.ppf(0.5 + 0.5 * prior.coverage))
    if QUANTITIES[prior.quantity].family == "half-normal":
        if prior.low != 0 or not 0 < prior.high < math.inf:
            got = f"{prior.low:g} to {prior.high:g}"
            raise StudyError([problem(where, got, "a range from 0 to a positive end", "A scatter range starts at 0: state its upper end.")])
        return Distribution("half-normal", 0.0, prior.high / spread)
    if not 0 < prior.low < prior.high < math.inf:
        got = f"{prior.low:g} to {prior.high:g}"
        raise StudyError([problem(where, got, "0 < low < high", "State the ends of the range in order.")])
    low, high = math.log(prior.low), math.log(prior.high)
    return Distribution("log-normal", 0.5 * (low + high), 0.5 * (high - low) / spread)


@dataclass(frozen=True, slots=True, eq=False)
class Layout:
    """The law laid out for one study, and how far it reaches.

    Attributes:
        law: with its relaxation times.
        shortest: s, the shortest time that any record resolves.
        longest: s, the end of the longest record.
        horizon: s, the longest reduced time that the law reaches.
        reference_time: s.
    """

    law: Law
    shortest: float
    longest: float
    horizon: float
    reference_time: float


def resolved_times(records: RecordSet) -> tuple[float, float]:
    """Shortest and longest time in s that the fitted readings resolve: after the ramp's end, or since the start without one."""
    shortest, longest = math.inf, 0.0
    for record in records.records:
        used = record.time[~record.held_out]
        if used.size == 0:
            continue
        positive = used[used > 0]
        # within the first ramp, relaxation faster than the ramp is not told apart from stiffness
        moving = np.flatnonzero(np.diff(record.history.value) != 0)
        first_ramp = float(record.history.time[moving[0] + 1]) if moving.size else float(positive[0])
        level = np.abs(record.history.value)
        ramp = float(record.history.time[int(np.argmax(level >= 0.98 * level.max()))])
        shortest = min(shortest, max(first_ramp, min(ramp, float(positive[0]) if record.time[0] > 0 else ramp)))
        longest = max(longest, float(used[-1]))
    return shortest, longest


def lay_out(study: Study, records: RecordSet) -> Layout:
    """Lay the study's law over its tests and its horizon.

    Raises:
        StudyError: when the horizon lies inside the tests, or the law is unknown.
    """
    if study.law.name not in LAWS:
        known = ", ".join(LAWS)
        raise StudyError([problem("study.yaml, law: name", study.law.name, f"one of: {known}", "Choose a law that exists.")])
    shortest, longest = resolved_times(records)
    if not 0 < longest < math.inf or not 0 < shortest < math.inf:
        raise StudyError(
            [problem("study.yaml, hold out", "no reading left to fit", "at least one record with readings to fit", "Hold out less.")]
        )
    horizon = study.horizon if study.horizon is not None else DEFAULT_HORIZON_FACTOR * longest
    if horizon < longest:
        raise StudyError(
            [
                problem(
                    "study.yaml, horizon",
                    f"{horizon:g} s",
                    f"at least the longest record, {longest:g} s",
                    "State a longer horizon, or leave the key out.",
                )
            ]
        )
    reference = study.reference_time if study.reference_time is not None else DEFAULT_REFERENCE_TIME
    if study.law.free_times is None:
        # arms a decade faster than the shortest resolved time still show as viscous stress during the ramp
        times = time_grid(shortest / FASTER_THAN_RESOLVED, horizon, study.law.terms_per_decade)
    else:
        edges = np.geomspace(shortest, horizon, study.law.free_times + 1)
        times = np.sqrt(edges[1:] * edges[:-1])
    law = LAWS[study.law.name](times, study.law.equilibrium, reference, study.law.free_times is not None)
    return Layout(law, shortest, longest, horizon, reference)


@dataclass(frozen=True, slots=True, eq=False)
class Priors:
    """All priors of a study, as the statistics use them.

    Attributes:
        ranges: the ranges behind them, by quantity.
        distributions: by quantity.
        mean, covariance: of the population's (stiffness, shape coordinates), shapes (1 + C,) and (1 + C, 1 + C).
        batch_scale, specimen_scale: half-normal scales of the scatter sds of the modes in use, shape (M,).
        noise_location, noise_scale: of the log noise (absolute, relative) per instrument, shape (instruments, 2).
    """

    ranges: Mapping[str, PriorRange]
    distributions: Mapping[str, Distribution]
    mean: Array
    covariance: Array
    batch_scale: Array
    specimen_scale: Array
    noise_location: Array
    noise_scale: Array


def _spectrum_covariance(log10_times: Array, scale: float) -> Array:
    distance = np.abs(log10_times[:, None] - log10_times[None, :])
    local = np.exp(-distance / SPECTRUM_CORRELATION_DECADES)
    return scale**2 * (SPECTRUM_COMMON_SHARE + (1.0 - SPECTRUM_COMMON_SHARE) * local)


def _log_range(low: float, high: float, coverage: float = 0.9) -> tuple[float, float]:
    spread = float(norm.ppf(0.5 + 0.5 * coverage))
    return 0.5 * (math.log(low) + math.log(high)), 0.5 * (math.log(high) - math.log(low)) / spread


def build_priors(study: Study, records: RecordSet, layout: Layout) -> Priors:
    """Turn the study's ranges into the priors of the model.

    Raises:
        StudyError: naming every quantity without a range and every range that cannot be used.
    """
    ranges = {prior.quantity: prior for prior in study.priors}
    needed = ["modulus", "loss per decade"]
    needed += [f"{mode} {level} scatter" for mode in study.modes for level in ("batch", "specimen")]
    problems = [
        problem("priors", f'no range for "{quantity}"', "a range from the handbook or the study", f'Add "{quantity}" under priors.')
        for quantity in needed
        if quantity not in ranges
    ]
    distributions: dict[str, Distribution] = {}
    for quantity, prior in ranges.items():
        try:
            distributions[quantity] = distribution(prior)
        except StudyError as error:
            problems.extend(error.problems)
    if problems:
        raise StudyError(problems)
    times = layout.law.times
    free = study.law.free_times is not None
    # what does not relax needs no range of its own: it is what the relaxing terms leave of E(t_ref)
    levels = times.size - int(not study.law.equilibrium)
    mean = np.array([distributions["modulus"].location] + [distributions["loss per decade"].location] * levels)
    size = 1 + len(layout.law.shape_names)
    covariance = np.zeros((size, size))
    covariance[0, 0] = distributions["modulus"].scale ** 2
    covariance[1 : 1 + levels, 1 : 1 + levels] = _spectrum_covariance(np.log10(times[:levels]), distributions["loss per decade"].scale)
    if free:
        # ordered free times: the first within a decade either way, each gap within a factor of about three
        gaps = np.log(np.diff(np.log(times)))
        mean = np.concatenate([mean, [math.log(times[0])], gaps])
        tail = 1 + levels
        covariance[tail, tail] = (math.log(10.0) / 1.645) ** 2
        for i in range(times.size - 1):
            covariance[tail + 1 + i, tail + 1 + i] = (math.log(3.0) / 1.645) ** 2
    noise = np.array(
        [[_log_range(*instrument.noise_absolute), _log_range(*instrument.noise_relative)] for instrument in records.instruments]
    )
    return Priors(
        ranges=ranges,
        distributions=distributions,
        mean=mean,
        covariance=covariance,
        batch_scale=np.array([distributions[f"{mode} batch scatter"].scale for mode in study.modes]),
        specimen_scale=np.array([distributions[f"{mode} specimen scatter"].scale for mode in study.modes]),
        noise_location=np.ascontiguousarray(noise[:, :, 0]),
        noise_scale=np.ascontiguousarray(noise[:, :, 1]),
    )
