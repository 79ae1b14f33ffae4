"""Channels of an export in consistent units: force, stress or ratio; strain or displacement; zero, sign rule, measures."""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from perdure.border.instruments import InstrumentDeclaration
from perdure.border.readers.reader import RawReadings
from perdure.border.register import RegisterRow
from perdure.border.signs import SignFault, opposite, sign_factor
from perdure.border.units import INTERNAL, convert
from perdure.errors import Problem, StudyError, problem
from perdure.study.methods import METHODS

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]


@dataclass(slots=True)
class BuildLog:
    """What was done to an export on the way to its record.

    Attributes:
        readings: raw readings with a time.
        missing: raw readings with a time but no response.
        rows: raw rows behind the record's readings.
        conversions: one line each.
    """

    readings: int = 0
    missing: int = 0
    rows: tuple[int, ...] = ()
    conversions: list[str] = field(default_factory=list)

    def note(self, text: str) -> None:
        """Add a conversion."""
        self.conversions.append(text)


@dataclass(frozen=True, slots=True, eq=False)
class Build:
    """What a record is built from, besides its readings.

    Attributes:
        row: of the register; :func:`perdure.border.record_rows.row_faults` found nothing wrong with it.
        instrument: that the record was measured with.
        log: everything done to the numbers.
    """

    row: RegisterRow
    instrument: InstrumentDeclaration
    log: BuildLog

    @property
    def label(self) -> str:
        """The export, for messages."""
        return f"records/{self.row.file}"

    def require(self, fault: SignFault | None, rows: Ints) -> None:
        """Raise :class:`StudyError` where there is a fault; ``rows`` are the raw rows that its index counts in."""
        if fault is not None:
            where = f"{self.label}, row {rows[fault.index]}"
            raise StudyError([problem(where, fault.got, fault.expected, fault.remedy)])


@dataclass(slots=True)
class Channels:
    """Raw readings with a time, in internal units; shape (n,) each, NaN where missing.

    ``load`` is what was observed before area and shape factor (force, stress or ratio); ``drive`` what was driven (strain or
    displacement), None where the export has neither.
    """

    export_time: Array
    time: Array
    load: Array
    drive: Array | None
    rows: Ints

    def cut(self, keep: Flags) -> Channels:
        """Those readings where ``keep``, shape (n,), is true."""
        drive = None if self.drive is None else self.drive[keep]
        return Channels(self.export_time[keep], self.time[keep], self.load[keep], drive, self.rows[keep])


def channels_of(build: Build, raw: RawReadings) -> Channels:
    """Numbers in internal units; readings without a time left out, times in order, force at no load subtracted.

    Raises:
        StudyError: no time or no response at all, times out of order, or nothing but zeros.
    """
    row, instrument, log = build.row, build.instrument, build.log
    values = {}
    for key, column in instrument.columns.items():
        values[key] = convert(raw.values[key], column.unit, column.dimension)
        internal = INTERNAL[column.dimension]
        if column.unit != internal:
            log.note(f"{key} from {column.unit} to {internal if internal != '1' else 'a ratio'}")
    load = values[instrument.observed]
    if instrument.observed == "percent lost":
        load = 1.0 - load
        log.note("ratio = 1 - share lost")
    time = values["time"]
    channels = Channels(time, time.copy(), load, values.get("strain", values.get("displacement")), raw.rows)
    known = ~np.isnan(time)
    if not known.all():
        lost = raw.rows[~known]
        log.note(f"{lost.size} readings without a time left out (first in row {lost[0]})")
        channels = channels.cut(known)
    log.readings = int(channels.time.size)
    log.missing = int(np.isnan(channels.load).sum())
    if row.zero is not None:
        channels.load = channels.load - row.zero
        log.note(f"force at no load {row.zero:g} N subtracted")
    if log.missing == log.readings or not np.nan_to_num(channels.load).any():
        what = "no time" if not log.readings else ("no response" if log.missing == log.readings else "no response but zero")
        remedy = "Check the columns of the instrument, or leave the record out with a reason."
        raise StudyError([problem(f'{build.label}, record "{row.record}"', f"{what} at all", "readings with time and response", remedy)])
    faults = np.flatnonzero(np.diff(channels.time) <= 0)
    if faults.size:
        raise StudyError(_order_faults(channels, faults, build.label))
    return channels


def _order_faults(channels: Channels, faults: Ints, label: str) -> list[Problem]:
    problems = []
    remedy = 'The export mixes runs or repeats rows: select one run in the column "where", or export it with more digits of time.'
    for index in faults[:5]:
        before, after = channels.time[index], channels.time[index + 1]
        got = f"the time {after:g} s a second time" if before == after else f"{after:g} s after {before:g} s"
        problems.append(problem(f"{label}, row {channels.rows[index + 1]}", got, "times that increase from row to row", remedy))
    if faults.size > len(problems):
        problems.append(problem(label, f"{faults.size - len(problems)} further rows out of order", "none", "Mend those above first."))
    return problems


def signed(build: Build, values: Array, what: str, rows: Ints) -> Array:
    """``values`` (strain or displacement, or stress or force; shape (n,)) after the sign rule, logged.

    Raises:
        StudyError: the sign contradicts the sense.
    """
    sense = build.row.sense
    factor = sign_factor(values, sense, what)
    if isinstance(factor, SignFault):
        build.require(factor, rows)
        return values
    if factor < 0:
        build.log.note(f"sign of {what} reversed: {sense} is {'negative' if sense == 'compression' else 'positive'} here")
    return factor * values


def signed_load(build: Build, channels: Channels) -> Array:
    """The observed channel after the sign rule; a ratio is positive whatever the sense.

    Raises:
        StudyError: the sign contradicts the sense, or a relaxation runs through zero.
    """
    if not build.instrument.normalised:
        load = signed(build, channels.load, "stress", channels.rows)
        if METHODS[build.row.method].hold_thinned:
            build.require(opposite(load, build.row.sense, "stress"), channels.rows)
        return load
    fault = sign_factor(channels.load, "tension", "ratio")
    if isinstance(fault, SignFault):
        remedy = 'Check the column and its unit: a share lost in % needs the unit "%".'
        build.require(SignFault(fault.index, "a negative ratio at its peak", "a positive ratio", remedy), channels.rows)
    return channels.load


def response_of(build: Build, load: Array) -> Array:
    """Nominal stress in MPa (divided by 1 + 2 S² where a shape factor is given), or the ratio as it is; shape of ``load``."""
    row, instrument, log = build.row, build.instrument, build.log
    if instrument.normalised:
        if row.shape_factor is not None:
            log.note("shape factor drops out of a ratio")
        return load
    response = load
    if instrument.observed == "force" and row.area is not None:
        response = response / row.area
        log.note(f"stress = force / {row.area:g} mm2")
    if row.shape_factor is not None:
        factor = 1 + 2 * row.shape_factor**2
        response = response / factor
        log.note(f"stress divided by {factor:.6g} (shape factor {row.shape_factor:g})")
    return response


def strain_of(build: Build, drive: Array, force_change: Array) -> tuple[Array, Array]:
    """Strain, and its change by one standard uncertainty of the frame compliance; shapes (n,).

    Args:
        build: what the record is built from.
        drive: strain, or displacement in mm; tension positive.
        force_change: N, from where the displacement counts as zero; used with a crosshead only.
    """
    length, instrument, log = build.row.length, build.instrument, build.log
    if "displacement" not in instrument.columns or length is None:
        return drive, np.zeros_like(drive)
    if not instrument.crosshead:
        log.note(f"strain = displacement / {length:g} mm")
        return drive / length, np.zeros_like(drive)
    log.note(f"strain = (displacement - {instrument.frame_compliance:g} mm/N x force) / {length:g} mm")
    strain = (drive - instrument.frame_compliance * force_change) / length
    return strain, -instrument.u_frame_compliance * force_change / length
