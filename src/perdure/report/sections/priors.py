"""Priors with their sources."""

from __future__ import annotations

from perdure.report.blocks import Cell, Table, Text, columns
from perdure.report.display import Display, symbol
from perdure.report.results import ResultsFolder
from perdure.report.rounding import significant, stated
from perdure.report.rows import Prior
from perdure.report.sections.section import Section, section

_TITLES = ("Quantity", "Unit", "Range from", "Range to", "Coverage", "Distribution", "5 %", "Median", "95 %", "Source", "Origin")


def priors(results: ResultsFolder) -> Section:
    """Every range, the distribution it became, where it comes from."""
    body = tuple(_row(row, results.display) for row in results.priors)
    return section(
        "Priors and their sources",
        "priors",
        [
            Text(
                "A range that holds a quantity with the stated coverage becomes a distribution of its logarithm with matching quantiles. "
                "A reader who doubts a source should repeat the run with a range of their own."
            ),
            Table("Priors", columns(_TITLES, ("Range from", "Range to", "Coverage", "5 %", "Median", "95 %")), body),
        ],
    )


def _row(row: Prior, display: Display) -> tuple[Cell, ...]:
    def shown(value: float | None, *, entered: bool = False) -> str:
        if value is None:
            return ""
        converted = float(display.quantity([value], row.unit)[0][0])
        return stated(converted) if entered else significant(converted)

    unit = display.quantity([], row.unit)[1]
    coverage = "" if row.coverage is None else f"{stated(100 * row.coverage)} %"
    texts = (
        row.quantity, unit or symbol(row.unit), shown(row.low, entered=True), shown(row.high, entered=True), coverage, row.distribution,
        shown(row.q05), shown(row.median), shown(row.q95), row.source, row.origin,
    )  # fmt: skip
    return tuple(Cell(text) for text in texts)
