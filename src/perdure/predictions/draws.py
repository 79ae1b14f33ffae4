"""The posterior as predictions see it: arrays of draws, and the parts that they imply at each level."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass, replace
from typing import Literal

import numpy as np
from numpy.typing import NDArray
from scipy.stats import norm, qmc

from perdure.rheology.law import Law

Array = NDArray[np.float64]
Ints = NDArray[np.int64]
Level = Literal["population median", "tested specimen", "known batch", "new batch"]
LEVELS: tuple[Level, ...] = ("population median", "tested specimen", "known batch", "new batch")


@dataclass(frozen=True, slots=True)
class Subject:
    """What is predicted: a level and, where it has one, the specimen or batch."""

    level: Level
    name: str = ""

    @property
    def spreads(self) -> bool:
        """True where parts differ within one posterior draw."""
        return self.level in ("known batch", "new batch")


@dataclass(frozen=True, slots=True, eq=False)
class PosteriorDraws:
    """Posterior draws of the material's part of the model (D draws).

    Attributes:
        law: laid out. modes: in use, (M,). mode_index: their places among the law's modes.
        batches, specimens: names. batch: of each specimen, (S,).
        stiffness: (D,) ln of the population's modulus. shape: (D, C).
        batch_offset: (D, B, M). specimen_offset: (D, S, M). batch_sd, specimen_sd: (D, M).
        chains: number of chains; draws are ordered chain by chain.
    """

    law: Law
    modes: tuple[str, ...]
    mode_index: Ints
    batches: tuple[str, ...]
    specimens: tuple[str, ...]
    batch: Ints
    stiffness: Array
    shape: Array
    batch_offset: Array
    specimen_offset: Array
    batch_sd: Array
    specimen_sd: Array
    chains: int

    @property
    def count(self) -> int:
        """D."""
        return self.stiffness.size

    def thinned(self, most: int) -> PosteriorDraws:
        """At most ``most`` draws, evenly spaced within each chain."""
        per_chain = self.count // self.chains
        step = max(1, -(-self.count // most))
        kept = np.concatenate([np.arange(chain * per_chain, (chain + 1) * per_chain, step) for chain in range(self.chains)])
        return replace(
            self,
            stiffness=self.stiffness[kept],
            shape=self.shape[kept],
            batch_offset=self.batch_offset[kept],
            specimen_offset=self.specimen_offset[kept],
            batch_sd=self.batch_sd[kept],
            specimen_sd=self.specimen_sd[kept],
        )

    def subjects(self) -> Iterator[Subject]:
        """Every subject of every level."""
        yield Subject("population median")
        for specimen in self.specimens:
            yield Subject("tested specimen", specimen)
        for batch in self.batches:
            yield Subject("known batch", batch)
        yield Subject("new batch")

    def centre(self, subject: Subject) -> Array:
        """Offsets of the modes in use that the subject has in each draw, before any new scatter, (D, M)."""
        if subject.level == "tested specimen":
            index = self.specimens.index(subject.name)
            return self.batch_offset[:, self.batch[index]] + self.specimen_offset[:, index]
        if subject.level == "known batch":
            return self.batch_offset[:, self.batches.index(subject.name)]
        return np.zeros_like(self.batch_sd)

    def spread(self, subject: Subject) -> Array:
        """Standard deviations of the parts' modes within each draw, (D, M)."""
        if subject.level == "known batch":
            return self.specimen_sd
        if subject.level == "new batch":
            # batch and specimen offsets of a new part add, and both are Gaussian within a draw
            return np.hypot(self.batch_sd, self.specimen_sd)
        return np.zeros_like(self.batch_sd)

    def natural(self, offsets: Array) -> Array:
        """Natural parameters for offsets of the modes in use, (D, M) to (D, K)."""
        modes = np.zeros((self.count, len(self.law.mode_names)))
        modes[:, 0] = self.stiffness
        for m, index in enumerate(self.mode_index):
            modes[:, index] += offsets[:, m]
        return self.law.natural(self.shape, modes)

    def parts(self, subject: Subject, scores: Array) -> Iterator[Array]:
        """Natural parameters of one part a draw, (D, K), for each row of standard normal ``scores`` (parts, M)."""
        centre, spread = self.centre(subject), self.spread(subject)
        for row in scores:
            yield self.natural(centre + spread * row)


def normal_scores(count: int, dimension: int, seed: int) -> Array:
    """``count`` standard normal points from a scrambled Sobol sequence, (count, dimension); ``count`` a power of 2."""
    if dimension == 0:
        return np.zeros((count, 0))
    points = qmc.Sobol(dimension, scramble=True, rng=np.random.default_rng(seed)).random(count)
    return np.asarray(norm.ppf(np.clip(points, 1e-12, 1 - 1e-12)))
