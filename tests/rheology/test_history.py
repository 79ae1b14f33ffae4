"""Histories: piecewise linear, from rest, refused in one pass when they are not."""

from __future__ import annotations

import dataclasses

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from perdure.errors import NumericsError
from perdure.rheology.history import History, ramp_and_hold

Array = NDArray[np.float64]

repeatable = settings(deadline=None, derandomize=True)
steps = st.lists(st.tuples(st.floats(1e-6, 1e6), st.floats(-1.0, 1.0)), min_size=1, max_size=12)
times = st.lists(st.floats(-10.0, 1e7), max_size=20)


def history_of(parts: list[tuple[float, float]]) -> History:
    time = np.concatenate([[0.0], np.cumsum([step for step, _ in parts])])
    return History(time, np.array([0.0, *(value for _, value in parts)]))


@repeatable
@given(parts=steps)
def test_at_the_knots_stand_the_given_values(parts: list[tuple[float, float]]) -> None:
    history = history_of(parts)
    np.testing.assert_array_equal(history.at(history.time), history.value)


@repeatable
@given(parts=steps, fraction=st.floats(0.0, 1.0), row=st.integers(0, 11))
def test_between_knots_the_value_runs_linearly(parts: list[tuple[float, float]], fraction: float, row: int) -> None:
    history = history_of(parts)
    left = min(row, history.time.size - 2)
    time = history.time[left] + fraction * (history.time[left + 1] - history.time[left])
    share = (time - history.time[left]) / (history.time[left + 1] - history.time[left])
    expected = (1 - share) * history.value[left] + share * history.value[left + 1]
    assert history.at(np.array([time]))[0] == pytest.approx(expected, abs=1e-12)


@repeatable
@given(parts=steps, later=st.floats(0.0, 1e9))
def test_before_the_start_is_rest_and_after_the_end_a_hold(parts: list[tuple[float, float]], later: float) -> None:
    history = history_of(parts)
    assert history.at(np.array([-1.0, history.duration + later])).tolist() == [0.0, history.value[-1]]


@repeatable
@given(parts=steps, extra=times)
def test_further_knots_leave_the_history_as_it_is(parts: list[tuple[float, float]], extra: list[float]) -> None:
    history = history_of(parts)
    fine = history.with_knots(np.array(extra))
    assert set(fine.time) == set(history.time) | {time for time in extra if time > 0}
    np.testing.assert_array_equal(fine.value, history.at(fine.time))
    np.testing.assert_array_equal(fine.at(history.time), history.value)
    again = fine.with_knots(np.array(extra))
    np.testing.assert_array_equal(again.time, fine.time)
    np.testing.assert_array_equal(again.value, fine.value)


@repeatable
@given(parts=steps)
def test_peak_and_duration(parts: list[tuple[float, float]]) -> None:
    history = history_of(parts)
    values = [0.0, *(value for _, value in parts)]
    assert abs(history.peak) == max(abs(value) for value in values)
    assert history.peak in values
    assert history.duration == history.time[-1]


def test_the_peak_keeps_its_sign() -> None:
    assert History(np.array([0.0, 1.0, 2.0]), np.array([0.0, 0.1, -0.3])).peak == -0.3


def test_whole_numbers_become_floats_and_the_history_is_frozen() -> None:
    history = History(np.array([0, 1]), np.array([0, 2]))
    assert history.time.dtype == history.value.dtype == np.float64
    with pytest.raises(dataclasses.FrozenInstanceError):
        history.time = np.zeros(2)  # type: ignore[misc]


@pytest.mark.parametrize(
    ("time", "value", "where", "got"),
    [
        ([0.0], [0.0], "shapes", "(1,) and (1,)"),
        ([0.0, 1.0], [0.0, 1.0, 2.0], "shapes", "(2,) and (3,)"),
        ([[0.0, 1.0]], [[0.0, 1.0]], "shapes", "(1, 2) and (1, 2)"),
        ([0.0, np.nan], [0.0, 1.0], "values", "NaN"),
        ([0.0, np.inf], [0.0, 1.0], "values", "infinity"),
        ([0.0, 1.0], [0.0, np.nan], "values", "NaN"),
        ([1.0, 2.0], [0.0, 1.0], "first knot", "(1, 0)"),
        ([0.0, 2.0], [0.5, 1.0], "first knot", "(0, 0.5)"),
        ([0.0, 3.0, 2.0, 4.0], [0.0, 1.0, 1.0, 1.0], "time", "2 s after 3 s"),
        ([0.0, 3.0, 3.0], [0.0, 1.0, 2.0], "time", "3 s after 3 s"),
    ],
)
def test_a_bad_history_says_where_what_and_what_to_do(time: list[float], value: list[float], where: str, got: str) -> None:
    with pytest.raises(NumericsError) as caught:
        History(np.array(time), np.array(value))
    (problem,) = caught.value.problems
    assert problem.where == f"history, {where}"
    assert got in problem.got
    assert problem.expected
    assert problem.remedy


def test_two_faults_are_told_in_one_pass() -> None:
    with pytest.raises(NumericsError) as caught:
        History(np.array([1.0, 1.0]), np.array([0.0, 1.0]))
    assert [problem.where for problem in caught.value.problems] == ["history, first knot", "history, time"]


@pytest.mark.parametrize("bad", [np.nan, np.inf])
def test_a_knot_that_is_no_time_is_not_dropped_in_silence(bad: float) -> None:
    history = ramp_and_hold(0.1, 1.0, 10.0)
    with pytest.raises(NumericsError, match="history, values"):
        history.with_knots(np.array([2.0, bad]))


@repeatable
@given(level=st.floats(-1.0, 1.0), ramp=st.floats(1e-3, 1e3), hold=st.floats(1e-2, 1e6))
def test_ramp_and_hold(level: float, ramp: float, hold: float) -> None:
    history = ramp_and_hold(level, ramp, ramp + hold)
    assert history.at(np.array([0.0, ramp / 2, ramp, ramp + hold])).tolist() == pytest.approx([0.0, level / 2, level, level], abs=1e-12)
    assert history.duration == ramp + hold


@pytest.mark.parametrize(("ramp", "duration"), [(0.0, 1.0), (-1.0, 1.0), (1.0, 1.0), (2.0, 1.0), (np.nan, 1.0), (1.0, np.nan)])
def test_an_ideal_step_is_refused(ramp: float, duration: float) -> None:
    with pytest.raises(NumericsError) as caught:
        ramp_and_hold(0.1, ramp, duration)
    (problem,) = caught.value.problems
    assert problem.where == "ramp and hold"
    assert f"{ramp:g} s" in problem.got
    assert problem.expected == "0 < ramp < duration"
    assert problem.remedy
