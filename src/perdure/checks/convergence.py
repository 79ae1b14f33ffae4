"""Did the sampler do its work? The one check whose failure stops every verdict."""

from __future__ import annotations

import math

from perdure.checks.fitted import FittedStudy
from perdure.inference.gate import EBFMI_LIMIT, ESS_LIMIT, RHAT_LIMIT
from perdure.study.finding import Finding

NAME = "convergence"
REMEDY = (
    "Look for records that contradict one another or the law, narrow the priors that carry no evidence, "
    "or raise draws and tune under sampler."
)


def _figure(subject: str, value: float, threshold: float, *, kept: bool, reads: str) -> Finding:
    outcome = "is kept" if kept else "is missed, so no verdict is stated"
    return Finding(
        check=NAME,
        subject=subject,
        outcome="pass" if kept else "fail",
        value=value if math.isfinite(value) else None,
        threshold=threshold,
        unit="",
        message=f"{reads}; the limit {outcome}.",
        remedy="" if kept else REMEDY,
        blocking=not kept,
    )


def check(fitted: FittedStudy) -> list[Finding]:
    """One finding for each figure of the gate, blocking where it is missed; a caution for every retry."""
    at = fitted.diagnosis
    found = [
        _figure("R-hat", at.rhat, RHAT_LIMIT, kept=at.rhat <= RHAT_LIMIT, reads=f"Largest R-hat {at.rhat:.4g} ({at.worst_rhat})"),
        _figure(
            "bulk effective sample size",
            at.ess_bulk,
            ESS_LIMIT,
            kept=at.ess_bulk >= ESS_LIMIT,
            reads=f"Smallest bulk effective sample size {at.ess_bulk:.0f} (smallest of bulk and tail in {at.worst_ess})",
        ),
        _figure(
            "tail effective sample size",
            at.ess_tail,
            ESS_LIMIT,
            kept=at.ess_tail >= ESS_LIMIT,
            reads=f"Smallest tail effective sample size {at.ess_tail:.0f} (smallest of bulk and tail in {at.worst_ess})",
        ),
        _figure("divergences", float(at.divergences), 0.0, kept=at.divergences == 0, reads=f"{at.divergences} divergences after tuning"),
        _figure("E-BFMI", at.ebfmi, EBFMI_LIMIT, kept=at.ebfmi >= EBFMI_LIMIT, reads=f"Smallest E-BFMI {at.ebfmi:.3g}"),
    ]
    for number, attempt in enumerate(fitted.attempts[1:], start=2):
        found.append(
            Finding(
                check=NAME,
                subject=f"attempt {number}",
                outcome="caution",
                value=float(number),
                threshold=1.0,
                unit="attempts",
                message=f"The attempt before missed the gate, so the sampler ran again: {attempt.change}.",
                remedy="State these settings under sampler to save the failed attempt; if retries keep failing, look at the priors.",
            )
        )
    return found
