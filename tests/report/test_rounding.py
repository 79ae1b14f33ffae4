"""Values are shown to the digits that their uncertainty supports."""

from __future__ import annotations

import math

import pytest
from hypothesis import given
from hypothesis import strategies as st

from perdure.report.rounding import against_limit, at_places, interval, probability, reserve, rounded, significant, stated


@pytest.mark.parametrize(
    ("value", "uncertainty", "shown"),
    [
        (10.05762, 0.027, "10.058"),  # GUM 7.2.6: 10,057 62 with u = 27 mΩ becomes 10,058
        (100.02147, 0.00035, "100.02147"),  # GUM 7.2.2, its mass standard
        (1.2345, 0.0996, "1.23"),  # an uncertainty that rounds up to the next power of ten keeps two digits: 0.10
        (-0.04, 3.0, "0.0"),
        (12_345.0, 1_200.0, "12300"),
        (1.23456e-7, 4.0e-10, "1.2346 \u00d7 10\u207b\u2077"),
        (-2.5, 1.0, "\u22122.5"),
        (5.0, None, "5.00"),
        (math.inf, 1.0, "\u221e"),
    ],
)
def test_value_takes_its_digits_from_the_uncertainty(value: float, uncertainty: float | None, shown: str) -> None:
    assert rounded(value, uncertainty) == shown


@given(st.floats(1e-3, 1e5), st.floats(1e-3, 0.5))
def test_rounding_moves_a_value_by_at_most_a_twentieth_of_its_uncertainty(value: float, relative: float) -> None:
    uncertainty = value * relative
    text = rounded(value, uncertainty)
    number = float(
        text.replace(" \u00d7 10", "e").translate(
            str.maketrans("\u207b\u2070\u00b9\u00b2\u00b3\u2074\u2075\u2076\u2077\u2078\u2079", "-0123456789")
        )
    )
    assert abs(number - value) <= 0.0501 * uncertainty


def test_interval_ends_share_the_digits_of_the_median() -> None:
    assert interval(4.2137, 4.021, 4.433) == ("4.21", "4.02", "4.43")


def test_skewed_interval_keeps_its_low_end_visible() -> None:
    median, low, _ = interval(0.002, 0.0001, 0.9)
    assert float(low) > 0
    assert float(median) == pytest.approx(0.002, rel=0.05)


@pytest.mark.parametrize(("value", "shown"), [(1.0, "> 0.999"), (0.9995, "> 0.999"), (0.0, "< 0.001"), (0.5, "0.500")])
def test_probability_is_never_shown_as_certain(value: float, shown: str) -> None:
    assert probability(value) == shown


def test_probability_takes_digits_from_its_monte_carlo_error() -> None:
    assert probability(0.93124, 0.0041) == "0.9312"
    assert probability(0.93124, 0.11) == "0.93"


@pytest.mark.parametrize(("ratio", "shown"), [(0.9996, "0.9996"), (1.00037, "1.0004"), (1.52, "1.52"), (1.0, "1.00")])
def test_reserve_factor_shows_its_side_of_one(ratio: float, shown: str) -> None:
    assert reserve(ratio) == shown


def test_bound_and_distance_share_decimals_fine_enough_for_the_distance() -> None:
    assert against_limit(0.25021, 0.00021) == ("0.25021", "0.00021")
    assert against_limit(2.345, 2.095) == ("2.34", "2.10")


@pytest.mark.parametrize(("value", "shown"), [(0.25, "0.25"), (90.0, "90"), (1200.0, "1200"), (0.0, "0"), (2e9, "2 \u00d7 10\u2079")])
def test_entered_numbers_stay_as_entered(value: float, shown: str) -> None:
    assert stated(value) == shown


def test_three_digits_without_an_uncertainty() -> None:
    assert significant(0.0123456) == "0.0123"
    assert at_places(math.nan, 2) == "not a number"
