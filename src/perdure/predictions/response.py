"""Responses of parts under a duty: what a limit looks at, and curves over time."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.predictions.draws import PosteriorDraws, Subject
from perdure.rheology.history import History
from perdure.study.duty import Duty, Limit

Array = NDArray[np.float64]

CURVE_POINTS = 160
INTERVAL_POINTS = 32
COVERAGES = (0.5, 0.9)
# curves begin this fraction of the duty's first knot after the start, where a log axis can show them
FIRST_POINT = 0.1


def sign_of(duty: Duty) -> float:
    """−1 where a duty's stresses are shown as magnitudes of compression, else 1."""
    return -1.0 if duty.sense == "compression" else 1.0


def curve_times(duty: Duty) -> Array:
    """Times in s at which bands are given: log-spaced over the duty, with its knots."""
    knots = duty.history.time[1:]
    grid = np.geomspace(FIRST_POINT * knots[0], duty.history.duration, CURVE_POINTS)
    # knots of a long measured history would crowd the table: the grid alone follows it then
    return np.union1d(grid, knots) if knots.size <= CURVE_POINTS else grid


@dataclass(frozen=True, slots=True, eq=False)
class Band:
    """Quantiles of the response over time.

    Attributes:
        subject: level and name. kind: "credible" (of a curve that is one for each draw) or "prediction" (of a new part).
        time: s, (T,). strain: (T,). median: (T,). low, high: by coverage in ``COVERAGES``, (2, T); MPa.
    """

    subject: Subject
    kind: str
    time: Array
    strain: Array
    median: Array
    low: Array
    high: Array


def band(posterior: PosteriorDraws, duty: Duty, subject: Subject, seed: int) -> Band:
    """Band of one subject under a duty; a new part is drawn afresh in each posterior draw."""
    time = curve_times(duty)
    history = duty.history.with_knots(time)
    rng = np.random.default_rng(seed)
    offsets = posterior.centre(subject) + posterior.spread(subject) * rng.standard_normal(posterior.batch_sd.shape)
    stress = posterior.law.simulate(posterior.natural(offsets), history)
    chosen = sign_of(duty) * stress[:, np.searchsorted(history.time, time)]
    edges = [0.5] + [0.5 * (1.0 - c) for c in COVERAGES] + [0.5 * (1.0 + c) for c in COVERAGES]
    quantiles = np.quantile(chosen, edges, axis=0)
    return Band(
        subject,
        "prediction" if subject.spreads else "credible",
        time,
        duty.history.at(time),
        quantiles[0],
        quantiles[1 : 1 + len(COVERAGES)],
        quantiles[1 + len(COVERAGES) :],
    )


def _looked_at(duty: Duty, limit: Limit) -> tuple[History, NDArray[np.intp], int | None]:
    """The history with the knots that a limit looks at, their indices, and that of the reference time."""
    if limit.end > limit.start:
        first = max(limit.start, FIRST_POINT * float(duty.history.time[1]))
        inside = duty.history.time[(duty.history.time >= limit.start) & (duty.history.time <= limit.end)]
        times = np.union1d(np.geomspace(first, limit.end, INTERVAL_POINTS), inside[inside > 0])
    else:
        times = np.array([limit.start])
    extra = times if limit.reference is None else np.append(times, limit.reference)
    history = duty.history.with_knots(extra)
    history = History(history.time[history.time <= extra.max()], history.value[history.time <= extra.max()])
    reference = None if limit.reference is None else int(np.searchsorted(history.time, limit.reference))
    return history, np.searchsorted(history.time, times), reference


def limited_response(posterior: PosteriorDraws, duty: Duty, limit: Limit, subject: Subject, scores: Array) -> Array:
    """What the limit looks at, for each draw and part, (D, parts): the worst moment of its interval.

    In MPa for "stress", a ratio for "retained"; magnitudes in a compression duty. Only parts of a level that spreads
    differ: other levels have one column.
    """
    history, indices, reference = _looked_at(duty, limit)
    rows = scores if subject.spreads else np.zeros((1, posterior.batch_sd.shape[1]))
    out = np.empty((posterior.count, rows.shape[0]))
    for part, natural in enumerate(posterior.parts(subject, rows)):
        stress = posterior.law.simulate(natural, history)
        response = sign_of(duty) * stress[:, indices] if reference is None else stress[:, indices] / stress[:, [reference]]
        out[:, part] = response.min(axis=1) if limit.kind == "at least" else response.max(axis=1)
    return out
