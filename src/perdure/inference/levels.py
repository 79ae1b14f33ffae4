"""Straightened coordinates for the levels of a spectrum.

Levels x of a spectrum are logarithms, the readings are linear in the strengths themselves: where readings pin down sums
of strengths that nothing tells apart, the posterior of the levels is a curved valley. A factor common to all strengths,
however, trades exactly against the mode *strength*. So levels move through y, about their optimum x̂,

    x_i = x̂_i + ρ + d_i,   y_i = ρ + (e^{d_i} − 1 + β d_i) / (1 + β),   Σ ω_i e^{d_i} = 1,

which is linear for a common factor and nearly linear in the strengths for what moves between them. The weights ω say how
strongly the readings see each strength.
"""

from __future__ import annotations

import math

import numba as nb
import numpy as np
from numpy.typing import NDArray

Array = NDArray[np.float64]

# a coordinate may be at most this much steeper at the centre than this many standard deviations below it
STEEPER_AT_MOST = 2.0
DEVIATIONS_BELOW = 2.0
LEAST_LOGARITHMIC_PART = 0.05


def logarithmic_part(scale: float) -> float:
    """β for levels whose prior has the standard deviation ``scale``.

    Straight in the strength is right where readings decide, straight in the logarithm where the prior does: there a wide
    prior would be squeezed against zero. β is the least that keeps the slope dy/dx, (e^d + β)/(1 + β), above one half at
    two standard deviations below the centre.
    """
    lowest = math.exp(-DEVIATIONS_BELOW * scale)
    return max(LEAST_LOGARITHMIC_PART, (1.0 - STEEPER_AT_MOST * lowest) / (STEEPER_AT_MOST - 1.0))


@nb.njit(cache=True, nogil=True, error_model="numpy")
def _straight_inverse(y: float, part: float) -> float:
    """d with e^d − 1 + β d = (1 + β) y."""
    target = (1.0 + part) * y + 1.0
    d = math.log(target) if target > 1.0 else y
    if target < 0.0:
        d = target / part
    for _ in range(60):
        e = math.exp(d)
        step = (e + part * d - target) / (e + part)
        d -= step
        if abs(step) < 1e-14 * (1.0 + abs(d)):
            break
    return d


@nb.njit(cache=True, nogil=True, error_model="numpy")
def unbend(y: Array, weight: Array, part: float, x: Array, slope: Array, pull: Array, log_det_bar: Array) -> float:  # noqa: PLR0917 - a kernel takes flat arrays, in and out
    """Solve the relations above; fills x − x̂, and what :func:`unbend_pullback` needs.

    ``slope`` is dd/dy at fixed ρ, ``pull`` is dρ/dy, ``log_det_bar`` the gradient of ln |dx/dy|, which is returned
    (NaN where the common factor cannot be found).
    """
    n = y.size
    if n == 0:
        return 0.0
    rho = 0.0
    for i in range(n):
        rho += weight[i] * y[i]
    for _ in range(60):
        total = -1.0
        change = 0.0
        for i in range(n):
            d = _straight_inverse(y[i] - rho, part)
            e = math.exp(d)
            total += weight[i] * e
            change += weight[i] * e * (1.0 + part) / (e + part)
        step = total / change
        rho += step
        if abs(step) < 1e-13:
            break
    else:
        return math.nan
    spread = 0.0
    for i in range(n):
        d = _straight_inverse(y[i] - rho, part)
        e = math.exp(d)
        x[i] = rho + d
        slope[i] = (1.0 + part) / (e + part)
        pull[i] = weight[i] * e * slope[i]
        spread += pull[i]
    log_det = -math.log(spread)
    inner = 0.0
    for i in range(n):
        e = math.exp(x[i] - rho)
        q = e / (e + part)
        by_d = -q - pull[i] * (1.0 - q) / spread
        log_det += math.log(slope[i])
        log_det_bar[i] = slope[i] * by_d
        inner += log_det_bar[i]
    for i in range(n):
        pull[i] /= spread
        log_det_bar[i] -= pull[i] * inner
    return log_det


@nb.njit(cache=True, nogil=True, error_model="numpy")
def unbend_pullback(x_bar: Array, slope: Array, pull: Array, log_det_bar: Array) -> Array:
    """Gradient to y of f(x(y)) + ln |dx/dy| for the gradient ``x_bar`` of f."""
    common = 0.0
    for i in range(x_bar.size):
        common += (1.0 - slope[i]) * x_bar[i]
    return slope * x_bar + pull * common + log_det_bar
