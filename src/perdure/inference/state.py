"""The unknowns of one model as named arrays, and as the flat vector that samplers move."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.inference.structure import Structure

Array = NDArray[np.float64]
Ints = NDArray[np.int64]


@dataclass(frozen=True, slots=True, eq=False)
class State:
    """Unknowns in natural coordinates (shapes in ``perdure.inference.structure``).

    Attributes:
        root: (G,) population stiffness, shape coordinates, instrument effects.
        batch_offset: (B, M). specimen: (S, D) offsets of the modes, then local effects, padded with zeros.
        batch_sd, specimen_sd: (M,). log_noise: (instruments, P).
    """

    root: Array
    batch_offset: Array
    specimen: Array
    batch_sd: Array
    specimen_sd: Array
    log_noise: Array


@dataclass(frozen=True, slots=True, eq=False)
class Packing:
    """Where each unknown stands in the flat vector: root, batches, specimens, batch sds, specimen sds, noise."""

    root: int
    batches: int
    modes: int
    size: Ints
    mask: NDArray[np.bool_]
    instruments: int
    noise: int

    @classmethod
    def of(cls, structure: Structure, noise_parameters: int) -> Packing:
        """For a structure."""
        size = (len(structure.modes) + np.diff(structure.local_start)).astype(np.int64)
        width = int(size.max())
        mask = np.arange(width)[None, :] < size[:, None]
        return cls(
            structure.root_size,
            len(structure.batches),
            len(structure.modes),
            size,
            mask,
            len(structure.instruments),
            noise_parameters,
        )

    @property
    def gaussian(self) -> int:
        """Length of the part that the hierarchy's whitening moves."""
        return self.root + self.batches * self.modes + int(self.size.sum())

    @property
    def total(self) -> int:
        """Length of the flat vector."""
        return self.gaussian + 2 * self.modes + self.instruments * self.noise

    def split(self, flat: Array) -> State:
        """Named arrays of a flat vector."""
        at = self.root
        batch = flat[at : at + self.batches * self.modes].reshape(self.batches, self.modes)
        at += batch.size
        specimen = np.zeros(self.mask.shape)
        own = int(self.size.sum())
        specimen[self.mask] = flat[at : at + own]
        at += own
        m = self.modes
        return State(
            flat[: self.root],
            batch,
            specimen,
            flat[at : at + m],
            flat[at + m : at + 2 * m],
            flat[at + 2 * m :].reshape(self.instruments, self.noise),
        )

    def join(self, state: State) -> Array:
        """Flat vector of named arrays."""
        return np.concatenate(
            [
                state.root,
                state.batch_offset.ravel(),
                state.specimen[self.mask],
                state.batch_sd,
                state.specimen_sd,
                state.log_noise.ravel(),
            ]
        )
