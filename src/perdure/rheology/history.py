"""Piecewise-linear histories of what drives a specimen or a part."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.errors import NumericsError, problem

Array = NDArray[np.float64]


@dataclass(frozen=True, slots=True, eq=False)
class History:
    """A quantity that runs linearly between knots, starting at rest.

    Attributes:
        time: knots in s, shape (n,), strictly increasing, the first at 0.
        value: driven quantity at the knots, shape (n,); strain as a ratio, tension positive.
            The first value is 0: before time 0 nothing has happened. A step is a steep ramp.
    """

    time: Array
    value: Array

    def __post_init__(self) -> None:
        time = np.ascontiguousarray(self.time, dtype=np.float64)
        value = np.ascontiguousarray(self.value, dtype=np.float64)
        object.__setattr__(self, "time", time)
        object.__setattr__(self, "value", value)
        faults = []
        if time.ndim != 1 or time.shape != value.shape or time.size < 2:
            faults.append(("shapes", f"{time.shape} and {value.shape}", "two equal one-dimensional arrays, two knots or more"))
        elif not (np.isfinite(time).all() and np.isfinite(value).all()):
            faults.append(("values", "NaN or infinity", "finite numbers"))
        else:
            if time[0] != 0.0 or value[0] != 0.0:
                faults.append(("first knot", f"({time[0]:g}, {value[0]:g})", "(0, 0): a history starts at rest"))
            if not (np.diff(time) > 0).all():
                row = int(np.argmax(np.diff(time) <= 0)) + 1
                faults.append(("time", f"{time[row]:g} s after {time[row - 1]:g} s", "strictly increasing times"))
        if faults:
            raise NumericsError(
                problem(f"history, {where}", got, expected, "Mend the history before it reaches a law.") for where, got, expected in faults
            )

    @property
    def duration(self) -> float:
        """Time of the last knot in s."""
        return float(self.time[-1])

    @property
    def peak(self) -> float:
        """Value of largest magnitude, with its sign."""
        return float(self.value[np.argmax(np.abs(self.value))])

    def at(self, time: Array) -> Array:
        """Values at ``time`` (s, any shape); the last value is held beyond the last knot."""
        return np.interp(time, self.time, self.value)

    def with_knots(self, time: Array) -> History:
        """The same history with further knots at ``time`` (s); times ≤ 0 are left out, NaN and infinity are refused."""
        extra = np.asarray(time, dtype=np.float64)
        knots = np.union1d(self.time, extra[~(extra <= 0)])
        return History(knots, self.at(knots))


def ramp_and_hold(level: float, ramp: float, duration: float) -> History:
    """A ramp to ``level`` within ``ramp`` s, then a hold until ``duration`` s after the start."""
    if not 0 < ramp < duration:
        raise NumericsError(
            [problem("ramp and hold", f"ramp {ramp:g} s, duration {duration:g} s", "0 < ramp < duration", "Declare the real ramp.")]
        )
    return History(np.array([0.0, ramp, duration]), np.array([0.0, level, level]))
