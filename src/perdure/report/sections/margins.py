"""The margins table: every limit at every level."""

from __future__ import annotations

from perdure.report.blocks import Block, Cell, Note, Table, Text, columns
from perdure.report.results import ResultsFolder
from perdure.report.rounding import against_limit, at_places, decimal_places, probability, reserve, significant
from perdure.report.rows import Margin
from perdure.report.sections.section import Section, section
from perdure.report.sections.verdicts import verdict_of
from perdure.report.words import level_name, limits, requirement

_FEWEST_PLACES = 3


def margins(results: ResultsFolder) -> Section:
    """One table a limit; numbers of what was not released are left empty."""
    blocks: list[Block] = [
        Text(
            "The share is the fraction of parts of a level that meets the limit; the probability is that this share reaches the "
            "required one. The bound is the one-sided statistical tolerance bound (ISO 16269-6) for the required share and "
            "confidence: a lower bound for \u201cat least\u201d, an upper bound for \u201cat most\u201d. The limit is kept where the "
            "bound is on its right side, that is, where the reserve factor exceeds 1. "
            "For the population median and a tested specimen the share counts draws of that one response."
        )
    ]
    if not results.released:
        blocks.append(Note("not released", "Not released: verdict, probability, share, bound and reserve factor are empty."))
    if not results.margins:
        blocks.append(Note("caution", "The tables hold no limit."))
    blocks += [_table(duty, limit, rows, results) for (duty, limit), rows in limits(results.margins).items()]
    return section("Margins", "margins", blocks)


def _table(duty: str, limit: str, rows: list[Margin], results: ResultsFolder) -> Table:
    unit = results.display.response_unit(rows[0].unit)
    in_unit = f" [{unit}]" if unit else ""
    titles = (
        "Level", "Verdict", "Probability", "Monte Carlo error", "Share, mean", "Share, 90 % interval",
        f"Bound{in_unit}", f"Distance to the limit{in_unit}", "Reserve factor", f"Median response{in_unit}",
    )  # fmt: skip
    body = tuple(_row(row, results) for row in rows)
    return Table(f"{duty} \u00b7 {limit}. {requirement(rows[0], results.display)}", columns(titles, titles[2:]), body)


def _row(row: Margin, results: ResultsFolder) -> tuple[Cell, ...]:
    verdict = verdict_of(row, results)
    head = (Cell(level_name(row.level, row.subject)), Cell(verdict, verdict))
    if verdict == "not released":
        return (*head, *(Cell("") for _ in range(8)))
    display = results.display
    bound = difference = ""
    if row.bound is not None and row.difference is not None:
        bound, difference = against_limit(display.response(row.bound, row.unit), display.response(row.difference, row.unit))
    return (
        *head,
        Cell("" if row.probability is None else probability(row.probability, row.probability_error)),
        Cell("" if row.probability_error is None else significant(row.probability_error, 2)),
        Cell("" if row.share_mean is None else probability(row.share_mean)),
        Cell(_share_interval(row)),
        Cell(bound),
        Cell(difference),
        Cell("" if row.ratio is None else reserve(row.ratio)),
        Cell("" if row.median_response is None else significant(display.response(row.median_response, row.unit))),
    )


def _share_interval(row: Margin) -> str:
    if row.share_low is None or row.share_high is None:
        return ""
    width = row.share_high - row.share_low
    places = min(decimal_places(width / 3.3), _FEWEST_PLACES) if width > 0 else _FEWEST_PLACES
    return f"{at_places(row.share_low, max(places, 2))} to {at_places(row.share_high, max(places, 2))}"
