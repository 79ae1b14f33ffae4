"""Cost of the Maxwell kernels: ``python -m tests.benchmarks.bench_kernels`` from the root of the checkout, one process, ten seconds.

Everything is a ratio within one run, so machines and days can be compared:

* per reading: stress alone and stress with all derivatives, against the same recurrence in plain NumPy (a Python loop over
  readings, arrays over terms) and against one exponential a reading and term, the least that the scheme needs;
* growth: exponent p of time ~ readings^p from 1e2 to 1e6 readings, and of time ~ runs^p from 10 to 300 runs (short records
  pay for the call, a million readings for fresh memory: 136 bytes of derivatives each);
* holds: a long hold against steady motion (arms that have relaxed must not slow the kernel down).

The NumPy implementation must agree with the kernel, or the benchmark stops with exit code 1.
"""

# ruff: noqa: T201 - a benchmark prints
from __future__ import annotations

import sys
import time
from collections.abc import Callable, Sequence
from functools import partial

import numba as nb
import numpy as np
from numpy.typing import NDArray

from perdure.rheology.history import History, ramp_and_hold
from perdure.rheology.law import Drives
from perdure.rheology.maxwell import GeneralisedMaxwell

Array = NDArray[np.float64]

TERMS = 8
SIZES = (100, 1_000, 10_000, 100_000, 1_000_000)
RUNS = (10, 30, 100, 300)
READINGS = 10_000  # of the comparison


@nb.njit(error_model="numpy")
def _scalar_exponentials(values: Array, out: Array) -> None:
    for n in range(values.size):
        out[n] = np.exp(values[n])


def plain_numpy(natural: Array, history: History, *, gradient: bool) -> tuple[Array, Array]:
    """The recurrence as it would be written without a compiler: stress (n,), and d stress / d natural (n, K) or empty."""
    terms = (natural.size - 1) // 2
    equilibrium, moduli, times = np.exp(natural[0]), np.exp(natural[1 : 1 + terms]), np.exp(natural[1 + terms :])
    stress = np.zeros(history.time.size)
    by_natural = np.zeros((history.time.size, natural.size if gradient else 0))
    h, d = np.zeros(terms), np.zeros(terms)
    for n in range(1, history.time.size):
        x = (history.time[n] - history.time[n - 1]) / times
        rise = history.value[n] - history.value[n - 1]
        decay, share = np.exp(-x), -np.expm1(-x) / x
        if gradient:
            d = d * decay + h * decay * x + rise * (share - decay)
        h = h * decay + rise * share
        stress[n] = equilibrium * history.value[n] + moduli @ h
        if gradient:
            by_natural[n, 0] = equilibrium * history.value[n]
            by_natural[n, 1 : 1 + terms] = moduli * h
            by_natural[n, 1 + terms :] = moduli * d
    return stress, by_natural


def seconds(action: Callable[[], object], budget: float = 0.6) -> float:
    """Shortest of several runs, after one that is not counted."""
    action()
    best, spent, count = np.inf, 0.0, 0
    while count < 3 or (spent < budget and count < 200):
        start = time.perf_counter()
        action()
        taken = time.perf_counter() - start
        best, spent, count = min(best, taken), spent + taken, count + 1
    return best


def exponent(sizes: Sequence[int], taken: list[float]) -> float:
    """Slope of ln time over ln size."""
    return float(np.polyfit(np.log(sizes), np.log(taken), 1)[0])


def motion(readings: int) -> History:
    """Unequal steps, so that nothing can be reused between readings."""
    steps = 10.0 ** np.random.default_rng(readings).uniform(-2.0, 0.0, readings)
    when = np.concatenate([[0.0], np.cumsum(steps)])
    return History(when, 0.1 * np.sin(when))


def main() -> int:
    """Run everything and print it; 0, or 1 when the two implementations disagree."""
    law = GeneralisedMaxwell(10.0 ** np.arange(-2.0, TERMS - 2.0))
    natural = law.natural(np.zeros(len(law.shape_names)), np.zeros((1, 3)))
    history, one = motion(READINGS), np.zeros(1)
    drives = Drives.pack([history])

    kernel = law.respond(natural, drives, one)
    stress, by_natural = plain_numpy(natural[0], history, gradient=True)
    apart = max(np.max(np.abs(stress - kernel.stress)), np.max(np.abs(by_natural - kernel.by_natural))) / np.max(np.abs(stress))
    print(f"agreement of the plain NumPy implementation with the kernel: {apart:.1e} of the peak")
    if not apart < 1e-9:  # NaN stops it too
        return 1

    values, out = -np.random.default_rng(0).uniform(0.0, 20.0, READINGS * TERMS), np.empty(READINGS * TERMS)
    rows = {
        "stress": seconds(lambda: law.simulate(natural, history)),
        "stress and derivatives": seconds(lambda: law.respond(natural, drives, one)),
        "plain NumPy, stress": seconds(lambda: plain_numpy(natural[0], history, gradient=False)),
        "plain NumPy, stress and derivatives": seconds(lambda: plain_numpy(natural[0], history, gradient=True)),
        "exponentials alone, compiled scalar": seconds(lambda: _scalar_exponentials(values, out)),
        "exponentials alone, numpy array": seconds(lambda: np.exp(values, out=out)),
    }
    print(f"\n{READINGS} readings, {TERMS} terms: nanoseconds a reading")
    for name, taken in rows.items():
        print(f"  {name:<38}{taken / READINGS * 1e9:10.1f}")
    print("ratios")
    for name in ("stress", "stress and derivatives"):
        print(f"  plain NumPy / kernel, {name:<28}{rows['plain NumPy, ' + name] / rows[name]:8.1f}")
        print(f"  kernel / scalar exponentials, {name:<20}{rows[name] / rows['exponentials alone, compiled scalar']:8.2f}")
        print(f"  kernel / array exponentials, {name:<21}{rows[name] / rows['exponentials alone, numpy array']:8.2f}")
    print(f"  derivatives and stress / stress{'':<19}{rows['stress and derivatives'] / rows['stress']:8.2f}")

    print("\ngrowth: time ~ size^p")
    by_size = [seconds(partial(law.respond, natural, Drives.pack([motion(size)]), one)) for size in SIZES]
    for size, value in zip(SIZES, by_size, strict=True):
        print(f"  {size:>9} readings {value * 1e3:12.4f} ms {value / size * 1e9:10.1f} ns a reading")
    print(f"  p over readings, 1e2 to 1e6 {exponent(SIZES, by_size):21.3f}   from 1e4 {exponent(SIZES[2:], by_size[2:]):.3f}")
    short = motion(200)
    by_runs = [seconds(partial(law.respond, np.tile(natural, (runs, 1)), Drives.pack([short] * runs), np.zeros(runs))) for runs in RUNS]
    print(f"  p over runs of 200 readings, 10 to 300 {exponent(RUNS, by_runs):10.3f}")

    print("\nhold / motion, 200 000 equal steps")
    when = 3e-3 * np.arange(1.0, 200_001.0)
    still = Drives.pack([ramp_and_hold(0.1, 1e-3, 601.0).with_knots(when)])
    moving = Drives.pack([History(np.concatenate([[0.0], when]), 0.1 * np.sin(np.arange(200_001.0)))])
    held, moved = (seconds(partial(law.respond, natural, drives, one)) for drives in (still, moving))
    print(f"  stress and derivatives {held / moved:26.2f}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
