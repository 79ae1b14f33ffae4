"""The fast face: the model's log-density and gradient in natural coordinates, compiled and linear in readings.

The PyMC model in ``perdure.inference.model`` states the same density; a contract test holds the two together.
"""

from __future__ import annotations

import math
from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

from perdure.inference.noise import NOISE
from perdure.inference.noise.term import NoiseTerm
from perdure.inference.readings import Predicted, predict_readings, sum_by_run
from perdure.inference.state import Packing, State
from perdure.inference.structure import Structure

Array = NDArray[np.float64]

HALF_LOG_TWO_PI = 0.5 * math.log(2.0 * math.pi)


@dataclass(frozen=True, slots=True, eq=False)
class Forward:
    """What a state implies for the readings.

    Attributes:
        modes: of each specimen, all modes of the law, (S, law modes).
        natural: (S, K) natural parameters of each specimen.
        predicted: readings with derivatives.
    """

    modes: Array
    natural: Array
    predicted: Predicted


class Density:
    """Log-density of one model.

    Args:
        structure: of the study.
        noise: key in ``NOISE``.
    """

    def __init__(self, structure: Structure, noise: str = "white") -> None:
        self.structure = structure
        self.noise: NoiseTerm = NOISE[noise]
        self.packing = Packing.of(structure, len(self.noise.parameter_names))
        priors = structure.priors
        shaped = 1 + structure.shape_size
        effects = len(structure.root_effects)
        # the root's prior: population part correlated, calibration effects standard normal
        self.root_mean = np.concatenate([priors.mean, np.zeros(effects)])
        self.root_precision = np.eye(structure.root_size)
        self.root_precision[:shaped, :shaped] = np.linalg.inv(priors.covariance)
        self._root_log_det = float(np.linalg.slogdet(priors.covariance)[1])

    def modes_of(self, state: State) -> Array:
        """All modes of each specimen, (S, law modes); those not in use are 0, the stiffness the population's."""
        structure = self.structure
        modes = np.zeros((len(structure.specimens), len(structure.law.mode_names)))
        modes[:, 0] = state.root[0]
        offsets = state.batch_offset[structure.batch] + state.specimen[:, : len(structure.modes)]
        for m, index in enumerate(structure.mode_index):
            modes[:, index] += offsets[:, m]
        return modes

    def effects_of(self, state: State) -> Array:
        """All effects, root ones first, (E,)."""
        modes = len(self.structure.modes)
        local = state.specimen[:, modes:][self.packing.mask[:, modes:]]
        return np.concatenate([state.root[1 + self.structure.shape_size :], local])

    def forward(self, state: State) -> Forward:
        """Predicted readings of a state."""
        structure = self.structure
        shape = state.root[1 : 1 + structure.shape_size]
        modes = self.modes_of(state)
        natural = structure.law.natural(shape, modes)
        effects = self.effects_of(state)
        predicted = predict_readings(
            structure.law,
            structure.readings,
            natural[structure.specimen],
            structure.gain.on_records(effects),
            structure.coefficient.on_records(effects),
        )
        return Forward(modes, natural, predicted)

    def core(self, state: State) -> tuple[float, State]:
        """Log-density without the prior of the scatter sds, and its gradient as a state."""
        structure = self.structure
        readings = structure.readings
        n_modes = len(structure.modes)
        forward = self.forward(state)
        value, by_reading, by_noise = self.noise.log_likelihood(
            forward.predicted.value, readings.observed, readings.count, readings.instrument, state.log_noise
        )
        natural_bar, gain_bar, coefficient_bar = sum_by_run(
            by_reading,
            forward.predicted.value,
            forward.predicted.by_natural,
            forward.predicted.by_coefficient,
            readings.run,
            len(structure.records),
        )
        by_specimen = np.zeros_like(forward.natural)
        np.add.at(by_specimen, structure.specimen, natural_bar)
        shape = state.root[1 : 1 + structure.shape_size]
        shape_bar, modes_bar = structure.law.natural_pullback(shape, forward.modes, by_specimen)
        effects_bar = structure.gain.on_effects(gain_bar) + structure.coefficient.on_effects(coefficient_bar)

        deviation = state.root - self.root_mean
        pull = self.root_precision @ deviation
        value -= 0.5 * float(deviation @ pull) + 0.5 * self._root_log_det + HALF_LOG_TWO_PI * deviation.size
        root_bar = -pull
        root_bar[0] += modes_bar[:, 0].sum()
        root_bar[1 : 1 + structure.shape_size] += shape_bar
        root_effects = len(structure.root_effects)
        root_bar[1 + structure.shape_size :] += effects_bar[:root_effects]

        used_bar = modes_bar[:, structure.mode_index]
        specimen_bar = np.zeros_like(state.specimen)
        specimen_bar[:, :n_modes] = used_bar
        local_mask = self.packing.mask[:, n_modes:]
        local = specimen_bar[:, n_modes:]
        local[local_mask] = effects_bar[root_effects:]
        local -= state.specimen[:, n_modes:]
        value -= 0.5 * float((state.specimen[:, n_modes:] ** 2).sum()) + HALF_LOG_TWO_PI * int(local_mask.sum())

        batch_bar = np.zeros_like(state.batch_offset)
        np.add.at(batch_bar, structure.batch, used_bar)
        batch_sd_bar = np.zeros(n_modes)
        specimen_sd_bar = np.zeros(n_modes)
        for offset, offset_bar, sd, sd_bar in (
            (state.batch_offset, batch_bar, state.batch_sd, batch_sd_bar),
            (state.specimen[:, :n_modes], specimen_bar[:, :n_modes], state.specimen_sd, specimen_sd_bar),
        ):
            standard = offset / sd
            value -= 0.5 * float((standard**2).sum()) + offset.shape[0] * float(np.log(sd).sum()) + HALF_LOG_TWO_PI * offset.size
            offset_bar -= standard / sd  # noqa: PLW2901 - in place, on purpose
            sd_bar += ((standard**2).sum(axis=0) - offset.shape[0]) / sd  # noqa: PLW2901 - in place, on purpose

        z = (state.log_noise - structure.priors.noise_location) / structure.priors.noise_scale
        value -= 0.5 * float((z**2).sum()) + float(np.log(structure.priors.noise_scale).sum()) + HALF_LOG_TWO_PI * z.size
        by_noise = by_noise - z / structure.priors.noise_scale
        return value, State(root_bar, batch_bar, specimen_bar, batch_sd_bar, specimen_sd_bar, by_noise)

    def log_density(self, state: State) -> tuple[float, State]:
        """Log-density in natural coordinates (scatter sds included) and its gradient."""
        value, gradient = self.core(state)
        priors = self.structure.priors
        for sd, scale, bar in (
            (state.batch_sd, priors.batch_scale, gradient.batch_sd),
            (state.specimen_sd, priors.specimen_scale, gradient.specimen_sd),
        ):
            value += float((0.5 * math.log(2.0 / math.pi) - np.log(scale) - 0.5 * (sd / scale) ** 2).sum())
            bar -= sd / scale**2  # noqa: PLW2901 - in place, on purpose
        return value, gradient
