"""Step: read the study folder, accept or refuse its records, and look at the data's quality."""

from __future__ import annotations

from perdure.border.intake import INTAKE_COLUMNS, examine
from perdure.border.store import write_findings, write_records, write_table
from perdure.checks import before_sampling
from perdure.errors import StudyError
from perdure.steps.runner import Place, run_step


def run(place: Place) -> None:
    """Write records.nc, intake.csv and the findings before sampling; intake.csv also when records are refused."""
    examined = examine(place.study)
    write_table(place.file("intake.csv"), INTAKE_COLUMNS, (entry.cells() for entry in examined.log))
    if examined.intake is None or examined.problems:
        raise StudyError(examined.problems)
    records, study = examined.intake.record_set, examined.intake.study
    write_findings(place.file("evidence/intake.json"), before_sampling(records, study))
    write_records(place.file("records.nc"), records)


if __name__ == "__main__":
    raise SystemExit(run_step("intake", run))
