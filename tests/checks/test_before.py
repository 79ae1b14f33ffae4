"""Checks before sampling: each is silent on clean data and fires, on the right subject, on data made to trigger it."""

from __future__ import annotations

import subprocess
import sys
from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest

from perdure.checks import BEFORE, before_sampling
from perdure.checks.few_batches import ENOUGH
from perdure.errors import StudyError
from perdure.inference.priors import lay_out
from perdure.report.sections.scatter import ENOUGH_BATCHES
from perdure.rheology.history import History
from perdure.study.finding import Finding
from perdure.study.records import RecordSet, Uncertainty
from perdure.study.study import Study
from tests.checks.small_study import LEVEL, changed, duty, record_set, study

Case = Callable[[], tuple[RecordSet, Study]]


def gap() -> tuple[RecordSet, Study]:
    records = record_set()
    one = records.records[1]
    kept = (one.time < 20) | (one.time > 400)
    fields = {name: getattr(one, name)[kept] for name in ("time", "response", "count", "first_row", "last_row", "held_out")}
    return changed(records, 1, **fields), study()


def backwards() -> tuple[RecordSet, Study]:
    records = record_set()
    time = records.records[1].time.copy()
    time[[20, 21]] = time[[21, 20]]
    return changed(records, 1, time=time), study()


def saturated_ramp() -> tuple[RecordSet, Study]:
    records = record_set()
    one = records.records[1]
    response = np.maximum(one.response, 0.8 * one.response.min())
    return changed(records, 1, response=response), study()


def repeated() -> tuple[RecordSet, Study]:
    records = record_set()
    return changed(records, 3, response=records.records[1].response), study()


def dwelling(drift: float) -> tuple[RecordSet, Study]:
    """A record that waits 30 s before its ramp, with a response that drifts by ``drift`` MPa meanwhile."""
    records = record_set()
    one = records.records[1]
    wait = np.linspace(1.0, 30.0, 20)
    noise = 1e-4 * np.random.default_rng(3).standard_normal(wait.size)
    more = np.ones(wait.size, dtype=np.int64)
    history = History(np.concatenate([[0.0], wait, 30.0 + one.history.time[1:]]), np.concatenate([[0.0], 0 * wait, one.history.value[1:]]))
    fields = {
        "history": history,
        "compliance": np.zeros(history.time.size),
        "time": np.concatenate([wait, 30.0 + one.time]),
        "response": np.concatenate([drift * wait / 30.0 + noise, one.response]),
        "held_out": np.zeros(wait.size + one.time.size, dtype=np.bool_),
    }
    fields |= {name: np.concatenate([more, getattr(one, name)]) for name in ("count", "first_row", "last_row")}
    return changed(records, 1, **fields), study()


def missing() -> tuple[RecordSet, Study]:
    return changed(record_set(), 1, missing=3), study()


def own_instrument() -> tuple[RecordSet, Study]:
    records = record_set()
    own = tuple(replace(one, instrument="north" if one.batch == "B1" else "south") for one in records.records)
    return RecordSet(own, records.instruments), study()


def four_batches() -> tuple[RecordSet, Study]:
    return record_set(batches=4), study()


def untested_batch() -> tuple[RecordSet, Study]:
    """Five batches of which the fit sees four."""
    records = record_set()
    own = tuple(replace(one, held_out=np.ones(one.time.size, dtype=np.bool_)) if one.batch == "B5" else one for one in records.records)
    return RecordSet(own, records.instruments), study()


def once_each() -> tuple[RecordSet, Study]:
    records = record_set()
    return RecordSet(tuple(one for one in records.records if one.name.endswith("a")), records.instruments), study()


def bare_instrument() -> tuple[RecordSet, Study]:
    records = record_set()
    north, south = records.instruments
    return RecordSet(records.records, (replace(north, u_force=0.0, u_strain=0.0), south)), study()


def bare_specimen() -> tuple[RecordSet, Study]:
    return changed(record_set(), 1, uncertainty=Uncertainty()), study()


def bare_reference() -> tuple[RecordSet, Study]:
    records = record_set()
    one = records.records[1]
    return changed(records, 1, reference_time=10.0, response=one.response / one.response[12]), study()


def conditioned() -> tuple[RecordSet, Study]:
    return record_set(), study(duty("wet season", state="conditioned"))


FIRES: dict[str, tuple[str, Case, str, str]] = {
    "a gap": ("time order and gaps", gap, "B1-2a", "caution"),
    "time runs backwards": ("time order and gaps", backwards, "B1-2a", "fail"),
    "clipped stress": ("saturation", saturated_ramp, "B1-2a", "caution"),
    "one test twice": ("repeats", repeated, "B2-2a", "fail"),
    "zero drifts": ("drift before the ramp", lambda: dwelling(-0.01), "B1-2a", "caution"),
    "many missing": ("missing readings", missing, "B1-2a", "caution"),
    "batch on an instrument of its own": ("confounding", own_instrument, "B1", "caution"),
    "four batches": ("few batches", four_batches, "all batches", "caution"),
    "a fifth batch held out": ("few batches", untested_batch, "all batches", "caution"),
    "each specimen once": ("one record a specimen", once_each, "all specimens", "caution"),
    "instrument without uncertainty": ("declared uncertainties", bare_instrument, "north", "caution"),
    "specimen without uncertainty": ("declared uncertainties", bare_specimen, "dimensions and mounting", "caution"),
    "reference without uncertainty": ("declared uncertainties", bare_reference, "reference readings", "caution"),
    "a state never tested": ("state", conditioned, "wet season", "caution"),
}


def doubts(name: str, case: tuple[RecordSet, Study]) -> list[Finding]:
    records, chosen = case
    layout = lay_out(study(), record_set())
    return [finding for finding in BEFORE[name](records, chosen, layout) if finding.outcome != "pass"]


@pytest.mark.parametrize(("check", "case", "subject", "outcome"), FIRES.values(), ids=FIRES)
def test_fires_on_its_subject_alone(check: str, case: Case, subject: str, outcome: str) -> None:
    assert [(finding.subject, finding.outcome) for finding in doubts(check, case())] == [(subject, outcome)]


@pytest.mark.parametrize("check", BEFORE)
def test_clean_data_passes_with_one_finding(check: str) -> None:
    records, chosen = record_set(), study()
    (finding,) = BEFORE[check](records, chosen, lay_out(chosen, records))
    assert finding.outcome == "pass"


def test_every_check_is_shown_to_fire() -> None:
    assert {check for check, *_ in FIRES.values()} == set(BEFORE)


def test_a_still_zero_before_the_ramp_passes() -> None:
    assert doubts("drift before the ramp", dwelling(0.0)) == []


def test_identical_readings_of_an_instant_are_no_saturation() -> None:
    """Five readings within a hundredth of a decade of a hold may agree to the last digit."""
    records = record_set()
    one = records.records[1]
    time = one.time.copy()
    time[5:10] = time[5] * (1.0 + 0.002 * np.arange(5))
    response = one.response.copy()
    response[5:10] = 1.05 * response.min()
    history = History(np.concatenate([[0.0], time]), np.concatenate([[0.0], np.full(time.size, LEVEL)]))
    assert doubts("saturation", (changed(records, 1, time=time, response=response, history=history), study())) == []


def test_ratios_need_no_instrument_uncertainty_and_confound_nothing() -> None:
    records, _ = own_instrument()
    own = tuple(replace(one, reference_time=10.0, uncertainty=Uncertainty(reference=0.005)) for one in records.records)
    bare = tuple(replace(one, u_force=0.0, u_strain=0.0) for one in records.instruments)
    ratios = RecordSet(own, bare)
    assert doubts("confounding", (ratios, study())) == []
    assert doubts("declared uncertainties", (ratios, study())) == []


def test_all_run_together_in_order() -> None:
    found = before_sampling(*four_batches())
    assert list(dict.fromkeys(finding.check for finding in found)) == list(BEFORE)
    assert [finding.check for finding in found if finding.outcome != "pass"] == ["few batches"]


def test_a_law_that_cannot_be_laid_out_is_refused() -> None:
    with pytest.raises(StudyError, match="horizon"):
        before_sampling(record_set(), replace(study(), horizon=10.0))


def test_checks_load_no_sampler() -> None:
    heavy = ("pymc", "nutpie", "arviz", "pytensor", "xarray", "pandas")
    code = f"import sys, perdure.checks; print(*(name for name in {heavy} if name in sys.modules))"
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    assert done.stdout.split() == []


def test_enough_batches_are_the_same_number_on_the_page() -> None:
    assert ENOUGH == ENOUGH_BATCHES
