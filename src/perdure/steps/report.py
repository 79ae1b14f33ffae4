"""Step report: all findings in one table, the run's provenance, and the reviewer's page."""

from __future__ import annotations

from collections.abc import Iterable, Mapping
from dataclasses import asdict, astuple, fields
from pathlib import Path
from typing import Any

from perdure.border.shipped import shipped
from perdure.border.store import read_findings, read_json, sha256_of, write_json, write_table
from perdure.border.study_file import load_study
from perdure.report.page import render
from perdure.report.results import ResultsFolder
from perdure.steps.chain import CHAIN, note
from perdure.steps.runner import Place, need, run_step
from perdure.study.finding import OUTCOMES, Finding
from perdure.study.study import Study

EVIDENCE: Mapping[str, str] = {
    "intake": "evidence/intake.json",
    "priors": "evidence/priors.json",
    "fit": "evidence/fit.json",
    "checks": "evidence/checks.json",
    "predict": "evidence/predict.json",
    "holdout": "evidence/holdout.json",
}
"""Files with findings, by the step that writes them. The hold-out's is there only where the study declares one."""

INPUTS = ("records", "histories", "handbook")
"""Folders of a study whose files are inputs of a run, beside ``study.yaml`` and ``register.csv``."""


def run(place: Place) -> None:
    """Write ``findings.csv``, ``run.json`` and ``report.html``.

    Raises:
        StudyError: the study cannot be read.
        ResultError: a results file is missing, damaged or of another run.
    """
    study = load_study(place.study).study
    findings = collect_findings(place)
    write_findings_table(place.file("findings.csv"), findings)
    diagnosis = read_json(need(place.file("evidence/fit.json"), "fit"))
    write_json(place.file("run.json"), provenance(place, study, diagnosis, findings))
    render(ResultsFolder.read(place.results), place.file("report.html"))


def collect_findings(place: Place) -> list[Finding]:
    """The findings of all steps, the gravest first, else in the order of the steps."""
    found: list[Finding] = []
    for step, name in EVIDENCE.items():
        path = place.file(name)
        if step == "holdout" and not path.is_file():
            continue
        found.extend(read_findings(need(path, step)))
    gravity = {outcome: rank for rank, outcome in enumerate(reversed(OUTCOMES))}
    return sorted(found, key=lambda finding: gravity[finding.outcome])


def write_findings_table(path: Path, findings: Iterable[Finding]) -> None:
    """Write ``findings.csv``: one row a finding, one column a field of :class:`perdure.study.finding.Finding`."""
    write_table(path, [field.name for field in fields(Finding)], [astuple(finding) for finding in findings])


def provenance(place: Place, study: Study, diagnosis: Mapping[str, Any], findings: Iterable[Finding]) -> dict[str, object]:
    """Content of ``run.json``: what went in, with which versions and settings, how long it took, and whether it is released.

    Args:
        place: of the study.
        study: its declarations.
        diagnosis: content of ``evidence/fit.json``.
        findings: of all steps; a blocking one that failed keeps the study from being released.
    """
    notes = {step: read_json(place.file(note(step))) for step in CHAIN if place.file(note(step)).is_file()}
    stopped = any(finding.blocking and finding.outcome == "fail" for finding in findings)
    return {
        "study": study.name,
        "title": study.title,
        "about": study.about,
        "display": asdict(study.display),
        "released": diagnosis.get("released") is True and not stopped,
        "records sha256": diagnosis.get("records sha256"),
        "inputs": inputs(place.study),
        "versions": versions(notes),
        "seed": diagnosis.get("seed", study.sampler.seed),
        "settings": settings(study),
        "durations": {step: float(content["seconds"]) for step, content in notes.items()},
        "started": {step: content["started"] for step, content in notes.items()},
    }


def inputs(study: Path) -> dict[str, str]:
    """SHA-256 of every file that a run of the study reads, by its path in the study, shipped handbook included."""
    own = [study / "study.yaml", study / "register.csv", *(path for folder in INPUTS for path in _files(study / folder))]
    found = {path.relative_to(study).as_posix(): sha256_of(path) for path in own}
    config = shipped("config")
    return found | {f"(shipped) {path.relative_to(config).as_posix()}": sha256_of(path) for path in _files(config / "handbook")}


def _files(folder: Path) -> list[Path]:
    return sorted(path for path in folder.rglob("*") if path.is_file()) if folder.is_dir() else []


def versions(notes: Mapping[str, Mapping[str, Any]]) -> dict[str, str]:
    """Versions by package; where steps ran with different ones, each with its steps."""
    seen: dict[str, dict[str, list[str]]] = {}
    for step, content in notes.items():
        for package, number in {"python": content["python"], **content["versions"]}.items():
            seen.setdefault(package, {}).setdefault(number, []).append(step)
    return {
        package: next(iter(numbers))
        if len(numbers) == 1
        else "; ".join(f"{number} ({', '.join(steps)})" for number, steps in numbers.items())
        for package, numbers in seen.items()
    }


def settings(study: Study) -> dict[str, object]:
    """Settings that shape the numbers, flat, in internal units."""
    sampler = study.sampler
    return {
        "chains": sampler.chains,
        "draws": sampler.draws,
        "tune": sampler.tune,
        "target accept": sampler.target_accept,
        "law": study.law.name,
        "equilibrium": study.law.equilibrium,
        "relaxation times": "grid" if study.law.free_times is None else study.law.free_times,
        "terms per decade": study.law.terms_per_decade,
        "clock": study.clock,
        "horizon [s]": study.horizon,
        "reference time [s]": study.reference_time,
        "reference temperature [K]": study.reference_temperature,
        "scatter modes": ", ".join(study.modes),
        "material family": study.family,
    }


if __name__ == "__main__":
    raise SystemExit(run_step("report", run))
