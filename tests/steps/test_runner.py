"""What all steps share: arguments, errors, log, note, withdrawal."""

from __future__ import annotations

import json
import os
import signal
import time
from contextlib import suppress
from pathlib import Path

import pytest

from perdure.errors import ResultError, StudyError, problem
from perdure.steps.chain import CHAIN, files, log, note
from perdure.steps.runner import DONE, FAILED, STARTED, Place, need, outcome, run_step


@pytest.fixture
def arguments(tmp_path: Path) -> list[str]:
    (tmp_path / "pads").mkdir()
    return ["--study", str(tmp_path / "pads"), "--results", str(tmp_path / "results" / "pads"), "--cores", "2"]


@pytest.fixture
def results(tmp_path: Path) -> Path:
    return tmp_path / "results" / "pads"


def fill(results: Path, step: str) -> None:
    for name in files(step):
        (results / name).parent.mkdir(parents=True, exist_ok=True)
        (results / name).write_text("old", encoding="utf-8")


def good(place: Place) -> None:
    for name in CHAIN["predict"].makes:
        place.file(name).write_text("new", encoding="utf-8")


def test_good_step_leaves_log_and_note(arguments: list[str], results: Path, capsys: pytest.CaptureFixture[str]) -> None:
    seen: list[Place] = []

    def work(place: Place) -> None:
        seen.append(place)
        good(place)

    assert run_step("predict", work, arguments) == 0
    assert (seen[0].name, seen[0].cores, seen[0].results) == ("pads", 2, results)
    written = json.loads((results / note("predict")).read_text(encoding="utf-8"))
    assert written["seconds"] >= 0
    assert set(written["depends"]) == {"duties", "code"}
    assert "numpy" in written["versions"]
    found = outcome(results, "predict")
    assert found is not None
    assert found.state == DONE
    assert capsys.readouterr().err.startswith("pads: predict predicts the duties")


def test_users_mistake_is_told_without_a_traceback(arguments: list[str], results: Path, capsys: pytest.CaptureFixture[str]) -> None:
    def work(_place: Place) -> None:
        raise StudyError([problem("study.yaml, key law", "x", "maxwell", "Write maxwell."), problem("register.csv", "y", "z", "Mend it.")])

    assert run_step("fit", work, arguments) == 1
    said = capsys.readouterr().err
    assert "Write maxwell." in said
    assert "Mend it." in said
    assert "Traceback" not in said + (results / log("fit")).read_text(encoding="utf-8")
    found = outcome(results, "fit")
    assert found is not None
    assert found.state == FAILED
    assert len(found.text.splitlines()) == 2


def test_fault_of_ours_has_its_traceback_in_the_log_alone(arguments: list[str], results: Path, capsys: pytest.CaptureFixture[str]) -> None:
    def work(_place: Place) -> None:
        raise ZeroDivisionError("by nothing")

    assert run_step("fit", work, arguments) == 1
    said = capsys.readouterr().err
    assert "unexpected ZeroDivisionError: by nothing" in said
    assert "Traceback" not in said
    assert "Traceback" in (results / log("fit")).read_text(encoding="utf-8")
    found = outcome(results, "fit")
    assert found is not None
    assert "Traceback" not in found.text


def test_step_that_forgets_a_file_fails(arguments: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    def work(place: Place) -> None:
        place.file("priors.csv").write_text("", encoding="utf-8")

    assert run_step("priors", work, arguments) == 1
    assert "did not write evidence/priors.json" in capsys.readouterr().err


def test_files_of_later_steps_are_withdrawn_before_the_work_begins(arguments: list[str], results: Path) -> None:
    for step in CHAIN:
        fill(results, step)

    def work(place: Place) -> None:
        left = {step for step in CHAIN if all(place.file(name).exists() for name in files(step))}
        assert left == set(CHAIN) - {"predict", "report"}
        good(place)

    assert run_step("predict", work, arguments) == 0
    assert not (results / "report.html").exists()


def test_step_that_was_killed_is_told_from_one_that_ended(results: Path) -> None:
    assert outcome(results, "fit") is None
    (results / log("fit")).parent.mkdir(parents=True)
    (results / log("fit")).write_text(f"{STARTED} now\n", encoding="utf-8")
    found = outcome(results, "fit")
    assert found is not None
    assert found.state == STARTED


@pytest.mark.parametrize("number", [signal.SIGINT, signal.SIGTERM])
def test_a_signal_stops_a_step_whatever_it_does_about_interrupts(arguments: list[str], results: Path, number: signal.Signals) -> None:
    handlers = {one: signal.getsignal(one) for one in (signal.SIGINT, signal.SIGTERM)}

    def work(place: Place) -> None:
        # a sampler makes do with the draws it has
        with suppress(KeyboardInterrupt, Exception):
            os.kill(os.getpid(), number)
            time.sleep(5)
        good(place)

    try:
        assert run_step("predict", work, arguments) == 130
        # whoever stops a run may well say it twice: the second must not interrupt the last words
        assert {signal.getsignal(one) for one in handlers} == {signal.SIG_IGN}
    finally:
        for one, handler in handlers.items():
            signal.signal(one, handler)
    found = outcome(results, "predict")
    assert found is not None
    assert found.state == STARTED
    assert not (results / "margins.csv").exists()


@pytest.mark.parametrize("error", [None, ZeroDivisionError])
def test_a_step_that_was_not_stopped_leaves_signals_as_they_were(arguments: list[str], error: type[Exception] | None) -> None:
    handlers = signal.getsignal(signal.SIGINT), signal.getsignal(signal.SIGTERM)

    def work(place: Place) -> None:
        if error is not None:
            raise error
        good(place)

    assert run_step("predict", work, arguments) == int(error is not None)
    assert (signal.getsignal(signal.SIGINT), signal.getsignal(signal.SIGTERM)) == handlers


@pytest.mark.parametrize("wrong", [["--cores", "0"], ["--cores", "x"], ["--bogus"]])
def test_wrong_arguments_end_with_usage(arguments: list[str], wrong: list[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        run_step("fit", good, [*arguments, *wrong])
    assert ended.value.code == 2


def test_a_missing_file_names_the_step_that_makes_it(tmp_path: Path) -> None:
    with pytest.raises(ResultError, match="step intake"):
        need(tmp_path / "records.nc", "intake")
