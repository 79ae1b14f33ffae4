"""Do the readings of each record follow one another in time, without a gap that hides how the response got there?"""

from __future__ import annotations

import numpy as np
from numpy.typing import NDArray

from perdure.checks.words import span
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import Record, RecordSet
from perdure.study.study import Study

Array = NDArray[np.float64]

NAME = "time order and gaps"
GAP_DECADES = 1.0
# the ramp counts as ended here, as where the law is laid out
AT_PEAK = 0.98


def _after_ramp(record: Record) -> Array:
    """Times of the readings in s from the end of the first ramp on: during a ramp, readings are spaced evenly, not in log time."""
    level = np.abs(record.history.value)
    ramp = float(record.history.time[int(np.argmax(level >= AT_PEAK * level.max()))])
    return record.time[(record.time >= ramp) & (record.time > 0)]


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Fail for times that do not increase; caution for more than a decade of time without a reading after the ramp."""
    found = []
    widest = 0.0
    for record in records.records:
        backwards = np.flatnonzero(np.diff(record.time) <= 0)
        if backwards.size:
            row = int(record.first_row[int(backwards[0]) + 1])
            found.append(
                Finding(
                    check=NAME,
                    subject=record.name,
                    outcome="fail",
                    value=float(backwards.size),
                    threshold=0.0,
                    unit="",
                    message=f"Time does not increase at {backwards.size} of {record.time.size} readings, first in row {row}.",
                    remedy="Mend the export, or leave the record out with a reason.",
                )
            )
            continue
        time = _after_ramp(record)
        if time.size < 2:
            continue
        gaps = np.diff(np.log10(time))
        worst = int(np.argmax(gaps))
        widest = max(widest, float(gaps[worst]))
        if gaps[worst] > GAP_DECADES:
            found.append(
                Finding(
                    check=NAME,
                    subject=record.name,
                    outcome="caution",
                    value=float(gaps[worst]),
                    threshold=GAP_DECADES,
                    unit="decades",
                    message=(
                        f"No reading between {span(float(time[worst]))} and {span(float(time[worst + 1]))}: "
                        "what relaxes there is seen only as a sum."
                    ),
                    remedy="Look for readings lost in the export, or take readings evenly in log time.",
                )
            )
    if found:
        return found
    return [
        Finding(
            check=NAME,
            subject="all records",
            outcome="pass",
            value=widest,
            threshold=GAP_DECADES,
            unit="decades",
            message=f"Time increases in every record, and the widest gap after a ramp is {widest:.2g} decades.",
        )
    ]
