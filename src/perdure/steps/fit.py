"""Step: find the optimum, sample the posterior, and write how it went, whatever it is."""

from __future__ import annotations

import sys
import time
from collections.abc import Callable
from dataclasses import asdict

from perdure.border.posterior_file import write_posterior
from perdure.border.store import finding_to_json, write_json
from perdure.inference.sample import Progress, coordinate_names, sample
from perdure.inference.start import Start, find_start
from perdure.steps.model import load_model
from perdure.steps.runner import Place, run_step
from perdure.study.finding import Finding

SECONDS_BETWEEN_LINES = 5.0
# climbs stop where a step gains little; optima this close in log-density are one
OPTIMA_APART = 2.0


def _teller(name: str) -> Callable[[Progress], None]:
    """A callback that prints a line every few seconds."""
    last = [0.0]

    def tell(progress: Progress) -> None:
        if progress.seconds - last[0] < SECONDS_BETWEEN_LINES and progress.seconds >= last[0]:
            return
        last[0] = progress.seconds
        left = "" if progress.done == 0 else f", about {progress.seconds_left:.0f} s left"
        trouble = f", {progress.divergences} divergences" if progress.divergences else ""
        # one write, so that lines of steps that run side by side stay whole
        sys.stderr.write(f"{name}: fit {progress.done} of {progress.total} draws{left}{trouble}\n")
        sys.stderr.flush()

    return tell


def start_finding(start: Start) -> Finding:
    """Whether all starting points climbed to the same optimum: chains start around the best one and would not see another."""
    apart = start.optima[0] - start.optima[-1]
    message = f"From {len(start.optima)} starting points the climb ended within {apart:.2g} in log-density."
    if apart <= OPTIMA_APART:
        return Finding("optima", "start", "pass", apart, OPTIMA_APART, "1", message)
    return Finding(
        "optima",
        "start",
        "caution",
        apart,
        OPTIMA_APART,
        "1",
        message + " The posterior may have more than one peak, and the chains began around the highest.",
        "Look for a mixed-up specimen or unit, or narrow the priors that the report names.",
    )


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
        density=model.density,
        layout=model.layout,
        flat=fit.draws,
        names=names,
        statistics=fit.statistics,
        records_sha256=model.records_sha256,
        released=fit.released,
        provenance={"study": model.study.name, "settings": settings},
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
            "findings": [finding_to_json(start_finding(start))],
            "parameters": len(names),
            "readings": int(model.density.structure.readings.knot.size),
            "seed": model.study.sampler.seed,
            "records sha256": model.records_sha256,
        },
    )


if __name__ == "__main__":
    raise SystemExit(run_step("fit", run))
