"""The block elimination against a dense one with sixty digits: the same Gaussian, whatever the scatter sds."""

from __future__ import annotations

from dataclasses import dataclass
from decimal import Decimal, localcontext
from itertools import product
from typing import Any

import numpy as np
import pytest
from numpy.typing import NDArray

from perdure.inference import arrow
from perdure.inference.start import find_start
from perdure.inference.whitening import Quadratic, Workspace
from tests.inference.invented import Plan, invented

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True)
class Tree:
    """A hierarchy with a quadratic for each specimen."""

    quadratic: Quadratic
    size: Ints
    batch: Ints
    loads: Array
    batches: int


def random_tree(seed: int = 0, stiffness: float = 1.0) -> Tree:
    """Ragged specimens (two have no local effect), a batch with one specimen and one with none."""
    rng = np.random.default_rng(seed)
    size, batch = np.array([4, 2, 3, 2, 4]), np.array([0, 0, 1, 0, 1])
    modes, width, g = 2, 4, 3
    own, cross, linear = np.zeros((5, width, width)), np.zeros((5, width, g)), np.zeros((5, width))
    root, root_linear = np.eye(g), rng.normal(size=g)
    for s in range(5):
        used = [*range(size[s]), *range(width, width + g)]
        design = np.zeros((12, width + g))
        design[:, used] = stiffness * rng.normal(size=(12, len(used)))
        hessian, pull = design.T @ design, design.T @ rng.normal(size=12)
        own[s], cross[s], linear[s] = hessian[:width, :width], hessian[:width, width:], pull[:width]
        own[s][range(modes, size[s]), range(modes, size[s])] += 1.0
        root, root_linear = root + hessian[width:, width:], root_linear + pull[width:]
    loads = np.array([[1.0, 0.0, 0.0], [0.0, 0.0, 0.0]])
    empty = np.empty(0)
    quadratic = Quadratic(own, cross, linear, root, root_linear, np.empty((0, 0)), np.empty((0, 0, 0)), empty, empty, 0.25)
    return Tree(quadratic, size, batch, loads, 3)


def real_tree() -> Tree:
    """The quadratic of an invented study at its optimum: readings are a thousand times sharper than priors."""
    made = invented(Plan(records=2, readings=12))
    quadratic = find_start(made.density, 1, 1).quadratic
    return Tree(quadratic, made.density.packing.size, made.structure.batch, made.structure.loads, len(made.structure.batches))


def factored(tree: Tree, batch_sd: Array, specimen_sd: Array) -> tuple[float, Workspace]:
    """Σ ln L_ii and the filled work arrays."""
    q = tree.quadratic
    w = Workspace(q, tree.batches, tree.loads.shape[0])
    log_det = arrow.factor(
        q.own,
        q.cross,
        q.linear,
        tree.size,
        tree.batch,
        q.root,
        q.root_linear,
        tree.loads,
        1.0 / batch_sd**2,
        1.0 / specimen_sd**2,
        w.spec_l,
        w.spec_u,
        w.spec_y,
        w.batch_f,
        w.batch_g,
        w.batch_c,
        w.batch_l,
        w.batch_u,
        w.batch_y,
        w.root_l,
        w.root_y,
    )
    return float(log_det), w


def eliminated(tree: Tree, batch_sd: Array, specimen_sd: Array) -> tuple[float, Array, Array]:
    """Σ ln L_ii, and the affine map x = centre + factor @ u, for x = (g, η, δ) flat."""
    log_det, w = factored(tree, batch_sd, specimen_sd)
    total = w.g.size + w.eta.size + int(tree.size.sum())

    def place(u: Array) -> Array:
        arrow.place(
            u,
            tree.size,
            tree.batch,
            tree.loads,
            w.spec_l,
            w.spec_u,
            w.spec_y,
            w.batch_l,
            w.batch_u,
            w.batch_y,
            w.root_l,
            w.root_y,
            w.g,
            w.eta,
            w.beta,
            w.delta,
        )
        np.testing.assert_allclose(w.beta, w.eta + tree.loads @ w.g, rtol=1e-14)
        return np.concatenate([w.g, w.eta.ravel(), *(w.delta[s, : tree.size[s]] for s in range(tree.size.size))])

    centre = place(np.zeros(total))
    return log_det, centre, np.stack([place(unit) - centre for unit in np.eye(total)], axis=1)


def exact(values: Array) -> Any:
    return np.vectorize(Decimal, otypes=[object])(values)


def dense(tree: Tree, batch_sd: Array, specimen_sd: Array) -> tuple[float, Array, Array]:
    """½ ln det Λ, mean and covariance of the same Gaussian by one dense Cholesky factorisation with sixty digits."""
    q, modes, g = tree.quadratic, tree.loads.shape[0], tree.loads.shape[1]
    starts = g + tree.batches * modes + np.concatenate([[0], np.cumsum(tree.size)])
    total = int(starts[-1])
    with localcontext() as context:
        context.prec = 60
        precision, linear = exact(np.zeros((total, total))), exact(np.zeros(total))
        precision[:g, :g] += exact(q.root)
        linear[:g] += exact(q.root_linear)
        for j, m in product(range(tree.batches), range(modes)):
            precision[g + j * modes + m, g + j * modes + m] += 1 / Decimal(batch_sd[m]) ** 2
        for s, d in enumerate(tree.size):
            # v = (Z g + η + δ, local effects): what the specimen's quadratic speaks of, followed by g
            see = np.zeros((d + g, total))
            see[:modes, :g] = tree.loads
            see[range(modes), range(g + tree.batch[s] * modes, g + (tree.batch[s] + 1) * modes)] = 1.0
            see[range(d), range(starts[s], starts[s] + d)] = 1.0
            see[range(d, d + g), range(g)] = 1.0
            block = np.zeros((d + g, d + g))
            block[:d, :d], block[:d, d:], block[d:, :d] = q.own[s, :d, :d], q.cross[s, :d], q.cross[s, :d].T
            precision += exact(see).T @ exact(block) @ exact(see)
            linear += exact(see[:d]).T @ exact(q.linear[s, :d])
            for m in range(modes):
                precision[starts[s] + m, starts[s] + m] += 1 / Decimal(specimen_sd[m]) ** 2
        lower = exact(np.zeros((total, total)))
        for i in range(total):
            for k in range(i + 1):
                rest = precision[i, k] - lower[i, :k] @ lower[k, :k]
                lower[i, k] = rest.sqrt() if i == k else rest / lower[k, k]
        inverse = exact(np.eye(total))
        for i in range(total):
            inverse[i] = (inverse[i] - lower[i, :i] @ inverse[:i]) / lower[i, i]
        covariance = inverse.T @ inverse
        half_log_det = sum((lower[i, i].ln() for i in range(total)), Decimal(0))
        return float(half_log_det), (covariance @ linear).astype(np.float64), covariance.astype(np.float64)


def check(tree: Tree, batch_sd: Array, specimen_sd: Array, digits: float) -> None:
    """Mean within ``digits`` of an sd, correlations within ``digits``, log-determinant within ``digits``."""
    log_det, centre, factor = eliminated(tree, batch_sd, specimen_sd)
    half_log_det, mean, covariance = dense(tree, batch_sd, specimen_sd)
    sd = np.sqrt(np.diag(covariance))
    assert abs(log_det - half_log_det) < digits * max(1.0, abs(half_log_det))
    np.testing.assert_allclose(centre / sd, mean / sd, rtol=digits, atol=digits)
    np.testing.assert_allclose(factor @ factor.T / np.outer(sd, sd), covariance / np.outer(sd, sd), atol=digits)


@pytest.mark.parametrize("batch_sd", [1e-8, 1e-3, 1.0, 1e3])
@pytest.mark.parametrize("specimen_sd", [1e-8, 1e-3, 1.0, 1e3])
def test_same_gaussian_as_dense_elimination(batch_sd: float, specimen_sd: float) -> None:
    check(random_tree(), np.array([batch_sd, 0.3]), np.array([0.1, specimen_sd]), 1e-9)
    check(random_tree(1), np.full(2, batch_sd), np.full(2, specimen_sd), 1e-7)


@pytest.mark.parametrize("sd", [1e-8, 1e-4, 0.05, 1.0])
def test_same_gaussian_for_a_study(sd: float) -> None:
    """Where readings are far sharper than priors, over the sds that scores of the sampler reach."""
    tree = real_tree()
    check(tree, np.full(3, sd), np.array([0.02, sd, 0.3]), 1e-7)


def test_a_quadratic_that_is_not_positive_definite_is_said_to_be() -> None:
    tree = random_tree()
    tree.quadratic.own[2, 0, 0] = -100.0
    assert np.isnan(factored(tree, np.ones(2), np.ones(2))[0])


def test_cholesky_adjoint_equals_finite_differences() -> None:
    rng = np.random.default_rng(0)
    n = 5
    a = rng.normal(size=(n, n))
    a = a @ a.T + n * np.eye(n)
    weight = np.tril(rng.normal(size=(n, n)))
    a_bar = np.empty((n, n))
    arrow.cholesky_adjoint(np.linalg.cholesky(a), weight.copy(), a_bar, n, np.empty((n, n)))
    direction = rng.normal(size=(n, n))
    direction = direction + direction.T
    step = 1e-5

    def value(t: float) -> float:
        return float((weight * np.linalg.cholesky(a + t * direction)).sum())

    assert (a_bar * direction).sum() == pytest.approx((value(step) - value(-step)) / (2 * step), rel=1e-8)
    np.testing.assert_array_equal(a_bar, a_bar.T)
