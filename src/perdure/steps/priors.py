"""Step: turn the ranges of handbook and study into priors, and tabulate them."""

from __future__ import annotations

from perdure.border.store import write_json, write_table
from perdure.inference.priors import QUANTITIES
from perdure.steps.model import load_model
from perdure.steps.runner import Place, run_step

COLUMNS = ("quantity", "unit", "low", "high", "coverage", "source", "origin", "distribution", "median", "q05", "q95")


def run(place: Place) -> None:
    """Write priors.csv and the evidence beside it."""
    model = load_model(place)
    rows = []
    for quantity, prior in model.priors.ranges.items():
        made = model.priors.distributions[quantity]
        rows.append(
            (
                quantity,
                QUANTITIES[quantity].unit,
                prior.low,
                prior.high,
                prior.coverage,
                prior.source,
                prior.origin,
                made.text,
                made.quantile(0.5),
                made.quantile(0.05),
                made.quantile(0.95),
            )
        )
    write_table(place.file("priors.csv"), COLUMNS, rows)
    layout = model.layout
    write_json(
        place.file("evidence/priors.json"),
        {
            "findings": [],
            "grid": {
                "shortest resolved time [s]": layout.shortest,
                "longest record [s]": layout.longest,
                "horizon [s]": layout.horizon,
                "reference time [s]": layout.reference_time,
                "relaxation times [s]": layout.law.times.tolist(),
            },
        },
    )


if __name__ == "__main__":
    raise SystemExit(run_step("priors", run))
