"""Units at the border: text such as ``"12 %"`` or a column in ``kgf/cm2`` becomes MPa, s, K, mm, N or a ratio.

The only file that imports pint. Unit words come from the table :data:`WORDS`, never from pint's own names, because many
of those mean something else than a test frame's export does (``C`` is coulomb there, ``a`` is an area).
"""

from __future__ import annotations

import math
import re
from collections.abc import Mapping
from dataclasses import dataclass
from enum import StrEnum
from functools import lru_cache
from types import MappingProxyType

import numpy as np
import pint
from numpy.typing import ArrayLike, NDArray

from perdure.errors import StudyError, problem

Array = NDArray[np.float64]


class Dimension(StrEnum):
    """What a number measures. Its internal unit stands in :data:`INTERNAL`."""

    STRESS = "stress"
    FORCE = "force"
    LENGTH = "length"
    AREA = "area"
    TIME = "time"
    TEMPERATURE = "temperature"
    TEMPERATURE_DIFFERENCE = "temperature difference"
    RATIO = "ratio"
    COMPLIANCE = "compliance"


INTERNAL: Mapping[Dimension, str] = MappingProxyType(
    {
        Dimension.STRESS: "MPa",
        Dimension.FORCE: "N",
        Dimension.LENGTH: "mm",
        Dimension.AREA: "mm2",
        Dimension.TIME: "s",
        Dimension.TEMPERATURE: "K",
        Dimension.TEMPERATURE_DIFFERENCE: "K",
        Dimension.RATIO: "1",
        Dimension.COMPLIANCE: "mm/N",
    }
)

EXAMPLES: Mapping[Dimension, str] = MappingProxyType(
    {
        Dimension.STRESS: "MPa, GPa, kPa, N/mm2, psi, kgf/cm2",
        Dimension.FORCE: "N, kN, mN, kgf, lbf",
        Dimension.LENGTH: "mm, µm, m, in",
        Dimension.AREA: "mm2, cm2, in2",
        Dimension.TIME: "s, min, h, d, a (Julian year of 365.25 d)",
        Dimension.TEMPERATURE: "degC, °C, K, degF",
        Dimension.TEMPERATURE_DIFFERENCE: "K, degC, degF",
        Dimension.RATIO: "%, 1, mm/mm, ppm",
        Dimension.COMPLIANCE: "mm/N, µm/N, mm/kN",
    }
)

#: A word as it stands in an export or in study.yaml -> the name that pint knows it by.
WORDS: Mapping[str, str] = MappingProxyType(
    {
        "Pa": "pascal",
        "hPa": "hectopascal",
        "kPa": "kilopascal",
        "KPa": "kilopascal",
        "MPa": "megapascal",
        "Mpa": "megapascal",
        "GPa": "gigapascal",
        "Gpa": "gigapascal",
        "bar": "bar",
        "mbar": "millibar",
        "psi": "psi",
        "ksi": "ksi",
        "N": "newton",
        "mN": "millinewton",
        "cN": "centinewton",
        "daN": "decanewton",
        "kN": "kilonewton",
        "KN": "kilonewton",
        "MN": "meganewton",
        "gf": "gram_force",
        "kgf": "kilogram_force",
        "kp": "kilogram_force",
        "lbf": "pound_force",
        "kip": "kip",
        "m": "meter",
        "cm": "centimeter",
        "mm": "millimeter",
        "um": "micrometer",
        "nm": "nanometer",
        "in": "inch",
        "inch": "inch",
        "mil": "thou",
        "ft": "foot",
        "s": "second",
        "sec": "second",
        "ms": "millisecond",
        "us": "microsecond",
        "min": "minute",
        "h": "hour",
        "hr": "hour",
        "hour": "hour",
        "hours": "hour",
        "d": "day",
        "day": "day",
        "days": "day",
        "week": "week",
        "weeks": "week",
        "a": "julian_year",
        "yr": "julian_year",
        "year": "julian_year",
        "years": "julian_year",
        "K": "kelvin",
        "degC": "degree_Celsius",
        "C": "degree_Celsius",
        "degF": "degree_Fahrenheit",
        "F": "degree_Fahrenheit",
        "%": "percent",
        "percent": "percent",
        "permille": "permille",
        "ppm": "ppm",
        "ue": "ppm",
        "1": "dimensionless",
        "-": "dimensionless",
        "strain": "dimensionless",
    }
)

_SPELLINGS = {
    "µ": "u",
    "μ": "u",
    "°": "deg",
    "º": "deg",
    "℃": "degC",
    "ε": "e",
    "²": "2",
    "⁻": "-",
    "¹": "1",
    "·": "*",
    "⋅": "*",
    "‰": "permille",
}
_FACTOR = re.compile(r"([A-Za-z%]+)(?:(?:\^|\*\*)?([-+]?\d+))?")
# a number and a unit: the pattern must not chew on anything longer
_QUANTITY_LENGTH = 100
_NUMBER = re.compile(r"\s*([-+]?(?:\d+\.?\d*|\.\d+)(?:[eE][-+]?\d+)?)\s*(.*?)\s*")


@dataclass(frozen=True, slots=True)
class Conversion:
    """internal = ``factor`` × value + ``offset``."""

    factor: float
    offset: float = 0.0


def _registry() -> pint.UnitRegistry[float]:
    registry: pint.UnitRegistry[float] = pint.UnitRegistry()
    registry.define("julian_year = 365.25 * day")
    return registry


_REGISTRY = _registry()


def _translate(unit: str, dimension: Dimension) -> str | None:
    """The expression in pint's words, or None where a word is not in :data:`WORDS`."""
    text = unit.strip()
    for found, plain in _SPELLINGS.items():
        text = text.replace(found, plain)
    if text in WORDS:
        parts = [("", WORDS[text])]
    else:
        parts = []
        position, operator = 0, ""
        text = text.replace("(", "").replace(")", "") if text.count("/") == 1 else text
        while position < len(text):
            if text[position] in "*/ ":
                sign = text[position].strip()
                operator = "/" if "/" in (operator, sign) else "*"
                position += 1
                continue
            match = _FACTOR.match(text, position)
            if match is None or match[1] not in WORDS:
                return None
            parts.append((operator or "*", f"{WORDS[match[1]]}**{int(match[2] or 1)}"))
            position, operator = match.end(), ""
        if not parts or operator:
            return None
        if parts[0][0] == "/":
            return None
    expression = parts[0][1] + "".join(f" {sign} {word}" for sign, word in parts[1:])
    if dimension is Dimension.TEMPERATURE_DIFFERENCE:
        expression = expression.replace("degree_", "delta_degree_")
    return expression


@lru_cache(maxsize=512)
def _conversion(unit: str, dimension: Dimension) -> Conversion | None:
    expression = _translate(unit, dimension)
    target = _translate(INTERNAL[dimension], dimension)
    if expression is None or target is None:
        return None
    try:
        zero = float(_REGISTRY.Quantity(0.0, expression).to(target).magnitude)
        one = float(_REGISTRY.Quantity(1.0, expression).to(target).magnitude)
    except (pint.PintError, ValueError):
        return None
    if dimension is Dimension.TEMPERATURE:
        # from the delta unit: the difference of two offset temperatures would lose digits
        delta = expression.replace("degree_", "delta_degree_")
        return Conversion(float(_REGISTRY.Quantity(1.0, delta).to(target).magnitude), zero)
    return Conversion(one)


def unit_conversion(unit: str, dimension: Dimension, where: str = "unit") -> Conversion:
    """Factor and offset from ``unit`` to the internal unit of ``dimension``.

    Raises:
        StudyError: the unit is unknown or measures something else.
    """
    conversion = _conversion(unit.strip(), dimension)
    if conversion is None:
        raise StudyError(
            [
                problem(
                    where,
                    f'the unit "{unit.strip()}"',
                    f"a unit of {dimension.value}",
                    f"Write one such as {EXAMPLES[dimension]}.",
                )
            ]
        )
    return conversion


def convert(values: ArrayLike, unit: str, dimension: Dimension, where: str = "unit") -> Array:
    """``values`` (any shape) from ``unit`` to the internal unit of ``dimension``.

    Raises:
        StudyError: the unit is unknown or measures something else.
    """
    conversion = unit_conversion(unit, dimension, where)
    return np.asarray(values, dtype=np.float64) * conversion.factor + conversion.offset


def from_internal(values: ArrayLike, dimension: Dimension, unit: str) -> Array:
    """``values`` (any shape) from the internal unit of ``dimension`` to ``unit``, for display.

    Raises:
        StudyError: the unit is unknown or measures something else.
    """
    conversion = unit_conversion(unit, dimension)
    return (np.asarray(values, dtype=np.float64) - conversion.offset) / conversion.factor


def parse_quantity(text: str | float, dimension: Dimension, where: str = "quantity") -> float:
    """One number with its unit, as ``"12 %"`` or ``"1.2e-5 mm/N"``, in the internal unit of ``dimension``.

    A number without a unit is taken as a ratio, and refused for anything else.

    Raises:
        StudyError: no number, no unit, or a unit of something else.
    """
    match = _NUMBER.fullmatch(str(text)) if len(str(text)) <= _QUANTITY_LENGTH else None
    if isinstance(text, bool) or match is None or not math.isfinite(float(match[1])):
        raise StudyError([problem(where, f'"{str(text)[:_QUANTITY_LENGTH]}"', _expected(dimension), _remedy(dimension))])
    number, unit = float(match[1]), match[2]
    if unit[:1] in (",", ".", "e", "E") or unit[:1].isdigit():
        raise StudyError([problem(where, f'"{str(text)[:_QUANTITY_LENGTH]}"', _expected(dimension), _remedy(dimension))])
    if not unit:
        if dimension is not Dimension.RATIO:
            raise StudyError([problem(where, f'"{text}" without a unit', _expected(dimension), _remedy(dimension))])
        unit = "1"
    conversion = unit_conversion(unit, dimension, where)
    return number * conversion.factor + conversion.offset


def _expected(dimension: Dimension) -> str:
    return "a number, with or without %" if dimension is Dimension.RATIO else f"a number with a unit of {dimension.value}"


def _remedy(dimension: Dimension) -> str:
    return f"Write a number with a decimal point and a unit such as {EXAMPLES[dimension]}."
