"""Excluded data, missing readings and every conversion."""

from __future__ import annotations

from collections.abc import Sequence

from perdure.report.blocks import Block, Cell, Subhead, Table, Text, cells, columns
from perdure.report.results import ResultsFolder
from perdure.report.rows import Intake
from perdure.report.sections.section import Section, section
from perdure.report.words import count

_OUT = {"left out": "caution", "refused": "fail"}


def intake(results: ResultsFolder) -> Section:
    """What was left out or refused and why, what is missing, and how readings were converted."""
    rows = results.intake
    out = [row for row in rows if row.status in _OUT]
    accepted = [row for row in rows if row.status == "accepted"]
    files = [row for row in rows if row.status not in {*_OUT, "accepted"}]
    blocks: list[Block] = [
        Text(
            f"{count(len(accepted), 'record')} accepted, {sum(row.status == 'left out' for row in rows)} left out by the register, "
            f"{sum(row.status == 'refused' for row in rows)} refused. Long holds may be averaged in log time, so that fewer readings are "
            "used than were read; the noise model knows how many stand behind each."
        ),
        Subhead("Left out or refused"),
        _excluded(out) if out else Text("Nothing was left out or refused."),
        Subhead("Accepted records"),
        _accepted(accepted),
        _conversions(rows),
    ]
    if files:
        blocks += [Subhead("Other files of the study"), _files(files)]
    return section("Excluded data and conversions", "intake", blocks)


def _excluded(rows: Sequence[Intake]) -> Table:
    titles = ("Record", "Register row", "Specimen", "Batch", "File", "Status", "Reason")
    body = tuple(
        (
            Cell(row.record),
            Cell(row.row),
            Cell(row.specimen),
            Cell(row.batch),
            Cell(row.file),
            Cell(row.status, _OUT[row.status]),
            Cell(row.reason),
        )
        for row in rows
    )
    return Table("Records that the fit did not see", columns(titles, ("Register row",)), body)


def _accepted(rows: Sequence[Intake]) -> Table:
    titles = (
        "Record", "Register row", "Specimen", "Batch", "Method", "Instrument", "File", "Readings", "Missing", "Used", "SHA-256 begins",
    )  # fmt: skip
    body = tuple(
        cells(
            row.record,
            row.row,
            row.specimen,
            row.batch,
            row.method,
            row.instrument,
            row.file,
            _whole(row.readings),
            _whole(row.missing),
            _whole(row.used),
            row.digest[:12],
        )
        for row in rows
    )
    numbers = ("Register row", "Readings", "Missing", "Used")
    return Table("Readings of the accepted records, missing ones counted", columns(titles, numbers, ("SHA-256 begins",)), body)


def _conversions(rows: Sequence[Intake]) -> Table:
    """Every conversion once, with the records that it was made for."""
    made: dict[str, list[str]] = {}
    for row in rows:
        for step in filter(None, (part.strip() for part in row.conversions.split(";"))):
            made.setdefault(step, []).append(row.record)
    body = tuple(cells(step, ", ".join(dict.fromkeys(names))) for step, names in made.items())
    return Table("Conversions", columns(("Conversion", "Records")), body, headers=0)


def _files(rows: Sequence[Intake]) -> Table:
    titles = ("File", "Status", "Reason", "Conversions", "SHA-256 begins")
    body = tuple(tuple(Cell(text) for text in (row.file, row.status, row.reason, row.conversions, row.digest[:12])) for row in rows)
    return Table("Files without an accepted record", columns(titles, (), ("SHA-256 begins",)), body)


def _whole(number: float | None) -> str:
    return "" if number is None else f"{number:.0f}"
