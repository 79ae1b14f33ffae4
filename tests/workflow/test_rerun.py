"""What runs again after a change: what it must, and nothing else."""

from __future__ import annotations

from collections.abc import Callable

import pytest

from perdure.steps.chain import CHAIN
from tests.workflow.bench import SECOND_DUTY, Bench, Finished

ALL = set(CHAIN) - {"holdout"}
FROM_PRIORS = ALL - {"intake"}
FROM_FIT = FROM_PRIORS - {"priors"}
DUTY = {"checks", "predict", "report"}


def add_history(bench: Bench) -> None:
    (bench.study("one") / "histories").mkdir()
    (bench.study("one") / "histories" / "year.csv").write_text("time [h],strain [%]\n0,0\n1,2\n", encoding="utf-8")


def comment(bench: Bench) -> None:
    bench.edit("one", "study.yaml", "format: 1 ", "# a remark\nformat:    1 ")


CHANGES: dict[str, tuple[Callable[[Bench], None], set[str], str]] = {
    "comment edited": (comment, set(), ""),
    "record added": (lambda bench: bench.add_record("one"), ALL, "register.csv changed, files in records/ changed"),
    "record edited": (lambda bench: bench.rewrite_reading("one", "strip_1a.csv"), ALL, "files in records/ changed"),
    "record left out": (
        lambda bench: bench.edit("one", "register.csv", "virgin,yes,,,", "virgin,no,,,slipped"),
        ALL,
        "register.csv changed",
    ),
    "instrument changed": (lambda bench: bench.edit("one", "study.yaml", "force: 0.5 %", "force: 0.4 %"), ALL, "instruments changed"),
    "hold-out declared": (
        lambda bench: bench.edit("one", "study.yaml", "sampler:\n", "hold out: {specimens: [2b]}\nsampler:\n"),
        ALL | {"holdout"},
        "the hold-out changed",
    ),
    "prior changed": (
        lambda bench: bench.edit(
            "one",
            "study.yaml",
            "instruments:\n",
            'priors:\n  modulus: {low: 2 MPa, high: 5 MPa, coverage: 90 %, source: "own"}\ninstruments:\n',
        ),
        FROM_PRIORS,
        "material, law, scatter, horizon or priors changed",
    ),
    "noise prior changed": (
        lambda bench: bench.edit(
            "one",
            "study.yaml",
            "instruments:\n",
            'priors:\n  noise relative: {low: 0.01 %, high: 1 %, coverage: 90 %, source: "own"}\ninstruments:\n',
        ),
        ALL,
        "material or noise ranges changed",
    ),
    "horizon changed": (
        lambda bench: bench.edit("one", "study.yaml", "#horizon: 5 a", "horizon: 5 a"),
        FROM_PRIORS,
        "material, law, scatter, horizon or priors changed",
    ),
    "seed changed": (lambda bench: bench.edit("one", "study.yaml", "seed: 20261", "seed: 20262"), FROM_FIT, "sampler settings changed"),
    "duty added": (
        lambda bench: bench.edit("one", "study.yaml", "duties:\n", SECOND_DUTY.replace("second", "third")),
        DUTY,
        "duties changed",
    ),
    "duty removed": (lambda bench: bench.edit("one", "study.yaml", SECOND_DUTY, "duties:\n"), DUTY, "duties changed"),
    "service history added": (add_history, DUTY, "duties changed"),
    "duty edited": (lambda bench: bench.edit("one", "study.yaml", "at least: 0.15 MPa", "at least: 0.16 MPa"), DUTY, "duties changed"),
    "title changed": (lambda bench: bench.edit("one", "study.yaml", "title: ", "title: New "), {"report"}, "title, display units"),
    "display unit changed": (lambda bench: bench.edit("one", "study.yaml", "  stress: MPa", "  stress: psi"), {"report"}, "display units"),
}


SLOW = (
    "instrument changed",
    "hold-out declared",
    "noise prior changed",
    "horizon changed",
    "service history added",
    "display unit changed",
)
"""Left to the slow tests: tests/steps/test_plan.py shows quickly which part each of them belongs to."""


@pytest.mark.parametrize("change", [pytest.param(name, marks=pytest.mark.slow) if name in SLOW else name for name in CHANGES])
def test_only_what_must_runs_again(bench: Bench, change: str) -> None:
    edit, steps, reason = CHANGES[change]
    edit(bench)
    reasons = bench.reasons()
    assert set(reasons) == {("one", step) for step in steps}
    if steps:
        first = next(step for step in CHAIN if step in steps)
        assert reason in reasons["one", first]


def test_reasons_follow_the_chain(bench: Bench) -> None:
    bench.edit("one", "study.yaml", "seed: 20261", "seed: 20262")
    assert bench.reasons()["one", "report"] == "follows fit, checks, parameters, predict"


def test_missing_file_is_made_again_with_what_follows(bench: Bench) -> None:
    (bench.results / "two" / "margins.csv").unlink()
    assert bench.pending() == {("two", "predict"), ("two", "report")}


def test_a_study_that_moved_does_not_run_again(finished: Finished, bench: Bench) -> None:
    assert finished.bench.folder != bench.folder
    assert bench.pending() == set()
