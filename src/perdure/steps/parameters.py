"""Step: tabulate the parameters, and the relaxation modulus over time."""

from __future__ import annotations

import numpy as np

from perdure.border.store import write_table
from perdure.predictions.draws import Subject
from perdure.predictions.table import parameter_rows
from perdure.steps.model import load_model, load_posterior
from perdure.steps.runner import Place, run_step

COLUMNS = (
    "quantity",
    "label",
    "level",
    "subject",
    "unit",
    "median",
    "low",
    "high",
    "prior median",
    "prior low",
    "prior high",
    "contraction",
    "identified",
)
MODULUS_COLUMNS = ("level", "subject", "time [s]", "median [MPa]", "low90 [MPa]", "high90 [MPa]", "in tests")
POINTS_A_DECADE = 8
MODULUS_DRAWS = 1000


def run(place: Place) -> None:
    """Write parameters.csv and evidence/modulus.csv."""
    model, posterior = load_model(place), load_posterior(place)
    flat = posterior.flat.reshape(-1, posterior.flat.shape[2])
    rows = []
    for row in parameter_rows(model.density, posterior.draws, flat, model.study.sampler.seed):
        prior = ("", "", "") if row.prior is None else (row.prior[1], row.prior[0], row.prior[2])
        rows.append(
            (
                row.quantity,
                row.label,
                row.level,
                row.subject,
                row.unit,
                row.posterior[1],
                row.posterior[0],
                row.posterior[2],
                *prior,
                "" if row.contraction is None else row.contraction,
                row.identified,
            )
        )
    write_table(place.file("parameters.csv"), COLUMNS, rows)
    layout = model.layout
    decades = np.log10(layout.horizon / layout.shortest)
    time = np.geomspace(layout.shortest, layout.horizon, int(decades * POINTS_A_DECADE) + 1)
    thinned = posterior.draws.thinned(MODULUS_DRAWS)
    subjects = [("population", Subject("population median"))]
    subjects += [("batch", Subject("known batch", batch)) for batch in thinned.batches]
    subjects += [("specimen", Subject("tested specimen", specimen)) for specimen in thinned.specimens]
    modulus_rows = []
    for level, subject in subjects:
        curves = thinned.law.modulus(thinned.natural(thinned.centre(subject)), time)
        for t, (low, median, high) in zip(time, np.quantile(curves, (0.05, 0.5, 0.95), axis=0).T, strict=True):
            inside = layout.shortest <= t <= layout.longest
            modulus_rows.append((level, subject.name, t, median, low, high, "yes" if inside else "no"))
    write_table(place.file("evidence/modulus.csv"), MODULUS_COLUMNS, modulus_rows)


if __name__ == "__main__":
    raise SystemExit(run_step("parameters", run))
