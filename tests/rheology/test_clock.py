"""Clocks: reduced time of a mechanism."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from perdure.rheology.clock import CLOCKS, Clock, reduced_time

Array = NDArray[np.float64]

every_clock = pytest.mark.parametrize("clock", CLOCKS.values(), ids=list(CLOCKS))


class TenfoldEach10K:
    """A stand-in whose integral over a linear temperature is known: a falls by ten for every 10 K above 300 K."""

    name = "tenfold"

    def log_shift(self, temperature: Array) -> Array:
        """ln a(T)."""
        return np.asarray(-np.log(10.0) * (temperature - 300.0) / 10.0, dtype=np.float64)


@pytest.mark.parametrize(("key", "clock"), CLOCKS.items(), ids=list(CLOCKS))
def test_every_clock_has_its_key_and_keeps_shapes(key: str, clock: Clock) -> None:
    assert clock.name == key
    for shape in ((), (4,), (2, 3)):
        shift = np.asarray(clock.log_shift(np.full(shape, 296.15)))
        assert shift.shape == shape
        assert np.isfinite(shift).all()


@every_clock
def test_reduced_time_starts_at_0_and_never_runs_backwards(clock: Clock) -> None:
    time = np.array([0.0, 1e-3, 1.0, 50.0, 1e7])
    reduced = reduced_time(clock, time, np.array([296.0, 300.0, 290.0, 310.0, 296.0]))
    assert reduced[0] == 0.0
    assert np.all(np.diff(reduced) > 0)


@settings(deadline=None, derandomize=True)
@given(steps=st.lists(st.floats(1e-6, 1e6), min_size=1, max_size=30), temperature=st.floats(200.0, 500.0))
def test_without_a_shift_reduced_time_is_time(steps: list[float], temperature: float) -> None:
    time = np.concatenate([[0.0], np.cumsum(steps)])
    np.testing.assert_allclose(reduced_time(CLOCKS["isothermal"], time, np.full(time.size, temperature)), time, rtol=1e-14)


@pytest.mark.parametrize(("temperature", "factor"), [(300.0, 1.0), (310.0, 10.0), (280.0, 0.01)])
def test_at_one_temperature_time_runs_faster_by_the_shift_factor(temperature: float, factor: float) -> None:
    time = np.array([0.0, 3.0, 4.0, 100.0])
    np.testing.assert_allclose(reduced_time(TenfoldEach10K(), time, np.full(4, temperature)), factor * time, rtol=1e-13)


def test_between_temperatures_the_rule_converges_at_second_order() -> None:
    """300 K to 310 K within 1 s: ∫ 10^t dt = 9 / ln 10."""
    errors = []
    for count in (20, 40):
        time = np.linspace(0.0, 1.0, count + 1)
        errors.append(reduced_time(TenfoldEach10K(), time, 300.0 + 10.0 * time)[-1] - 9.0 / np.log(10.0))
    assert errors[1] == pytest.approx(0.0, abs=2e-3)
    assert np.log2(errors[0] / errors[1]) == pytest.approx(2.0, abs=0.05)
