"""The last step names every study and fails when one is not released."""

from __future__ import annotations

import json
from pathlib import Path

import pytest

from perdure.errors import ResultError
from perdure.steps.report import write_findings_table
from perdure.steps.verdict import judge, main
from perdure.study.finding import Finding, Outcome


def write(results: Path, name: str, *, released: bool, outcome: Outcome = "pass", blocking: bool = False) -> None:
    folder = results / name / "evidence"
    folder.mkdir(parents=True)
    (folder / "fit.json").write_text(json.dumps({"released": released}), encoding="utf-8")
    finding = Finding("convergence", "the study", outcome, 1.2, 1.01, "", "chains disagree", "Sample longer.", blocking=blocking)
    write_findings_table(results / name / "findings.csv", [finding])


def test_released_studies_end_well(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    write(tmp_path, "a", released=True)
    write(tmp_path, "b", released=True, outcome="fail")
    assert main(["--results", str(tmp_path), "--", "a", "b"]) == 0
    assert capsys.readouterr().out == "a: released\nb: released\n"


def test_one_study_that_is_not_released_fails_the_run_and_all_are_named(tmp_path: Path, capsys: pytest.CaptureFixture[str]) -> None:
    write(tmp_path, "a", released=False, outcome="fail", blocking=True)
    write(tmp_path, "b", released=True)
    assert main(["--results", str(tmp_path), "a", "b"]) == 1
    said = capsys.readouterr().out
    assert "a: NOT RELEASED" in said
    assert "chains disagree" in said
    assert "b: released" in said


def test_blocking_finding_stops_a_study_whose_gate_passed(tmp_path: Path) -> None:
    write(tmp_path, "a", released=True, outcome="fail", blocking=True)
    assert not judge(tmp_path / "a").released


def test_failed_gate_without_a_finding_is_not_released_either(tmp_path: Path) -> None:
    write(tmp_path, "a", released=False)
    judgement = judge(tmp_path / "a")
    assert not judgement.released
    assert judgement.reasons


@pytest.mark.parametrize("content", [None, "{", "[]", '{"released": "yes"}', "{}"])
def test_damaged_diagnosis_never_counts_as_released(tmp_path: Path, content: str | None, capsys: pytest.CaptureFixture[str]) -> None:
    write(tmp_path, "a", released=True)
    file = tmp_path / "a" / "evidence" / "fit.json"
    if content is None:
        file.unlink()
    else:
        file.write_text(content, encoding="utf-8")
    assert main(["--results", str(tmp_path), "a"]) == 1
    assert "released" not in capsys.readouterr().out.replace("NOT RELEASED", "")


def test_missing_findings_are_told(tmp_path: Path) -> None:
    write(tmp_path, "a", released=True)
    (tmp_path / "a" / "findings.csv").unlink()
    with pytest.raises(ResultError, match="perdure run"):
        judge(tmp_path / "a")
