"""How many readings have a time but no response?"""

from __future__ import annotations

from perdure.checks.words import count, percent
from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import Record, RecordSet
from perdure.study.study import Study

NAME = "missing readings"
SHARE_AT_MOST = 0.05


def _share(record: Record) -> float:
    total = record.missing + int(record.count.sum())
    return record.missing / total if total else 0.0


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Caution for every record that misses more than 5 % of its readings; else one pass with the counts."""
    found = [
        Finding(
            check=NAME,
            subject=record.name,
            outcome="caution",
            value=_share(record),
            threshold=SHARE_AT_MOST,
            unit="",
            message=(
                f"{count(record.missing, 'reading')} without a response, {percent(_share(record))} of the record: "
                "if they are missing for a cause, the rest is not a fair sample."
            ),
            remedy="Find out why they are missing; if the response ran out of range, the record misleads.",
        )
        for record in records.records
        if _share(record) > SHARE_AT_MOST
    ]
    if found:
        return found
    missing = sum(record.missing for record in records.records)
    total = missing + sum(int(record.count.sum()) for record in records.records)
    where = [f"{record.name} ({record.missing})" for record in records.records if record.missing]
    return [
        Finding(
            check=NAME,
            subject="all records",
            outcome="pass",
            value=missing / total if total else 0.0,
            threshold=SHARE_AT_MOST,
            unit="",
            message=f"{missing} of {total} readings have no response{': ' + ', '.join(where) if where else ''}.",
        )
    ]
