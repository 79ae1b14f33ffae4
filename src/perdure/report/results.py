"""The results folder of one study, read once and typed, as the only input of the page."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path
from typing import Any

from perdure.border.store import read_json, read_table
from perdure.errors import Problem, ResultError
from perdure.report.display import Display
from perdure.report.rows import (
    REMEDY,
    Band,
    FindingRow,
    Fitted,
    HeldOut,
    Intake,
    Margin,
    Modulus,
    Parameter,
    Prior,
    parse,
)
from perdure.study.finding import OUTCOMES, Finding

TABLES = (
    "margins.csv",
    "bands.csv",
    "parameters.csv",
    "priors.csv",
    "findings.csv",
    "intake.csv",
    "evidence/modulus.csv",
    "evidence/fitted.csv",
)
DOCUMENTS = ("run.json", "evidence/fit.json")
HOLDOUT_TABLE = "holdout.csv"
HOLDOUT_DOCUMENT = "evidence/holdout.json"


@dataclass(frozen=True, slots=True)
class Window:
    """Times that readings used by the fit cover, in s."""

    shortest: float
    longest: float


@dataclass(frozen=True, slots=True)
class ResultsFolder:
    """What a run of one study left behind.

    Attributes:
        folder: where it was read from.
        study: name of the study.
        title, about: for the head of the page.
        gate_passed: whether sampling passed its gate.
        released: False when the gate was not passed, or a blocking finding failed.
        display: the user's units.
        run, fit: ``run.json`` and ``evidence/fit.json`` as they are.
        margins, bands, modulus, fitted, parameters, priors, intake, findings: rows of the tables of the same name.
        holdout: rows of ``holdout.csv``; None where the study declares no hold-out.
        holdout_summary: ``summary`` of ``evidence/holdout.json``; empty where there is none.
        window: times covered by the readings that the fit used; None when there are none at positive times.
    """

    folder: Path
    study: str
    title: str
    about: str
    gate_passed: bool
    released: bool
    display: Display
    run: Mapping[str, Any]
    fit: Mapping[str, Any]
    margins: tuple[Margin, ...]
    bands: tuple[Band, ...]
    modulus: tuple[Modulus, ...]
    fitted: tuple[Fitted, ...]
    parameters: tuple[Parameter, ...]
    priors: tuple[Prior, ...]
    intake: tuple[Intake, ...]
    findings: tuple[Finding, ...]
    holdout: tuple[HeldOut, ...] | None
    holdout_summary: Mapping[str, Any]
    window: Window | None

    @classmethod
    def read(cls, folder: Path) -> ResultsFolder:
        """Read the results of one study.

        ``findings.csv`` and ``run.json`` must be there already: the report step writes them before it asks for the page.
        The page holds a hold-out only where ``holdout.csv`` exists.

        Raises:
            ResultError: with every file that is missing or damaged, and when tables belong to other records than the fit.
        """
        with_holdout = (folder / HOLDOUT_TABLE).exists()
        wanted = (*TABLES, *DOCUMENTS, *((HOLDOUT_TABLE, HOLDOUT_DOCUMENT) if with_holdout else ()))
        absent = [
            Problem(name, "no such file", f"a results file in {folder.name}", REMEDY) for name in wanted if not (folder / name).is_file()
        ]
        if absent:
            raise ResultError(absent)
        tables = _Tables(folder)
        run, fit = tables.document("run.json"), tables.document("evidence/fit.json")
        margins = tables.rows(Margin, "margins.csv")
        bands = tables.rows(Band, "bands.csv")
        fitted = tables.rows(Fitted, "evidence/fitted.csv")
        findings = tables.findings("findings.csv")
        gate_passed = tables.entry(fit, "evidence/fit.json", "released") is True
        holdout = tables.rows(HeldOut, HOLDOUT_TABLE) if with_holdout else None
        results = cls(
            folder=folder,
            study=str(tables.entry(run, "run.json", "study")),
            title=str(run.get("title") or run.get("study") or folder.name),
            about=str(run.get("about") or ""),
            gate_passed=gate_passed,
            released=gate_passed and not any(finding.blocking and finding.outcome == "fail" for finding in findings),
            display=Display.of(run.get("display")),
            run=run,
            fit=fit,
            margins=margins,
            bands=bands,
            modulus=tables.rows(Modulus, "evidence/modulus.csv"),
            fitted=fitted,
            parameters=tables.rows(Parameter, "parameters.csv"),
            priors=tables.rows(Prior, "priors.csv"),
            intake=tables.rows(Intake, "intake.csv"),
            findings=findings,
            holdout=holdout,
            holdout_summary=tables.document(HOLDOUT_DOCUMENT).get("summary") or {} if with_holdout else {},
            window=_window(fitted),
        )
        problems = [*tables.problems, *_strangers(results)]
        if problems:
            raise ResultError(problems)
        return results

    @property
    def batches(self) -> tuple[str, ...]:
        """Batches with readings that the fit used, in order of first appearance."""
        return tuple(dict.fromkeys(row.batch for row in self.fitted if not row.held_out))

    @property
    def duties(self) -> tuple[str, ...]:
        """Duties in the order of the tables."""
        return tuple(dict.fromkeys([*(row.duty for row in self.margins), *(row.duty for row in self.bands)]))

    def findings_of(self, outcome: str) -> tuple[Finding, ...]:
        """Findings with this outcome, in the order of the table."""
        return tuple(finding for finding in self.findings if finding.outcome == outcome)


class _Tables:
    """Reads files of one folder and collects what is wrong with them, so that all of it is shown at once."""

    def __init__(self, folder: Path) -> None:
        self.folder = folder
        self.problems: list[Problem] = []

    def rows[Row](self, kind: type[Row], name: str) -> tuple[Row, ...]:
        """Rows of the table called ``name``."""
        path = self.folder / name
        rows, problems = parse(kind, read_table(path), path)
        self.problems += problems
        return rows

    def document(self, name: str) -> Mapping[str, Any]:
        """The JSON object called ``name``."""
        content = read_json(self.folder / name)
        if isinstance(content, dict):
            return content
        self.problems.append(Problem(name, type(content).__name__, "a JSON object", REMEDY))
        return {}

    def entry(self, content: Mapping[str, Any], name: str, key: str) -> object:
        """``content[key]``; None and a problem where it is missing."""
        if key not in content:
            self.problems.append(Problem(f"{name}, key {key}", "nothing", "a value", REMEDY))
        return content.get(key)

    def findings(self, name: str) -> tuple[Finding, ...]:
        """Findings of the table called ``name``."""
        found = []
        for row in self.rows(FindingRow, name):
            if row.outcome not in OUTCOMES:
                where = f'{name}, check {row.check}, subject {row.subject}, column "outcome"'
                self.problems.append(Problem(where, repr(row.outcome), ", ".join(OUTCOMES), REMEDY))
                continue
            found.append(
                Finding(
                    check=row.check,
                    subject=row.subject,
                    outcome=row.outcome,
                    value=row.value,
                    threshold=row.threshold,
                    unit=row.unit,
                    message=row.message,
                    remedy=row.remedy,
                    blocking=row.blocking,
                )
            )
        return tuple(found)


def _window(fitted: Sequence[Fitted]) -> Window | None:
    times = [row.time for row in fitted if row.time > 0 and not row.held_out]
    return Window(min(times), max(times)) if times else None


def _strangers(results: ResultsFolder) -> list[Problem]:
    """Tables whose rows carry another digest of the records than the fit: results of another run."""
    own = results.fit.get("records sha256")
    digests = {
        "margins.csv": [row.digest for row in results.margins],
        "bands.csv": [row.digest for row in results.bands],
        HOLDOUT_TABLE: [row.digest for row in results.holdout or ()],
    }
    return [
        Problem(name, f"rows made from records {', '.join(others)}", f"records {own}, as in evidence/fit.json", REMEDY)
        for name, found in digests.items()
        if own is not None and (others := sorted(set(found) - {own}))
    ]
