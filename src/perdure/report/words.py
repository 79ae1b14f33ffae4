"""Sentences that several sections share."""

from __future__ import annotations

from collections.abc import Iterable, Mapping, Sequence
from types import MappingProxyType

from perdure.report.display import Display, duration
from perdure.report.results import ResultsFolder
from perdure.report.rounding import stated
from perdure.report.rows import Margin

LEVELS: Mapping[str, str] = MappingProxyType(
    {
        "new batch": "Next specimen of a new batch",
        "known batch": "Next specimen of",
        "population median": "Population median",
        "tested specimen": "Tested specimen",
    }
)
"""Levels of prediction in the order of the page, and how they are called there: the next part from the next batch comes first."""

VERDICTS: Mapping[str, str] = MappingProxyType(
    {
        "kept": "The probability that at least the required share of parts meets the limit reaches the required confidence.",
        "not kept": "That probability is at most one minus the required confidence.",
        "undecided": "Neither: the records and priors do not settle it. This is an answer, and it is no permission.",
        "not released": "The gate was not passed or a check that stops verdicts failed: no verdict is stated.",
    }
)
"""Verdicts and what they mean."""


def level_name(level: str, subject: str) -> str:
    """A level with its subject, as panels are called."""
    return f"{LEVELS.get(level, level)} {subject}".strip()


def level_rank(level: str) -> int:
    """Place of a level in the order of the page; levels that the page doesn't know come last."""
    order = list(LEVELS)
    return order.index(level) if level in order else len(order)


def limit_value(margin: Margin, display: Display) -> str:
    """Value of the limit with its unit."""
    unit = display.response_unit(margin.unit)
    value = stated(display.response(margin.limit_value, margin.unit))
    return f"{value} {unit}".strip()


def when(margin: Margin) -> str:
    """When the limit applies."""
    if margin.start == margin.end:
        return f"at {duration(margin.end)}"
    return f"from {duration(margin.start)} until {duration(margin.end)}"


def requirement(margin: Margin, display: Display) -> str:
    """The limit and what is required of it, as one sentence."""
    quantity = "retained stress" if margin.quantity == "retained" else margin.quantity
    return (
        f"Required: {quantity} {margin.kind} {limit_value(margin, display)} {when(margin)}, "
        f"for {stated(100 * margin.share)} % of parts, with {stated(100 * margin.confidence)} % confidence."
    )


def limits(margins: Iterable[Margin]) -> dict[tuple[str, str], list[Margin]]:
    """Margins by (duty, limit), in the order of the table, each ordered by level."""
    grouped: dict[tuple[str, str], list[Margin]] = {}
    for margin in margins:
        grouped.setdefault((margin.duty, margin.limit), []).append(margin)
    return {key: sorted(rows, key=lambda row: level_rank(row.level)) for key, rows in grouped.items()}


def count(number: int, one: str, many: str = "") -> str:
    """A number with its noun."""
    return f"{number} {one if number == 1 else many or one + 's'}"


def listed(names: Sequence[str]) -> str:
    """Names as in a sentence."""
    return names[0] if len(names) == 1 else ", ".join(names[:-1]) + " and " + names[-1] if names else ""


def reasons(results: ResultsFolder) -> list[str]:
    """Why a study is not released: blocking failures, each with its remedy."""
    found = [finding for finding in results.findings if finding.outcome == "fail" and finding.blocking]
    return [f"{finding.check}, {finding.subject}: {finding.message} {finding.remedy}".strip() for finding in found]
