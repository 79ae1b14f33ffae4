"""The hold-out: readings that the fit never saw against their predictive bands, as it is."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from perdure.report.blocks import Block, Key, Panels, Table, Text, cells, columns
from perdure.report.display import Display
from perdure.report.figures.records import holdout_panel
from perdure.report.results import ResultsFolder
from perdure.report.rounding import at_places, significant
from perdure.report.rows import HeldOut
from perdure.report.sections.section import Section, section

_KEY = Key(
    (
        ("dot", "reading in the fit"),
        ("inside", "held-out reading inside the 90 % band"),
        ("cross", "held-out reading outside"),
        ("inner", "50 % band"),
        ("outer", "90 % band"),
    )
)
_TITLES = ("Record", "Specimen", "Batch", "Readings held out", "Inside the 50 % band", "Inside the 90 % band", "Mean interval score, 90 %")


def holdout(results: ResultsFolder) -> Section | None:
    """Coverage and interval score over all held-out readings and per record; None where the study declares no hold-out."""
    rows = results.holdout
    if rows is None:
        return None
    groups: dict[str, list[HeldOut]] = {}
    for row in sorted(rows, key=lambda row: (row.batch, row.specimen, row.record)):
        groups.setdefault(row.record, []).append(row)
    used = {record: [row for row in results.fitted if row.record == record] for record in groups}
    pictures = [
        holdout_panel(mine, used[record], results.display, key=f"holdout-{number}")
        for number, (record, mine) in enumerate(groups.items(), start=1)
        if any(row.time > 0 for row in mine)
    ]
    summary = results.holdout_summary
    blocks: list[Block] = [
        Text(_lead(summary, rows, results.display)),
        Text(
            "Coverage below its nominal value says that the bands are too narrow, above it that they are too wide. The interval score adds "
            "to the width of the 90 % band a penalty for every reading outside; lower is better, in the unit of the readings."
        ),
        _KEY,
        Panels(tuple(pictures)),
        Table(
            "Hold-out per record",
            columns(_TITLES, _TITLES[3:]),
            tuple(cells(*_summary(record, mine, results.display)) for record, mine in groups.items()),
        ),
    ]
    return section("Hold-out", "holdout", blocks)


def _lead(summary: Mapping[str, Any], rows: Sequence[HeldOut], display: Display) -> str:
    """From the summary of the hold-out step, completed from the rows where it leaves something out."""
    number = int(summary.get("readings", len(rows)))
    if not number:
        return "The study declares a hold-out, but no reading was held out."
    cover50 = float(summary.get("coverage50", sum(row.inside50 for row in rows) / len(rows)))
    cover90 = float(summary.get("coverage90", sum(row.inside90 for row in rows) / len(rows)))
    score = summary.get("interval score 90")
    what = f"Held out: {summary['rows']}. " if summary.get("rows") else ""
    units = {row.unit for row in rows}
    scored = f", interval score {_score(float(score), units.pop(), display)}" if score is not None and len(units) == 1 else ""
    return f"{what}Of {number} readings the 50 % band holds {_percent(cover50)} and the 90 % band {_percent(cover90)}{scored}."


def _summary(record: str, rows: Sequence[HeldOut], display: Display) -> tuple[str, ...]:
    scores = [row.score for row in rows if row.score is not None]
    shares = (sum(row.inside50 for row in rows) / len(rows), sum(row.inside90 for row in rows) / len(rows))
    score = _score(sum(scores) / len(scores), rows[0].unit, display) if scores else ""
    return (record, rows[0].specimen, rows[0].batch, str(len(rows)), *(_percent(share) for share in shares), score)


def _score(value: float, unit: str, display: Display) -> str:
    return f"{significant(display.response(value, unit))} {display.response_unit(unit)}".strip()


def _percent(share: float) -> str:
    return f"{at_places(100 * share, 0)} %"
