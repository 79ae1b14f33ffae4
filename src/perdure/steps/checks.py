"""Step: look at the fit from every side, and write what the model says of every reading."""

from __future__ import annotations

from perdure.border.store import write_findings, write_table
from perdure.checks import after_sampling
from perdure.checks.fitted import FittedStudy
from perdure.steps.model import load_fitted
from perdure.steps.runner import Place, run_step

COLUMNS = (
    "record",
    "specimen",
    "batch",
    "method",
    "instrument",
    "time [s]",
    "strain",
    "observed",
    "count",
    "held out",
    "median",
    "low50",
    "high50",
    "low90",
    "high90",
    "residual z",
    "unit",
)


def rows(fitted: FittedStudy) -> list[tuple[object, ...]]:
    """One row a reading, in the order of the register."""
    predictive = fitted.predictive
    out: list[tuple[object, ...]] = []
    for n in range(predictive.observed.size):
        record = fitted.records.records[int(predictive.record[n])]
        out.append(
            (
                record.name,
                record.specimen,
                record.batch,
                record.method,
                record.instrument,
                predictive.time[n],
                predictive.strain[n],
                predictive.observed[n],
                int(predictive.count[n]),
                "yes" if predictive.held_out[n] else "no",
                predictive.median[n],
                predictive.low50[n],
                predictive.high50[n],
                predictive.low90[n],
                predictive.high90[n],
                predictive.z[n],
                "1" if record.normalised else "MPa",
            )
        )
    return out


def run(place: Place) -> None:
    """Write evidence/checks.json and evidence/fitted.csv."""
    fitted = load_fitted(place)
    write_table(place.file("evidence/fitted.csv"), COLUMNS, rows(fitted))
    write_findings(place.file("evidence/checks.json"), after_sampling(fitted))


if __name__ == "__main__":
    raise SystemExit(run_step("checks", run))
