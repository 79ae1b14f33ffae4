"""Thinning: long holds averaged in log time, moving parts reduced by leaving readings out.

A hold is the end of a record over which the drive stays within a small band. Its readings are averaged in bins of equal
width in the logarithm of the time since the ramp ended; time is the mean of that logarithm, response and strain are plain
means, so a response that runs straight in log time is met exactly. Noise of an average of n readings is that of one
reading divided by the root of n: the count goes with it. Moving parts are never averaged, because stress there follows
the strain of its own instant.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

HOLD_AT_LEAST = 60
"""A hold of fewer readings is kept as it is."""
BINS_PER_DECADE = 40
"""Bins a decade of time since the end of the ramp: 6 % wide each."""
MOVING_AT_MOST = 200
"""Readings kept of the moving part of a record."""
HOLD_BAND = 0.005
"""Half-width of the band that a drive at rest stays in, by its level."""
_INSIDE = 0.95


@dataclass(frozen=True, slots=True, eq=False)
class Groups:
    """Which raw readings become one.

    Attributes:
        members: raw indices of each group, in order; groups in order of time.
        averaged: number of raw readings that went into averages.
        dropped: number of raw readings of moving parts left out.
        origin: s, the end of the ramp, from which log time counts; infinite where there is no hold.
    """

    members: tuple[Ints, ...]
    averaged: int
    dropped: int
    origin: float


def find_hold(drive: Array) -> int:
    """Index at which the final hold begins (the end of the ramp), or ``drive.size`` where the record doesn't end in one.

    Args:
        drive: what the machine holds (strain or displacement, in any unit), shape (n,).
    """
    if drive.size < 2:
        return int(drive.size)
    tail = drive[drive.size // 2 :]
    level = float(np.median(tail))
    spread = 1.4826 * float(np.median(np.abs(tail - level)))
    if level == 0 or spread > HOLD_BAND * abs(level):
        return int(drive.size)
    inside = np.abs(drive - level) <= max(HOLD_BAND * abs(level), 4 * spread)
    start = int(np.argmax(inside))
    return start if inside[start:].mean() >= _INSIDE else int(drive.size)


def thin(time: Array, ramp_end: float, *, average: bool, split: float = np.inf) -> Groups:
    """Group readings at ``time`` (s, shape (n,), increasing).

    Args:
        time: times of the readings.
        ramp_end: s, where the final hold begins; infinite for none.
        average: True where holds may be averaged; else the whole record counts as moving.
        split: s; readings before and after it (those held out) are never averaged together.
    """
    first = int(np.searchsorted(time, ramp_end, side="right")) if average else int(time.size)
    kept = np.arange(first, dtype=np.int64)
    if first > MOVING_AT_MOST:
        kept = np.unique(np.linspace(0, first - 1, MOVING_AT_MOST).round().astype(np.int64))
    held = np.arange(first, time.size, dtype=np.int64)
    parts = [held[index : index + 1] for index in range(held.size)]
    if held.size > HOLD_AT_LEAST:
        bins = np.floor(BINS_PER_DECADE * np.log10(time[held] - ramp_end))
        edges = (np.diff(bins) > 0) | (np.diff(time[held] > split))
        parts = np.split(held, np.flatnonzero(edges) + 1)
    averaged = sum(part.size for part in parts if part.size > 1)
    groups = [kept[index : index + 1] for index in range(kept.size)] + parts
    return Groups(tuple(groups), averaged, first - int(kept.size), ramp_end)


def mean_times(time: Array, groups: Groups) -> Array:
    """Time of each group: of a single reading its own, else the mean in log time since the end of the ramp; shape (groups,)."""
    return np.array(
        [
            time[group[0]] if group.size == 1 else groups.origin + np.exp(np.mean(np.log(time[group] - groups.origin)))
            for group in groups.members
        ]
    )


def means(values: Array, groups: Groups) -> Array:
    """Plain mean of each group, shape (groups,)."""
    return np.array([values[group].mean() for group in groups.members])


def essential_knots(time: Array, value: Array, tolerance: float) -> Ints:
    """Indices of the knots that a piecewise-linear curve needs to stay within ``tolerance`` (unit of ``value``) of all of them.

    The knot farthest from the chord is kept and both halves are treated alike (Ramer; Douglas and Peucker).
    """
    keep = np.zeros(time.size, dtype=np.bool_)
    if time.size == 0:
        return np.zeros(0, dtype=np.int64)
    keep[[0, -1]] = True
    stack = [(0, int(time.size) - 1)]
    while stack:
        left, right = stack.pop()
        if right - left < 2:
            continue
        inner = slice(left + 1, right)
        chord = np.interp(time[inner], [time[left], time[right]], [value[left], value[right]])
        distance = np.abs(value[inner] - chord)
        worst = int(np.argmax(distance))
        if distance[worst] > tolerance:
            middle = left + 1 + worst
            keep[middle] = True
            stack += [(left, middle), (middle, right)]
    return np.flatnonzero(keep).astype(np.int64)
