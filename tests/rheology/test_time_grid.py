"""The registry of laws and the grid of relaxation times."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st

from perdure.rheology.laws import LAWS, time_grid


@settings(deadline=None, derandomize=True)
@given(shortest=st.floats(-6.0, 3.0), decades=st.floats(0.0, 12.0), density=st.sampled_from([0.5, 1.0, 1.5, 2.0, 3.0]))
def test_the_grid_covers_its_range_with_the_spacing_asked_for(shortest: float, decades: float, density: float) -> None:
    first, last = 10.0**shortest, 10.0 ** (shortest + decades)
    grid = time_grid(first, last, density)
    assert grid[0] == first
    assert grid[-1] >= last * (1 - 1e-12)
    np.testing.assert_allclose(np.diff(np.log10(grid)), 1.0 / density, rtol=1e-10)
    # no term more than the range needs
    assert grid.size == 1 or grid[-2] < last * (1 + 1e-12)


@pytest.mark.parametrize(("density", "terms"), [(1.0, 4), (1.5, 6), (2.0, 7)])
def test_three_decades(density: float, terms: int) -> None:
    assert time_grid(0.1, 100.0, density).size == terms


def test_the_registry_cannot_be_changed_from_outside() -> None:
    with pytest.raises(TypeError):
        LAWS["mine"] = LAWS["maxwell"]  # type: ignore[index]
