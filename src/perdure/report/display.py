"""Values in the units that the user chose, and durations in words."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass, fields
from types import MappingProxyType
from typing import Any

import numpy as np
from numpy.typing import NDArray

from perdure.border.units import Dimension, from_internal
from perdure.report.rounding import significant, stated
from perdure.study.study import DisplayUnits

Array = NDArray[np.float64]

SPANS: Mapping[str, float] = MappingProxyType(
    {"\u00b5s": 1e-6, "ms": 1e-3, "s": 1.0, "min": 60.0, "h": 3600.0, "d": 86_400.0, "a": 31_557_600.0}
)
"""Spans of time that people name, in s; a is the Julian year of 365.25 d."""

_SYMBOLS = MappingProxyType(
    {"degC": "\u00b0C", "degF": "\u00b0F", "percent": "%", "um": "\u00b5m", "ratio": "", "dimensionless": "", "1": ""}
)


def symbol(unit: str) -> str:
    """A unit as readers write it."""
    return _SYMBOLS.get(unit, unit)


def duration(seconds: float) -> str:
    """A duration in the largest named span that fits, as ``10 a`` or ``45 min``."""
    if seconds <= 0:
        return "0 s"
    name, span = max(((name, span) for name, span in SPANS.items() if span <= seconds), key=lambda item: item[1], default=("\u00b5s", 1e-6))
    value = seconds / span
    shown = stated(value) if abs(value - round(value, 2)) <= 1e-9 * value else significant(value)
    return f"{shown} {name}"


@dataclass(frozen=True, slots=True)
class Display:
    """Converts internal values (MPa, s, K, ratio) to the user's units.

    Attributes:
        units: as the user wrote them.
    """

    units: DisplayUnits

    @classmethod
    def of(cls, chosen: Mapping[str, Any] | None) -> Display:
        """From the entry ``display`` of ``run.json``; what it doesn't name keeps its default."""
        names = {field.name for field in fields(DisplayUnits)}
        return cls(DisplayUnits(**{key: str(value) for key, value in (chosen or {}).items() if key in names}))

    def times(self, seconds: Sequence[float] | Array) -> Array:
        """Times in the display unit, shape of ``seconds``."""
        return from_internal(seconds, Dimension.TIME, self.units.time)

    def responses(self, values: Sequence[float] | Array, unit: str) -> Array:
        """Responses whose internal ``unit`` is MPa (converted) or a ratio (left as it is), shape of ``values``."""
        array = np.asarray(values, dtype=np.float64)
        if unit != "MPa":
            return array
        return from_internal(array, Dimension.STRESS, self.units.stress)

    def response(self, value: float, unit: str) -> float:
        """One response, see :meth:`responses`."""
        return float(self.responses([value], unit)[0])

    def strain(self, value: float) -> float:
        """One strain in the display unit."""
        return float(from_internal(value, Dimension.RATIO, self.units.strain))

    def response_unit(self, unit: str) -> str:
        """Symbol of the unit in which :meth:`responses` answers; "" for a ratio."""
        return symbol(self.units.stress) if unit == "MPa" else symbol(unit)

    def quantity(self, values: Sequence[float] | Array, unit: str) -> tuple[Array, str]:
        """Values of any internal unit and the symbol they are shown in: stresses and times are converted, other units stay."""
        if unit == "MPa":
            return self.responses(values, unit), self.response_unit(unit)
        if unit == "s":
            return self.times(values), symbol(self.units.time)
        return np.asarray(values, dtype=np.float64), symbol(unit)

    def time(self, seconds: float) -> str:
        """A time in the display unit and, where that reads better, in a named span: ``87 660 h (10 a)``."""
        own = f"{stated(float(self.times([seconds])[0]))} {symbol(self.units.time)}"
        named = duration(seconds)
        return own if own == named else f"{named} ({own})"
