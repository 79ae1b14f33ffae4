"""Step: find the optimum, sample the posterior, and write how it went, whatever it is."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from dataclasses import asdict

from perdure.border.posterior_file import write_posterior
from perdure.border.store import write_json
from perdure.inference.sample import Progress, coordinate_names, sample
from perdure.inference.start import find_start
from perdure.steps.model import load_model
from perdure.steps.runner import Place, run_step

SECONDS_BETWEEN_LINES = 5.0


def _teller(name: str) -> Callable[[Progress], None]:
    """A callback that prints a line every few seconds."""
    last = [0.0]

    def tell(progress: Progress) -> None:
        if progress.seconds - last[0] < SECONDS_BETWEEN_LINES and progress.seconds >= last[0]:
            return
        last[0] = progress.seconds
        left = "" if progress.done == 0 else f", about {progress.seconds_left:.0f} s left"
        trouble = f", {progress.divergences} divergences" if progress.divergences else ""
        print(f"{name}: fit {progress.done} of {progress.total} draws{left}{trouble}", file=sys.stderr, flush=True)

    return tell


def run(place: Place) -> None:
    """Write posterior.nc and evidence/fit.json."""
    model = load_model(place)
    began = time.perf_counter()
    start = find_start(model.density, model.study.sampler.seed)
    started = time.perf_counter()
    fit = sample(model.density, start, model.study.sampler, place.cores, _teller(place.name))
    finished = time.perf_counter()
    names = coordinate_names(model.density)
    settings = asdict(fit.attempts[-1].settings)
    write_posterior(
        place.file("posterior.nc"),
        model.density,
        model.layout,
        fit.draws,
        names,
        fit.statistics,
        model.records_sha256,
        fit.released,
        {"study": model.study.name, "settings": settings},
    )
    last = fit.attempts[-1].diagnosis
    write_json(
        place.file("evidence/fit.json"),
        {
            "released": fit.released,
            "diagnosis": {
                "rhat": last.rhat,
                "ess bulk": last.ess_bulk,
                "ess tail": last.ess_tail,
                "divergences": last.divergences,
                "ebfmi": last.ebfmi,
            },
            "worst": {"rhat": last.worst_rhat, "ess": last.worst_ess},
            "attempts": [asdict(attempt) for attempt in fit.attempts],
            "start": {"optima": list(start.optima), "steps": start.steps},
            "seconds": {"start": started - began, "sampling": finished - started},
            "findings": [],
            "parameters": len(names),
            "readings": int(model.density.structure.readings.knot.size),
            "seed": model.study.sampler.seed,
            "records sha256": model.records_sha256,
        },
    )


if __name__ == "__main__":
    raise SystemExit(run_step("fit", run))
