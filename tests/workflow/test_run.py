"""A whole run: files, exit codes, and studies that stay as they are."""

from __future__ import annotations

import csv
import fcntl
import json
import os
import shutil
import subprocess
import sys

import numpy as np
import pytest
import xarray as xr

from perdure.commands.snakemake import NOTES
from perdure.errors import ResultError
from perdure.steps.chain import CHAIN, files, later
from perdure.steps.plan import made, plan
from tests.workflow.bench import DRAWS, SECOND_DUTY, STUDIES, Bench, Finished, digest_of

RESULTS = [name for step in later("fit") for name in files(step)]
"""What a reader could take for a result: all that is made from a posterior."""


def rows_of(bench: Bench, study: str, file: str) -> list[dict[str, str]]:
    with (bench.results / study / file).open(encoding="utf-8", newline="") as handle:
        return list(csv.DictReader(handle))


def holding(bench: Bench, study: str, words: str) -> set[str]:
    """Files of the study's results that hold ``words`` anywhere."""
    own = bench.results / study
    return {path.relative_to(own).as_posix() for path in own.rglob("*") if path.is_file() and words.encode() in path.read_bytes()}


def test_first_run_is_released_and_writes_every_file(finished: Finished) -> None:
    assert finished.first.returncode == 0, finished.first.stdout + finished.first.stderr
    for name in STUDIES:
        missing = [file for file in made(plan(finished.bench.study(name))) if not (finished.bench.results / file).is_file()]
        assert missing == []
        assert f"{name}: released" in finished.first.stdout
        assert str(finished.bench.results / name / "report.html") in finished.first.stdout
    assert "Traceback" not in finished.first.stderr


def test_study_folders_are_untouched(finished: Finished) -> None:
    after = {name: digest_of(finished.bench.study(name)) for name in STUDIES}
    assert after == finished.before
    assert (finished.bench.results / NOTES / "metadata").is_dir()
    assert not (finished.bench.folder / NOTES).exists()


def test_notes_of_the_run_hold_versions_durations_and_inputs(finished: Finished) -> None:
    run = json.loads((finished.bench.results / "one" / "run.json").read_text(encoding="utf-8"))
    assert run["released"] is True
    assert set(run["durations"]) == set(CHAIN) - {"holdout", "report"}
    assert {"study.yaml", "register.csv", "records/strip_1a.csv"} <= set(run["inputs"])
    assert {"python", "numpy", "perdure"} <= set(run["versions"])


def test_nothing_runs_twice(bench: Bench) -> None:
    reports = {name: (bench.results / name / "report.html").stat().st_mtime_ns for name in STUDIES}
    done = bench.run()
    assert done.returncode == 0, done.stderr
    assert done.stdout.count("everything is up to date") == len(STUDIES)
    assert {name: (bench.results / name / "report.html").stat().st_mtime_ns for name in STUDIES} == reports


def test_removed_duty_leaves_no_row_behind_and_no_refit(bench: Bench) -> None:
    tables = {"bands.csv", "margins.csv", "predictions.nc", "findings.csv", "report.html", "evidence/checks.json", "evidence/predict.json"}
    assert holding(bench, "one", "second cover") == tables
    assert holding(bench, "one", "cover held down") >= tables
    posterior = bench.results / "one" / "posterior.nc"
    fitted = posterior.stat().st_mtime_ns
    bench.edit("one", "study.yaml", SECOND_DUTY, "duties:\n")
    done = bench.run()
    assert done.returncode == 0, done.stderr
    assert "predict     duties changed" in done.stdout
    assert holding(bench, "one", "second cover") == set()
    assert holding(bench, "one", "cover held down") >= tables
    assert posterior.stat().st_mtime_ns == fitted


def test_record_added_runs_the_chain_of_its_study_alone(bench: Bench) -> None:
    other = digest_of(bench.results / "two")
    dates = {name: (bench.results / "two" / name).stat().st_mtime_ns for name in other}
    bench.add_record("one")
    done = bench.run()
    assert done.returncode == 0, done.stdout + done.stderr
    for step in set(CHAIN) - {"holdout"}:
        assert f"one: {step} done" in done.stderr
        assert f"two: {step}" not in done.stderr
    assert {row["record"] for row in rows_of(bench, "one", "evidence/fitted.csv")} >= {"strip 1a", "strip 1c"}
    assert digest_of(bench.results / "two") == other
    assert {name: (bench.results / "two" / name).stat().st_mtime_ns for name in other} == dates


def test_study_that_fails_the_gate_is_reported_and_not_released(bench: Bench) -> None:
    """Too few draws for the gate, whatever is retried: everything is written and nothing is claimed."""
    bench.edit("one", "study.yaml", f"draws: {DRAWS} ", "draws: 100 ")
    bench.edit("two", "study.yaml", "title: ", "title: New ")
    done = bench.run()
    assert done.returncode == 1
    assert "one: NOT RELEASED" in done.stdout
    assert "two: released" in done.stdout
    assert "Traceback" not in done.stderr
    fit = json.loads((bench.results / "one" / "evidence" / "fit.json").read_text(encoding="utf-8"))
    assert fit["released"] is False
    assert len(fit["attempts"]) == 3
    bands, margins = rows_of(bench, "one", "bands.csv"), rows_of(bench, "one", "margins.csv")
    assert {row["released"] for row in bands} == {"no"}
    assert {(row["released"], row["verdict"]) for row in margins} == {("no", "not released")}
    claims = ("share mean", "share low", "share high", "probability", "probability mcse", "bound", "difference", "ratio", "median response")
    assert {row[claim] for row in margins for claim in claims} == {""}
    assert {row["duty"] for row in margins} == {"cover held down", "second cover"}
    assert json.loads((bench.results / "one" / "run.json").read_text(encoding="utf-8"))["released"] is False
    assert "not released" in (bench.results / "one" / "report.html").read_text(encoding="utf-8").casefold()
    with xr.open_datatree(bench.results / "one" / "predictions.nc", engine="h5netcdf") as tree:
        for duty in tree.children.values():
            assert duty.attrs["released"] == "no"
            assert np.isnan(duty["probability"].to_numpy()).all()
            assert np.isnan(duty["bound"].to_numpy()).all()
    # nothing is left to do, and it still fails
    again = bench.run()
    assert again.returncode == 1
    assert again.stdout.count("everything is up to date") == len(STUDIES)
    assert "one: NOT RELEASED" in again.stdout


def test_study_with_problems_is_not_run_and_leaves_the_other_running(bench: Bench) -> None:
    """Nor does what an earlier run predicted for it stay; mended, it is predicted again from the posterior that was kept."""
    shown = {name: (bench.results / "one" / name).read_bytes() for name in ("margins.csv", "bands.csv")}
    posterior = bench.results / "one" / "posterior.nc"
    fitted = posterior.stat().st_mtime_ns
    bench.edit("one", "study.yaml", "family: filled rubber", "family: filled ruber")
    bench.edit("one", "register.csv", ",yes,", ",maybe,")
    bench.edit("two", "study.yaml", "title: ", "title: New ")
    done = bench.run()
    assert done.returncode == 1
    assert "filled ruber" in done.stderr
    assert "maybe" in done.stderr
    assert "one: NOT RUN" in done.stdout
    assert "of an earlier run are withdrawn" in done.stdout
    assert "two: released" in done.stdout
    assert "one: intake" not in done.stderr
    assert "two: report done" in done.stderr
    again = bench.run()
    assert again.returncode == 1
    assert "one: NOT RUN" in again.stdout
    assert [name for name in RESULTS if (bench.results / "one" / name).exists()] == []
    bench.edit("one", "study.yaml", "family: filled ruber", "family: filled rubber")
    bench.edit("one", "register.csv", ",maybe,", ",yes,")
    mended = bench.run()
    assert mended.returncode == 0, mended.stderr
    assert "one: released" in mended.stdout
    assert {name: (bench.results / "one" / name).read_bytes() for name in shown} == shown
    assert posterior.stat().st_mtime_ns == fitted


def test_plain_snakemake_keeps_the_others_going_and_names_the_failure(bench: Bench) -> None:
    """Data that the intake refuses: no old result stays, now or at the next run."""
    bench.rewrite_reading("one", "strip_1a.csv", "not a number")
    bench.edit("two", "study.yaml", "title: ", "title: New ")
    first = bench.plain_snakemake()
    assert "two: report done" in first.stderr
    for done in (first, bench.plain_snakemake()):
        assert done.returncode != 0
        assert "one: intake failed" in done.stderr
        assert "strip_1a.csv" in done.stderr
        assert [name for name in ("records.nc", "posterior.nc", *RESULTS) if (bench.results / "one" / name).exists()] == []


def test_no_old_result_survives_a_crash(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    """A good run; then new data make the fit crash; the next run must not find "nothing to do" beside the old predictions."""
    shown = {name: (bench.results / "one" / name).read_bytes() for name in ("margins.csv", "bands.csv")}
    record = bench.study("one") / "records" / "strip_1a.csv"
    sound = record.read_bytes()
    bench.rewrite_reading("one", "strip_1a.csv")
    bench.edit("two", "study.yaml", "title: ", "title: New ")
    crash = bench.folder / "crash"
    crash.mkdir()
    # found by every Python process of the run: breaks the sampler in the processes of the chains
    (crash / "sitecustomize.py").write_text(
        "import sys\n"
        "if any('spawn_main' in word for word in sys.orig_argv):\n"
        "    import nutpie\n"
        "    def crash(*arguments, **options):\n"
        "        raise MemoryError('the sampler broke')\n"
        "    nutpie.sample = crash\n",
        encoding="utf-8",
    )
    with monkeypatch.context() as patched:
        patched.setenv("PYTHONPATH", os.pathsep.join([str(crash), os.environ.get("PYTHONPATH", "")]))
        first = bench.run()
        assert "one: FAILED at fit" in first.stdout
        assert "two: released" in first.stdout
        assert "two: report done" in first.stderr
        for done in (first, bench.run()):
            assert done.returncode != 0
            assert "one: fit failed" in done.stderr
            assert "the sampler broke" in done.stderr
            assert "one: released" not in done.stdout
            assert [name for name in (*files("fit"), *RESULTS) if (bench.results / "one" / name).exists()] == []
    reasons = bench.reasons()
    assert reasons["one", "fit"] == "failed last time"
    assert ("one", "predict") in reasons
    assert ("one", "intake") not in reasons
    assert not [study for study, _ in reasons if study == "two"]
    record.write_bytes(sound)
    mended = bench.run()
    assert mended.returncode == 0, mended.stderr
    assert "one: released" in mended.stdout
    assert {name: (bench.results / "one" / name).read_bytes() for name in shown} == shown


def test_lock_of_a_killed_run_is_removed_and_said_to_be(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    locks = bench.results / NOTES / "locks"
    locks.mkdir(exist_ok=True)
    (locks / "0.output.lock").write_text("one/report.html\n", encoding="utf-8")
    assert bench.pending() == set()
    assert "left its lock behind" in capsys.readouterr().err
    assert list(locks.glob("*.lock")) == []


def test_lock_of_a_snakemake_at_work_is_respected(bench: Bench) -> None:
    (bench.results / NOTES / "locks").mkdir(exist_ok=True)
    lock = bench.results / NOTES / "locks" / "0.output.lock"
    lock.write_text("one/report.html\n", encoding="utf-8")
    # a process that is called snakemake and works in the results folder
    at_work = subprocess.Popen([sys.executable, "-c", "input()", "snakemake"], cwd=bench.results, stdin=subprocess.PIPE)
    try:
        with pytest.raises(ResultError, match="another run at work"):
            bench.pending()
    finally:
        at_work.communicate(b"\n")
    assert lock.is_file()


def test_two_runs_in_one_results_folder_are_refused(bench: Bench) -> None:
    handle = os.open(bench.results / NOTES / "perdure" / "lock", os.O_RDWR)
    try:
        fcntl.flock(handle, fcntl.LOCK_EX)
        with pytest.raises(ResultError, match="another run at work"):
            bench.pending()
    finally:
        os.close(handle)


def test_lost_notes_make_everything_run_again(bench: Bench, capsys: pytest.CaptureFixture[str]) -> None:
    """Without its notes Snakemake compares dates only, and would take old results for new ones."""
    shutil.rmtree(bench.results / NOTES / "metadata")
    assert bench.pending() == {(name, step) for name in STUDIES for step in CHAIN if step != "holdout"}
    assert "everything runs again" in capsys.readouterr().err


@pytest.mark.slow
def test_a_run_that_is_told_to_stop_ends_its_steps_and_can_be_resumed(bench: Bench) -> None:
    bench.edit("one", "study.yaml", "seed: 20261", "seed: 20262")
    process = bench.start()
    said = ""
    while "one: fit samples" not in said:
        line = process.stderr.readline() if process.stderr is not None else ""
        assert line, said
        said += line
    process.terminate()
    out, err = process.communicate(timeout=60)
    assert process.returncode != 0
    assert "one: stopped at fit" in out
    assert "Traceback" not in err
    assert ("one", "fit") in bench.pending()
    assert not (bench.results / "one" / "report.html").exists()
