"""The change of variables that makes the posterior look like N(0, I), exactly accounted for.

Levels of a spectrum move through straightened coordinates, see ``perdure.inference.levels``.

The quadratic belongs to the noise at the optimum. Few readings leave the noise open, and a posterior that is ten times
narrower where the noise is ten times smaller is a funnel: so the readings' part of the quadratic is scaled by the
noise variance at hand, instrument by instrument.

``u`` holds the hierarchy's part (mapped by ``perdure.inference.arrow``), normal scores of the scatter sds, and whitened
noise parameters. The log-density in ``u`` is that of the model in natural coordinates plus the logarithm of the
Jacobian; no approximation enters the target.
"""

from __future__ import annotations

from dataclasses import dataclass, field

import numpy as np
from numpy.typing import NDArray

from perdure.inference import arrow
from perdure.inference.density import Density
from perdure.inference.halfnormal import log_half_normal
from perdure.inference.levels import unbend, unbend_pullback
from perdure.inference.state import State

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

# beyond these the density is set to −inf: no posterior mass lies there, and exponentials stay finite
SCORE_LIMIT = 8.0
COORDINATE_LIMIT = 1e4
LOG_PARAMETER_LIMIT = 60.0
SCALE_LIMIT = 12.0


@dataclass(frozen=True, slots=True, eq=False)
class Quadratic:
    """Local quadratic of the log-likelihood (with the priors of local effects) about an optimum.

    Attributes:
        own: (S, D, D). cross: (S, D, G). linear: (S, D). root: (G, G), root_linear: (G,), both with the root's prior.
        log_noise: (instruments, P), the optimum. noise_factor: (instruments, P, P), L⁻ᵀ of the noise information.
        levels, level_weight: x̂ and ω of the module's text, (number of levels,).
        level_part: β of ``perdure.inference.levels``.
        root_own, root_own_linear: the readings' share of root and root_linear, by instrument, (instruments, …).
        instrument: the one that most readings of a specimen come from, (S,).
        mean_square: of the predicted readings of each instrument, (instruments,).
    """

    own: Array
    cross: Array
    linear: Array
    root: Array
    root_linear: Array
    log_noise: Array
    noise_factor: Array
    levels: Array
    level_weight: Array
    level_part: float
    root_own: Array = field(default_factory=lambda: np.zeros((0, 0, 0)))
    root_own_linear: Array = field(default_factory=lambda: np.zeros((0, 0)))
    instrument: Ints = field(default_factory=lambda: np.zeros(0, dtype=np.int64))
    mean_square: Array = field(default_factory=lambda: np.zeros(0))


@dataclass(frozen=True, slots=True, eq=False)
class _Scaled:
    """A quadratic under a given noise; shapes as in :class:`Quadratic`."""

    own: Array
    cross: Array
    linear: Array
    root: Array
    root_linear: Array
    by_instrument: Array


@dataclass(frozen=True, slots=True, eq=False)
class _Mapped:
    """Where ``u`` leads, and what the way back needs."""

    state: State
    score_slope: Array
    log_det: float
    scaled: _Scaled
    scale_slope: Array


class Workspace:
    """Arrays that one evaluation fills; one a thread."""

    def __init__(self, quadratic: Quadratic, batches: int, modes: int) -> None:
        specimens, width = quadratic.linear.shape
        g = quadratic.root_linear.size
        self.spec_l = np.zeros((specimens, width, width))
        self.spec_u = np.zeros((specimens, width, modes + g))
        self.spec_y = np.zeros((specimens, width))
        self.batch_f = np.zeros((batches, modes, modes))
        self.batch_g = np.zeros((batches, modes, g))
        self.batch_c = np.zeros((batches, modes))
        self.batch_l = np.zeros((batches, modes, modes))
        self.batch_u = np.zeros((batches, modes, g))
        self.batch_y = np.zeros((batches, modes))
        self.root_l = np.zeros((g, g))
        self.root_y = np.zeros(g)
        self.g = np.zeros(g)
        self.eta = np.zeros((batches, modes))
        self.beta = np.zeros((batches, modes))
        self.delta = np.zeros((specimens, width))

    def factor(self, density: Density, quadratic: Quadratic | _Scaled, batch_sd: Array, specimen_sd: Array) -> float:
        """Eliminate specimens, batches and root for given sds; returns Σ ln L_ii, NaN where a block is not positive definite."""
        return float(
            arrow.factor(
                quadratic.own,
                quadratic.cross,
                quadratic.linear,
                density.packing.size,
                density.structure.batch,
                quadratic.root,
                quadratic.root_linear,
                density.structure.loads,
                1.0 / batch_sd**2,
                1.0 / specimen_sd**2,
                self.spec_l,
                self.spec_u,
                self.spec_y,
                self.batch_f,
                self.batch_g,
                self.batch_c,
                self.batch_l,
                self.batch_u,
                self.batch_y,
                self.root_l,
                self.root_y,
            )
        )

    def place(self, density: Density, u: Array) -> None:
        """Walk down the tree from the hierarchy's part of ``u`` to g, η, β and δ; after :meth:`factor`."""
        arrow.place(
            u,
            density.packing.size,
            density.structure.batch,
            density.structure.loads,
            self.spec_l,
            self.spec_u,
            self.spec_y,
            self.batch_l,
            self.batch_u,
            self.batch_y,
            self.root_l,
            self.root_y,
            self.g,
            self.eta,
            self.beta,
            self.delta,
        )


class WhitenedDensity:
    """A density in whitened coordinates; call it with ``u`` (n,).

    Args:
        density: the model's fast face.
        quadratic: from ``perdure.inference.start``.
    """

    def __init__(self, density: Density, quadratic: Quadratic) -> None:
        self.density = density
        self.quadratic = quadratic
        self.size = density.packing.total
        self._work = Workspace(quadratic, density.packing.batches, density.packing.modes)
        modes = density.packing.modes
        self._local = np.zeros_like(quadratic.own)
        for i in range(modes, self._local.shape[1]):
            self._local[:, i, i] = density.packing.mask[:, i]
        self._reference_variance = density.noise.typical_variance(quadratic.mean_square, quadratic.log_noise)[0]
        count = quadratic.levels.size
        self._levels = slice(1, 1 + count)
        self._slope, self._pull, self._log_det_bar = np.ones(count), np.zeros(count), np.zeros(count)

    def fork(self) -> WhitenedDensity:
        """A copy with a workspace of its own, for another thread."""
        return WhitenedDensity(self.density, self.quadratic)

    def _scatter(self, scores: Array) -> tuple[Array, Array]:
        """Scatter sds and d ln sd / d score, batch modes then specimen modes."""
        priors = self.density.structure.priors
        scale = np.concatenate([priors.batch_scale, priors.specimen_scale])
        sd, slope = np.empty_like(scores), np.empty_like(scores)
        for i in range(scores.size):
            log_t, slope[i] = log_half_normal(scores[i])
            sd[i] = scale[i] * np.exp(log_t)
        return sd, slope

    def _scaled(self, log_noise: Array) -> tuple[_Scaled, Array]:
        """The quadratic under a given noise, and d ln(scale)/d log_noise of each instrument, (instruments, P)."""
        q = self.quadratic
        log_variance, slope = self.density.noise.typical_variance(q.mean_square, log_noise)
        by_instrument = np.exp(np.clip(self._reference_variance - log_variance, -SCALE_LIMIT, SCALE_LIMIT))
        c = by_instrument[q.instrument]
        return _Scaled(
            own=q.own * c[:, None, None] + self._local * (1.0 - c)[:, None, None],
            cross=q.cross * c[:, None, None],
            linear=q.linear * c[:, None],
            root=q.root + np.einsum("k,kij->ij", by_instrument - 1.0, q.root_own),
            root_linear=q.root_linear + (by_instrument - 1.0) @ q.root_own_linear,
            by_instrument=by_instrument,
        ), -slope

    def _map(self, u: Array) -> _Mapped | None:
        packing = self.density.packing
        gaussian = packing.gaussian
        scores = u[gaussian : gaussian + 2 * packing.modes]
        if not (np.abs(u).max() < COORDINATE_LIMIT and (scores.size == 0 or np.abs(scores).max() < SCORE_LIMIT)):
            return None
        sd, slope = self._scatter(scores)
        noise = u[gaussian + 2 * packing.modes :].reshape(packing.instruments, packing.noise)
        log_noise = self.quadratic.log_noise + np.einsum("kij,kj->ki", self.quadratic.noise_factor, noise)
        if np.abs(log_noise).max() > LOG_PARAMETER_LIMIT:
            return None
        scaled, scale_slope = self._scaled(log_noise)
        log_det = self._work.factor(self.density, scaled, sd[: packing.modes], sd[packing.modes :])
        if not np.isfinite(log_det):
            return None
        w = self._work
        w.place(self.density, u[:gaussian])
        root = w.g.copy()
        # in the map's own root the levels stand as x̂ + y
        moved = np.empty_like(self.quadratic.levels)
        log_det -= unbend(
            w.g[self._levels] - self.quadratic.levels,
            self.quadratic.level_weight,
            self.quadratic.level_part,
            moved,
            self._slope,
            self._pull,
            self._log_det_bar,
        )
        if not np.isfinite(log_det):
            return None
        root[self._levels] = self.quadratic.levels + moved
        state = State(root, w.eta.copy(), w.delta.copy(), sd[: packing.modes], sd[packing.modes :], log_noise)
        return _Mapped(state, slope, log_det, scaled, scale_slope)

    def state(self, u: Array) -> State:
        """Natural coordinates of ``u``; NaN everywhere where the density is −inf."""
        mapped = self._map(np.ascontiguousarray(u))
        if mapped is None:
            return self.density.packing.split(np.full(self.size, np.nan))
        return mapped.state

    def log_jacobian(self, u: Array) -> float:
        """ln |d x / d u| of the hierarchy's part and the noise (sds excluded): all but a constant."""
        mapped = self._map(np.ascontiguousarray(u))
        return -np.inf if mapped is None else -mapped.log_det + float(np.linalg.slogdet(self.quadratic.noise_factor)[1].sum())

    def __call__(self, u: Array) -> tuple[float, Array]:
        """Log-density in ``u`` up to a constant, and its gradient; (−inf, zeros) outside the bounds."""
        # far-out points overflow on their way to −inf; a warning raised inside the sampler's callback would stop it
        with np.errstate(all="ignore"):
            return self._evaluate(np.ascontiguousarray(u))

    def _evaluate(self, u: Array) -> tuple[float, Array]:
        packing, structure, w = self.density.packing, self.density.structure, self._work
        gaussian, modes = packing.gaussian, packing.modes
        gradient = np.zeros(self.size)
        mapped = self._map(u)
        if mapped is None:
            return -np.inf, gradient
        state = mapped.state
        if np.abs(self.density.modes_of(state)).max() > LOG_PARAMETER_LIMIT:
            return -np.inf, gradient
        value, bar = self.density.core(state)
        scores = u[gaussian : gaussian + 2 * modes]
        value -= mapped.log_det + 0.5 * float(scores @ scores)
        if not np.isfinite(value):
            return -np.inf, gradient
        # the gradient of `core` already runs through β = Z g + η; only the map's own use of β is still to come
        root_bar = bar.root.copy()
        root_bar[self._levels] = unbend_pullback(root_bar[self._levels], self._slope, self._pull, self._log_det_bar)
        precision_bar = np.zeros((2, modes))
        specimen_scale_bar = np.zeros(packing.size.size)
        lam_bar, pull_bar = np.zeros((packing.root, packing.root)), np.zeros(packing.root)
        arrow.pull_back(
            packing.size,
            structure.batch,
            structure.loads,
            mapped.scaled.own,
            mapped.scaled.cross,
            mapped.scaled.linear,
            w.spec_l,
            w.spec_u,
            w.spec_y,
            w.batch_f,
            w.batch_g,
            w.batch_l,
            w.batch_u,
            w.batch_y,
            w.root_l,
            w.root_y,
            w.g,
            w.eta,
            w.beta,
            w.delta,
            root_bar,
            np.zeros_like(state.batch_offset),
            bar.batch_offset.copy(),
            bar.specimen.copy(),
            gradient[:gaussian],
            precision_bar[0],
            precision_bar[1],
            specimen_scale_bar,
            lam_bar,
            pull_bar,
        )
        sd = np.concatenate([state.batch_sd, state.specimen_sd])
        sd_bar = np.concatenate([bar.batch_sd, bar.specimen_sd]) - 2.0 * precision_bar.ravel() / sd**3
        gradient[gaussian : gaussian + 2 * modes] = sd_bar * sd * mapped.score_slope - scores
        q = self.quadratic
        scale_bar = np.bincount(q.instrument, specimen_scale_bar, minlength=packing.instruments)
        scale_bar += mapped.scaled.by_instrument * (np.einsum("kij,ij->k", q.root_own, lam_bar) + q.root_own_linear @ pull_bar)
        noise_bar = bar.log_noise + scale_bar[:, None] * mapped.scale_slope
        gradient[gaussian + 2 * modes :] = np.einsum("kij,ki->kj", q.noise_factor, noise_bar).ravel()
        if not np.isfinite(gradient).all():
            return -np.inf, np.zeros(self.size)
        return value, gradient
