"""The contract of a law: natural parameters + history → response, with exact derivatives.

A *family of coordinates* leads to the natural parameters. The statistics work in two kinds of coordinates that a
law names itself:

* *shape coordinates*, shared by the population (a log-spectrum, say);
* *modes*, the few physical directions in which batches and specimens differ (stiffness, strength, pace).

``natural`` maps (shape, modes) to natural parameters; ``respond`` maps natural parameters and strain histories to
stress. Both come with their exact derivatives, both are compiled, and nothing in them knows a probability.
"""

from __future__ import annotations

from dataclasses import dataclass
from typing import Protocol, Self

import numpy as np
from numpy.typing import NDArray

from perdure.rheology.history import History

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class Drives:
    """Strain histories of several runs, packed end to end.

    Attributes:
        offset: shape (runs + 1,); the knots of run r are ``offset[r]:offset[r + 1]``.
        time: knots in s (reduced time of the mechanism's clock), shape (knots,).
        base: strain at the knots, shape (knots,).
        direction: a second strain history, added with a coefficient a run (the frame compliance), shape (knots,).
    """

    offset: Ints
    time: Array
    base: Array
    direction: Array

    @property
    def runs(self) -> int:
        """Number of runs."""
        return self.offset.size - 1

    @classmethod
    def pack(cls, histories: list[History], directions: list[Array] | None = None) -> Self:
        """Pack histories; ``directions[r]`` has the shape of ``histories[r].time`` (zeros where left out)."""
        offset = np.concatenate([[0], np.cumsum([history.time.size for history in histories])]).astype(np.int64)
        time = np.concatenate([history.time for history in histories])
        base = np.concatenate([history.value for history in histories])
        direction = np.zeros_like(base) if directions is None else np.concatenate(directions).astype(np.float64)
        return cls(offset, time, base, direction)


@dataclass(frozen=True, slots=True, eq=False)
class Response:
    """Stress at every knot of every run, and its derivatives.

    Attributes:
        stress: MPa, shape (knots,).
        by_natural: d stress / d natural parameter, shape (knots, K).
        by_coefficient: d stress / d coefficient of the second strain history, shape (knots,).
        by_clock: d stress / d ln(clock rate), all of reduced time running faster by that factor, shape (knots,).
    """

    stress: Array
    by_natural: Array
    by_coefficient: Array
    by_clock: Array


class Law(Protocol):
    """A rheological law, laid out for one study (its relaxation times are fixed or counted)."""

    @property
    def name(self) -> str:
        """Key in ``LAWS``."""
        ...

    @property
    def times(self) -> Array:
        """Relaxation times of the layout in s, increasing."""
        ...

    @property
    def equilibrium(self) -> bool:
        """True with an equilibrium term."""
        ...

    @property
    def free(self) -> bool:
        """True where relaxation times are parameters."""
        ...

    @property
    def linear(self) -> bool:
        """True where the response is proportional to the strain history."""
        ...

    @property
    def natural_names(self) -> tuple[str, ...]:
        """Names of the K natural parameters, all positive quantities carried as natural logarithms."""
        ...

    @property
    def natural_units(self) -> tuple[str, ...]:
        """Their units, shape (K,)."""
        ...

    @property
    def shape_names(self) -> tuple[str, ...]:
        """Names of the shape coordinates, C of them."""
        ...

    @property
    def strength_levels(self) -> int:
        """How many leading shape coordinates are logarithms of strengths that add up in the response."""
        ...

    @property
    def mode_names(self) -> tuple[str, ...]:
        """Names of the modes that this law offers, M of them, the stiffness first."""
        ...

    def natural(self, shape: Array, modes: Array) -> Array:
        """Natural parameters (logarithms), shape (S, K), for ``shape`` (S, C) or (C,) and ``modes`` (S, M)."""
        ...

    def natural_pullback(self, shape: Array, modes: Array, cotangent: Array) -> tuple[Array, Array]:
        """Pull (S, K) cotangents of ``natural`` back: to shape, summed over S, (C,), and to modes, (S, M)."""
        ...

    def natural_jacobian(self, shape: Array, modes: Array) -> tuple[Array, Array]:
        """d natural / d shape, (S, K, C), and d natural / d modes, (S, K, M)."""
        ...

    def respond(self, natural: Array, drives: Drives, coefficient: Array) -> Response:
        """Stress and derivatives for one row of ``natural`` (runs, K) and one ``coefficient`` (runs,) a run."""
        ...

    def simulate(self, natural: Array, history: History) -> Array:
        """Stress at the knots of one history for many parameter sets, shape (draws, knots), without derivatives.

        ``natural`` is (draws, K). Reads no global state; used for predictions, where nothing else is loaded.
        """
        ...

    def modulus(self, natural: Array, time: Array) -> Array:
        """Relaxation modulus in MPa, shape (draws, times), for ``natural`` (draws, K) and ``time`` in s."""
        ...
