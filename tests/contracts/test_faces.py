"""The two faces of the model, the PyMC statement and the compiled density, are the same density.

    log p_fast(x) − log p_PyMC(x) = constant,  gradients in natural coordinates equal

for each law and noise term of the registries and each way of pooling. Nothing is integrated out of the compiled face
(population, batch and specimen variables are all in it), so the identity has no conditional term log p(μ, b | θ).
Scatter sds are compared as they are, with PyMC's transforms taken off, so no Jacobian of a transform enters either.
"""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace
from itertools import product
from typing import Any

import arviz as az
import numpy as np
import pymc as pm  # type: ignore[import-untyped]
import pytest
from numpy.typing import NDArray
from pymc.model.transform.conditioning import remove_value_transforms  # type: ignore[import-untyped]
from pytensor.compile.maker import function
from pytensor.gradient import grad
from pytensor.tensor import tensor

from perdure.inference.density import Density
from perdure.inference.model import MODE, READINGS, build_model, point_of
from perdure.inference.noise import NOISE
from perdure.inference.readings import predict_readings
from perdure.inference.response import NaturalOp, respond
from perdure.rheology.laws import LAWS
from perdure.study.study import LawChoice
from tests.inference.invented import Plan, invented, random_state

Array = NDArray[np.float64]

LAYOUTS = {
    "grid": LawChoice(terms_per_decade=1.0),
    "grid without equilibrium": LawChoice(equilibrium=False, terms_per_decade=0.6),
    "free times": LawChoice(free_times=3),
    "free times without equilibrium": LawChoice(equilibrium=False, free_times=3),
}
POOLINGS = {
    "all modes": Plan(),
    "stiffness and strength": Plan(modes=("stiffness", "strength")),
    "strength and pace": Plan(modes=("strength", "pace")),
    "modes out of the law's order": Plan(modes=("pace", "stiffness")),
    "complete pooling": Plan(modes=()),
    "one batch": Plan(batches=1, specimens=3),
    "one specimen a batch": Plan(batches=3, specimens=1),
    "several records a specimen": Plan(records=3, readings=6),
    "normalised and absolute": Plan(records=2, readings=6, normalised="some"),
    "all normalised": Plan(normalised="all"),
    "held-out readings": Plan(held_out=True),
    "no type B uncertainty": Plan(type_b=False, compliance=False),
}
CASES = [
    *(pytest.param(law, noise, "grid", pooling, id=f"{law}-{noise}-{pooling}") for law, noise, pooling in product(LAWS, NOISE, POOLINGS)),
    *(
        pytest.param(law, noise, layout, "normalised and absolute", id=f"{law}-{noise}-{layout}")
        for law, noise, layout in product(LAWS, NOISE, [name for name in LAYOUTS if name != "grid"])
    ),
]


def plan_of(law: str, layout: str, pooling: str) -> Plan:
    return replace(POOLINGS[pooling], law=replace(LAYOUTS[layout], name=law))


def stated(density: Density, noise: str) -> tuple[pm.Model, Callable[[dict[str, Array]], tuple[float, dict[str, Array]]]]:
    """The PyMC model, and its log-density and gradient in natural coordinates."""
    model = build_model(density.structure, noise)
    natural = remove_value_transforms(model)
    variables = natural.value_vars
    value = natural.logp()
    slopes: Any = grad(value, variables)
    compiled = function(variables, [value, *slopes], mode=MODE)

    def evaluate(point: dict[str, Array]) -> tuple[float, dict[str, Array]]:
        out, *slopes = compiled(*(point[variable.name] for variable in variables))
        return float(out), {variable.name: slope for variable, slope in zip(variables, slopes, strict=True)}

    return model, evaluate


@pytest.mark.parametrize(("law", "noise", "layout", "pooling"), CASES)
def test_the_two_faces_are_one_density(law: str, noise: str, layout: str, pooling: str) -> None:
    structure = invented(plan_of(law, layout, pooling)).structure
    density = Density(structure, noise)
    model, evaluate = stated(density, noise)
    differences, size = [], 1.0
    for seed in range(4):
        state = random_state(density, seed)
        fast, slope = density.log_density(state)
        slow, by_variable = evaluate(point_of(model, structure, state))
        expected = point_of(model, structure, slope)
        assert by_variable.keys() == expected.keys()
        for name, found in by_variable.items():
            np.testing.assert_allclose(found, expected[name], rtol=1e-8, atol=1e-12 * np.max(np.abs(found)), err_msg=name)
        # every unknown of the flat vector is compared
        assert sum(found.size for found in by_variable.values()) == density.packing.total
        differences.append(fast - slow)
        size = max(size, abs(fast))
    assert np.ptp(differences) < 1e-12 * size


@pytest.mark.parametrize("noise", NOISE)
def test_every_noise_term_is_stated(noise: str) -> None:
    assert noise in READINGS


@pytest.mark.parametrize(("law", "noise"), list(product(LAWS, NOISE)))
def test_the_compiled_statement_agrees_too(law: str, noise: str) -> None:
    """In PyTensor's own default mode, as a reviewer would compile it without asking for anything: our operations stay in Python."""
    density = Density(invented(plan_of(law, "grid", "all modes")).structure, noise)
    model = remove_value_transforms(build_model(density.structure, noise))
    states = [random_state(density, seed) for seed in (5, 6)]
    with pytest.warns(UserWarning, match="Numba will use object mode to run"):
        evaluate = model.compile_logp()
    stated_values = [float(evaluate(point_of(model, density.structure, state))) for state in states]
    fast = [density.log_density(state)[0] for state in states]
    assert fast[0] - fast[1] == pytest.approx(stated_values[0] - stated_values[1], rel=1e-10)


@pytest.mark.parametrize("law", LAWS)
def test_operation_equals_the_bare_kernel(law: str) -> None:
    made = invented(plan_of(law, "grid", "normalised and absolute"))
    structure, density = made.structure, made.density
    state = random_state(density, 1)
    forward, effects = density.forward(state), density.effects_of(state)
    natural = forward.natural[structure.specimen]
    gain, coefficient = structure.gain.on_records(effects), structure.coefficient.on_records(effects)
    value = respond(structure.law, structure.readings, natural, gain, coefficient).eval(mode=MODE)
    np.testing.assert_array_equal(value, predict_readings(structure.law, structure.readings, natural, gain, coefficient).value)
    shape = state.root[1 : 1 + structure.shape_size]
    mapped: Any = NaturalOp(structure.law)(shape, forward.modes)
    np.testing.assert_array_equal(mapped.eval(mode=MODE), structure.law.natural(shape, forward.modes))


@pytest.mark.parametrize("law", LAWS)
def test_pullback_of_the_operation_equals_finite_differences(law: str) -> None:
    made = invented(plan_of(law, "free times", "normalised and absolute"))
    structure, density = made.structure, made.density
    state = random_state(density, 2)
    shape, modes = state.root[1 : 1 + structure.shape_size], density.modes_of(state)
    rng = np.random.default_rng(0)
    runs = len(structure.records)
    points = {"shape": shape, "modes": modes, "gain": 0.1 * rng.normal(size=runs), "coefficient": rng.normal(size=runs)}
    variables = {name: tensor(name, shape=value.shape) for name, value in points.items()}
    mapped: Any = NaturalOp(structure.law)(variables["shape"], variables["modes"])
    response: Any = respond(structure.law, structure.readings, mapped[structure.specimen], variables["gain"], variables["coefficient"])
    total = (response * rng.normal(size=structure.readings.knot.size)).sum()
    slopes: Any = grad(total, list(variables.values()))
    evaluate = function(list(variables.values()), [total, *slopes], mode=MODE)
    exact = np.concatenate([np.ravel(slope) for slope in evaluate(*points.values())[1:]])

    def moved(flat: Array) -> float:
        edges = np.cumsum([value.size for value in points.values()])[:-1]
        parts = [part.reshape(value.shape) for part, value in zip(np.split(flat, edges), points.values(), strict=True)]
        return float(evaluate(*parts)[0])

    flat, step = np.concatenate([value.ravel() for value in points.values()]), 1e-5
    numeric = [(moved(flat + step * unit) - moved(flat - step * unit)) / (2 * step) for unit in np.eye(flat.size)]
    np.testing.assert_allclose(exact, numeric, rtol=1e-6, atol=1e-8 * np.max(np.abs(exact)))


def test_predictive_and_log_likelihood_come_from_pymc() -> None:
    """Prior predictive, posterior predictive and pointwise log-likelihood of the statement, held against the compiled face."""
    made = invented(Plan(records=2, readings=6, normalised="some"))
    density, structure = made.density, made.structure
    states = [random_state(density, seed, spread=0.1) for seed in range(6)]
    compile_kwargs = {"mode": MODE}
    with build_model(structure) as model:
        prior = pm.sample_prior_predictive(30, random_seed=1, compile_kwargs=compile_kwargs)
        points = [point_of(model, structure, state) for state in states]
        posterior = {name: np.stack([point[name] for point in points])[None] for name in points[0]}
        dims = {name: list(model.named_vars_to_dims[name]) for name in posterior}
        coords = {name: list(values) for name, values in model.coords.items()}
        draws = az.from_dict({"posterior": posterior}, dims=dims, coords=coords)
        pointwise = pm.compute_log_likelihood(
            draws, extend_inferencedata=False, progressbar=False, compile_kwargs=compile_kwargs, model=model
        )
        replicated = pm.sample_posterior_predictive(
            draws, random_seed=1, progressbar=False, compile_kwargs=compile_kwargs, var_names=["readings", "predicted"]
        )

    readings = structure.readings
    predicted = np.stack([density.forward(state).predicted.value for state in states])
    np.testing.assert_allclose(replicated["posterior_predictive"]["predicted"].to_numpy()[0], predicted, rtol=1e-12)
    expected = [
        density.noise.log_likelihood(value, readings.observed, readings.count, readings.instrument, state.log_noise)[0]
        for value, state in zip(predicted, states, strict=True)
    ]
    np.testing.assert_allclose(pointwise["readings"].sum("reading").to_numpy()[0], expected, rtol=1e-10)
    sd = density.noise.standard_deviation(predicted[0], readings.count, readings.instrument, states[0].log_noise)
    scores = (replicated["posterior_predictive"]["readings"].to_numpy()[0, 0] - predicted[0]) / sd
    assert 0.7 < scores.std() < 1.3

    modulus = np.exp(prior["prior"]["population"].sel(coordinate="stiffness").to_numpy())
    assert 2.0 < np.median(modulus) < 10.0
    drawn = prior["prior_predictive"]["readings"]
    assert drawn.dims == ("chain", "draw", "reading")
    assert np.isfinite(drawn.to_numpy()).all()
    names = drawn["reading"].to_numpy()
    assert len(set(names)) == readings.knot.size
    # readings are named after their record, and records stand by specimen
    assert [name.split(",")[0] for name in names] == [structure.records[r] for r in readings.run]
    assert sorted(structure.specimen) == list(structure.specimen)
