"""Verdicts first: one strip a limit, one gauge a level, in words."""

from __future__ import annotations

from dataclasses import dataclass

from perdure.report.blocks import Panels
from perdure.report.figures.reach import reach_ruler
from perdure.report.results import ResultsFolder
from perdure.report.rounding import probability, reserve
from perdure.report.rows import Margin
from perdure.report.sections.section import Section
from perdure.report.templating import fill
from perdure.report.words import LEVELS, VERDICTS, count, limits, listed, reasons, requirement

_NO_REASON = "No finding names the reason; see how the study was sampled."


@dataclass(frozen=True, slots=True)
class Gauge:
    """One level of one limit."""

    level: str
    subject: str
    verdict: str
    figures: str


@dataclass(frozen=True, slots=True)
class Strip:
    """One limit of one duty with all its levels."""

    duty: str
    limit: str
    requirement: str
    gauges: tuple[Gauge, ...]


def verdicts(results: ResultsFolder) -> Section:
    """Banner when not released, the answer in a sentence, a strip a limit, the ruler of reach, and the meaning of the words."""
    strips = [
        Strip(duty, limit, requirement(rows[0], results.display), tuple(_gauge(row, results) for row in rows))
        for (duty, limit), rows in limits(results.margins).items()
    ]
    html = fill(
        "verdicts.html",
        {
            "released": results.released,
            "cause": "The sampler did not pass its gate" if not results.gate_passed else "A check that stops all verdicts has failed",
            "reasons": reasons(results) or ([] if results.released else [_NO_REASON]),
            "lead": _lead(results),
            "cautions": _cautions(results),
            "strips": strips,
            "ruler": _ruler(results),
            "meanings": list(VERDICTS.items()),
        },
    )
    return Section("Verdicts", html, "verdicts")


def verdict_of(margin: Margin, results: ResultsFolder) -> str:
    """The verdict that may be shown: nothing of a study that was not released is."""
    return margin.verdict if results.released and margin.released and margin.verdict in VERDICTS else "not released"


def _gauge(margin: Margin, results: ResultsFolder) -> Gauge:
    verdict = verdict_of(margin, results)
    parts = []
    if verdict != "not released":
        if margin.ratio is not None:
            parts.append(f"reserve factor {reserve(margin.ratio)}")
        if margin.probability is not None:
            parts.append(f"probability {probability(margin.probability, margin.probability_error)}")
    return Gauge(LEVELS.get(margin.level, margin.level), margin.subject, verdict, ", ".join(parts))


def _lead(results: ResultsFolder) -> str:
    new = [margin for margin in results.margins if margin.level == "new batch"]
    if not new:
        return "The tables hold no verdict for the next specimen of a new batch."
    tally = {verdict: sum(verdict_of(margin, results) == verdict for margin in new) for verdict in VERDICTS}
    told = [f"{number} {verdict}" for verdict, number in tally.items() if number]
    return f"For the next part from a new batch, {count(len(new), 'limit')}: {listed(told)}."


def _cautions(results: ResultsFolder) -> str:
    failed, cautions = len(results.findings_of("fail")), len(results.findings_of("caution"))
    if not failed + cautions:
        return ""
    return f"The checks report {count(failed, 'failure')} and {count(cautions, 'caution')}."


def _ruler(results: ResultsFolder) -> Panels | None:
    if results.window is None or not results.margins:
        return None
    spans = {}
    for (duty, limit), rows in limits(results.margins).items():
        if rows[0].end > 0:
            spans[f"{duty}, {limit}"] = (rows[0].start, rows[0].end)
    return Panels((reach_ruler(results.window, spans, results.display),), wide=True) if spans else None
