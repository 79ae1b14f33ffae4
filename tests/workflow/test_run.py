"""A whole run: files, exit codes, and studies that stay as they are."""

from __future__ import annotations

import csv
import fcntl
import json
import os
import shutil
import subprocess
import sys

import pytest

from perdure.commands.snakemake import NOTES
from perdure.errors import ResultError
from perdure.steps.chain import CHAIN, files
from perdure.steps.plan import made, plan
from tests.workflow.bench import SECOND_DUTY, STUDIES, Bench, Finished, digest_of


def duties_of(bench: Bench, study: str) -> set[str]:
    with (bench.results / study / "margins.csv").open(encoding="utf-8", newline="") as handle:
        return {row["duty"] for row in csv.DictReader(handle)}


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
    assert duties_of(bench, "one") == {"cover held down", "second cover"}
    posterior = bench.results / "one" / "posterior.nc"
    fitted = posterior.stat().st_mtime_ns
    bench.edit("one", "study.yaml", SECOND_DUTY, "duties:\n")
    done = bench.run()
    assert done.returncode == 0, done.stderr
    assert duties_of(bench, "one") == {"cover held down"}
    assert posterior.stat().st_mtime_ns == fitted
    assert "predict     duties changed" in done.stdout


def test_study_with_problems_is_not_run_and_leaves_the_other_running(bench: Bench) -> None:
    bench.edit("one", "study.yaml", "family: filled rubber", "family: filled ruber")
    bench.edit("one", "register.csv", ",yes,", ",maybe,")
    bench.edit("two", "study.yaml", "title: ", "title: New ")
    done = bench.run()
    assert done.returncode == 1
    assert "filled ruber" in done.stderr
    assert "maybe" in done.stderr
    assert "one: NOT RUN" in done.stdout
    assert "two: released" in done.stdout
    assert "one: intake" not in done.stderr
    assert "two: report done" in done.stderr


def test_plain_snakemake_keeps_the_others_going_and_names_the_failure(bench: Bench) -> None:
    bench.rewrite_reading("one", "strip_1a.csv", "not a number")
    bench.edit("two", "study.yaml", "title: ", "title: New ")
    done = bench.plain_snakemake()
    assert done.returncode != 0
    assert "one: intake failed" in done.stderr
    assert "strip_1a.csv" in done.stderr
    assert "two: report done" in done.stderr


def test_no_old_result_survives_a_crash(bench: Bench, monkeypatch: pytest.MonkeyPatch) -> None:
    """A good run; then new data make the fit crash; the next run must not find "nothing to do" beside the old predictions."""
    bench.rewrite_reading("one", "strip_1a.csv")
    crash = bench.folder / "crash"
    crash.mkdir()
    # found by every Python process of the run: breaks the sampler in the process of the step fit
    (crash / "sitecustomize.py").write_text(
        "import sys\n"
        "if 'perdure.steps.fit' in sys.orig_argv:\n"
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
        for done in (first, bench.plain_snakemake()):
            assert done.returncode != 0
            assert "one: fit failed" in done.stderr
            assert "the sampler broke" in done.stderr
            left = [name for name in files("fit") + files("predict") + files("report") if (bench.results / "one" / name).exists()]
            assert left == []
    reasons = bench.reasons()
    assert reasons["one", "fit"] == "failed last time"
    assert ("one", "predict") in reasons
    assert ("one", "intake") not in reasons
    assert not [study for study, _ in reasons if study == "two"]


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
