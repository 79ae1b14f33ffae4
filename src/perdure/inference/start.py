"""Where sampling starts: the joint optimum by Levenberg–Marquardt, and the local quadratic that whitens the posterior.

Each step solves the Gauss–Newton system by the same block elimination that the whitening uses, so its cost is linear in
specimens. The noise starts large and follows the residuals (Fisher scoring, at most one e-fold a step), which anneals
the problem. Scatter sds start at the medians of their priors; then they move to the maximum of the Laplace approximation
of their marginal density, and the climb is repeated: a quadratic taken at sds that nobody believes whitens badly.
"""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray
from scipy.optimize import minimize
from scipy.stats import halfnorm

from perdure.errors import NumericsError, problem
from perdure.inference.density import Density
from perdure.inference.levels import logarithmic_part
from perdure.inference.state import State
from perdure.inference.whitening import Quadratic, WhitenedDensity, Workspace

Array = NDArray[np.float64]

MEDIAN_HALF_NORMAL = float(halfnorm.median())
STARTING_NOISE = 0.1  # of the root mean square response
MOST_STEPS = 80
TOLERANCE = 1e-7
SCATTER_ROUNDS = 2
SCORE_BOUND = 2.0


@dataclass(frozen=True, slots=True, eq=False)
class Start:
    """An optimum and its quadratic.

    Attributes:
        state: the optimum.
        quadratic: about it.
        log_density: at it.
        steps: taken.
        optima: log-densities reached from each starting point, best first.
    """

    state: State
    quadratic: Quadratic
    log_density: float
    steps: int
    optima: tuple[float, ...]


def expand(density: Density, state: State) -> tuple[Array, Array, Array]:
    """Predicted readings (N,), their derivatives to (own variables, root), (N, D + G), and sds (N,)."""
    structure = density.structure
    readings = structure.readings
    forward = density.forward(state)
    by_shape, by_modes = structure.law.natural_jacobian(state.root[1 : 1 + structure.shape_size], forward.modes)
    modes = len(structure.modes)
    width = density.packing.mask.shape[1]
    design = np.zeros((readings.knot.size, width + structure.root_size))
    specimen_of = structure.specimen[readings.run]
    natural = forward.predicted.by_natural
    gain, coefficient = structure.gain.dense(), structure.coefficient.dense()
    root_effects = len(structure.root_effects)
    for s in range(len(structure.specimens)):
        rows = np.flatnonzero(specimen_of == s)
        if rows.size == 0:
            continue
        moved = natural[rows] @ by_modes[s]
        design[rows, :modes] = moved[:, structure.mode_index]
        if "stiffness" not in structure.modes:
            design[rows, width] = moved[:, 0]
        design[rows, width + 1 : width + 1 + structure.shape_size] = natural[rows] @ by_shape[s]
        run = readings.run[rows]
        value = forward.predicted.value[rows][:, None]
        slope = forward.predicted.by_coefficient[rows][:, None]
        design[rows, width + 1 + structure.shape_size :] = gain[run][:, :root_effects] * value + coefficient[run][:, :root_effects] * slope
        first, last = root_effects + structure.local_start[s], root_effects + structure.local_start[s + 1]
        design[rows, modes : modes + last - first] = gain[run][:, first:last] * value + coefficient[run][:, first:last] * slope
    deviation = density.noise.standard_deviation(forward.predicted.value, readings.count, readings.instrument, state.log_noise)
    return forward.predicted.value, design, deviation


def _totals(density: Density, state: State) -> Array:
    """Own variables as the likelihood sees them: β + δ for the modes, local effects as they are, (S, D)."""
    structure = density.structure
    totals = state.specimen.copy()
    beta = state.root @ structure.loads.T + state.batch_offset
    totals[:, : len(structure.modes)] += beta[structure.batch]
    return totals


def quadratic_at(density: Density, state: State, damping: float = 0.0) -> Quadratic:
    """Gauss–Newton quadratic about ``state``; ``damping`` adds that share of the diagonals, centred at ``state``."""
    structure, packing = density.structure, density.packing
    readings = structure.readings
    value, design, deviation = expand(density, state)
    specimens, width = packing.mask.shape
    modes = len(structure.modes)
    g_size = structure.root_size
    own, cross, linear = np.zeros((specimens, width, width)), np.zeros((specimens, width, g_size)), np.zeros((specimens, width))
    instruments = len(structure.instruments)
    root_own, root_own_linear = np.zeros((instruments, g_size, g_size)), np.zeros((instruments, g_size))
    instrument = np.zeros(specimens, dtype=np.int64)
    scaled = design / deviation[:, None]
    residual = (readings.observed - value) / deviation
    specimen_of = structure.specimen[readings.run]
    totals = _totals(density, state)
    for s in range(specimens):
        rows = specimen_of == s
        block = scaled[rows]
        hessian = block.T @ block
        here = np.concatenate([totals[s], state.root])
        pull = hessian @ here + block.T @ residual[rows]
        if damping > 0:
            extra = damping * np.diag(hessian)
            hessian = hessian + np.diag(extra)
            pull = pull + extra * here
        own[s], cross[s] = hessian[:width, :width], hessian[:width, width:]
        linear[s] = pull[:width]
        for i in range(modes, int(packing.size[s])):
            own[s, i, i] += 1.0
        if rows.any():
            instrument[s] = np.bincount(readings.instrument[rows]).argmax()
        root_own[instrument[s]] += hessian[width:, width:]
        root_own_linear[instrument[s]] += pull[width:]
    information = density.noise.information(value, readings.count, readings.instrument, state.log_noise)
    factor = np.zeros_like(information)
    for k in range(information.shape[0]):
        total = information[k] + np.diag(1.0 / structure.priors.noise_scale[k] ** 2)
        factor[k] = np.linalg.inv(np.linalg.cholesky(total)).T
    levels = slice(1, 1 + structure.law.strength_levels)
    seen = np.sqrt((scaled[:, width:][:, levels] ** 2).sum(axis=0)) + 1e-12
    counts = np.bincount(readings.instrument, minlength=instruments)
    mean_square = np.bincount(readings.instrument, value**2, minlength=instruments) / np.maximum(counts, 1)
    return Quadratic(
        own=own,
        cross=cross,
        linear=linear,
        root=density.root_precision + root_own.sum(axis=0),
        root_linear=density.root_precision @ density.root_mean + root_own_linear.sum(axis=0),
        log_noise=state.log_noise.copy(),
        noise_factor=factor,
        levels=state.root[levels].copy(),
        level_weight=seen / seen.sum(),
        level_part=logarithmic_part(float(np.sqrt(np.diag(structure.priors.covariance)[levels].max(initial=0.0)))),
        root_own=root_own,
        root_own_linear=root_own_linear,
        instrument=instrument,
        mean_square=mean_square,
    )


def _solve(density: Density, quadratic: Quadratic, state: State) -> State:
    """The optimum of a quadratic with the sds of ``state``."""
    packing = density.packing
    w = Workspace(quadratic, packing.batches, packing.modes)
    log_det = w.factor(density, quadratic, state.batch_sd, state.specimen_sd)
    if not np.isfinite(log_det):
        raise NumericsError(
            [
                problem(
                    "start",
                    "a quadratic that is not positive definite",
                    "finite responses at the priors' centre",
                    "Check units of the records and the prior ranges.",
                )
            ]
        )
    w.place(density, np.zeros(packing.gaussian))
    return State(w.g, w.eta, w.delta, state.batch_sd, state.specimen_sd, state.log_noise)


def _noise_step(density: Density, state: State) -> State:
    readings, priors = density.structure.readings, density.structure.priors
    predicted = density.forward(state).predicted.value
    _, _, slope = density.noise.log_likelihood(predicted, readings.observed, readings.count, readings.instrument, state.log_noise)
    information = density.noise.information(predicted, readings.count, readings.instrument, state.log_noise)
    moved = state.log_noise.copy()
    for k in range(moved.shape[0]):
        precision = 1.0 / priors.noise_scale[k] ** 2
        gradient = slope[k] - (moved[k] - priors.noise_location[k]) * precision
        moved[k] += np.clip(np.linalg.solve(information[k] + np.diag(precision), gradient), -1.0, 1.0)
    return State(state.root, state.batch_offset, state.specimen, state.batch_sd, state.specimen_sd, moved)


def starting_state(density: Density, rng: np.random.Generator | None) -> State:
    """The priors' centre, or a draw of the population from its prior; noise large, sds at their prior medians."""
    structure, packing = density.structure, density.packing
    priors = structure.priors
    root = density.root_mean.copy()
    if rng is not None:
        root[: priors.mean.size] += np.linalg.cholesky(priors.covariance) @ rng.standard_normal(priors.mean.size)
    noise = priors.noise_location.copy()
    readings = structure.readings
    for k in range(noise.shape[0]):
        own = readings.observed[readings.instrument == k]
        if own.size:
            noise[k, 0] = np.log(STARTING_NOISE * np.sqrt(np.mean(own**2)))
    return State(
        root,
        np.zeros((packing.batches, packing.modes)),
        np.zeros(packing.mask.shape),
        MEDIAN_HALF_NORMAL * priors.batch_scale,
        MEDIAN_HALF_NORMAL * priors.specimen_scale,
        noise,
    )


def climb(density: Density, state: State, *, settle_noise: bool = True) -> tuple[State, float, int]:
    """Levenberg–Marquardt from ``state``; returns the optimum, its log-density and the number of steps."""
    damping = 1e-3
    value = density.core(state)[0]
    step = 0
    for step in range(1, MOST_STEPS + 1):  # noqa: B007 - how many it took is returned
        before = value
        for _ in range(14):
            try:
                candidate = _solve(density, quadratic_at(density, state, damping), state)
                reached = density.core(candidate)[0]
            except NumericsError:
                # nearly noiseless readings make the system numerically singular: damping mends that
                candidate, reached = state, -np.inf
            if np.isfinite(reached) and reached >= value - 1e-9:
                state, value = candidate, reached
                damping = max(damping / 5.0, 1e-10)
                break
            damping = max(damping * 5.0, 1e-8)
        if settle_noise:
            quieter = _noise_step(density, state)
            reached = density.core(quieter)[0]
            if np.isfinite(reached) and reached > value:
                state, value = quieter, reached
        if abs(value - before) < TOLERANCE * (1.0 + abs(value)):
            break
    return state, value, step


def with_likely_scatter(density: Density, state: State) -> State:
    """``state`` with scatter sds and noise at the maximum of their Laplace-approximated marginal density, priors included.

    At the joint optimum both are biased: effects fitted to the readings leave too little noise, and shrunken effects too
    little scatter.
    """
    whitened = WhitenedDensity(density, quadratic_at(density, state))
    first = density.packing.gaussian
    count = whitened.size - first

    def negative(moved: Array) -> tuple[float, Array]:
        u = np.zeros(whitened.size)
        u[first:] = moved
        value, gradient = whitened(u)
        if not np.isfinite(value):
            return 1e30, np.zeros(count)
        return -value, -gradient[first:]

    found = minimize(negative, np.zeros(count), jac=True, method="L-BFGS-B", bounds=[(-SCORE_BOUND, SCORE_BOUND)] * count)
    u = np.zeros(whitened.size)
    u[first:] = found.x
    likely = whitened.state(u)
    return State(state.root, state.batch_offset, state.specimen, likely.batch_sd, likely.specimen_sd, likely.log_noise)


def find_start(density: Density, seed: int, points: int = 3) -> Start:
    """Climb from the priors' centre and from ``points − 1`` draws of the prior; keep the best.

    Raises:
        NumericsError: when no starting point leads to a finite optimum.
    """
    rng = np.random.default_rng(seed)
    reached = []
    for number in range(points):
        try:
            reached.append(climb(density, starting_state(density, None if number == 0 else rng)))
        except NumericsError:
            if number == points - 1 and not reached:
                raise
    reached.sort(key=lambda item: -item[1])
    state, value, steps = reached[0]
    for _ in range(SCATTER_ROUNDS):
        state, value, more = climb(density, with_likely_scatter(density, state), settle_noise=False)
        steps += more
    return Start(state, quadratic_at(density, state), value, steps, tuple(item[1] for item in reached))
