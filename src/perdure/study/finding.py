"""Findings: one verdict of one check on one subject."""

from __future__ import annotations

from dataclasses import dataclass
from typing import Literal

Outcome = Literal["pass", "caution", "fail"]
OUTCOMES: tuple[Outcome, ...] = ("pass", "caution", "fail")


@dataclass(frozen=True, slots=True)
class Finding:
    """One verdict of one check on one subject.

    Attributes:
        check: key in the registry of checks.
        subject: what was looked at: a record, specimen, batch, instrument, parameter, duty or the study.
        outcome: pass, caution or fail.
        value: what was measured, None where there is no number.
        threshold: what it is held against, None where there is none.
        unit: unit of both, "" for a pure number.
        message: one sentence saying what was found and what it means.
        remedy: what to do about it; "" for a pass.
        blocking: a fail that stops verdicts (convergence, Monte Carlo error), not only evidence of doubt.
    """

    check: str
    subject: str
    outcome: Outcome
    value: float | None
    threshold: float | None
    unit: str
    message: str
    remedy: str = ""
    blocking: bool = False
