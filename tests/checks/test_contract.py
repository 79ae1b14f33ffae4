"""The contract of a check: every finding is well-formed, whatever the study."""

from __future__ import annotations

import math
from dataclasses import replace

import numpy as np
import pytest

from perdure.checks import AFTER, BEFORE, after_sampling
from perdure.checks.fitted import FittedStudy
from perdure.inference.priors import lay_out
from perdure.study.finding import OUTCOMES, Finding
from perdure.study.records import Record, RecordSet, Uncertainty
from tests.checks.small_study import DIAGNOSIS, attempt, duty, record_set, study


def bare(record: Record) -> Record:
    """With nothing declared, some readings missing, and readings on no instrument but one."""
    return replace(record, uncertainty=Uncertainty(), missing=9, state="aged", instrument="north" if record.batch == "B1" else "south")


def doubtful_records() -> RecordSet:
    records = record_set(batches=3)
    own = [bare(record) for record in records.records]
    own[3] = replace(own[3], response=own[2].response)
    return RecordSet(tuple(own), tuple(replace(one, u_force=0.0, u_strain=0.0) for one in records.instruments))


def well_formed(finding: Finding, check: str) -> None:
    assert finding.check == check
    assert finding.outcome in OUTCOMES
    assert finding.subject
    assert finding.message[0].isupper() or finding.message[0].isdigit()
    assert finding.message.endswith(".")
    assert "  " not in finding.message
    assert "nan" not in finding.message.split()
    assert bool(finding.remedy) is (finding.outcome != "pass")
    assert finding.remedy == "" or (finding.remedy[0].isupper() and finding.remedy.endswith("."))
    assert not finding.blocking or finding.outcome == "fail"
    assert all(number is None or math.isfinite(number) for number in (finding.value, finding.threshold))


def no_repeats(found: list[Finding]) -> None:
    keys = [(finding.check, finding.subject, finding.message) for finding in found]
    assert len(set(keys)) == len(keys)


@pytest.mark.parametrize("check", BEFORE)
@pytest.mark.parametrize("records", [record_set(), doubtful_records()], ids=["clean", "doubtful"])
def test_before_sampling(check: str, records: RecordSet) -> None:
    chosen = study(duty("one"), duty("two", state="wet"))
    found = BEFORE[check](records, chosen, lay_out(chosen, records))
    assert found
    for finding in found:
        well_formed(finding, check)
    no_repeats(found)


def doubtful(clean: FittedStudy) -> FittedStudy:
    """A fit with everything wrong that can be wrong without sampling again."""
    packing = clean.density.packing
    draws = clean.draws.copy()
    draws[:, 3] += 5.0 * np.random.default_rng(1).standard_normal(draws.shape[0])
    draws[:, -4:] -= 2.0
    state = packing.split(draws[0])
    state.specimen_sd[:] = 1e-9
    draws[:, packing.gaussian : packing.gaussian + 2 * packing.modes] = 1e-9
    serving = study(duty("far", temperature=400.0, sense="shear", state="wet"), duty("near"))
    failed = replace(DIAGNOSIS, rhat=math.inf, ess_bulk=0.0, ess_tail=0.0, divergences=9, ebfmi=math.nan)
    attempts = [attempt(change) for change in ("first", "slower", "longer")]
    return replace(clean, draws=draws, study=serving, diagnosis=failed, attempts=attempts)


@pytest.mark.parametrize("check", AFTER)
@pytest.mark.parametrize("kind", ["clean", "doubtful"])
def test_after_sampling(clean: FittedStudy, check: str, kind: str) -> None:
    found = AFTER[check](clean if kind == "clean" else doubtful(clean))
    assert found
    for finding in found:
        well_formed(finding, check)
    no_repeats(found)


def test_findings_of_all_checks_together_do_not_repeat(clean: FittedStudy) -> None:
    no_repeats(after_sampling(clean))
