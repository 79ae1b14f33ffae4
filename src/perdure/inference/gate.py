"""The convergence gate: its limits, what a run of the sampler is judged by, and what retries change. Without the sampler."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from typing import Any

from perdure.study.study import SamplerSettings

RHAT_LIMIT = 1.01
ESS_LIMIT = 400.0
EBFMI_LIMIT = 0.3


@dataclass(frozen=True, slots=True)
class Diagnosis:
    """What the gate looks at; the worst over all parameters.

    Attributes:
        rhat, ess_bulk, ess_tail: rank-normalised split R-hat and effective sample sizes (Vehtari et al. 2021).
        divergences: after tuning. ebfmi: smallest over chains (Betancourt 2016).
        worst_rhat, worst_ess: names of the parameters with the largest R-hat and the smallest ESS.
        steps: mean leapfrog steps a draw.
    """

    rhat: float
    ess_bulk: float
    ess_tail: float
    divergences: int
    ebfmi: float
    worst_rhat: str
    worst_ess: str
    steps: float

    @property
    def passed(self) -> bool:
        """True when every limit of the gate is kept."""
        return (
            self.rhat <= RHAT_LIMIT
            and self.ess_bulk >= ESS_LIMIT
            and self.ess_tail >= ESS_LIMIT
            and self.divergences == 0
            and self.ebfmi >= EBFMI_LIMIT
        )


@dataclass(frozen=True, slots=True)
class Attempt:
    """One run of the sampler: its settings, what had been changed, how it went."""

    settings: SamplerSettings
    change: str
    diagnosis: Diagnosis
    seconds: float


def attempt_from(entry: Mapping[str, Any]) -> Attempt:
    """An attempt as ``dataclasses.asdict`` wrote it."""
    # what JSON cannot hold (NaN, infinity) comes back as the worst value: a gate that reads it must not pass
    worst = {"rhat": float("inf"), "ess_bulk": 0.0, "ess_tail": 0.0, "ebfmi": 0.0, "steps": float("nan")}
    diagnosis: dict[str, Any] = {key: worst[key] if value is None else value for key, value in entry["diagnosis"].items()}
    return Attempt(SamplerSettings(**entry["settings"]), str(entry["change"]), Diagnosis(**diagnosis), float(entry["seconds"]))
