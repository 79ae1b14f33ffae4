"""Packing of the strain histories of several runs."""

from __future__ import annotations

import numpy as np

from perdure.rheology.history import History, ramp_and_hold
from perdure.rheology.law import Drives


def test_runs_lie_end_to_end_and_can_be_found_again() -> None:
    histories = [ramp_and_hold(0.1, 1.0, 10.0), History(np.array([0.0, 2.0]), np.array([0.0, -0.2]))]
    drives = Drives.pack(histories)
    assert drives.runs == 2
    assert drives.offset.tolist() == [0, 3, 5]
    for run, history in enumerate(histories):
        part = slice(drives.offset[run], drives.offset[run + 1])
        np.testing.assert_array_equal(drives.time[part], history.time)
        np.testing.assert_array_equal(drives.base[part], history.value)
    assert drives.direction.tolist() == [0.0] * 5


def test_second_histories_keep_their_order() -> None:
    histories = [ramp_and_hold(0.1, 1.0, 10.0), ramp_and_hold(0.2, 1.0, 10.0)]
    drives = Drives.pack(histories, [np.array([0.0, 1.0, 2.0]), np.array([0.0, 3.0, 4.0])])
    assert drives.direction.tolist() == [0.0, 1.0, 2.0, 0.0, 3.0, 4.0]
