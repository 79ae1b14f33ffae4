"""The change of variables is exactly accounted for, and its gradient is exact."""

from __future__ import annotations

from dataclasses import replace
from functools import cache

import numpy as np
import pytest
from numpy.typing import NDArray

from perdure.inference.start import find_start
from perdure.inference.whitening import COORDINATE_LIMIT, SCORE_LIMIT, WhitenedDensity
from perdure.study.study import LawChoice
from tests.inference.invented import Plan, invented

Array = NDArray[np.float64]

PLANS = {
    "all modes": Plan(),
    "stiffness and strength": Plan(modes=("stiffness", "strength")),
    "strength and pace": Plan(modes=("strength", "pace"), compliance=False),
    "complete pooling": Plan(modes=(), specimens=1),
    "one batch": Plan(batches=1, specimens=2),
    "several records": Plan(records=2, specimens=1, readings=8, normalised="some"),
    "all normalised": Plan(normalised="all", held_out=True),
    "free times": Plan(law=LawChoice(free_times=3), specimens=1),
    "without equilibrium": Plan(law=LawChoice(equilibrium=False, terms_per_decade=0.6), specimens=1),
}
every_plan = pytest.mark.parametrize("name", PLANS)


@cache
def whitened(name: str) -> WhitenedDensity:
    density = invented(PLANS[name]).density
    return WhitenedDensity(density, find_start(density, 1, 1).quadratic)


def points(size: int, count: int) -> Array:
    return 0.8 * np.random.default_rng(3).normal(size=(count, size))


def central(function: WhitenedDensity, u: Array) -> Array:
    """Gradient by central differences of two steps, extrapolated (Richardson): error of fourth order."""

    def difference(step: float) -> Array:
        return np.array([(function(u + step * unit)[0] - function(u - step * unit)[0]) / (2 * step) for unit in np.eye(u.size)])

    return (4 * difference(1e-3) - difference(2e-3)) / 3


@every_plan
def test_gradient_equals_finite_differences(name: str) -> None:
    function = whitened(name)
    for u in points(function.size, 2):
        _, gradient = function(u)
        np.testing.assert_allclose(gradient, central(function, u), rtol=2e-6, atol=2e-7 * max(1.0, float(np.abs(gradient).max())))


@pytest.mark.parametrize("score", [-6.0, -3.0, 3.0])
def test_gradient_is_exact_for_sds_far_from_their_medians(score: float) -> None:
    """Scatter sds from 1e-10 of their prior's scale to three times its scale."""
    function = whitened("all modes")
    packing = function.density.packing
    for first in (packing.gaussian, packing.gaussian + packing.modes):
        u = points(function.size, 1)[0]
        u[first : first + packing.modes] = score
        _, gradient = function(u)
        np.testing.assert_allclose(gradient, central(function, u), rtol=2e-6, atol=1e-6 * max(1.0, float(np.abs(gradient).max())))


def left_over(function: WhitenedDensity) -> list[float]:
    """log p(u) − log p(x(u)) − ln |dx/du| at three points, the Jacobian taken numerically from x(u) alone."""
    packing = function.density.packing

    def place(u: Array) -> Array:
        return packing.join(function.state(u))

    out = []
    for u in points(function.size, 3):
        columns = []
        for unit in np.eye(u.size):
            near, far = ((place(u + step * unit) - place(u - step * unit)) / (2 * step) for step in (5e-4, 1e-3))
            columns.append((4 * near - far) / 3)
        sign, log_det = np.linalg.slogdet(np.stack(columns, axis=1))
        assert sign != 0
        out.append(function(u)[0] - function.density.log_density(function.state(u))[0] - float(log_det))
    return out


@every_plan
def test_density_is_the_models_plus_the_numeric_jacobian(name: str) -> None:
    constants = left_over(whitened(name))
    np.testing.assert_allclose(constants, constants[0], atol=1e-6)


def test_the_target_does_not_depend_on_the_quadratic() -> None:
    """The quadratic decides how round the density looks, never what it is: a wrong one is accounted for just as exactly."""
    function = whitened("all modes")
    q = function.quadratic
    wrong = replace(q, own=2.0 * q.own, linear=0.5 * q.linear, levels=q.levels + 0.3, log_noise=q.log_noise + 0.1)
    constants = left_over(WhitenedDensity(function.density, wrong))
    np.testing.assert_allclose(constants, constants[0], atol=1e-6)


@every_plan
def test_the_optimum_is_the_origin(name: str) -> None:
    """At u = 0 the natural coordinates are those of the optimum for the sds of u: the density has little slope there."""
    function = whitened(name)
    gaussian = function.density.packing.gaussian
    _, gradient = function(np.zeros(function.size))
    assert np.abs(gradient[:gaussian]).max() < 1.5


def test_bad_points_have_no_density_and_raise_nothing() -> None:
    function = whitened("all modes")
    packing = function.density.packing
    scored, lost, far = np.zeros((3, function.size))
    scored[packing.gaussian] = -SCORE_LIMIT
    lost[0] = np.nan
    far[0] = COORDINATE_LIMIT
    for bad in (scored, lost, far):
        value, gradient = function(bad)
        assert value == -np.inf
        assert not gradient.any()
    for bad in (scored, lost, far):
        assert np.isnan(packing.join(function.state(bad))[: packing.gaussian]).all()
    for scale in (3.0, 30.0, 300.0):
        value, gradient = function(scale * np.random.default_rng(0).normal(size=function.size))
        assert value == -np.inf or (np.isfinite(value) and np.isfinite(gradient).all())


def test_a_fork_shares_nothing_that_is_written_to() -> None:
    function = whitened("all modes")
    u, other = points(function.size, 2)
    value, gradient = function(u)
    fork = function.fork()
    assert fork(other)[0] != value
    state = function.state(u)
    fork.state(other)
    again = function(u)
    assert again[0] == value
    np.testing.assert_array_equal(again[1], gradient)
    np.testing.assert_array_equal(function.density.packing.join(state), function.density.packing.join(function.state(u)))


def test_jacobian_alone() -> None:
    """`log_jacobian` is what is added to the density, noise included, sds and constants aside."""
    function = whitened("all modes")
    packing = function.density.packing
    scores = slice(packing.gaussian, packing.gaussian + 2 * packing.modes)
    rest = []
    for u in points(function.size, 3):
        core = function.density.core(function.state(u))[0]
        rest.append(function(u)[0] - core - function.log_jacobian(u) + 0.5 * float(u[scores] @ u[scores]))
    np.testing.assert_allclose(rest, rest[0], atol=1e-8)
