"""Does a response stand still at its extreme, as a load cell or an amplifier at the end of its range does?"""

from __future__ import annotations

import math

import numpy as np

from perdure.checks.words import span
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import Record, RecordSet
from perdure.study.study import Study

NAME = "saturation"
IDENTICAL = 5
# the response had reason to change: the strain moved by this share of its peak, or time by this many decades
STRAIN_MOVED = 0.005
DECADES_MOVED = 0.05


def _longest_run(record: Record) -> tuple[int, int]:
    """First reading and length of the longest run of identical responses at the record's extreme."""
    extreme = record.response[int(np.argmax(np.abs(record.response)))]
    # averages of several raw readings are never identical by saturation alone
    flat = np.concatenate([[False], (record.response == extreme) & (record.count == 1), [False]]).astype(np.int64)
    starts, ends = np.flatnonzero(np.diff(flat) == 1), np.flatnonzero(np.diff(flat) == -1)
    if starts.size == 0:
        return 0, 0
    longest = int(np.argmax(ends - starts))
    return int(starts[longest]), int(ends[longest] - starts[longest])


def _should_change(record: Record, first: int, last: int) -> bool:
    strain = record.history.at(record.time[first : last + 1])
    moved = float(np.ptp(strain)) > STRAIN_MOVED * abs(record.history.peak)
    return moved or (record.time[first] > 0 and math.log10(record.time[last] / record.time[first]) > DECADES_MOVED)


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution for five or more identical readings in a row at the record's extreme while the response should change."""
    found = []
    longest = 0
    for record in records.records:
        first, length = _longest_run(record)
        longest = max(longest, length)
        last = first + length - 1
        if length >= IDENTICAL and _should_change(record, first, last):
            found.append(
                Finding(
                    check=NAME,
                    subject=record.name,
                    outcome="caution",
                    value=float(length),
                    threshold=float(IDENTICAL),
                    unit="readings",
                    message=(
                        f"{length} readings in a row from {span(float(record.time[first]))} to {span(float(record.time[last]))} "
                        f"(rows {record.first_row[first]} to {record.last_row[last]}) are identical at the record's extreme, "
                        "as at the end of an instrument's range."
                    ),
                    remedy="Check the range of the load cell; leave these rows out with from and until.",
                )
            )
    if found:
        return found
    return [
        Finding(
            check=NAME,
            subject="all records",
            outcome="pass",
            value=float(longest),
            threshold=float(IDENTICAL),
            unit="readings",
            message="No response stands still at its extreme while it should change.",
        )
    ]
