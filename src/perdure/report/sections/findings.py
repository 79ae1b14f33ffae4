"""Every finding of every check, the worst first."""

from __future__ import annotations

from perdure.report.blocks import Block, Cell, Note, Subhead, Table, Text, columns
from perdure.report.display import symbol
from perdure.report.results import ResultsFolder
from perdure.report.rounding import significant, stated
from perdure.report.sections.section import Section, section
from perdure.report.words import count
from perdure.study.finding import OUTCOMES, Finding

_HEADS = {"fail": "Failures", "caution": "Cautions", "pass": "Passes"}
_NOUNS = {"fail": ("failure", "failures"), "caution": ("caution", "cautions"), "pass": ("pass", "passes")}
_TITLES = ("Check", "Subject", "Outcome", "Found", "Held against", "What it means", "Remedy")


def findings(results: ResultsFolder) -> Section:
    """Findings grouped by outcome, failures and cautions first."""
    tally = ", ".join(count(len(results.findings_of(outcome)), *_NOUNS[outcome]) for outcome in reversed(OUTCOMES))
    blocks: list[Block] = [
        Text(f"{count(len(results.findings), 'finding')}: {tally}. A failure marked as blocking stops all verdicts of the study.")
    ]
    for outcome in reversed(OUTCOMES):
        mine = results.findings_of(outcome)
        blocks.append(Subhead(_HEADS[outcome]))
        if mine:
            blocks.append(
                Table(
                    f"Findings with outcome {outcome}",
                    columns(_TITLES, ("Found", "Held against")),
                    tuple(_row(one) for one in mine),
                    headers=2,
                )
            )
        else:
            blocks.append(Text("None."))
    if not results.findings:
        blocks.append(Note("caution", "No check left a finding: nothing was looked at."))
    return section("Findings", "findings", blocks)


def _row(finding: Finding) -> tuple[Cell, ...]:
    outcome = Cell(f"{finding.outcome}, blocking" if finding.blocking and finding.outcome == "fail" else finding.outcome, finding.outcome)
    return (
        Cell(finding.check),
        Cell(finding.subject),
        outcome,
        Cell(_number(finding.value, finding.unit)),
        Cell("" if finding.threshold is None else f"{stated(finding.threshold)} {symbol(finding.unit)}".strip()),
        Cell(finding.message),
        Cell(finding.remedy),
    )


def _number(value: float | None, unit: str) -> str:
    if value is None:
        return ""
    shown = stated(value) if value == round(value) else significant(value)
    return f"{shown} {symbol(unit)}".strip()
