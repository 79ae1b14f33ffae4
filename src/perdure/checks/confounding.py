"""Can differences between batches be told apart from differences between instruments?"""

from __future__ import annotations

from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from perdure.study.study import Study

NAME = "confounding"


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution for every batch that one instrument alone measured and that alone went through this instrument."""
    # calibration drops out of a normalised response
    pairs = {(record.batch, record.instrument) for record in records.records if not record.normalised}
    batches = {batch for batch, _ in pairs}
    found = []
    for batch in records.batches:
        own = {instrument for name, instrument in pairs if name == batch}
        if len(own) != 1 or len(batches) < 2:
            continue
        (instrument,) = own
        if {name for name, other in pairs if other == instrument} == {batch}:
            found.append(
                Finding(
                    check=NAME,
                    subject=batch,
                    outcome="caution",
                    value=None,
                    threshold=None,
                    unit="",
                    message=(
                        f'Batch "{batch}" was measured on "{instrument}" only, which measured no other batch: its stiffness and '
                        "the calibration of the instrument are told apart by the stated uncertainty alone."
                    ),
                    remedy=f'Measure a specimen of another batch on "{instrument}", or one of "{batch}" on another instrument.',
                )
            )
    if found:
        return found
    return [
        Finding(
            check=NAME,
            subject="all batches",
            outcome="pass",
            value=None,
            threshold=None,
            unit="",
            message="No batch stands and falls with an instrument of its own.",
        )
    ]
