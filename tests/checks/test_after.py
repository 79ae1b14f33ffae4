"""Checks of a fitted study: each is silent on a clean fit and fires, on the right subject, on one made to trigger it."""

from __future__ import annotations

from collections.abc import Callable
from dataclasses import replace

import numpy as np
import pytest
from numpy.typing import NDArray

from perdure.border.record_builder import NOMINAL_STRAIN
from perdure.checks import AFTER, after_sampling, extrapolation
from perdure.checks.fitted import FittedStudy
from perdure.inference.state import State
from perdure.rheology.history import History
from perdure.study.finding import Finding
from perdure.study.records import RecordSet
from tests.checks.small_study import DIAGNOSIS, LEVEL, attempt, changed, duty, fit, record_set, study

Array = NDArray[np.float64]
Change = Callable[[FittedStudy], FittedStudy]


def doubts(check: str, fitted: FittedStudy) -> list[Finding]:
    return [finding for finding in AFTER[check](fitted) if finding.outcome != "pass"]


def diagnosed(**figures: float) -> Change:
    return lambda clean: replace(clean, diagnosis=replace(DIAGNOSIS, **figures))  # type: ignore[arg-type] # named by the tests


def moved(change: Callable[[State, int], State]) -> Change:
    """Every draw changed; the second argument numbers the draws."""

    def apply(clean: FittedStudy) -> FittedStudy:
        packing = clean.density.packing
        draws = [packing.join(change(packing.split(draw.copy()), row)) for row, draw in enumerate(clean.draws)]
        return replace(clean, draws=np.stack(draws))

    return apply


def noise_times(factor: float) -> Change:
    return moved(lambda state, _: replace(state, log_noise=state.log_noise + np.log(factor)))


def one_specimen_noisier(clean: FittedStudy) -> FittedStudy:
    one = clean.records.records[3]
    response = one.response * (1.0 + 0.02 * np.random.default_rng(2).standard_normal(one.time.size))
    return replace(clean, records=changed(clean.records, 3, response=response))


def bump(clean: FittedStudy) -> FittedStudy:
    """One specimen a percent off the law between 200 s and 2000 s only."""
    one = clean.records.records[3]
    inside = (one.time > 200) & (one.time < 2000)
    return replace(clean, records=changed(clean.records, 3, response=one.response * np.where(inside, 1.01, 1.0)))


def from_prior(*names: str) -> Change:
    """Coordinates of the root drawn from their priors instead of the posterior."""

    def apply(clean: FittedStudy) -> FittedStudy:
        structure = clean.density.structure
        draws = clean.draws.copy()
        rng = np.random.default_rng(4)
        for name in names:
            place = 1 + structure.law.shape_names.index(name)
            sd = np.sqrt(structure.priors.covariance[place, place])
            draws[:, place] = structure.priors.mean[place] + 1.2 * sd * rng.standard_normal(draws.shape[0])
        return replace(clean, draws=draws)

    return apply


def serving(**changes: object) -> Change:
    return lambda clean: replace(clean, study=study(duty(**changes)))  # type: ignore[arg-type] # fields of a duty


def held(level: float = LEVEL, ramp: float = 3.0, end: float = 3600.0) -> History:
    return History(np.array([0.0, ramp, end]), np.array([0.0, level, level]))


FIRES: dict[str, tuple[str, Change, list[str]]] = {
    "R-hat": ("convergence", diagnosed(rhat=1.02), ["R-hat"]),
    "R-hat that does not exist": ("convergence", diagnosed(rhat=float("inf")), ["R-hat"]),
    "bulk": ("convergence", diagnosed(ess_bulk=399.0), ["bulk effective sample size"]),
    "tail": ("convergence", diagnosed(ess_tail=10.0), ["tail effective sample size"]),
    "divergences": ("convergence", diagnosed(divergences=1), ["divergences"]),
    "energy": ("convergence", diagnosed(ebfmi=0.2), ["E-BFMI"]),
    "a figure that is not a number": ("convergence", diagnosed(ebfmi=float("nan")), ["E-BFMI"]),
    "a noisier specimen": ("coverage of readings", one_specimen_noisier, ["B2-2"]),
    "a bump": ("residuals over time", bump, ["B2-2"]),
    "certain scatter below type B": (
        "scatter sensitivity",
        moved(lambda state, _: replace(state, specimen_sd=0.001 * np.ones(1))),
        ["stiffness, between specimens"],
    ),
    "batches alike to calibration": (
        "scatter sensitivity",
        moved(lambda state, _: replace(state, batch_sd=1e-6 * np.ones(1))),
        ["stiffness, between batches"],
    ),
    "a level nobody saw": ("prior dominance", from_prior("level_5"), ["population"]),
    "a long duty": ("extrapolation", serving(history=held(end=3e5)), ["short hold, reduced time", "short hold, new mechanisms"]),
    "a hot duty": ("extrapolation", serving(temperature=310.0), ["short hold, temperature"]),
    "a larger strain": ("extrapolation", serving(history=held(level=-0.15)), ["short hold, strain level"]),
    "a smaller strain": ("extrapolation", serving(history=held(level=-0.05)), ["short hold, strain level"]),
    "a faster ramp": ("extrapolation", serving(history=held(ramp=0.02)), ["short hold, rate"]),
    "another sense": ("extrapolation", serving(sense="shear"), ["short hold, sense"]),
    "another state": ("extrapolation", serving(state="wet"), ["short hold, state"]),
}


@pytest.mark.parametrize(("check", "change", "subjects"), FIRES.values(), ids=FIRES)
def test_fires_on_its_subject_alone(clean: FittedStudy, check: str, change: Change, subjects: list[str]) -> None:
    assert [finding.subject for finding in doubts(check, change(clean))] == subjects


@pytest.mark.parametrize("check", AFTER)
def test_clean_fit_passes(clean: FittedStudy, check: str) -> None:
    found = AFTER[check](clean)
    assert found
    assert [finding for finding in found if finding.outcome != "pass"] == []


def test_every_check_is_shown_to_fire() -> None:
    assert {check for check, *_ in FIRES.values()} | {"linearity"} == set(AFTER)


def test_all_run_together_in_order(clean: FittedStudy) -> None:
    assert list(dict.fromkeys(finding.check for finding in after_sampling(clean))) == list(AFTER)


def test_only_a_missed_gate_stops_verdicts(clean: FittedStudy) -> None:
    missed = replace(bump(clean), diagnosis=replace(DIAGNOSIS, divergences=2))
    assert [(finding.subject, finding.outcome) for finding in after_sampling(missed) if finding.blocking] == [("divergences", "fail")]


@pytest.mark.parametrize(
    "figures", [{}, {"rhat": 1.011}, {"ess_bulk": 399.9}, {"ess_tail": 0.0}, {"divergences": 3}, {"ebfmi": 0.29}], ids=str
)
def test_blocks_exactly_where_the_sampler_does_not_release(clean: FittedStudy, figures: dict[str, float]) -> None:
    at = replace(DIAGNOSIS, **figures)  # type: ignore[arg-type] # named by the test
    blocked = any(finding.blocking for finding in AFTER["convergence"](replace(clean, diagnosis=at)))
    assert blocked is not at.passed


def test_each_retry_is_a_caution_that_names_the_change(clean: FittedStudy) -> None:
    changes = ["settings as declared", "target acceptance raised", "twice the draws"]
    found = doubts("convergence", replace(clean, attempts=[attempt(change) for change in changes]))
    assert [(finding.subject, finding.outcome) for finding in found] == [("attempt 2", "caution"), ("attempt 3", "caution")]
    assert [change in finding.message for change, finding in zip(changes[1:], found, strict=True)] == [True, True]


@pytest.mark.parametrize(("factor", "words"), [(0.3, "too narrow"), (8.0, "taken too large")])
def test_coverage_says_on_which_side_it_fails(clean: FittedStudy, factor: float, words: str) -> None:
    found = doubts("coverage of readings", noise_times(factor)(clean))
    assert len(found) >= 5  # specimens tested once have too few readings for a test at 0.1 %
    assert all(words in finding.message for finding in found)
    assert all("independent" in finding.message for finding in found)


def test_systematic_miss_names_its_times(clean: FittedStudy) -> None:
    (found,) = doubts("residuals over time", bump(clean))
    assert found.value is not None
    assert found.value > 4
    assert "The law misses systematically" in found.message


def test_relaxation_beyond_the_tests_may_rest_on_its_prior(clean: FittedStudy) -> None:
    (found,) = AFTER["prior dominance"](from_prior("level_10")(clean))
    assert found.outcome == "pass"
    time = clean.density.structure.law.times[9]
    assert f"{time / 86_400 / 365.25:.3g} a" in found.message or f"{time / 86_400:.3g} d" in found.message


@pytest.mark.parametrize(("change", "fires"), [(0.10, True), (-0.10, True), (0.02, False)])
def test_linearity_sees_an_effect_of_strain_of_its_size(change: float, fires: bool) -> None:
    (found,) = AFTER["linearity"](fit(record_set(stiffening=change), study(), size=100))
    assert found.outcome == ("caution" if fires else "pass")
    # each record meets its own stiffness to about noise / √readings
    assert found.value == pytest.approx(abs(np.expm1(change)), abs=0.004)


def test_linearity_takes_scatter_between_specimens_for_scatter() -> None:
    """One level a specimen: what differs between the levels is as large as what differs at one level."""
    records = record_set()
    own = tuple(one for one in records.records if one.name.endswith("a"))
    (found,) = AFTER["linearity"](fit(RecordSet(own, records.instruments), study(), size=100))
    assert found.outcome == "pass"
    assert "between specimens of a batch" in found.message


def test_linearity_cannot_be_tested_at_one_level(clean: FittedStudy) -> None:
    own = tuple(one for one in clean.records.records if abs(one.strain_level) == abs(LEVEL))
    (found,) = AFTER["linearity"](replace(clean, records=RecordSet(own, clean.records.instruments)))
    assert (found.outcome, found.value) == ("pass", None)
    assert found.message.startswith("Not testable")


@pytest.mark.parametrize(("end", "words"), [(3e5, "decades past"), (9e6, "not a measurement")])
def test_extrapolation_in_time_is_measured_in_decades(clean: FittedStudy, end: float, words: str) -> None:
    found = doubts("extrapolation", serving(history=held(end=end))(clean))[0]
    assert found.unit == "decades"
    assert found.value == pytest.approx(np.log10(end / 2e4))
    assert words in found.message


def test_nominal_strain_of_ratios_is_no_tested_level(clean: FittedStudy) -> None:
    own = tuple(
        replace(one, reference_time=10.0, history=History(one.history.time, one.history.value * NOMINAL_STRAIN / abs(one.strain_level)))
        for one in clean.records.records
    )
    found = doubts("extrapolation", replace(clean, records=RecordSet(own, clean.records.instruments)))
    assert [(finding.subject, finding.value) for finding in found] == [("short hold, strain level", None)]
    assert extrapolation.NOMINAL_STRAIN == NOMINAL_STRAIN


def test_a_specimen_that_the_fit_never_saw_is_predicted_but_not_checked() -> None:
    records = record_set(batches=2)
    place = len(records.records) - 3
    unseen = records.records[place]
    alone = changed(records, place, held_out=np.ones(unseen.time.size, dtype=np.bool_))
    fitted = fit(alone, study(), size=100)
    assert [one.specimen for one in alone.records].count(unseen.specimen) == 1
    checked = {finding.subject for finding in after_sampling(fitted) if finding.check in {"coverage of readings", "residuals over time"}}
    assert checked == set(alone.specimens) - {unseen.specimen}
    bands = fitted.predictive
    own = bands.record == place
    # a new specimen's scatter is in its bands
    assert float(np.median(bands.sd[own] / np.abs(bands.mean[own]))) > 2 * float(np.median(bands.sd[~own] / np.abs(bands.mean[~own])))
