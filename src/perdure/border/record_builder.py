"""From the numbers of an export to a record: stress and strain measures, zero, sign rule, ramp, readings that count, thinning."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.border.channels import Build, BuildLog, Channels, channels_of, response_of, signed, signed_load, strain_of
from perdure.border.instruments import InstrumentDeclaration
from perdure.border.readers.reader import RawReadings
from perdure.border.register import RegisterRow
from perdure.border.signs import opposite
from perdure.border.thinning import MOVING_AT_MOST, Groups, essential_knots, find_hold, mean_times, means, thin
from perdure.errors import StudyError, problem
from perdure.rheology.history import History
from perdure.study.methods import METHODS
from perdure.study.records import Record
from perdure.study.study import HoldOut

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Flags = NDArray[np.bool_]

NOMINAL_STRAIN = 0.01
"""Strain taken for a normalised record that states none: in a linear law it drops out."""
REST_AT_MOST = 0.05
"""A first reading of more than this share of the peak shows that the record doesn't start at rest."""
READINGS_AT_LEAST = 3
HISTORY_TOLERANCE = (1e-4, 1e-3)
"""A long moving part keeps the knots that hold its strain to within four sds of its noise, but between these shares of the peak."""


@dataclass(frozen=True, slots=True, eq=False)
class _Course:
    """Strain, compliance and response of every raw reading, times from the start of the history."""

    time: Array
    strain: Array
    compliance: Array
    response: Array
    export_time: Array
    rows: Ints
    ramp_end: float


def build_record(
    row: RegisterRow, instrument: InstrumentDeclaration, raw: RawReadings, digest: str, hold_out: HoldOut | None
) -> tuple[Record, BuildLog]:
    """The record of one row of the register.

    Args:
        row: of the register; :func:`perdure.border.record_rows.row_faults` found nothing wrong with it.
        instrument: that it was measured with.
        raw: its readings in the units of the export.
        digest: sha256 of the export.
        hold_out: of the study.

    Raises:
        StudyError: with the rows of the export that can't be used as they are.
    """
    build = Build(row, instrument, BuildLog())
    channels = channels_of(build, raw)
    course = _from_rest(build, channels) if row.ramp is None else _after_ramp(build, channels, row.ramp)
    usable = _usable(build, course)
    count = int(usable.sum())
    if count < READINGS_AT_LEAST:
        raise StudyError(
            [
                problem(
                    f'{build.label}, record "{row.record}"',
                    f"{count} usable readings of {build.log.readings} ({build.log.missing} without a response)",
                    f"{READINGS_AT_LEAST} or more",
                    "Widen from and until, check the columns of the instrument, or leave the record out with a reason.",
                )
            ]
        )
    return _record(build, course, usable, digest, hold_out), build.log


def _at_rest(build: Build, channels: Channels, drive: Array) -> int:
    """Index of the reading that time and strain count from.

    Raises:
        StudyError: there is none, or the record carries load from the start.
    """
    row = build.row
    complete = ~np.isnan(channels.load) & ~np.isnan(drive)
    reached = complete if row.preload is None else complete & (np.abs(np.nan_to_num(channels.load)) >= row.preload)
    if not reached.any():
        got = "no reading with response and strain" if row.preload is None else f"no force of {row.preload:g} N or more"
        remedy = "Check preload, columns and units."
        raise StudyError([problem(f'{build.label}, record "{row.record}"', got, "such a reading", remedy)])
    origin = int(np.argmax(reached))
    share = abs(float(channels.load[origin])) / float(np.nanmax(np.abs(channels.load)))
    if row.preload is None and share > REST_AT_MOST:
        raise StudyError(
            [
                problem(
                    f"{build.label}, row {channels.rows[origin]}",
                    f"{share:.0%} of the peak load in the first reading",
                    f"a start at rest (at most {REST_AT_MOST:.0%})",
                    'Fill in "ramp" if the record starts after its ramp, "preload" if the strain zero was set under load, '
                    'or "zero" if the force was not zeroed.',
                )
            ]
        )
    return origin


def _from_rest(build: Build, channels: Channels) -> _Course:
    """A record whose first reading is at rest."""
    row, log = build.row, build.log
    if channels.drive is None:  # excluded by row_faults; says so to the type checker
        raise StudyError([problem(build.label, "no strain", "strain or displacement", "Declare the column, or the ramp of the record.")])
    origin = _at_rest(build, channels, channels.drive)
    if origin:
        why = "before the first complete reading" if row.preload is None else f"below the preload of {row.preload:g} N"
        log.note(f"{origin} readings {why} dropped (rows {channels.rows[0]} to {channels.rows[origin - 1]})")
    drive = channels.drive[origin:]
    channels = channels.cut(np.arange(channels.time.size) >= origin)
    if channels.time[0] != 0:
        log.note(f"time counts from row {channels.rows[0]} ({channels.time[0]:g} s in the export)")
    if drive[0] != 0:
        log.note(
            f"strain counts from row {channels.rows[0]} ({drive[0]:g}{'' if 'strain' in build.instrument.columns else ' mm'} in the export)"
        )
    time, drive = channels.time - channels.time[0], drive - drive[0]
    if not np.nan_to_num(drive).any():
        remedy = 'Fill in "ramp" if the record starts after it; otherwise check the column.'
        raise StudyError([problem(build.label, "a strain that never changes", "a strain that starts from rest", remedy)])
    drive = signed(build, drive, "strain", channels.rows)
    build.require(opposite(drive, row.sense, "strain"), channels.rows)
    load = signed_load(build, channels)
    strain, compliance = strain_of(build, drive, load - load[0])
    known = ~np.isnan(drive)
    hold = find_hold(drive[known])
    ramp_end = float(time[known][hold]) if hold < int(known.sum()) else np.inf
    return _Course(time, strain, compliance, response_of(build, load), channels.export_time, channels.rows, ramp_end)


def _after_ramp(build: Build, channels: Channels, ramp: float) -> _Course:
    """A record that starts after its ramp: the ramp is put before it as declared."""
    row, log = build.row, build.log
    if channels.time[0] < ramp:
        raise StudyError(
            [
                problem(
                    f"{build.label}, row {channels.rows[0]}",
                    f"a reading at {channels.time[0]:g} s, within the ramp of {ramp:g} s",
                    "times that count from the start of the ramp, all after it",
                    'Leave "ramp" empty if the record starts at rest, or correct it.',
                )
            ]
        )
    load = signed_load(build, channels)
    ramp_end = ramp
    if channels.drive is not None:
        drive = signed(build, channels.drive, "strain", channels.rows)
        build.require(opposite(drive, row.sense, "strain"), channels.rows)
        strain, compliance = strain_of(build, drive, load)
        known = ~np.isnan(strain)
        if not np.nan_to_num(strain).any():
            raise StudyError([problem(build.label, "no strain but zero", "the strain held", "Check the column and its unit.")])
        hold = find_hold(drive[known])
        if hold > 0:
            ramp_end = float(channels.time[known][hold]) if hold < int(known.sum()) else np.inf
    else:
        level = NOMINAL_STRAIN if row.strain is None else abs(row.strain)
        if row.strain is None:
            log.note(f"strain level not stated: {NOMINAL_STRAIN:.0%} taken; it drops out of a normalised response")
        strain = np.full(channels.time.size, -level if row.sense == "compression" else level)
        compliance = np.zeros(channels.time.size)
    first = int(np.argmax(~np.isnan(strain)))
    log.note(f"starts after its ramp: a ramp of {ramp:g} s to a strain of {strain[first]:g} put before it")
    starts, levels, slopes = [0.0], [0.0], [0.0]
    if channels.time[0] > ramp:
        starts, levels, slopes = [0.0, ramp], [0.0, float(strain[first])], [0.0, float(compliance[first])]
    blank = np.full(len(starts), np.nan)
    return _Course(
        np.concatenate([starts, channels.time]),
        np.concatenate([levels, strain]),
        np.concatenate([slopes, compliance]),
        np.concatenate([blank, response_of(build, load)]),
        np.concatenate([blank, channels.export_time]),
        np.concatenate([np.zeros(len(starts), dtype=np.int64), channels.rows]),
        ramp_end,
    )


def _usable(build: Build, course: _Course) -> Flags:
    """Readings that may be fitted: response and strain known, after the start, within from and until, not the reference itself."""
    row, log = build.row, build.log
    usable = ~np.isnan(course.response) & ~np.isnan(course.strain) & (course.time > 0)
    unknown = ~np.isnan(course.response) & np.isnan(course.strain)
    if unknown.any():
        log.note(f"{int(unknown.sum())} readings without a strain left out (first in row {course.rows[np.argmax(unknown)]})")
    with np.errstate(invalid="ignore"):
        inside = np.ones(usable.shape, dtype=np.bool_)
        if row.start is not None:
            inside &= course.export_time >= row.start
        if row.until is not None:
            inside &= course.export_time <= row.until
    cut = int((usable & ~inside).sum())
    if cut:
        log.note(f"{cut} readings outside from and until not fitted")
    usable &= inside
    if row.reference is not None:
        itself = usable & (np.abs(course.time - row.reference) <= 1e-9 * row.reference)
        if itself.any():
            log.note(f"the reference reading (row {course.rows[np.argmax(itself)]}) is 1 by definition and not fitted")
            usable &= ~itself
        if usable.any() and row.reference > course.time[usable][-1]:
            raise StudyError(
                [
                    problem(
                        row.place("reference"),
                        f"{row.reference:g} s",
                        f"a time within the record, which ends at {course.time[usable][-1]:g} s",
                        "Correct the reference time or its unit.",
                    )
                ]
            )
    return usable


def _record(build: Build, course: _Course, usable: Flags, digest: str, hold_out: HoldOut | None) -> Record:
    row, log = build.row, build.log
    read = np.flatnonzero(usable)
    after = np.inf if hold_out is None or hold_out.after is None else hold_out.after
    groups = thin(course.time[read], course.ramp_end, average=METHODS[row.method].hold_thinned, split=after)
    time = mean_times(course.time[read], groups)
    rows = course.rows[read]
    log.rows = tuple(int(line) for line in rows)
    held = sum(group.size > 1 for group in groups.members)
    if groups.averaged:
        log.note(f"{groups.averaged} readings of the hold averaged in log time into {held}")
    if groups.dropped:
        log.note(f"{groups.dropped} readings of moving parts left out, {MOVING_AT_MOST} kept")
    knots, strain, compliance = _knots(course, read, groups, time)
    held_out = time > after
    if hold_out is not None and (row.specimen in hold_out.specimens or row.batch in hold_out.batches):
        held_out = np.ones(time.size, dtype=np.bool_)
    return Record(
        name=row.record,
        specimen=row.specimen,
        batch=row.batch,
        method=row.method,
        instrument=build.instrument.name,
        sense=row.sense,
        state=row.state,
        temperature=row.temperature,
        history=History(knots, strain),
        compliance=compliance,
        time=time,
        response=means(course.response[read], groups),
        count=np.array([group.size for group in groups.members], dtype=np.int64),
        first_row=np.array([rows[group[0]] for group in groups.members], dtype=np.int64),
        last_row=np.array([rows[group[-1]] for group in groups.members], dtype=np.int64),
        held_out=held_out,
        reference_time=row.reference,
        missing=log.missing,
        file=build.label,
        sha256=digest,
        uncertainty=row.uncertainty,
    )


def _tolerance(strain: Array) -> float:
    """How closely a simplified history follows ``strain``: knots that only follow noise would cost time and tell nothing.

    White noise of sd s gives second differences of sd √6 s; their median magnitude is 0.6745 of that.
    """
    lowest, highest = (share * float(np.abs(strain).max()) for share in HISTORY_TOLERANCE)
    noise = float(np.median(np.abs(np.diff(strain, 2)))) / (0.6745 * 6**0.5) if strain.size > 2 else 0.0
    return min(max(4 * noise, lowest), highest)


def _knots(course: _Course, read: Ints, groups: Groups, time: Array) -> tuple[Array, Array, Array]:
    """Times, strains and compliances of the history: every reading is a knot, and the drive between them is kept.

    Where a hold is averaged, its raw knots give way to the averages; a long moving part keeps the knots it needs.
    """
    known = np.flatnonzero(~np.isnan(course.strain) & (course.time <= course.time[read[-1]]))
    if any(group.size > 1 for group in groups.members):
        # what lies beyond the ramp is told by the averages
        known = known[course.time[known] <= groups.origin]
    if groups.dropped:
        tolerance = _tolerance(course.strain[known])
        known = known[essential_knots(course.time[known], course.strain[known], tolerance)]
    group_strain = means(course.strain[read], groups)
    group_compliance = means(course.compliance[read], groups)
    extra = ~np.isin(course.time[known], time)
    all_time = np.concatenate([course.time[known][extra], time])
    order = np.argsort(all_time)
    strain = np.concatenate([course.strain[known][extra], group_strain])[order]
    compliance = np.concatenate([course.compliance[known][extra], group_compliance])[order]
    return all_time[order], strain, compliance
