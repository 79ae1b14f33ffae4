"""Where everything came from: inputs by digest, versions, durations."""

from __future__ import annotations

from collections.abc import Mapping

from perdure.report.blocks import Block, Cell, Table, Text, columns
from perdure.report.results import ResultsFolder
from perdure.report.rounding import significant
from perdure.report.sections.sampling import shown
from perdure.report.sections.section import Section, section


def provenance(results: ResultsFolder) -> Section:
    """Inputs' hashes, versions and durations of ``run.json``."""
    run = results.run
    digest = results.fit.get("records sha256")
    blocks: list[Block] = []
    if digest:
        blocks.append(
            Text(f"Accepted records, SHA-256: {digest}. Every row of the result tables carries it; a page is refused where one does not.")
        )
    for key, caption, heads in (
        ("inputs", "Inputs of the run", ("File", "SHA-256")),
        ("versions", "Versions", ("Package", "Version")),
        ("durations", "Durations", ("Step", "Duration [s]")),
    ):
        values = run.get(key)
        if isinstance(values, Mapping) and values:
            number = ("Duration [s]",) if key == "durations" else ()
            body = tuple((Cell(str(name)), Cell(_text(value))) for name, value in values.items())
            blocks.append(Table(caption, columns(heads, number, ("SHA-256",)), body))
        else:
            blocks.append(Text(f"{caption}: not recorded."))
    return section("Provenance", "provenance", blocks)


def _text(value: object) -> str:
    return significant(value) if isinstance(value, float) else shown(value)
