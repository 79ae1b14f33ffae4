"""Are there enough batches to speak of the next one?"""

from __future__ import annotations

from perdure.checks.words import count
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from perdure.study.study import Study

NAME = "few batches"
ENOUGH = 5


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution below five batches with fitted readings."""
    fitted = {record.batch for record in records.records if not record.held_out.all()}
    enough = len(fitted) >= ENOUGH
    seen = f"{count(len(fitted), 'batch', 'batches')} {'was' if len(fitted) == 1 else 'were'} tested"
    return [
        Finding(
            check=NAME,
            subject="all batches",
            outcome="pass" if enough else "caution",
            value=float(len(fitted)),
            threshold=float(ENOUGH),
            unit="batches",
            message=f"{seen}, which can show how much batches differ."
            if enough
            else f"{seen}: every bound for a new batch rests largely on the prior of the scatter between batches.",
            remedy="" if enough else "Test further batches, or support the batch scatter ranges under priors with records of production.",
        )
    ]
