"""A study: everything about one material that is not a reading."""

from __future__ import annotations

from dataclasses import dataclass, field

from perdure.study.duty import Duty


@dataclass(frozen=True, slots=True)
class LawChoice:
    """Which law, and how its relaxation times are laid.

    Attributes:
        name: key in ``perdure.rheology.laws.LAWS``.
        equilibrium: with an equilibrium term, or without.
        free_times: None for a log grid over tests and horizon; else the number of free ordered times.
        terms_per_decade: of the grid.
    """

    name: str = "maxwell"
    equilibrium: bool = True
    free_times: int | None = None
    terms_per_decade: float = 1.5


@dataclass(frozen=True, slots=True)
class PriorRange:
    """A range that holds a quantity with probability ``coverage``.

    Attributes:
        quantity: key, as listed in ``perdure.inference.priors.QUANTITIES``.
        low, high: in the quantity's internal unit.
        coverage: probability that the range holds the quantity, 0 < coverage < 1.
        source: publication, or "from memory".
        origin: "handbook <family>" or "study".
    """

    quantity: str
    low: float
    high: float
    coverage: float
    source: str
    origin: str


@dataclass(frozen=True, slots=True)
class SamplerSettings:
    """Settings of the sampler; retries on a failed gate change them and say so."""

    chains: int = 4
    draws: int = 1000
    tune: int = 600
    seed: int = 20_261
    target_accept: float = 0.95


@dataclass(frozen=True, slots=True)
class HoldOut:
    """Which readings the fit must not see.

    Attributes:
        after: readings later than this (s) are held out; None for no such rule.
        specimens, batches: whole ones held out.
    """

    after: float | None = None
    specimens: tuple[str, ...] = ()
    batches: tuple[str, ...] = ()


@dataclass(frozen=True, slots=True)
class DisplayUnits:
    """Units of the report and the tables, as the user wrote them; inside everything is MPa, s, K, ratio."""

    stress: str = "MPa"
    time: str = "h"
    temperature: str = "degC"
    strain: str = "%"


@dataclass(frozen=True, slots=True)
class Study:
    """Everything about one material that is not a reading.

    Attributes:
        name: unique within a run; also the name of the results folder.
        title, about: for the report.
        family: key in the handbook.
        law: see :class:`LawChoice`.
        clock: key in ``perdure.rheology.clock.CLOCKS``.
        horizon: s, the longest reduced time that the law is built to reach; None for three decades beyond the longest record.
        reference_time: s, where the stiffness mode is defined as the relaxation modulus; None for 10 s.
        reference_temperature: K.
        priors: one range a quantity; the user's own replace the handbook's.
        modes: scatter modes in use, a subset of what the law offers.
        duties: at least one.
        hold_out: None where nothing is held out.
        sampler, display: settings.
    """

    name: str
    title: str
    about: str
    family: str
    law: LawChoice
    clock: str
    horizon: float | None
    reference_time: float | None
    reference_temperature: float
    priors: tuple[PriorRange, ...]
    modes: tuple[str, ...]
    duties: tuple[Duty, ...]
    hold_out: HoldOut | None = None
    sampler: SamplerSettings = field(default_factory=SamplerSettings)
    display: DisplayUnits = field(default_factory=DisplayUnits)
