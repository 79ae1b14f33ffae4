"""How far does each duty lie outside the tests: in reduced time, temperature, strain level, rate, sense and state?"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping
from types import MappingProxyType

import numpy as np

from perdure.checks.fitted import FittedStudy
from perdure.checks.words import listed, percent, span
from perdure.rheology.clock import CLOCKS
from perdure.rheology.history import History
from perdure.study.duty import Duty
from perdure.study.finding import Finding
from perdure.study.records import Record, RecordSet

NAME = "extrapolation"
FAR_DECADES = 2.0
# laboratories hold temperature to ± 2 K (ISO 23529, from memory)
TEMPERATURE_APART = 2.0
LEVEL_BEYOND = 0.1
# a tenth of a decade is within what one ramp differs from the next
RATE_DECADES = 0.1
# what a normalised record is given where it states no strain
NOMINAL_STRAIN = 0.01


def _fitted(records: RecordSet) -> list[Record]:
    return [record for record in records.records if not record.held_out.all()]


def _finding(duty: Duty, axis: str, number: tuple[float | None, float | None, str], message: str, remedy: str, *, beyond: bool) -> Finding:
    value, threshold, unit = number
    return Finding(
        check=NAME,
        subject=f"{duty.name}, {axis}",
        outcome="caution" if beyond else "pass",
        value=value,
        threshold=threshold,
        unit=unit,
        message=message,
        remedy=remedy if beyond else "",
    )


def _reduced(fitted: FittedStudy, time: float, temperature: float) -> float:
    return time * math.exp(-float(CLOCKS[fitted.study.clock].log_shift(np.array([temperature]))[0]))


def _time(duty: Duty, fitted: FittedStudy) -> Finding:
    longest = max(_reduced(fitted, float(record.time[~record.held_out][-1]), record.temperature) for record in _fitted(fitted.records))
    end = _reduced(fitted, duty.history.duration, duty.temperature)
    decades = math.log10(end / longest)
    if decades <= 0:
        message = f"The duty ends at {span(end)} of reduced time, within the tests, which reach {span(longest)}."
    elif decades <= FAR_DECADES:
        message = f"The duty ends at {span(end)} of reduced time, {decades:.2g} decades past the longest fitted reading ({span(longest)})."
    else:
        message = (
            f"The duty ends at {span(end)} of reduced time, {decades:.2g} decades beyond the longest fitted reading ({span(longest)}): "
            "out there the bands are the prior of the relaxation per decade, not a measurement."
        )
    return _finding(
        duty,
        "reduced time",
        (max(decades, 0.0), 0.0, "decades"),
        message,
        "Run one record longer; each further decade that is measured narrows the bands.",
        beyond=decades > 0,
    )


def _temperature(duty: Duty, fitted: FittedStudy) -> Finding:
    tested = [record.temperature for record in _fitted(fitted.records)]
    apart = max(min(tested) - duty.temperature, duty.temperature - max(tested), 0.0)
    beyond = apart > TEMPERATURE_APART
    return _finding(
        duty,
        "temperature",
        (apart, TEMPERATURE_APART, "K"),
        f"The duty's temperature lies {apart:.3g} K outside the tests, and nothing here says what the material does there."
        if beyond
        else "The duty's temperature lies within the tests, to the tolerance of a laboratory.",
        "Test at the temperature of the duty.",
        beyond=beyond,
    )


def _level(duty: Duty, fitted: FittedStudy) -> Finding:
    levels = [
        abs(record.strain_level)
        for record in _fitted(fitted.records)
        if not (record.normalised and abs(record.strain_level) == NOMINAL_STRAIN)
    ]
    remedy = "Test at the strain of the duty."
    peak = abs(duty.history.peak)
    if not levels:
        text = "The strain level of the tests is not known, since ratios were recorded: the response is taken to be proportional to strain."
        return _finding(duty, "strain level", (None, None, ""), text, "State the strain of the records in the register.", beyond=True)
    low, high = min(levels), max(levels)
    ratio = peak / high if peak > low else peak / low
    tested = percent(high) if high - low <= LEVEL_BEYOND * high else f"{percent(low)} to {percent(high)}"
    beyond = peak > (1.0 + LEVEL_BEYOND) * high or peak < (1.0 - LEVEL_BEYOND) * low
    return _finding(
        duty,
        "strain level",
        (ratio if beyond else 1.0, 1.0, ""),
        f"The duty's strain reaches {percent(peak)}, {ratio:.2g} times the nearest tested level ({tested}): that is untested."
        if beyond
        else f"The duty's strain reaches {percent(peak)}, within the tested levels ({tested}).",
        remedy,
        beyond=beyond,
    )


def _fastest(history: History) -> float:
    """Largest strain rate in 1/s."""
    return float(np.max(np.abs(np.diff(history.value) / np.diff(history.time))))


def _ramp_rate(record: Record) -> float:
    """Mean strain rate in 1/s up to the record's first arrival near its peak: rates between single knots would be noise."""
    level = np.abs(record.history.value)
    arrival = int(np.argmax(level >= 0.98 * level.max()))
    moving = np.flatnonzero(level[: arrival + 1] > 0.02 * level.max())
    start = max(int(moving[0]) - 1, 0) if moving.size else 0
    return float((level[arrival] - level[start]) / (record.history.time[arrival] - record.history.time[start]))


def _rate(duty: Duty, fitted: FittedStudy) -> Finding:
    # relative to the peak, since a linear law knows no other rate
    tested = max(_ramp_rate(record) / abs(record.strain_level) for record in _fitted(fitted.records))
    peak = abs(duty.history.peak)
    decades = math.log10(_fastest(duty.history) / peak / tested) if peak > 0 else 0.0
    beyond = decades > RATE_DECADES
    return _finding(
        duty,
        "rate",
        (max(decades, 0.0), RATE_DECADES, "decades"),
        f"The duty strains {decades:.2g} decades faster than any test, so what relaxes during its fastest ramp was never seen."
        if beyond
        else "The duty strains no faster than the tests.",
        "Test with a faster ramp, or enter the ramp that the part really sees.",
        beyond=beyond,
    )


def _sense(duty: Duty, fitted: FittedStudy) -> Finding:
    tested = list(dict.fromkeys(record.sense for record in _fitted(fitted.records)))
    beyond = duty.sense not in tested
    return _finding(
        duty,
        "sense",
        (None, None, ""),
        f"The duty is in {duty.sense}, but the tests are in {listed(tested)}: another modulus may hold there."
        if beyond
        else f"The duty is in {duty.sense}, as tests are.",
        f"Test in {duty.sense}.",
        beyond=beyond,
    )


def _state(duty: Duty, fitted: FittedStudy) -> Finding:
    tested = list(dict.fromkeys(record.state for record in _fitted(fitted.records)))
    beyond = duty.state not in tested
    return _finding(
        duty,
        "state",
        (None, None, ""),
        f'The duty is in the state "{duty.state}", but the fitted records are {listed(tested)}: the bands are those of the tested state.'
        if beyond
        else f'The duty is in the state "{duty.state}", as tested.',
        "Test specimens in the state of the duty.",
        beyond=beyond,
    )


def _mechanisms(duty: Duty, fitted: FittedStudy) -> Finding:
    longest = max(float(record.time[~record.held_out][-1]) for record in _fitted(fitted.records))
    beyond = duty.history.duration > longest
    return _finding(
        duty,
        "new mechanisms",
        (None, None, ""),
        "Extrapolation assumes that no new mechanism (chemical relaxation, oxidation, ageing, moisture) sets in: "
        "the bands hold for physical relaxation only."
        if beyond
        else "The duty is no longer than the tests; mechanisms that other surroundings bring are not covered.",
        "Judge by ageing tests or service experience whether another mechanism may set in within the duty.",
        beyond=beyond,
    )


AXES: Mapping[str, Callable[[Duty, FittedStudy], Finding]] = MappingProxyType(
    {
        "reduced time": _time,
        "temperature": _temperature,
        "strain level": _level,
        "rate": _rate,
        "sense": _sense,
        "state": _state,
        "new mechanisms": _mechanisms,
    }
)
"""What a duty may lie outside of."""


def check(fitted: FittedStudy) -> list[Finding]:
    """One finding for each duty and axis."""
    return [look(duty, fitted) for duty in fitted.study.duties for look in AXES.values()]
