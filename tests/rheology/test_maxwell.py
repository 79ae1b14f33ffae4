"""The generalised Maxwell law: what its springs and dashpots do, and its coordinates."""

from __future__ import annotations

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from perdure.errors import NumericsError
from perdure.rheology.history import History, ramp_and_hold
from perdure.rheology.law import Drives
from perdure.rheology.maxwell import SERIES_BELOW, GeneralisedMaxwell

Array = NDArray[np.float64]

repeatable = settings(deadline=None, derandomize=True, max_examples=40)
segments = st.lists(st.tuples(st.floats(-2, 2), st.integers(-2000, 2000)), min_size=1, max_size=8)


def stored_and_flowing(law: GeneralisedMaxwell, natural: Array, history: History) -> tuple[Array, Array]:
    """Energy in the springs and power lost in the dashpots at each knot, from the stress of every arm.

    The stress of an arm is the derivative to the logarithm of its modulus: σ is linear in the moduli.
    """
    arms = law.respond(natural, Drives.pack([history]), np.zeros(1)).by_natural[:, 1 : 1 + law.terms]
    moduli, times = np.exp(natural[0, 1 : 1 + law.terms]), np.exp(natural[0, 1 + law.terms :])
    stored = 0.5 * np.exp(natural[0, 0]) * history.value**2 + 0.5 * (arms**2 / moduli).sum(axis=1)
    return stored, (arms**2 / (moduli * times)).sum(axis=1)


@repeatable
@given(parts=segments, seed=st.integers(0, 2**32 - 1))
def test_work_is_stored_or_dissipated(parts: list[tuple[float, int]], seed: int) -> None:
    """In every segment: ∫σ dε − (what the springs gained) = ∫ (dashpot power) dt, and that is never below 0."""
    rng = np.random.default_rng(seed)
    law = GeneralisedMaxwell(np.array([0.5, 5.0, 50.0]))
    natural = law.natural(rng.normal(size=3), rng.normal(0.0, 0.3, (1, 3)))
    time = np.concatenate([[0.0], np.cumsum([10.0**power for power, _ in parts])])
    history = History(time, np.array([0.0, *(level * 1e-4 for _, level in parts)]))
    nodes, weights = np.polynomial.legendre.leggauss(6)
    edges = np.concatenate([[0.0], np.geomspace(1e-5, 1.0, 16)])
    fraction = (edges[:-1, None] + np.diff(edges)[:, None] * (nodes + 1.0) / 2.0).ravel()
    weight = (np.diff(edges)[:, None] * weights / 2.0).ravel()
    points = time[:-1, None] + np.diff(time)[:, None] * fraction
    fine = history.with_knots(points.ravel())
    at, ends = np.searchsorted(fine.time, points), np.searchsorted(fine.time, time)

    stored, lost = stored_and_flowing(law, natural, fine)
    work = np.diff(history.value) * (law.simulate(natural, fine)[0][at] @ weight)
    dissipated = work - np.diff(stored[ends])
    scale = np.max(np.abs(work), initial=0.0) + np.max(stored)
    np.testing.assert_allclose(dissipated, np.diff(time) * (lost[at] @ weight), rtol=0.0, atol=1e-6 * scale)
    assert np.all(dissipated >= -1e-7 * scale)


def test_natural_parameters_are_the_formula_of_the_module() -> None:
    times = np.array([0.1, 1.0, 100.0])
    law = GeneralisedMaxwell(times, reference_time=2.0)
    shape, modes = np.array([-0.2, 0.5, 0.1]), np.array([[1.5, 0.4, 0.7]])
    width = np.array([1.0, 1.5, 2.0])  # decades that each term stands for
    left = np.exp(-np.cumsum(width * np.exp(shape + 0.4)))
    arms = np.array([1.0 - left[0], left[0] - left[1], left[1] - left[2]])
    level = left[2] + (arms * np.exp(-2.0 / times)).sum()
    expected = np.concatenate([[np.exp(1.5) * left[2] / level], np.exp(1.5) * arms / level, times * np.exp(0.7)])
    np.testing.assert_allclose(np.exp(law.natural(shape, modes)[0]), expected, rtol=1e-13)


@pytest.mark.parametrize("equilibrium", [True, False])
def test_stiffness_is_the_logarithm_of_the_modulus_at_the_reference_time(*, equilibrium: bool) -> None:
    law = GeneralisedMaxwell(np.array([0.1, 1.0, 10.0]), equilibrium, reference_time=3.0)
    shape = np.linspace(-1.0, 0.5, len(law.shape_names))
    natural = law.natural(shape, np.array([[0.7, 0.3, 0.0]]))
    np.testing.assert_allclose(np.log(law.modulus(natural, np.array([3.0]))), 0.7, rtol=1e-13)


@pytest.mark.parametrize("equilibrium", [True, False])
def test_strength_multiplies_every_loss(*, equilibrium: bool) -> None:
    """What is left after each arm is a product of losses, so its logarithm is multiplied too."""
    law = GeneralisedMaxwell(np.array([0.1, 1.0, 10.0]), equilibrium)
    shape = np.linspace(-2.0, -1.0, len(law.shape_names))
    logarithms = []
    for strength in (0.0, 1.0):
        moduli = np.exp(law.natural(shape, np.array([[0.0, strength, 0.0]]))[0, : law.terms + int(equilibrium)])
        slowest_last = np.roll(moduli, -1) if equilibrium else moduli
        left = 1.0 - np.cumsum(slowest_last)[:-1] / slowest_last.sum()
        logarithms.append(np.log(left))
    np.testing.assert_allclose(logarithms[1], np.e * logarithms[0], rtol=1e-12)


def test_pace_delays_everything_and_touches_no_modulus() -> None:
    law = GeneralisedMaxwell(np.array([0.1, 1.0, 10.0]))
    shape = np.array([0.2, 0.3, 0.4])
    plain, slow = law.natural(shape, np.zeros((1, 3))), law.natural(shape, np.array([[0.0, 0.0, np.log(5.0)]]))
    time = np.geomspace(0.01, 100.0, 9)
    np.testing.assert_allclose(law.modulus(slow, 5.0 * time), law.modulus(plain, time), rtol=1e-13)
    np.testing.assert_array_equal(slow[:, :4], plain[:, :4])


def test_the_grid_at_the_centres_of_free_times_is_the_same_law() -> None:
    times = np.array([0.2, 1.0, 30.0])
    fixed, free = GeneralisedMaxwell(times), GeneralisedMaxwell(times, free=True)
    shape, modes = np.array([-0.1, 0.4, 0.3]), np.array([[1.0, 0.2, -0.3]])
    centres = np.concatenate([[np.log(times[0])], np.log(np.diff(np.log(times)))])
    np.testing.assert_allclose(free.natural(np.concatenate([shape, centres]), modes), fixed.natural(shape, modes), rtol=1e-13)


def test_names() -> None:
    law = GeneralisedMaxwell(np.array([1.0, 10.0]), free=True)
    assert law.natural_names == ("E_inf", "E_1", "E_2", "tau_1", "tau_2")
    assert law.natural_units == ("MPa", "MPa", "MPa", "s", "s")
    assert law.shape_names == ("level_1", "level_2", "ln_tau_1", "ln_gap_1")
    assert GeneralisedMaxwell(np.array([1.0, 10.0]), equilibrium=False).natural_names == ("E_1", "E_2", "tau_1", "tau_2")
    assert GeneralisedMaxwell(np.array([1.0, 10.0]), equilibrium=False).shape_names == ("level_1",)


def test_one_time_without_an_equilibrium_term_is_refused() -> None:
    with pytest.raises(NumericsError, match="two or more"):
        GeneralisedMaxwell(np.array([1.0]), equilibrium=False)


@pytest.mark.parametrize(("side", "precision"), [(-1, 1e-12), (1, 1e-9)], ids=["series", "closed form"])
def test_the_series_for_short_steps_joins_the_closed_form(side: int, precision: float) -> None:
    """Just below and just above the changeover: the ramp's stress (1 − e^{−x})/x and its derivative to ln(clock rate)."""
    law = GeneralisedMaxwell(np.array([1.0, 10.0]), equilibrium=False)
    one_arm = np.array([[0.0, -np.inf, 0.0, np.log(10.0)]])
    x = SERIES_BELOW * (1 + side * 1e-9)
    ramp = History(np.array([0.0, x]), np.array([0.0, 1.0]))
    response = law.respond(one_arm, Drives.pack([ramp]), np.zeros(1))
    slope = -x / 2 + x**2 / 3 - x**3 / 8 + x**4 / 30 - x**5 / 144
    np.testing.assert_allclose([response.stress[-1], response.by_clock[-1]], [-np.expm1(-x) / x, slope], rtol=precision)


def test_relaxed_arms_come_to_rest_instead_of_creeping_through_subnormal_numbers() -> None:
    law = GeneralisedMaxwell(np.array([1e-3, 1e-2]))
    hold = ramp_and_hold(0.1, 1e-3, 100.0).with_knots(np.arange(1.0, 200_000.0) * 3e-4)
    natural = law.natural(np.zeros(2), np.zeros((1, 3)))
    drives = Drives.pack([hold], [hold.value])
    response = law.respond(natural, drives, np.zeros(1))
    late = np.flatnonzero(hold.time > 10.0)
    assert late.size > 1000
    for values in (response.by_natural[late, 1:], response.by_clock[late]):
        assert not values.any()
    assert response.stress[late] == pytest.approx(0.1 * np.exp(natural[0, 0]), rel=1e-13)


@pytest.mark.parametrize("times", [[], [0.0, 1.0], [-1.0], [1.0, 1.0], [2.0, 1.0], [1.0, np.inf], [np.nan, 1.0], [[1.0, 2.0]]])
def test_bad_relaxation_times_are_refused(times: list[float]) -> None:
    with pytest.raises(NumericsError) as caught:
        GeneralisedMaxwell(np.array(times))
    (problem,) = caught.value.problems
    assert problem.where == "relaxation times"
    assert problem.expected == "positive, increasing, finite"


@pytest.mark.parametrize("reference", [-1.0, np.nan, np.inf])
def test_a_bad_reference_time_is_refused(reference: float) -> None:
    with pytest.raises(NumericsError, match="reference time"):
        GeneralisedMaxwell(np.array([1.0]), reference_time=reference)
