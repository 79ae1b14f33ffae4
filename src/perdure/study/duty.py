"""Duties: service histories with the limits that the part must keep."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

from perdure.rheology.history import History

Kind = Literal["at least", "at most"]
Quantity = Literal["stress", "retained"]


@dataclass(frozen=True, slots=True)
class Limit:
    """One limit of a duty.

    Attributes:
        name: unique within the duty.
        kind: "at least" or "at most".
        quantity: "stress" (nominal stress in MPa; in compression its magnitude) or
            "retained" (stress divided by the stress at ``reference`` of the same part).
        value: MPa, or a ratio for "retained".
        start, end: s; equal for a limit at one time. Over an interval the worst moment counts.
        share: required content P, the share of parts that must keep the limit.
        confidence: required confidence C.
        reference: s, the time of the reference stress of "retained"; None for "stress".
    """

    name: str
    kind: Kind
    quantity: Quantity
    value: float
    start: float
    end: float
    share: float
    confidence: float
    reference: float | None = None


@dataclass(frozen=True, slots=True, eq=False)
class Duty:
    """A service history and its limits.

    Attributes:
        name: unique within the study.
        about: one line for the report.
        history: strain over time, tension positive.
        sense: tension, compression or shear.
        temperature: K.
        state: as in the register.
        limits: at least one.
    """

    name: str
    about: str
    history: History
    sense: str
    temperature: float
    state: str
    limits: tuple[Limit, ...]
