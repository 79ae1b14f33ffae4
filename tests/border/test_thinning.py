"""Thinning: means are means, in log time a straight response is met exactly, and nothing moving is averaged."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given
from hypothesis import strategies as st

from perdure.border.thinning import (
    BINS_PER_DECADE,
    HOLD_AT_LEAST,
    MOVING_AT_MOST,
    essential_knots,
    find_hold,
    mean_times,
    means,
    thin,
)


def ramp_and_hold(readings: int, ramp: float = 10.0, step: float = 0.5) -> tuple[np.ndarray, np.ndarray]:
    time = step * np.arange(readings)
    return time, np.minimum(time, ramp) / ramp * 1.5


def test_the_end_of_the_ramp_is_found() -> None:
    time, drive = ramp_and_hold(4000)
    assert time[find_hold(drive)] == 10.0


def test_noise_of_the_drive_does_not_hide_a_hold() -> None:
    time, drive = ramp_and_hold(4000)
    noisy = drive + np.random.default_rng(1).normal(0, 0.002, drive.size)
    assert time[find_hold(noisy)] == pytest.approx(10.0, abs=0.5)


@pytest.mark.parametrize(
    "drive",
    [
        np.linspace(0, 1, 500),
        np.sin(np.linspace(0, 40, 500)),
        np.zeros(500),
        np.concatenate([np.linspace(0, 1, 250), np.linspace(1, 0, 250)]),
        np.array([1.0]),
    ],
    ids=["ramp", "cycles", "rest", "triangle", "single"],
)
def test_a_record_without_a_final_hold_has_none(drive: np.ndarray) -> None:
    assert find_hold(drive) == drive.size


def test_a_second_step_is_the_hold() -> None:
    drive = np.concatenate([np.linspace(0, 1, 10), np.ones(100), np.linspace(1, 2, 10), np.full(300, 2.0)])
    assert find_hold(drive) == 119


def test_a_straight_line_in_log_time_is_met_exactly() -> None:
    time, _ = ramp_and_hold(4000)
    held = time > 10
    response = np.where(held, 5 - 0.4 * np.log(np.where(held, time - 10, 1)), 0.5 * time)
    groups = thin(time, 10.0, average=True)
    thinned, average = mean_times(time, groups), means(response, groups)
    after = thinned > 10
    np.testing.assert_allclose(average[after], 5 - 0.4 * np.log(thinned[after] - 10), rtol=1e-12)
    assert groups.averaged > 3000
    assert (np.diff(thinned) > 0).all()


def test_every_reading_of_a_hold_is_in_exactly_one_group() -> None:
    time, _ = ramp_and_hold(4000)
    groups = thin(time, 10.0, average=True)
    assert np.concatenate(groups.members).tolist() == list(range(4000))
    assert groups.dropped == 0
    for group in groups.members:
        if group.size > 1:
            since = time[group] - 10
            assert since[0] > 0
            assert np.log10(since[-1] / since[0]) < 1 / BINS_PER_DECADE


def test_short_holds_and_moving_parts_are_not_averaged() -> None:
    time, _ = ramp_and_hold(20 + HOLD_AT_LEAST)
    assert all(group.size == 1 for group in thin(time, time[19], average=True).members)
    assert all(group.size == 1 for group in thin(np.arange(150.0), np.inf, average=True).members)
    assert all(group.size == 1 for group in thin(np.arange(150.0), 10.0, average=False).members)


def test_moving_parts_are_reduced_to_their_limit_with_both_ends() -> None:
    time = np.arange(5000.0)
    groups = thin(time, np.inf, average=True)
    assert len(groups.members) == MOVING_AT_MOST
    assert groups.dropped == 5000 - MOVING_AT_MOST
    assert (groups.members[0][0], groups.members[-1][0]) == (0, 4999)


def test_readings_before_and_after_the_split_are_kept_apart() -> None:
    time, _ = ramp_and_hold(4000)
    split = 1234.3
    groups = thin(time, 10.0, average=True, split=split)
    assert all((time[group] > split).all() or (time[group] <= split).all() for group in groups.members)
    thinned = mean_times(time, groups)
    assert [bool(moment > split) for moment in thinned] == [bool(time[group[0]] > split) for group in groups.members]


@given(st.lists(st.floats(-1, 1), min_size=2, max_size=60), st.floats(1e-3, 0.5))
def test_essential_knots_keep_the_curve_within_the_tolerance(values: list[float], tolerance: float) -> None:
    value = np.array(values)
    time = np.arange(value.size, dtype=np.float64)
    kept = essential_knots(time, value, tolerance)
    assert (kept[0], kept[-1]) == (0, value.size - 1)
    assert np.abs(np.interp(time, time[kept], value[kept]) - value).max() <= tolerance + 1e-12


def test_essential_knots_of_a_triangle_are_its_corners() -> None:
    time = np.arange(201.0)
    assert essential_knots(time, np.minimum(time, 200 - time), 1e-9).tolist() == [0, 100, 200]
