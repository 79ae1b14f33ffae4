"""Cost of one gradient of the posterior: ``python -m tests.benchmarks.bench_gradient`` from the root of the checkout, one process.

Everything is measured in one run, so that machines and days can be compared: milliseconds of a whitened gradient (what the
sampler pays for a leapfrog step), of a gradient in natural coordinates (the same without the change of variables) and of the
predicted readings alone, from 10 to 300 specimens with one record each; the exponent p of time ~ specimens^p of each; and the
seconds that the start takes. The cost is meant to be linear in specimens: the benchmark stops with exit code 1 where p of the
whitened gradient is above 1.15.
"""

# ruff: noqa: T201 - a benchmark prints
from __future__ import annotations

import sys
import time
from functools import partial

import numpy as np

from perdure.inference.start import climb, quadratic_at, starting_state
from perdure.inference.whitening import WhitenedDensity
from perdure.study.study import LawChoice
from tests.benchmarks.bench_kernels import exponent, seconds
from tests.inference.invented import Plan, invented

SPECIMENS = (10, 30, 100, 300)
A_BATCH = 5
READINGS = 100
MOST = 1.15


def main() -> int:
    """Run everything and print it; 0, or 1 when the cost grows faster than specimens do."""
    columns: dict[str, list[float]] = {"whitened gradient": [], "natural gradient": [], "readings alone": []}
    starts = []
    print(f"one record of {READINGS} readings a specimen, {A_BATCH} specimens a batch, three modes, 1.5 terms a decade")
    print(f"{'specimens':>10}{'unknowns':>10}" + "".join(f"{name + ' [ms]':>26}" for name in columns) + f"{'start [s]':>12}")
    for specimens in SPECIMENS:
        plan = Plan(batches=specimens // A_BATCH, specimens=A_BATCH, readings=READINGS, law=LawChoice(terms_per_decade=1.5))
        density = invented(plan).density
        began = time.perf_counter()
        state, _, _ = climb(density, starting_state(density, None))
        whitened = WhitenedDensity(density, quadratic_at(density, state))
        starts.append(time.perf_counter() - began)
        u = 0.3 * np.random.default_rng(0).normal(size=whitened.size)
        if not np.isfinite(whitened(u)[0]):
            print("the density is not finite at the point of the benchmark")
            return 1
        at = whitened.state(u)
        columns["whitened gradient"].append(seconds(partial(whitened, u)))
        columns["natural gradient"].append(seconds(partial(density.log_density, at)))
        columns["readings alone"].append(seconds(partial(density.forward, at)))
        row = "".join(f"{taken[-1] * 1e3:>26.3f}" for taken in columns.values())
        print(f"{specimens:>10}{whitened.size:>10}{row}{starts[-1]:>12.2f}")
    powers = {name: exponent(SPECIMENS, taken) for name, taken in columns.items()}
    print(f"{'p':>20}" + "".join(f"{power:>26.3f}" for power in powers.values()) + f"{exponent(SPECIMENS, starts):>12.3f}")
    return int(not powers["whitened gradient"] <= MOST)


if __name__ == "__main__":
    sys.exit(main())
