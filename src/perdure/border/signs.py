"""The sign rule: inside, tension is positive; exports of compression tests come in either sign."""

from __future__ import annotations

from dataclasses import dataclass

import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]
Ints = NDArray[np.int64]

OPPOSITE_AT_MOST = 0.05
"""Readings of the opposite sign, by the peak, that pass as noise around zero."""


@dataclass(frozen=True, slots=True)
class SignFault:
    """Readings whose sign contradicts the sense.

    Attributes:
        index: of the first such reading.
        got, expected, remedy: for the message.
    """

    index: int
    got: str
    expected: str
    remedy: str


def sign_at_peak(values: Array) -> float:
    """Sign of the value of largest magnitude; NaN are passed over, 0 where nothing is different from zero."""
    filled = np.nan_to_num(values)
    return float(np.sign(filled[np.argmax(np.abs(filled))])) if filled.size else 0.0


def sign_factor(values: Array, sense: str, what: str) -> float | SignFault:
    """The factor (1 or -1) that brings ``values`` to tension positive, or why there is none.

    In compression the peak becomes negative whatever its sign was; in shear it becomes positive; in tension it must be
    positive already.

    Args:
        values: readings from zero, shape (n,), NaN where missing.
        sense: tension, compression or shear.
        what: "strain" or "stress", for messages.
    """
    sign = sign_at_peak(values)
    if sense == "tension" and sign < 0:
        return SignFault(
            int(np.argmax(np.abs(np.nan_to_num(values)))),
            f"a negative {what} at its peak in a record in tension",
            "tension positive",
            'Write compression under "sense" if that is what was done; otherwise export with the other sign.',
        )
    wanted = -1.0 if sense == "compression" else 1.0
    return wanted if sign >= 0 else -wanted


def opposite(values: Array, sense: str, what: str) -> SignFault | None:
    """Readings well on the other side of zero, in tension and compression, after the sign rule."""
    if sense == "shear":
        return None
    filled = np.nan_to_num(values)
    against = filled if sense == "compression" else -filled
    limit = OPPOSITE_AT_MOST * float(np.abs(filled).max(initial=0.0))
    if not (against > limit).any() or limit == 0:
        return None
    return SignFault(
        int(np.argmax(against > limit)),
        f"a {what} of both signs in a record in {sense}",
        f"one sign, but for noise of {OPPOSITE_AT_MOST:.0%} of the peak",
        'Check the column and its unit; declare a force that was not zeroed in the column "zero".',
    )
