"""Scatter between batches and between specimens against its priors."""

from __future__ import annotations

from perdure.report.blocks import Block, Note, Panels, Text
from perdure.report.figures.forest import forest, on_prior_scale
from perdure.report.results import ResultsFolder
from perdure.report.sections.parameters import FOREST_CAPTION, FOREST_KEY, is_scatter, parameter_table
from perdure.report.sections.section import Section, section
from perdure.report.words import count

ENOUGH_BATCHES = 5


def scatter(results: ResultsFolder) -> Section:
    """Standard deviations of the scatter modes, with the number of batches that speak for them."""
    rows = [row for row in results.parameters if is_scatter(row)]
    batches = len(results.batches)
    specimens = len({row.specimen for row in results.fitted if not row.held_out})
    blocks: list[Block] = [
        Text(
            f"Standard deviations on the log scale: 0.05 means about 5 %. They rest on {count(batches, 'batch', 'batches')} and "
            f"{count(specimens, 'specimen')}. What instruments, mounting and dimensions share is kept apart from scatter."
        )
    ]
    if batches < ENOUGH_BATCHES:
        blocks.append(
            Note(
                "caution",
                f"Fewer than {ENOUGH_BATCHES} batches: scatter between batches rests largely on its prior, "
                "and so does every bound for a new batch.",
            )
        )
    if placed := [row for row in rows if on_prior_scale(row) is not None]:
        label = f"Posterior against prior for {len(placed)} standard deviations of scatter; the table below has the numbers."
        blocks += [FOREST_KEY, Panels((forest(placed, key="scatter", label=label, caption=FOREST_CAPTION),), wide=True)]
    if rows:
        blocks.append(parameter_table("Standard deviations of scatter", rows, results.display))
    else:
        blocks.append(Note("caution", "The tables hold no scatter."))
    return section("Scatter", "scatter", blocks)
