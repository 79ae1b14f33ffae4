"""Does the response drift while nothing is driven yet?"""

from __future__ import annotations

import math

import numpy as np
from numpy.typing import NDArray

from perdure.checks.words import percent
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import Record, RecordSet
from perdure.study.study import Study

Flags = NDArray[np.bool_]

NAME = "drift before the ramp"
READINGS_AT_LEAST = 5
STANDARD_ERRORS = 4.0
# strain, as a share of its peak, at which the ramp has certainly begun and is halfway
BEGUN, HALFWAY = 1e-3, 0.5


def _dwell(record: Record) -> Flags:
    """Which readings lie before the ramp, (n,)."""
    level = np.abs(record.history.value) / abs(record.history.peak)
    time = record.history.time
    begun, halfway = (float(time[int(np.argmax(level >= share))]) for share in (BEGUN, HALFWAY))
    before = float(time[max(int(np.argmax(level >= BEGUN)) - 1, 0)])
    # the knot before a clear rise may already be under way: step back by a share of the ramp
    return record.time <= min(before, begun - 2.0 * BEGUN * (halfway - begun))


def _drift(record: Record) -> tuple[float, float] | None:
    """Drift over the dwell in the record's unit and its standard error; None where the dwell has too few readings."""
    inside = _dwell(record)
    n = int(inside.sum())
    if n < READINGS_AT_LEAST:
        return None
    time, response = record.time[inside], record.response[inside]
    centred = time - time.mean()
    slope = float(centred @ response / (centred @ centred))
    residual = response - response.mean() - slope * centred
    length = float(time[-1] - time[0])
    error = math.sqrt(float(residual @ residual) / (n - 2) / float(centred @ centred)) * length
    return slope * length, error


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution where the response before the ramp changes by more than four standard errors of its trend."""
    found = []
    looked_at = 0
    for record in records.records:
        measured = _drift(record)
        if measured is None:
            continue
        looked_at += 1
        drift, error = measured
        if abs(drift) > STANDARD_ERRORS * error:
            unit = "" if record.normalised else "MPa"
            share = abs(drift) / float(np.abs(record.response).max())
            found.append(
                Finding(
                    check=NAME,
                    subject=record.name,
                    outcome="caution",
                    value=abs(drift),
                    threshold=STANDARD_ERRORS * error,
                    unit=unit,
                    message=(
                        f"Before the ramp, with nothing driven, the response drifts by {percent(share)} of the record's peak, "
                        "more than its noise: later readings may carry this drift too."
                    ),
                    remedy="Let the instrument warm up, or correct the zero; repeat the record if the drift matters.",
                )
            )
    if found:
        return found
    text = f"None of {looked_at} records with a dwell before the ramp drifts there by more than its noise."
    return [
        Finding(
            check=NAME,
            subject="all records",
            outcome="pass",
            value=None,
            threshold=None,
            unit="",
            message=text if looked_at else "No record dwells before its ramp, so drift of the zero cannot be seen.",
        )
    ]
