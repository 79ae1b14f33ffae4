"""Is one test in the study twice under two names?"""

from __future__ import annotations

from itertools import combinations

import numpy as np

from perdure.inference.priors import Layout
from perdure.study.finding import Finding
from perdure.study.records import Record, RecordSet
from perdure.study.study import Study

NAME = "repeats"


def _alike(one: Record, other: Record) -> bool:
    if one.response.size != other.response.size or not np.array_equal(one.response, other.response):
        return False
    # two coarse records may agree in every digit by chance while nothing happens; not while the response changes
    return np.unique(one.response).size > 2


def check(records: RecordSet, _study: Study, _layout: Layout) -> list[Finding]:
    """Fail for two records whose readings are identical: they would count as two independent tests."""
    found = [
        Finding(
            check=NAME,
            subject=other.name,
            outcome="fail",
            value=float(other.response.size),
            threshold=0.0,
            unit="readings",
            message=f'All readings are identical to those of record "{one.name}" ({one.file}): one test would count as two.',
            remedy=f'Set use to no for one of "{one.name}" and "{other.name}", or correct the file that it names.',
        )
        for one, other in combinations(records.records, 2)
        if _alike(one, other)
    ]
    if found:
        return found
    return [
        Finding(
            check=NAME,
            subject="all records",
            outcome="pass",
            value=None,
            threshold=None,
            unit="",
            message="No two records have the same readings.",
        )
    ]
