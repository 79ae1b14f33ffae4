"""The command line: what it says and what it leaves alone. Whole runs are in tests/workflow."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from perdure.border.study_file import load_study
from perdure.commands import main
from perdure.commands.closing import End, end_of
from perdure.commands.closing import told as closing_told
from perdure.commands.forecast import forecast
from perdure.commands.forecast import told as forecast_told
from perdure.steps.chain import CHAIN, files, log
from perdure.steps.plan import plans
from perdure.steps.runner import FAILED, STARTED


@pytest.fixture
def study(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> Path:
    folder = tmp_path / "straps"
    assert main(["new", str(folder)]) == 0
    capsys.readouterr()
    return folder


def edit(study: Path, file: str, old: str, new: str) -> None:
    text = (study / file).read_text(encoding="utf-8")
    assert old in text
    (study / file).write_text(text.replace(old, new), encoding="utf-8")


def test_help_waits_for_no_library() -> None:
    script = (
        "import sys\nfrom perdure.commands import main\n"
        "try:\n    main(['--help'])\nexcept SystemExit as ended:\n    code = ended.code\n"
        "heavy = {'numpy', 'pandas', 'pymc', 'numba', 'snakemake', 'yaml', 'matplotlib'} & set(sys.modules)\n"
        "sys.exit(str(heavy) if heavy else code)\n"
    )
    done = subprocess.run([sys.executable, "-c", script], capture_output=True, text=True, check=False)
    assert done.returncode == 0, done.stderr
    for command in ("new", "check", "run"):
        assert f"    {command} " in done.stdout


@pytest.mark.parametrize(
    "wrong", [[], ["bogus"], ["run", "--cores", "0"], ["run", "--cores", "many"], ["check"], ["check", "x", "--", "-n"]]
)
def test_command_line_that_is_not_understood(wrong: list[str], capsys: pytest.CaptureFixture[str]) -> None:
    with pytest.raises(SystemExit) as ended:
        main(wrong)
    assert ended.value.code == 2
    assert "usage: perdure" in capsys.readouterr().err


def test_new_study_is_sound_and_bears_its_title(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    folder = tmp_path / "deep" / "own-straps"
    assert main(["new", str(folder), "--name", 'Straps: "A" & B #2']) == 0
    assert "perdure check" in capsys.readouterr().out
    assert load_study(folder).study.title == 'Straps: "A" & B #2'
    assert {path.name for path in folder.iterdir()} == {"study.yaml", "register.csv", "records"}
    assert [path.name for path in folder.parent.iterdir()] == ["own-straps"]


def test_new_study_without_a_title_is_called_as_its_folder(study: Path) -> None:
    assert load_study(study).study.title == "straps"


def test_new_takes_an_empty_folder_and_no_other(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    empty, full, file = tmp_path / "empty", tmp_path / "full", tmp_path / "file"
    empty.mkdir()
    full.mkdir()
    (full / "mine.txt").write_text("mine", encoding="utf-8")
    file.write_text("mine", encoding="utf-8")
    assert main(["new", str(empty)]) == 0
    assert main(["new", str(full)]) == 1
    assert main(["new", str(file)]) == 1
    assert "isn't empty" in capsys.readouterr().err
    assert [path.name for path in full.iterdir()] == ["mine.txt"]
    assert file.read_text(encoding="utf-8") == "mine"


def test_check_says_what_a_study_holds(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    edit(study, "register.csv", "40.1,50,virgin,yes,,,", "40.1,50,virgin,no,,,slipped in the grips")
    before = sorted(study.rglob("*"))
    assert main(["check", str(study)]) == 0
    said = capsys.readouterr().out
    for words in (
        "straps: straps",
        "3 records of 3 specimens from 2 batches",
        "strip 2b (register.csv, row 5): slipped in the grips",
        "strip 1a: strain from % to a ratio",
        "horizon",
        "three decades beyond the longest record",
        "cover held down: tension, virgin, 23 °C, 1",
        "stays down: stress at least 0.15 MPa at 1 a, for 90 % of parts with 95 % confidence",
        "stays tight: stress at least 0.265 MPa from 1 d to 1 a",
        "modulus: ",
        "(handbook filled rubber)",
        "Checks before sampling: ",
    ):
        assert words in said
    assert sorted(study.rglob("*")) == before


def test_check_tells_all_problems_of_all_studies_at_once(study: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    edit(study, "study.yaml", "family: filled rubber", "family: filled ruber")
    edit(study, "register.csv", "strip_1a.csv", "strip_9.csv")
    record = study / "records" / "strip_2a.csv"
    record.write_text(record.read_text(encoding="utf-8") + "50000,much,9.989\n", encoding="utf-8")
    assert main(["check", str(study), str(tmp_path / "nowhere")]) == 1
    said = capsys.readouterr()
    for words in ("filled ruber", "strip_9.csv", "much", "no such folder", "remedy"):
        assert words in said.err
    assert "straps: 3 problems; it would not run" in said.out
    assert "nowhere: 1 problem; it would not run" in said.out
    assert "Traceback" not in said.err


def test_horizon_inside_the_tests_is_told_before_sampling(study: Path, capsys: pytest.CaptureFixture[str]) -> None:
    edit(study, "study.yaml", "#horizon: 5 a", "horizon: 1 min")
    assert main(["check", str(study)]) == 1
    assert "horizon" in capsys.readouterr().err


def test_run_refuses_before_anything_starts(study: Path, tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    other = tmp_path / "other" / "straps"
    assert main(["new", str(other)]) == 0
    results = tmp_path / "results"
    assert main(["run", str(study), str(other), "--results", str(results)]) == 1
    assert "two folders of this name" in capsys.readouterr().err
    assert main(["run", str(study), "--results", str(study)]) == 1
    assert "nothing is ever written into a study" in capsys.readouterr().err
    edit(study, "study.yaml", "format: 1 ", "format: 9 ")
    assert main(["run", str(study), "--results", str(results)]) == 1
    assert "straps: cannot run as it is" in capsys.readouterr().err
    assert not results.exists()


def summary_of(states: dict[tuple[str, str], tuple[str, str]]) -> str:
    """Snakemake's table with (status, plan) by (step, file)."""
    head = "output_file\tdate\trule\tlog-file(s)\tstatus\tplan"
    rows = [f"straps/{file}\t-\t{step}\t\t{status}\t{plan}" for (step, file), (status, plan) in states.items()]
    return "\n".join([head, *rows])


def test_forecast_of_a_first_run_is_one_line(study: Path, tmp_path: Path) -> None:
    planned = plans([study])
    steps = [step for step in CHAIN if step != "holdout"]
    summary = summary_of({(step, file): ("missing", "update pending") for step in steps for file in files(step)})
    coming = forecast(summary, planned, tmp_path)
    assert [one.step for one in coming] == steps
    assert forecast_told(coming, planned, tmp_path).splitlines()[1] == f"  straps: {', '.join(steps)} (not made yet)"


def test_forecast_tells_a_failure_a_stop_and_what_follows(study: Path, tmp_path: Path) -> None:
    planned = plans([study])
    for step, said in (("fit", FAILED), ("priors", f"{STARTED} now")):
        (tmp_path / "straps" / log(step)).parent.mkdir(parents=True, exist_ok=True)
        (tmp_path / "straps" / log(step)).write_text(f"{said}\n", encoding="utf-8")
    states = {
        ("intake", "records.nc"): ("ok", "no update"),
        ("priors", "priors.csv"): ("missing", "update pending"),
        ("fit", "posterior.nc"): ("missing", "update pending"),
        ("parameters", "parameters.csv"): ("set of input files changed", "update pending"),
    }
    reasons = {one.step: one.reason for one in forecast(summary_of(states), planned, tmp_path)}
    assert reasons == {"priors": "was stopped last time", "fit": "failed last time", "parameters": "it reads other files than before"}


def test_closing_words_name_the_step_the_error_and_the_report(study: Path, tmp_path: Path) -> None:
    plan = plans([study])["straps"]
    assert end_of(plan, tmp_path).state == "not finished"
    log_file = tmp_path / "straps" / log("fit")
    log_file.parent.mkdir(parents=True)
    log_file.write_text(f"{STARTED} now\n", encoding="utf-8")
    assert end_of(plan, tmp_path).state == "stopped at fit"
    lines = "\n".join(f"line {number}" for number in range(9))
    log_file.write_text(f"{STARTED} now\n{FAILED}\n{lines}\nTraceback (most recent call last):\n  deep\n", encoding="utf-8")
    end = end_of(plan, tmp_path)
    assert end.state == "FAILED at fit"
    assert end.lines[0] == "line 0"
    assert end.lines[-1].startswith("… 3 further lines in ")
    said = closing_told([end, End("b", "released", (), tmp_path / "report.html")], {"c": "2 problems, listed above"})
    assert f"  b: released\n    report: {tmp_path / 'report.html'}" in said
    assert "  c: NOT RUN\n    2 problems" in said
