"""Was the material tested in the state that it serves in?"""

from __future__ import annotations

from perdure.checks.words import listed
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from perdure.study.study import Study

NAME = "state"


def check(records: RecordSet, study: Study, _layout: Layout) -> list[Finding]:
    """Caution for every duty whose state no record has."""
    tested = list(dict.fromkeys(record.state for record in records.records))
    found = [
        Finding(
            check=NAME,
            subject=duty.name,
            outcome="caution",
            value=None,
            threshold=None,
            unit="",
            message=f'The duty is in the state "{duty.state}", but the records are {listed(tested)}.',
            remedy="Test specimens in the state of the duty, or correct the state in the register or in the duty.",
        )
        for duty in study.duties
        if duty.state not in tested
    ]
    if found:
        return found
    return [
        Finding(
            check=NAME,
            subject="all duties",
            outcome="pass",
            value=None,
            threshold=None,
            unit="",
            message="Every duty is in a state that was tested.",
        )
    ]
