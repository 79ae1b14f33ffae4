"""The hold-out step: what it says of its coverage, and of what was held out."""

from __future__ import annotations

import pytest

from perdure.steps.holdout import coverage_finding, said
from perdure.study.study import HoldOut


@pytest.mark.parametrize(("coverage", "outcome"), [(1.0, "pass"), (0.8, "pass"), (0.79, "caution"), (0.5, "caution"), (0.07, "fail")])
def test_poor_coverage_is_never_passed_over(coverage: float, outcome: str) -> None:
    finding = coverage_finding(41, coverage)
    assert finding.outcome == outcome
    assert f"{coverage:.0%}" in finding.message
    assert bool(finding.remedy) == (outcome != "pass")
    assert not finding.blocking


def test_what_was_held_out_is_said_in_words() -> None:
    assert said(None) == "nothing"
    assert said(HoldOut(after=100.0, specimens=("a", "b"), batches=("x",))) == "readings later than 100 s; specimens a, b; batches x"
