"""Parameters with intervals, prior and contraction; those the records say little about are marked."""

from __future__ import annotations

from collections.abc import Sequence

from perdure.report.blocks import Block, Cell, Key, Note, Panels, Subhead, Table, Text, columns
from perdure.report.display import Display
from perdure.report.figures.forest import forest, on_prior_scale
from perdure.report.results import ResultsFolder
from perdure.report.rounding import at_places, interval
from perdure.report.rows import Parameter
from perdure.report.sections.section import Section, section

LEVELS = ("population", "batch", "specimen", "instrument", "record")
TITLES = ("Parameter", "Subject", "Unit", "Median", "5 %", "95 %", "Prior median", "Prior 5 %", "Prior 95 %", "Contraction", "Identified")
_PRIOR_TITLES = TITLES[6:10]
FOREST_KEY = Key((("prior", "90 % interval of the prior"), ("median", "90 % interval and median of the posterior")))
FOREST_CAPTION = (
    "Each line is drawn on the scale of its own prior (logarithmic where the prior is positive). A posterior as wide as its bar was not "
    "informed by the records; one at the end of its bar disagrees with the prior. Dashed grey with an open dot: not identified."
)


def parameters(results: ResultsFolder) -> Section:
    """Forest plot of the population, tables of all levels."""
    rows = results.parameters
    unknown = [row for row in rows if row.identified == "no"]
    blocks: list[Block] = [
        Text(
            "Intervals are central 90 % credible intervals. Contraction is 1 \u2212 posterior variance over prior variance (on the "
            "log scale for positive quantities): near 0 the records added nothing, near 1 the prior no longer matters."
        )
    ]
    if not results.released:
        blocks.append(Note("not released", "These numbers are not released."))
    if unknown:
        blocks.append(Note("caution", f"Not identified by the records: {_names(unknown)}. What is stated for them is the prior's word."))
    if placed := [row for row in rows if row.level == "population" and on_prior_scale(row) is not None and not is_scatter(row)]:
        label = f"Posterior against prior for {len(placed)} population parameters; the table below has the numbers."
        blocks += [FOREST_KEY, Panels((forest(placed, key="forest", label=label, caption=FOREST_CAPTION),), wide=True)]
    levels = [*LEVELS, *sorted({row.level for row in rows} - set(LEVELS))]
    for level in levels:
        if mine := [row for row in rows if row.level == level]:
            blocks += [Subhead(level.capitalize()), parameter_table(f"Parameters, level {level}", mine, results.display)]
    return section("Parameters", "parameters", blocks)


def is_scatter(row: Parameter) -> bool:
    """True for the standard deviations of scatter, which have a section of their own as well."""
    return row.quantity.endswith("scatter")


def parameter_table(caption: str, rows: Sequence[Parameter], display: Display) -> Table:
    """A table of parameters, values rounded by their intervals; columns that would be empty are left out."""
    with_subject = any(row.subject for row in rows)
    with_prior = any(row.prior_median is not None or row.contraction is not None for row in rows)
    dropped = {*(() if with_subject else ("Subject",)), *(() if with_prior else _PRIOR_TITLES)}
    titles = tuple(title for title in TITLES if title not in dropped)
    body = tuple(tuple(cell for title, cell in zip(TITLES, _row(row, display), strict=True) if title not in dropped) for row in rows)
    return Table(caption, columns(titles, TITLES[3:10]), body, headers=2 if with_subject else 1)


def _row(row: Parameter, display: Display) -> tuple[Cell, ...]:
    (median, low, high), unit = display.quantity([row.median, row.low, row.high], row.unit)
    own = interval(float(median), float(low), float(high))
    prior = ("", "", "")
    if row.prior_median is not None and row.prior_low is not None and row.prior_high is not None:
        values, _ = display.quantity([row.prior_median, row.prior_low, row.prior_high], row.unit)
        prior = interval(*(float(value) for value in values))
    identified = Cell("not identified", "caution") if row.identified == "no" else Cell(row.identified)
    contraction = "" if row.contraction is None else at_places(row.contraction, 2)
    return (
        Cell(row.label or row.quantity),
        Cell(row.subject),
        Cell(unit),
        *(Cell(text) for text in (*own, *prior, contraction)),
        identified,
    )


def _names(rows: Sequence[Parameter], most: int = 12) -> str:
    names = [f"{row.label or row.quantity}{f' ({row.subject})' if row.subject else ''}" for row in rows]
    more = len(names) - most
    return ", ".join(names[:most]) + (f" and {more} more, marked in the tables" if more > 0 else "")
