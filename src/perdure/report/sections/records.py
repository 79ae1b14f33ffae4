"""Every record with its predictive bands and residuals."""

from __future__ import annotations

from collections.abc import Sequence

from perdure.report.blocks import Block, Key, Note, Panels, Table, Text, cells, columns
from perdure.report.display import symbol
from perdure.report.figures.records import record_panel
from perdure.report.results import ResultsFolder
from perdure.report.rounding import at_places, stated
from perdure.report.rows import Fitted
from perdure.report.sections.section import Section, section

_KEY = Key(
    (
        ("dot", "reading"),
        ("ring", "reading kept from the fit"),
        ("median", "predictive median"),
        ("inner", "50 % band"),
        ("outer", "90 % band"),
    )
)
_TITLES = (
    "Specimen", "Record", "Batch", "Method", "Instrument", "Largest strain", "Readings in the fit",
    "Inside the 50 % band", "Inside the 90 % band",
)  # fmt: skip


def records(results: ResultsFolder) -> Section:
    """Small multiples, one a record, and how many readings their bands hold."""
    groups = by_record(results.fitted)
    blocks: list[Block] = [
        Text(
            "Bands of single readings: instrument, mounting and reading errors are in them. The lower strip of each picture shows the "
            "standardised residual z over time, grey between \u22121.96 and 1.96, cut at \u00b13.5: a run on one side, or a slope, is a "
            "law that misses something. Compressive stress is drawn as magnitude."
        ),
        Note(
            "caution",
            "The fit has seen these readings. A good picture here is needed, but says little about later times or other parts.",
        ),
        _KEY,
    ]
    pictures = [
        record_panel(rows, results.display, key=f"record-{number}")
        for number, rows in enumerate(groups.values(), start=1)
        if _drawable(rows)
    ]
    blocks.append(Panels(tuple(pictures)))
    body = tuple(cells(*_summary(rows, results)) for rows in groups.values())
    blocks.append(Table("Readings inside their predictive bands", columns(_TITLES, _TITLES[5:]), body, headers=2))
    return section("Records with predictive bands", "records", blocks)


def by_record(fitted: Sequence[Fitted]) -> dict[str, list[Fitted]]:
    """Rows by record, records ordered by batch, specimen and name."""
    ordered = sorted(fitted, key=lambda row: (row.batch, row.specimen, row.record))
    groups: dict[str, list[Fitted]] = {}
    for row in ordered:
        groups.setdefault(row.record, []).append(row)
    return groups


def _drawable(rows: Sequence[Fitted]) -> bool:
    return any(row.time > 0 for row in rows)


def _summary(rows: Sequence[Fitted], results: ResultsFolder) -> tuple[str, ...]:
    first, seen = rows[0], [row for row in rows if not row.held_out]
    strains = [abs(row.strain) for row in rows if row.strain is not None]
    strain = f"{stated(round(results.display.strain(max(strains)), 6))} {symbol(results.display.units.strain)}".strip() if strains else ""
    inside50 = sum(row.low50 <= row.observed <= row.high50 for row in seen)
    inside90 = sum(row.low90 <= row.observed <= row.high90 for row in seen)
    shares = [f"{at_places(100 * inside / len(seen), 0)} %" if seen else "" for inside in (inside50, inside90)]
    return (first.specimen, first.record, first.batch, first.method, first.instrument, strain, str(len(seen)), *shares)
