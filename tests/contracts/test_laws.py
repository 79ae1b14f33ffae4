"""What every law of the registry promises, whatever it is made of: one line in LAWS and these tests hold it to it.

Each law is laid out four times: with and without an equilibrium term, on given and on free relaxation times. What only
a linear law promises is asked of the layouts that declare themselves linear.
"""

from __future__ import annotations

from dataclasses import dataclass
from itertools import product

import numpy as np
import pytest
from hypothesis import given, settings
from hypothesis import strategies as st
from numpy.typing import NDArray

from perdure.errors import NumericsError
from perdure.rheology.history import History, ramp_and_hold
from perdure.rheology.law import Drives, Law, Response
from perdure.rheology.laws import LAWS

Array = NDArray[np.float64]

TIMES = np.array([0.05, 0.6, 4.0, 90.0])
REFERENCE_TIME = 3.0
STEP = 1e-5  # of central differences in coordinates that are logarithms: truncation and rounding both about 1e-11


@dataclass(frozen=True)
class Layout:
    """One law as it is asked for: key in LAWS, with equilibrium term, with free times."""

    key: str
    equilibrium: bool
    free: bool

    @property
    def law(self) -> Law:
        """The law laid out on TIMES."""
        return LAWS[self.key](TIMES, self.equilibrium, REFERENCE_TIME, self.free)

    def __str__(self) -> str:
        return f"{self.key}-{'equilibrium' if self.equilibrium else 'fluid'}-{'free' if self.free else 'grid'}"


LAYOUTS = [Layout(key, equilibrium, free) for key, equilibrium, free in product(LAWS, (True, False), (True, False))]
LINEAR = [layout for layout in LAYOUTS if layout.law.linear]
FREE = [layout for layout in LAYOUTS if layout.free]

every_law = pytest.mark.parametrize("layout", LAYOUTS, ids=str)
every_linear_law = pytest.mark.parametrize("layout", LINEAR, ids=str)
repeatable = settings(deadline=None, derandomize=True, max_examples=40)

# (log10 of a duration in s, strain at its end): loading, holds, reversals, over five decades of speed
segments = st.lists(st.tuples(st.floats(-2, 3), st.integers(-2000, 2000)), min_size=1, max_size=8)
seeds = st.integers(0, 2**32 - 1)


def history_of(parts: list[tuple[float, int]]) -> History:
    time = np.concatenate([[0.0], np.cumsum([10.0**power for power, _ in parts])])
    return History(time, np.concatenate([[0.0], [level * 1e-4 for _, level in parts]]))


def coordinates(law: Law, seed: int, rows: int = 1) -> tuple[Array, Array]:
    rng = np.random.default_rng(seed)
    return rng.normal(0.0, 0.5, len(law.shape_names)), rng.normal(0.0, 0.4, (rows, len(law.mode_names)))


def parameters(law: Law, seed: int, rows: int = 1) -> Array:
    return law.natural(*coordinates(law, seed, rows))


def wander(seed: int, knots: int = 14) -> History:
    """A random history whose steps run from much faster to much slower than the relaxation times."""
    rng = np.random.default_rng(seed)
    return History(
        np.concatenate([[0.0], np.cumsum(10.0 ** rng.uniform(-2.0, 2.0, knots))]),
        np.concatenate([[0.0], rng.uniform(-0.1, 0.1, knots)]),
    )


def alone(law: Law, natural: Array, history: History) -> Response:
    return law.respond(natural, Drives.pack([history]), np.zeros(1))


def agree(exact: Array, differences: Array, peak: float) -> bool:
    """Derivatives agree to 1e-6 of their own peak; the second term is the rounding of the difference quotient."""
    return bool(np.max(np.abs(exact - differences)) <= 1e-6 * np.max(np.abs(exact)) + 1e-9 * peak)


# --- names and shapes ---------------------------------------------------------------------------------------------


@every_law
def test_names_units_and_shapes_agree(layout: Layout) -> None:
    law = layout.law
    shape, modes = coordinates(law, 1, rows=3)
    natural = law.natural(shape, modes)
    assert law.name == layout.key
    assert natural.shape == (3, len(law.natural_names))
    assert len(law.natural_units) == len(law.natural_names)
    assert law.mode_names[0] == "stiffness"
    for names in (law.natural_names, law.shape_names, law.mode_names):
        assert len(set(names)) == len(names) > 0
    by_shape, by_modes = law.natural_jacobian(shape, modes)
    assert by_shape.shape == (3, len(law.natural_names), len(law.shape_names))
    assert by_modes.shape == (3, len(law.natural_names), len(law.mode_names))
    history = wander(1)
    response = law.respond(natural, Drives.pack([history] * 3), np.zeros(3))
    assert response.by_natural.shape == (3 * history.time.size, len(law.natural_names))
    assert law.simulate(natural, history).shape == (3, history.time.size)
    assert law.modulus(natural, TIMES).shape == (3, TIMES.size)


@every_law
def test_one_shape_for_all_rows_equals_that_shape_in_every_row(layout: Layout) -> None:
    shape, modes = coordinates(layout.law, 2, rows=3)
    np.testing.assert_array_equal(layout.law.natural(shape, modes), layout.law.natural(np.tile(shape, (3, 1)), modes))


@every_law
def test_arrays_that_do_not_fit_are_refused(layout: Layout) -> None:
    law, history = layout.law, wander(3)
    natural = parameters(law, 3, rows=2)
    with pytest.raises(NumericsError, match="natural parameters"):
        law.respond(natural[:1], Drives.pack([history, history]), np.zeros(2))
    with pytest.raises(NumericsError, match="coefficients"):
        law.respond(natural, Drives.pack([history, history]), np.zeros(1))
    with pytest.raises(NumericsError, match="natural parameters"):
        law.simulate(natural[:, :-1], history)


@every_law
def test_a_bad_parameter_stays_visible(layout: Layout) -> None:
    law, history = layout.law, wander(4)
    for k in range(len(law.natural_names)):
        natural = parameters(law, 4)
        natural[0, k] = np.nan
        assert np.isnan(alone(law, natural, history).stress[-1]), law.natural_names[k]
        assert np.isnan(law.simulate(natural, history)[0, -1]), law.natural_names[k]


# --- physics ------------------------------------------------------------------------------------------------------


@every_law
def test_zero_strain_gives_zero_stress(layout: Layout) -> None:
    law = layout.law
    rest = History(np.array([0.0, 1e-3, 1.0, 1e4]), np.zeros(4))
    natural = parameters(law, 5)
    assert not alone(law, natural, rest).stress.any()
    assert not law.simulate(natural, rest).any()


@every_law
@repeatable
@given(parts=segments, seed=seeds, cut=st.integers(1, 8), other=segments)
def test_what_comes_later_changes_nothing_before(
    layout: Layout, parts: list[tuple[float, int]], seed: int, cut: int, other: list[tuple[float, int]]
) -> None:
    law = layout.law
    natural = parameters(law, seed)
    kept = parts[:cut]
    first, second = history_of(parts), history_of(kept + other)
    shared = len(kept) + 1
    for one, two in (
        (alone(law, natural, first), alone(law, natural, second)),
        (alone(law, natural, second), alone(law, natural, history_of(kept))),
    ):
        np.testing.assert_array_equal(one.stress[:shared], two.stress[:shared])
        np.testing.assert_array_equal(one.by_natural[:shared], two.by_natural[:shared])


@every_law
@repeatable
@given(parts=segments, seed=seeds, pause=st.floats(0.1, 100.0))
def test_a_pause_at_rest_shifts_the_response(layout: Layout, parts: list[tuple[float, int]], seed: int, pause: float) -> None:
    law, history = layout.law, history_of(parts)
    natural = parameters(law, seed)
    later = History(np.concatenate([[0.0], history.time + pause]), np.concatenate([[0.0], history.value]))
    now, then = law.simulate(natural, history)[0], law.simulate(natural, later)[0]
    # the shifted knots are rounded to 1e-11 s
    np.testing.assert_allclose(then[1:], now, rtol=0.0, atol=1e-8 * np.max(np.abs(now), initial=1e-30))


NODES, WEIGHTS = np.polynomial.legendre.leggauss(6)


def work_of(law: Law, natural: Array, history: History) -> tuple[Array, Array]:
    """∫ σ dε and ∫ |σ dε| up to each knot: Gauss rules on pieces that crowd towards the start of every segment."""
    edges = np.concatenate([[0.0], np.geomspace(1e-6, 1.0, 19)])
    fraction = (edges[:-1, None] + np.diff(edges)[:, None] * (NODES + 1.0) / 2.0).ravel()
    weight = (np.diff(edges)[:, None] * WEIGHTS / 2.0).ravel()
    points = history.time[:-1, None] + np.diff(history.time)[:, None] * fraction
    fine = history.with_knots(points.ravel())
    stress = law.simulate(natural, fine)[0][np.searchsorted(fine.time, points)]
    strain = np.diff(history.value)
    return np.cumsum(strain * (stress @ weight)), np.cumsum(np.abs(strain) * (np.abs(stress) @ weight))


@every_law
@repeatable
@given(parts=segments, seed=seeds)
def test_no_history_yields_more_work_than_was_put_in(layout: Layout, parts: list[tuple[float, int]], seed: int) -> None:
    """From rest, work done on the material less what it can still give back is what was dissipated: never below 0."""
    law = layout.law
    work, turnover = work_of(law, parameters(law, seed), history_of(parts))
    assert np.all(work >= -1e-7 * turnover)


@every_law
@repeatable
@given(parts=segments, seed=seeds, last=st.floats(-2, 3))
def test_a_closed_strain_cycle_dissipates(layout: Layout, parts: list[tuple[float, int]], seed: int, last: float) -> None:
    law = layout.law
    work, turnover = work_of(law, parameters(law, seed), history_of([*parts, (last, 0)]))
    assert work[-1] >= -1e-7 * turnover[-1]


@every_law
def test_a_triangle_at_the_pace_of_an_arm_dissipates_a_good_part(layout: Layout) -> None:
    """The two tests above would pass on an elastic spring: here dissipation is not only allowed but due."""
    law = layout.law
    work, turnover = work_of(law, parameters(law, 6), history_of([(0.0, 1000), (0.0, 0)]))
    assert work[-1] > 0.01 * turnover[-1]


@every_linear_law
@repeatable
@given(seed=seeds, factor=st.floats(-50.0, 50.0))
def test_superposition_and_scaling(layout: Layout, seed: int, factor: float) -> None:
    law, first = layout.law, wander(seed)
    natural = parameters(law, seed)
    second = np.concatenate([[0.0], np.random.default_rng(seed + 1).uniform(-0.1, 0.1, first.time.size - 1)])
    a = law.simulate(natural, first)
    b = law.simulate(natural, History(first.time, second))
    both = law.simulate(natural, History(first.time, first.value + factor * second))
    np.testing.assert_allclose(both, a + factor * b, rtol=0.0, atol=1e-12 * (np.max(np.abs(a)) + abs(factor) * np.max(np.abs(b))))


@every_linear_law
@repeatable
@given(parts=segments, seed=seeds, fractions=st.lists(st.floats(0.001, 0.999), min_size=1, max_size=40))
def test_further_knots_change_nothing(layout: Layout, parts: list[tuple[float, int]], seed: int, fractions: list[float]) -> None:
    law, history = layout.law, history_of(parts)
    natural = parameters(law, seed)
    fine = history.with_knots(np.array(fractions) * history.duration)
    at = np.searchsorted(fine.time, history.time)
    coarse, refined = alone(law, natural, history), alone(law, natural, fine)
    np.testing.assert_allclose(refined.stress[at], coarse.stress, rtol=0.0, atol=1e-12 * np.max(np.abs(refined.stress), initial=1e-30))
    peak = np.max(np.abs(refined.by_natural), initial=1e-30)
    np.testing.assert_allclose(refined.by_natural[at], coarse.by_natural, rtol=0.0, atol=1e-10 * peak)


@every_linear_law
def test_the_modulus_is_the_limit_of_a_fast_ramp(layout: Layout) -> None:
    law = layout.law
    natural = parameters(law, 7, rows=3)
    time = np.geomspace(1e-3, 1e3, 25)
    ramp = 1e-10
    step = ramp_and_hold(0.02, ramp, 2e3).with_knots(time + ramp)
    stress = law.simulate(natural, step)[:, np.searchsorted(step.time, time + ramp)]
    np.testing.assert_allclose(stress / 0.02, law.modulus(natural, time), rtol=1e-8)


@every_linear_law
@repeatable
@given(seed=seeds, stiffness=st.floats(-3.0, 8.0), strength=st.floats(-2.0, 2.0))
def test_stiffness_is_the_modulus_at_the_reference_time(layout: Layout, seed: int, stiffness: float, strength: float) -> None:
    """Whatever the spectrum, and wherever free times have moved to; at pace 0."""
    law = layout.law
    shape, modes = coordinates(law, seed)
    modes[:] = 0.0
    modes[0, law.mode_names.index("stiffness")] = stiffness
    modes[0, law.mode_names.index("strength")] = strength
    modulus = law.modulus(law.natural(shape, modes), np.array([REFERENCE_TIME]))[0, 0]
    assert np.log(modulus) == pytest.approx(stiffness, abs=1e-12)


@pytest.mark.parametrize("layout", FREE, ids=str)
@repeatable
@given(data=st.data())
def test_free_times_stay_ordered(layout: Layout, data: st.DataObject) -> None:
    law = layout.law
    values = st.floats(-5.0, 5.0)
    count, modes = len(law.shape_names), len(law.mode_names)
    shape = np.array(data.draw(st.lists(values, min_size=count, max_size=count)))
    mode = np.array([data.draw(st.lists(values, min_size=modes, max_size=modes))])
    at = [k for k, name in enumerate(law.natural_names) if name.startswith("tau_")]
    assert len(at) == TIMES.size
    assert np.all(np.diff(law.natural(shape, mode)[0, at]) > 0)


# --- the two kernels ----------------------------------------------------------------------------------------------


@every_law
def test_prediction_and_fitting_share_one_response(layout: Layout) -> None:
    law, history = layout.law, wander(8)
    natural = parameters(law, 8, rows=3)
    fitted = law.respond(natural, Drives.pack([history] * 3), np.zeros(3)).stress.reshape(3, -1)
    np.testing.assert_allclose(law.simulate(natural, history), fitted, rtol=0.0, atol=1e-13 * np.max(np.abs(fitted)))


@every_law
def test_runs_of_a_batch_do_not_know_each_other(layout: Layout) -> None:
    law = layout.law
    histories = [wander(9, 5), wander(10, 17), wander(11, 1)]
    directions = [np.sin(history.time) for history in histories]
    natural, coefficient = parameters(law, 9, rows=3), np.array([0.2, -0.1, 0.05])
    together = law.respond(natural, Drives.pack(histories, directions), coefficient)
    parts = [
        law.respond(natural[r : r + 1], Drives.pack([histories[r]], [directions[r]]), coefficient[r : r + 1]) for r in range(len(histories))
    ]
    for field in ("stress", "by_natural", "by_coefficient", "by_clock"):
        np.testing.assert_array_equal(getattr(together, field), np.concatenate([getattr(part, field) for part in parts]))


@every_law
def test_the_second_strain_history_is_added_with_its_coefficient(layout: Layout) -> None:
    law, history = layout.law, wander(12)
    extra = np.concatenate([[0.0], np.random.default_rng(12).uniform(-0.05, 0.05, history.time.size - 1)])
    natural = parameters(law, 12)
    stress = law.respond(natural, Drives.pack([history], [extra]), np.array([0.7])).stress
    whole = law.simulate(natural, History(history.time, history.value + 0.7 * extra))[0]
    np.testing.assert_allclose(stress, whole, rtol=0.0, atol=1e-13 * np.max(np.abs(whole)))


# --- derivatives --------------------------------------------------------------------------------------------------


@every_law
@pytest.mark.parametrize("seed", [13, 14, 15])
def test_derivatives_of_the_response(layout: Layout, seed: int) -> None:
    law = layout.law
    histories = [wander(seed, 12), wander(seed + 50, 9)]
    directions = [np.concatenate([[0.0], np.cos(history.time[1:])]) for history in histories]
    drives = Drives.pack(histories, directions)
    natural, coefficient = parameters(law, seed, rows=2), np.array([0.03, -0.05])
    exact = law.respond(natural, drives, coefficient)
    peak = float(np.max(np.abs(exact.stress)))

    for k, name in enumerate(law.natural_names):
        step = np.zeros_like(natural)
        step[:, k] = STEP
        up, down = (law.respond(natural + sign * step, drives, coefficient).stress for sign in (1.0, -1.0))
        assert agree(exact.by_natural[:, k], (up - down) / (2 * STEP), peak), name

    up, down = (law.respond(natural, drives, coefficient + sign * STEP).stress for sign in (1.0, -1.0))
    assert agree(exact.by_coefficient, (up - down) / (2 * STEP), peak)

    up, down = (
        law.respond(natural, Drives(drives.offset, drives.time * np.exp(sign * STEP), drives.base, drives.direction), coefficient).stress
        for sign in (1.0, -1.0)
    )
    assert agree(exact.by_clock, (up - down) / (2 * STEP), peak)
    assert np.max(np.abs(exact.by_clock)) > 1e-3 * peak  # else the comparison above could not fail


@every_law
@pytest.mark.parametrize("seed", [16, 17, 18])
def test_derivatives_of_the_natural_parameters(layout: Layout, seed: int) -> None:
    law = layout.law
    shape, modes = coordinates(law, seed, rows=2)
    by_shape, by_modes = law.natural_jacobian(shape, modes)
    for c in range(shape.size):
        step = STEP * np.eye(shape.size)[c]
        differences = (law.natural(shape + step, modes) - law.natural(shape - step, modes)) / (2 * STEP)
        np.testing.assert_allclose(by_shape[:, :, c], differences, rtol=0.0, atol=1e-8, err_msg=law.shape_names[c])
    for m in range(modes.shape[1]):
        step = STEP * np.eye(modes.shape[1])[m]
        differences = (law.natural(shape, modes + step) - law.natural(shape, modes - step)) / (2 * STEP)
        np.testing.assert_allclose(by_modes[:, :, m], differences, rtol=0.0, atol=1e-8, err_msg=law.mode_names[m])


@every_law
@pytest.mark.parametrize("seed", [19, 20])
def test_the_pullback_is_the_contraction_with_the_jacobian(layout: Layout, seed: int) -> None:
    law = layout.law
    shape, modes = coordinates(law, seed, rows=4)
    cotangent = np.random.default_rng(seed).normal(size=(4, len(law.natural_names)))
    by_shape, by_modes = law.natural_jacobian(shape, modes)
    to_shape, to_modes = law.natural_pullback(shape, modes, cotangent)
    np.testing.assert_allclose(to_shape, np.einsum("sk,skc->c", cotangent, by_shape), rtol=1e-12, atol=1e-12)
    np.testing.assert_allclose(to_modes, np.einsum("sk,skm->sm", cotangent, by_modes), rtol=1e-12, atol=1e-12)
