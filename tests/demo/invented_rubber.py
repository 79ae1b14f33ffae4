"""An invented rubber with known truth, and the arithmetic of the demonstration data. Independent of perdure's own code.

The material is a sum of exponentials on a fine grid plus a term that stays. Its spectrum is flat (a constant share of what
remains is lost in a decade) with a Gaussian bump over log10 of the relaxation time, so that the time scale of a specimen can be seen.
Specimens differ in exactly three ways:

* stiffness k: ln E(10 s);
* strength r: the share of the remaining modulus that relaxes in a decade is multiplied by e^r, with E(10 s) held (for the
  relaxation times of the population);
* pace p: afterwards every relaxation time is multiplied by e^p.
"""

from __future__ import annotations

import math
from collections.abc import Callable, Mapping, Sequence
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Modes = tuple[float, float, float]

MODES = ("stiffness", "strength", "pace")
REFERENCE = 10.0  # s
DAY = 86_400.0
YEAR = 365.25 * DAY
TIMES = (1.0, 10.0, 100.0, 1e3, 1e4, 1e5, 6e5, 1e7, 10.0 * YEAR)  # s, where moduli are written down


@dataclass(frozen=True, slots=True)
class Population:
    """What all batches share.

    Attributes:
        modulus: E(10 s) in MPa of the population.
        loss: base loss a decade as a share of what remains.
        bump, centre, width: factor of the bump at its top, its place in s, its standard deviation in decades.
        batch, specimen: standard deviations of stiffness, strength, pace between batches, and between specimens of one batch.
    """

    modulus: float
    loss: float
    bump: float
    centre: float
    width: float
    batch: Modes
    specimen: Modes


@dataclass(frozen=True, slots=True, eq=False)
class Terms:
    """Equilibrium modulus (MPa), moduli (MPa, shape (n,)) and relaxation times (s, shape (n,)) of one specimen."""

    equilibrium: float
    moduli: Array
    times: Array


def grid() -> tuple[Array, float]:
    """Relaxation times from 10^-2 s to 10^8.5 s, 33 of them, and their spacing in decades (about three a decade)."""
    places, spacing = np.linspace(-2.0, 8.5, 33, retstep=True)
    return 10.0**places, float(spacing)


def population_terms(population: Population) -> Terms:
    """The spectrum of the population; raises ``ValueError`` where less than 0.3 E(10 s) would stay for ever."""
    terms = specimen_terms(population, (0.0, 0.0, 0.0))
    if terms.equilibrium < 0.3 * population.modulus:
        message = f"only {terms.equilibrium / population.modulus:.2f} of E(10 s) stays for ever: lower the loss a decade"
        raise ValueError(message)
    return terms


def specimen_terms(population: Population, modes: Modes) -> Terms:
    """The spectrum of a specimen that differs from the population by ``modes`` = (k, r, p)."""
    stiffness, strength, pace = modes
    times, spacing = grid()
    bump = np.exp(math.log(population.bump) * np.exp(-0.5 * (np.log10(times / population.centre) / population.width) ** 2))
    losses = population.loss * spacing * bump * math.exp(strength)
    left = np.exp(-np.cumsum(losses))
    moduli = np.concatenate([[1.0], left[:-1]]) - left
    equilibrium = float(left[-1])
    level = equilibrium + float(np.sum(moduli * np.exp(-REFERENCE / times)))
    scale = population.modulus * math.exp(stiffness) / level
    return Terms(equilibrium * scale, moduli * scale, times * math.exp(pace))


def relaxation_modulus(terms: Terms, time: Array) -> Array:
    """E(t) in MPa at ``time`` (s, shape (n,))."""
    return terms.equilibrium + np.exp(-time[:, None] / terms.times) @ terms.moduli


def stress(terms: Terms, time: Array, strain: Array) -> Array:
    """Stress in MPa for a strain that runs linearly between the knots ``time`` (s, shape (n,), from rest at the first)."""
    memory = np.zeros_like(terms.moduli)
    out = np.empty_like(time)
    out[0] = terms.equilibrium * strain[0]
    for n in range(1, time.size):
        reduced = (time[n] - time[n - 1]) / terms.times
        memory = memory * np.exp(-reduced) + (strain[n] - strain[n - 1]) * (-np.expm1(-reduced) / reduced)
        out[n] = terms.equilibrium * strain[n] + float(terms.moduli @ memory)
    return out


def draw_specimens(
    rng: np.random.Generator, population: Population, batches: Mapping[str, Sequence[str]]
) -> tuple[dict[str, Modes], dict[str, Modes]]:
    """Modes of the batches and of the specimens, both as totals relative to the population, drawn in reading order."""
    of_batch: dict[str, Modes] = {}
    of_specimen: dict[str, Modes] = {}
    for batch, specimens in batches.items():
        shift = rng.standard_normal(3) * population.batch
        of_batch[batch] = _modes(shift)
        for specimen in specimens:
            of_specimen[specimen] = _modes(shift + rng.standard_normal(3) * population.specimen)
    return of_batch, of_specimen


def _modes(values: Array) -> Modes:
    return float(values[0]), float(values[1]), float(values[2])


@dataclass(frozen=True, slots=True, eq=False)
class Parts:
    """Stress of parts to be made: ln stress is normal given strength and pace, which sit on quadrature nodes.

    Attributes:
        mean: of ln stress given the nodes, shape (nodes,).
        weight: of the nodes, summing to 1, shape (nodes,).
        sd: of ln stress given a node.
    """

    mean: Array
    weight: Array
    sd: float

    def share_above(self, limit: float) -> float:
        """Share of the parts whose stress is at least ``limit`` (MPa)."""
        z = (self.mean - math.log(limit)) / self.sd
        return float(np.sum(self.weight * [0.5 * math.erfc(-value / math.sqrt(2.0)) for value in z]))

    def exceeded_by(self, share: float) -> float:
        """The stress (MPa) that ``share`` of the parts reach, by bisection."""
        low, high = float(self.mean.min()) - 10.0 * self.sd, float(self.mean.max()) + 10.0 * self.sd
        for _ in range(200):
            middle = 0.5 * (low + high)
            low, high = (middle, high) if self.share_above(math.exp(middle)) > share else (low, middle)
        return math.exp(0.5 * (low + high))


def parts(population: Population, centre: Modes, sds: Modes, duty: Callable[[Terms], float], nodes: int = 40) -> Parts:
    """Parts whose modes are normal around ``centre`` with ``sds``, under ``duty`` (terms to stress in MPa)."""
    at, weight = np.polynomial.hermite_e.hermegauss(nodes)
    weight = weight / weight.sum()
    logs = [
        math.log(duty(specimen_terms(population, (centre[0], centre[1] + sds[1] * float(x), centre[2] + sds[2] * float(y)))))
        for x in at
        for y in at
    ]
    return Parts(np.array(logs), np.outer(weight, weight).ravel(), sds[0])


def new_batch_sds(population: Population) -> Modes:
    """Standard deviations of the modes over new parts of new batches."""
    pairs = zip(population.batch, population.specimen, strict=True)
    return _modes(np.array([math.hypot(batch, specimen) for batch, specimen in pairs]))


def held_stress(level: float, ramp: float, at: float) -> Callable[[Terms], float]:
    """The duty "ramp to ``level`` within ``ramp`` s, then hold", looked at ``at`` s after the start of the ramp."""

    def duty(terms: Terms) -> float:
        return float(stress(terms, np.array([0.0, ramp, at]), np.array([0.0, level, level]))[-1])

    return duty


def reading_times(ramp: float, duration: float, fast: float, dense: float, per_decade: int) -> Array:
    """Times in s as a controller writes them.

    Every ``fast`` s through the ramp, every ``dense`` s for the next 20 s, then evenly in log time, ``per_decade`` a decade.
    """
    through = np.arange(round(ramp / fast) + 1) * fast
    after = ramp + dense * np.arange(1, round(20.0 / dense) + 1)
    count = round(math.log10(duration / after[-1]) * per_decade)
    late = np.geomspace(float(after[-1]), duration, count + 1)[1:]
    return np.concatenate([through, after, late])


def ramp_strain(time: Array, ramp: float, level: float) -> Array:
    """Strain of a drive that slows to half its rate for the last tenth of the way, then holds ``level``."""
    slow_from = ramp * 0.9 / 1.1
    return level * np.interp(time, [0.0, slow_from, ramp], [0.0, 0.9, 1.0])


def noisy(rng: np.random.Generator, values: Array, absolute: float, relative: float) -> Array:
    """``values`` with independent reading noise of standard deviation sqrt(absolute² + (relative · value)²)."""
    return values + rng.standard_normal(values.size) * np.hypot(absolute, relative * values)


def decimal(value: float, places: int, comma: bool = False) -> str:
    """``value`` with ``places`` decimals, never as minus zero, with a decimal comma if asked for."""
    text = f"{value:.{places}f}"
    if float(text) == 0.0:
        text = text.removeprefix("-")
    return text.replace(".", ",") if comma else text


def moduli_at_times(terms: Terms) -> dict[str, float]:
    """E(t) in MPa at :data:`TIMES`, keyed by the time in s."""
    values = relaxation_modulus(terms, np.array(TIMES))
    return {f"{time:g}": float(value) for time, value in zip(TIMES, values, strict=True)}


def rounded(value: object) -> object:
    """``value`` with every float at ten significant digits: what differs between machines lies beyond them."""
    if isinstance(value, float):
        return float(f"{value:.10g}")
    if isinstance(value, Mapping):
        return {key: rounded(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [rounded(item) for item in value]
    return value
