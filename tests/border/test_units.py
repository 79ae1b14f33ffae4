"""Units: exact factors, refusals by dimension, and numbers that come back."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from perdure.border.units import EXAMPLES, INTERNAL, WORDS, Dimension, convert, from_internal, parse_quantity, unit_conversion
from perdure.errors import StudyError

KNOWN = (
    ("1 N/mm2", Dimension.STRESS, 1.0),
    ("1 N/mm²", Dimension.STRESS, 1.0),
    ("1 Mpa", Dimension.STRESS, 1.0),
    ("1 GPa", Dimension.STRESS, 1000.0),
    ("1 kgf/cm2", Dimension.STRESS, 0.0980665),
    ("1 bar", Dimension.STRESS, 0.1),
    ("1 psi", Dimension.STRESS, 6.894757293168361e-3),
    ("1 lbf/in^2", Dimension.STRESS, 6.894757293168361e-3),
    ("1 kgf", Dimension.FORCE, 9.80665),
    ("2 kN", Dimension.FORCE, 2000.0),
    ("1 in", Dimension.LENGTH, 25.4),
    ("3 µm", Dimension.LENGTH, 3e-3),
    ("3 um", Dimension.LENGTH, 3e-3),
    ("1 cm2", Dimension.AREA, 100.0),
    ("1 in**2", Dimension.AREA, 645.16),
    ("1 h", Dimension.TIME, 3600.0),
    ("1 min", Dimension.TIME, 60.0),
    ("1 d", Dimension.TIME, 86_400.0),
    ("1 a", Dimension.TIME, 31_557_600.0),
    ("23 degC", Dimension.TEMPERATURE, 296.15),
    ("23°C", Dimension.TEMPERATURE, 296.15),
    ("23 C", Dimension.TEMPERATURE, 296.15),
    ("73.4 degF", Dimension.TEMPERATURE, 296.15),
    ("296.15 K", Dimension.TEMPERATURE, 296.15),
    ("0.5 K", Dimension.TEMPERATURE_DIFFERENCE, 0.5),
    ("0.5 degC", Dimension.TEMPERATURE_DIFFERENCE, 0.5),
    ("0.9 degF", Dimension.TEMPERATURE_DIFFERENCE, 0.5),
    ("12 %", Dimension.RATIO, 0.12),
    ("12%", Dimension.RATIO, 0.12),
    ("0.12", Dimension.RATIO, 0.12),
    ("1 mm/mm", Dimension.RATIO, 1.0),
    ("250 ppm", Dimension.RATIO, 2.5e-4),
    ("250 µm/m", Dimension.RATIO, 2.5e-4),
    ("3 ‰", Dimension.RATIO, 3e-3),
    ("1.2e-5 mm/N", Dimension.COMPLIANCE, 1.2e-5),
    ("12 µm/kN", Dimension.COMPLIANCE, 1.2e-5),
    ("5 mm N-1", Dimension.COMPLIANCE, 5.0),
)

REFUSED = (
    ("12 %", Dimension.STRESS),
    ("12", Dimension.STRESS),
    ("1 m", Dimension.TIME),
    ("1 a", Dimension.AREA),
    ("1 C", Dimension.FORCE),
    ("1 phr", Dimension.RATIO),
    ("1 pct", Dimension.RATIO),
    ("1 mm/s", Dimension.LENGTH),
    ("1 /mm", Dimension.LENGTH),
    ("1 mm/", Dimension.LENGTH),
    ("1 degC", Dimension.RATIO),
    ("inf s", Dimension.TIME),
    ("nan s", Dimension.TIME),
    ("1e999 s", Dimension.TIME),
    ("1,5 s", Dimension.TIME),
    ("five s", Dimension.TIME),
    ("", Dimension.TIME),
    ("1 __import__", Dimension.TIME),
    ("1 s**99999", Dimension.TIME),
)


@pytest.mark.parametrize(("text", "dimension", "value"), KNOWN)
def test_quantities_have_their_exact_value(text: str, dimension: Dimension, value: float) -> None:
    assert parse_quantity(text, dimension) == pytest.approx(value, rel=1e-14)


@pytest.mark.parametrize(("text", "dimension"), REFUSED)
def test_other_dimensions_and_unknown_words_are_refused(text: str, dimension: Dimension) -> None:
    with pytest.raises(StudyError) as caught:
        parse_quantity(text, dimension, "study.yaml, key x")
    fault = caught.value.problems[0]
    assert fault.where == "study.yaml, key x"
    assert fault.got
    assert EXAMPLES[dimension] in fault.remedy


@pytest.mark.parametrize("dimension", list(Dimension))
def test_every_example_and_the_internal_unit_are_units_of_their_dimension(dimension: Dimension) -> None:
    units = [unit.split(" (")[0] for unit in EXAMPLES[dimension].split(", ")]
    assert all(unit_conversion(unit, dimension).factor > 0 for unit in units)
    identity = unit_conversion(INTERNAL[dimension], dimension)
    assert (identity.factor, identity.offset) == (1.0, 0.0)


@pytest.mark.parametrize("word", list(WORDS))
def test_every_word_measures_something(word: str) -> None:
    fitting = []
    for dimension in Dimension:
        try:
            fitting.append(unit_conversion(word, dimension))
        except StudyError:
            continue
    assert fitting


def test_a_truth_value_is_no_number() -> None:
    with pytest.raises(StudyError):
        parse_quantity(True, Dimension.RATIO)


UNITS = [(unit.split(" (")[0], dimension) for dimension in Dimension for unit in EXAMPLES[dimension].split(", ")]


@given(st.sampled_from(UNITS), st.lists(st.floats(-1e12, 1e12), max_size=5))
def test_numbers_come_back_from_the_internal_unit(unit: tuple[str, Dimension], values: list[float]) -> None:
    name, dimension = unit
    internal = convert(values, name, dimension)
    scale = max(1.0, *(abs(value) for value in values)) if values else 1.0
    # offsets of temperature cost digits near zero, in proportion to the offset
    np.testing.assert_allclose(
        from_internal(internal, dimension, name), values, rtol=1e-14, atol=1e-13 * 500 * (scale < 1e3) + 1e-15 * scale
    )


@given(st.sampled_from(UNITS), st.floats(-1e9, 1e9), st.floats(0, 1e9))
def test_conversion_keeps_order(unit: tuple[str, Dimension], low: float, step: float) -> None:
    name, dimension = unit
    ends = convert([low, low + step], name, dimension)
    assert ends[0] <= ends[1]


def parsed_or_none(text: str, dimension: Dimension) -> float | None:
    try:
        return parse_quantity(text, dimension)
    except StudyError:
        return None


@given(st.text(max_size=30), st.sampled_from(list(Dimension)))
def test_any_text_gives_a_finite_number_or_a_problem(text: str, dimension: Dimension) -> None:
    value = parsed_or_none(text, dimension)
    assert value is None or np.isfinite(value)
