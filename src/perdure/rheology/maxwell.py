"""Generalised Maxwell law (Prony series), with or without an equilibrium term.

    σ(t) = E∞ ε(t) + Σ E_i h_i(t),   ḣ_i = ε̇ − h_i / τ_i

Between knots the strain rate is constant, for which h_i has the closed form

    h_i(t + Δ) = h_i(t) e^{−Δ/τ} + ε̇ τ (1 − e^{−Δ/τ})

so every step is exact and unconditionally stable, whatever its length (Tschoegl, The Phenomenological Theory of
Linear Viscoelastic Behavior, 1989, from memory). Natural parameters are the logarithms of E∞, E_1 … E_I, τ_1 … τ_I.

Coordinates: x_i is the log of the share of the *remaining* modulus that arm i loses per decade of time. With Δ_i the width
of arm i in decades and t_ref the reference time,

    h_i = Δ_i e^{x_i + r},   R_i = exp(−Σ_{j ≤ i} h_j),   E_i ∝ R_{i−1} − R_i,   τ_i = τ_i⁰ e^{p}

and what no arm takes, R_I, stays: E∞, or, without an equilibrium term, the slowest arm, whose level is not free. All moduli
are scaled so that the relaxation modulus at t_ref is E_ref = e^k for the times τ_i⁰ (free ones included; that is, at pace
0). So the mode *stiffness* k is ln E(t_ref) exactly; *strength* r multiplies every loss; *pace* p delays everything.
Nothing can become negative, and slow arms take only from what faster ones left: where no test reaches, a level changes
nothing that a test has seen.
"""

from __future__ import annotations

import math
from dataclasses import dataclass, field
from typing import Literal, TypedDict

import numba as nb
import numpy as np
from numpy.typing import NDArray

from perdure.errors import NumericsError, problem
from perdure.rheology.history import History
from perdure.rheology.law import Drives, Response

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


class CompileFlags(TypedDict):
    """The flags of ``numba.njit`` that kernels set."""

    cache: bool
    nogil: bool
    error_model: Literal["numpy"]
    fastmath: set[str]


# fastmath without "nnan"/"ninf": bad points must stay visible as NaN, not turn into plausible numbers
COMPILE: CompileFlags = {"cache": True, "nogil": True, "error_model": "numpy", "fastmath": {"contract", "reassoc", "nsz", "arcp"}}
DIRECTIONS = ("stiffness", "strength", "pace")
SERIES_BELOW = 1e-3
# a state this small is at rest: left alone it would decay into subnormal numbers and stay there, where arithmetic is slow
REST_BELOW = 1e-200


@nb.njit(**COMPILE)
def _decay(x: float) -> tuple[float, float, float]:
    """e^{−x}, (1 − e^{−x})/x and d/dx of the latter; series for small x, where the quotients cancel."""
    q = math.exp(-x)
    if x < SERIES_BELOW:
        phi = 1.0 - x * (0.5 - x * (1.0 / 6.0 - x / 24.0))
        dphi = -0.5 + x * (1.0 / 3.0 - x * (0.125 - x / 30.0))
    else:
        phi = (1.0 - q) / x
        dphi = (q - phi) / x
    return q, phi, dphi


@nb.njit(**COMPILE)
def _settled(state: float) -> float:
    return 0.0 if abs(state) < REST_BELOW else state


@nb.njit(**COMPILE)
def _respond(  # noqa: PLR0913, PLR0917 - a kernel takes flat arrays, in and out
    natural: Array,
    offset: Ints,
    time: Array,
    base: Array,
    direction: Array,
    coefficient: Array,
    equilibrium: int,
    stress: Array,
    by_natural: Array,
    by_coefficient: Array,
    by_clock: Array,
) -> None:
    runs = offset.size - 1
    terms = (natural.shape[1] - equilibrium) // 2
    modulus = np.empty(terms)
    rate = np.empty(terms)
    # states: h for base + c·direction, its derivative to ln τ, and h for the direction alone
    h = np.empty(terms)
    d = np.empty(terms)
    g = np.empty(terms)
    for run in range(runs):
        c = coefficient[run]
        e_inf = math.exp(natural[run, 0]) if equilibrium == 1 else 0.0
        for i in range(terms):
            modulus[i] = math.exp(natural[run, equilibrium + i])
            rate[i] = math.exp(-natural[run, equilibrium + terms + i])
            h[i] = 0.0
            d[i] = 0.0
            g[i] = 0.0
        start = offset[run]
        directed = False
        for n in range(start, offset[run + 1]):
            if direction[n] != 0.0:
                directed = True
        for n in range(start, offset[run + 1]):
            strain = base[n] + c * direction[n]
            total = e_inf * strain
            by_c = e_inf * direction[n]
            clock = 0.0
            if equilibrium == 1:
                by_natural[n, 0] = total
            if n == start:
                for i in range(terms):
                    by_natural[n, equilibrium + i] = 0.0
                    by_natural[n, equilibrium + terms + i] = 0.0
            else:
                dt = time[n] - time[n - 1]
                de = strain - base[n - 1] - c * direction[n - 1]
                dg = direction[n] - direction[n - 1]
                for i in range(terms):
                    x = dt * rate[i]
                    q, phi, dphi = _decay(x)
                    # d/d ln τ of e^{−x} is x e^{−x}, of φ(x) is −x φ'(x)
                    d[i] = _settled(d[i] * q + h[i] * q * x - de * x * dphi)
                    h[i] = _settled(h[i] * q + de * phi)
                    part = modulus[i] * h[i]
                    slope = modulus[i] * d[i]
                    by_natural[n, equilibrium + i] = part
                    by_natural[n, equilibrium + terms + i] = slope
                    total += part
                    clock -= slope
                    if directed:
                        g[i] = _settled(g[i] * q + dg * phi)
                        by_c += modulus[i] * g[i]
            stress[n] = total
            by_coefficient[n] = by_c
            by_clock[n] = clock


@nb.njit(**COMPILE)
def _simulate(natural: Array, time: Array, strain: Array, equilibrium: int, stress: Array) -> None:
    draws = natural.shape[0]
    terms = (natural.shape[1] - equilibrium) // 2
    h = np.empty(terms)
    modulus = np.empty(terms)
    rate = np.empty(terms)
    for s in range(draws):
        e_inf = math.exp(natural[s, 0]) if equilibrium == 1 else 0.0
        for i in range(terms):
            modulus[i] = math.exp(natural[s, equilibrium + i])
            rate[i] = math.exp(-natural[s, equilibrium + terms + i])
            h[i] = 0.0
        stress[s, 0] = e_inf * strain[0]
        for n in range(1, time.size):
            dt = time[n] - time[n - 1]
            de = strain[n] - strain[n - 1]
            total = e_inf * strain[n]
            for i in range(terms):
                q, phi, _ = _decay(dt * rate[i])
                h[i] = _settled(h[i] * q + de * phi)
                total += modulus[i] * h[i]
            stress[s, n] = total


@dataclass(frozen=True, slots=True, eq=False)
class _Shares:
    """What :meth:`GeneralisedMaxwell.natural` and its derivatives share; L levels, moduli ordered arm by arm, the rest last.

    Attributes:
        natural: (S, K). loss: h_i, (S, L). own: ∂ ln(R_{i−1} − R_i)/∂ ln h_i, (S, L).
        share: of each modulus in E(t_ref), (S, L + 1). age: t_ref/τ_i⁰ of all arms, (S, I).
    """

    natural: Array
    loss: Array
    own: Array
    share: Array
    age: Array


@dataclass(frozen=True, slots=True, eq=False)
class GeneralisedMaxwell:
    """The law laid out on given or free relaxation times; see the module's text.

    Attributes:
        times: relaxation times τ⁰ in s, increasing, shape (I,). With ``free`` they are the centres of the priors.
        equilibrium: with E∞, or without.
        reference_time: s, where the stiffness mode is the relaxation modulus.
        free: True where ln τ_1 and the logarithms of the ratios τ_{i+1}/τ_i are shape coordinates too, which keeps
            the times ordered.
    """

    times: Array
    equilibrium: bool = True
    reference_time: float = 10.0
    free: bool = False
    _log_width: Array = field(init=False, repr=False)

    def __post_init__(self) -> None:
        times = np.ascontiguousarray(self.times, dtype=np.float64)
        if times.ndim != 1 or times.size < 1 or not (times > 0).all() or not (np.diff(times) > 0).all() or not np.isfinite(times).all():
            raise NumericsError([problem("relaxation times", str(times), "positive, increasing, finite", "Mend the grid.")])
        if not 0 <= self.reference_time < math.inf:
            raise NumericsError(
                [problem("reference time", f"{self.reference_time:g} s", "0 or a positive, finite time", "Mend the reference time.")]
            )
        object.__setattr__(self, "times", times)
        if times.size < 2 - int(self.equilibrium):
            raise NumericsError([problem("relaxation times", "one", "two or more without an equilibrium term", "Add a time.")])
        width = np.gradient(np.log10(times)) if times.size > 1 else np.ones(1)
        object.__setattr__(self, "_log_width", np.log(width[: self._levels]))

    name = "maxwell"
    linear = True

    @property
    def terms(self) -> int:
        """Number of Maxwell arms."""
        return self.times.size

    @property
    def natural_names(self) -> tuple[str, ...]:
        """E_inf (with an equilibrium term), E_1 … E_I, tau_1 … tau_I."""
        head = ("E_inf",) if self.equilibrium else ()
        return (*head, *(f"E_{i + 1}" for i in range(self.terms)), *(f"tau_{i + 1}" for i in range(self.terms)))

    @property
    def natural_units(self) -> tuple[str, ...]:
        """MPa for moduli, s for times."""
        return ("MPa",) * (int(self.equilibrium) + self.terms) + ("s",) * self.terms

    @property
    def shape_names(self) -> tuple[str, ...]:
        """Levels of the log-spectrum (all arms, or all but the slowest), then, where times are free, ln τ_1 and the log gaps."""
        levels = tuple(f"level_{i + 1}" for i in range(self._levels))
        return levels + (("ln_tau_1", *(f"ln_gap_{i + 1}" for i in range(self.terms - 1))) if self.free else ())

    @property
    def strength_levels(self) -> int:
        """All levels."""
        return self._levels

    @property
    def mode_names(self) -> tuple[str, ...]:
        """Stiffness, strength, pace."""
        return DIRECTIONS

    @property
    def _levels(self) -> int:
        return self.terms - 1 + int(self.equilibrium)

    @property
    def _moduli(self) -> int:
        return int(self.equilibrium) + self.terms

    def _rows(self, shape: Array, modes: Array) -> tuple[Array, Array]:
        modes = np.ascontiguousarray(np.atleast_2d(modes), dtype=np.float64)
        shape = np.broadcast_to(np.asarray(shape, dtype=np.float64), (modes.shape[0], np.shape(shape)[-1]))
        return np.ascontiguousarray(shape), modes

    def _times_at(self, shape: Array) -> Array:
        """ln τ⁰, shape (S, I)."""
        if not self.free:
            return np.broadcast_to(np.log(self.times), (shape.shape[0], self.terms))
        tail = shape[:, self._levels :]
        # a gap is e^{ln_gap} > 0 in ln τ: ordered whatever the coordinates are
        return np.cumsum(np.concatenate([tail[:, :1], np.exp(tail[:, 1:])], axis=1), axis=1)

    def _evaluate(self, shape: Array, modes: Array) -> _Shares:
        times = self._times_at(shape)
        levels = self._levels
        age = self.reference_time * np.exp(-times)
        log_loss = shape[:, :levels] + self._log_width + modes[:, 1:2]
        loss = np.exp(log_loss)
        lost = np.cumsum(loss, axis=1)
        rows = loss.shape[0]
        # 1 − e^{−h} without cancellation for small h
        taken = -np.expm1(-loss)
        log_moduli = np.concatenate([np.log(taken) + loss - lost, -lost[:, -1:]], axis=1)
        aged = np.zeros((rows, levels + 1))
        aged[:, : self.terms] = age
        log_now = log_moduli - aged
        peak = log_now.max(axis=1, keepdims=True)
        share = np.exp(log_now - peak)
        total = share.sum(axis=1, keepdims=True)
        share /= total
        moduli = log_moduli + modes[:, 0:1] - peak - np.log(total)
        ordered = [moduli[:, -1:], moduli[:, :-1]] if self.equilibrium else [moduli]
        natural = np.concatenate([*ordered, times + modes[:, 2:3]], axis=1)
        return _Shares(natural, loss, loss * np.exp(-loss) / taken, share, age)

    def natural(self, shape: Array, modes: Array) -> Array:
        """See :meth:`perdure.rheology.law.Law.natural`."""
        return self._evaluate(*self._rows(shape, modes)).natural

    def natural_pullback(self, shape: Array, modes: Array, cotangent: Array) -> tuple[Array, Array]:
        """See :meth:`perdure.rheology.law.Law.natural_pullback`."""
        shape, modes = self._rows(shape, modes)
        at = self._evaluate(shape, modes)
        moduli = cotangent[:, : self._moduli]
        times = cotangent[:, self._moduli :]
        if self.equilibrium:
            moduli = np.concatenate([moduli[:, 1:], moduli[:, :1]], axis=1)
        total = moduli.sum(axis=1, keepdims=True)
        centred = moduli - total * at.share
        # a level raises its own modulus and lowers all slower ones
        slower = np.cumsum(centred[:, :0:-1], axis=1)[:, ::-1]
        by_level = centred[:, :-1] * at.own - at.loss * slower
        to_modes = np.stack([total[:, 0], by_level.sum(axis=1), times.sum(axis=1)], axis=1)
        to_shape = by_level.sum(axis=0)
        if self.free:
            # ln τ_i = ln τ_1 + Σ_{j<i} e^{gap_j}: a gap moves every later time
            by_time = times - total * at.share[:, : self.terms] * at.age
            later = np.cumsum(by_time[:, ::-1], axis=1)[:, ::-1]
            gaps = np.exp(shape[:, self._levels + 1 :])
            to_shape = np.concatenate([to_shape, [later[:, 0].sum()], (later[:, 1:] * gaps).sum(axis=0)])
        return to_shape, to_modes

    def natural_jacobian(self, shape: Array, modes: Array) -> tuple[Array, Array]:
        """See :meth:`perdure.rheology.law.Law.natural_jacobian`."""
        shape, modes = self._rows(shape, modes)
        at = self._evaluate(shape, modes)
        rows, levels, moduli = modes.shape[0], self._levels, self._moduli
        raw = np.zeros((rows, moduli, levels))
        for j in range(levels):
            raw[:, j, j] = at.own[:, j]
            raw[:, j + 1 :, j] = -at.loss[:, j : j + 1]
        raw -= at.share[:, None, :] @ raw
        order = np.concatenate([[moduli - 1], np.arange(moduli - 1)]) if self.equilibrium else np.arange(moduli)
        by_shape = np.zeros((rows, moduli + self.terms, len(self.shape_names)))
        by_modes = np.zeros((rows, moduli + self.terms, len(DIRECTIONS)))
        by_shape[:, :moduli, :levels] = raw[:, order]
        by_modes[:, :moduli, 0] = 1.0
        by_modes[:, :moduli, 1] = by_shape[:, :moduli, :levels].sum(axis=2)
        by_modes[:, moduli:, 2] = 1.0
        if self.free:
            gaps = np.exp(shape[:, levels + 1 :])
            by_shape[:, moduli:, levels] = 1.0
            for j in range(self.terms - 1):
                by_shape[:, moduli + j + 1 :, levels + 1 + j] = gaps[:, j : j + 1]
            older = (at.share[:, : self.terms] * at.age)[:, None, :]
            by_shape[:, :moduli, levels:] = -(older @ by_shape[:, moduli:, levels:])
        return by_shape, by_modes

    def _check(self, natural: Array, rows: int | None = None) -> None:
        """Refuse what the compiled kernels would read past the end of, or count as other terms."""
        width = self._moduli + self.terms
        if natural.ndim != 2 or natural.shape[1] != width or (rows is not None and natural.shape[0] != rows):
            expected = f"({'draws' if rows is None else rows}, {width})"
            raise NumericsError([problem("natural parameters", f"shape {natural.shape}", expected, "Pass one row a run or draw.")])

    def respond(self, natural: Array, drives: Drives, coefficient: Array) -> Response:
        """See :meth:`perdure.rheology.law.Law.respond`; refuses arrays whose shapes do not fit."""
        self._check(natural, drives.runs)
        if coefficient.shape != (drives.runs,):
            raise NumericsError([problem("coefficients", f"shape {coefficient.shape}", f"({drives.runs},)", "Pass one a run.")])
        knots = drives.time.size
        stress = np.empty(knots)
        by_natural = np.empty((knots, natural.shape[1]))
        by_coefficient = np.empty(knots)
        by_clock = np.empty(knots)
        _respond(
            natural,
            drives.offset,
            drives.time,
            drives.base,
            drives.direction,
            coefficient,
            int(self.equilibrium),
            stress,
            by_natural,
            by_coefficient,
            by_clock,
        )
        return Response(stress, by_natural, by_coefficient, by_clock)

    def simulate(self, natural: Array, history: History) -> Array:
        """See :meth:`perdure.rheology.law.Law.simulate`; refuses a shape that does not fit."""
        natural = np.ascontiguousarray(np.atleast_2d(natural))
        self._check(natural)
        stress = np.empty((natural.shape[0], history.time.size))
        _simulate(natural, history.time, history.value, int(self.equilibrium), stress)
        return stress

    def modulus(self, natural: Array, time: Array) -> Array:
        """E(t) = E∞ + Σ E_i e^{−t/τ_i}."""
        natural = np.atleast_2d(natural)
        head = int(self.equilibrium)
        moduli = np.exp(natural[:, head : head + self.terms])
        rates = np.exp(-natural[:, head + self.terms :])
        out = np.exp(natural[:, :1]) * np.ones((1, np.size(time))) if self.equilibrium else np.zeros((natural.shape[0], np.size(time)))
        for i in range(self.terms):
            out = out + moduli[:, i : i + 1] * np.exp(-np.asarray(time)[None, :] * rates[:, i : i + 1])
        return out
