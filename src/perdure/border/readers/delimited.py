"""Delimited text: one reading a line, headings above, cells between separators."""

from __future__ import annotations

import csv
import math
import re
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from pathlib import Path

import numpy as np

from perdure.border.instruments import Column, ReaderSettings
from perdure.border.readers.reader import RawReadings
from perdure.border.units import unit_conversion
from perdure.errors import Problem, StudyError, problem

SIZE_LIMIT = 256_000_000
# headings stand within the first lines of an export; beyond that a missing column would be searched for in readings
_HEADING_LINES = 500
# one wrong column shows in every row: the first few say it
_FAULTS_SHOWN = 5
_NUMBER = re.compile(r"[-+]?(\d+\.?\d*|\.\d+)([eE][-+]?\d+)?")


@dataclass(frozen=True, slots=True)
class Delimited:
    """Reader of delimited text."""

    name: str = "delimited"
    about: str = "Text with one reading a line: separator, decimal sign, encoding and headings as declared."

    def read(
        self,
        path: Path,
        label: str,
        columns: Mapping[str, Column],
        conditions: Sequence[tuple[str, str]],
        settings: ReaderSettings,
    ) -> RawReadings:
        """See :class:`perdure.border.readers.reader.Reader`. Blank cells become NaN; lines without any cell are passed over."""
        lines = _lines(path, label, settings)
        wanted = [column.heading for column in columns.values()] + [heading for heading, _ in conditions]
        header_row, header = _find_header(lines, wanted, label, settings)
        problems: list[Problem] = []
        first = header_row
        if settings.units_row:
            problems.extend(_unit_faults(lines, header_row, header, columns, label, settings))
            first += 1
        places = {key: header.index(column.heading) for key, column in columns.items()}
        tests = [(header.index(heading), value) for heading, value in conditions]
        values: dict[str, list[float]] = {key: [] for key in columns}
        rows: list[int] = []
        for row, line in enumerate(lines[first:], start=first + 1):
            cells = _cells(line, settings)
            if not any(cells):
                continue
            if len(cells) > len(header) and any(cells[len(header) :]):
                problems.append(
                    problem(
                        f"{label}, row {row}",
                        f"{len(cells)} cells",
                        f"at most {len(header)}, one a heading",
                        "Check separator and decimal sign of the instrument in study.yaml.",
                    )
                )
                continue
            cells += [""] * (len(header) - len(cells))
            if not all(_same(cells[place], value, settings.decimal) for place, value in tests):
                continue
            rows.append(row)
            for key, place in places.items():
                number = _number(cells[place], settings)
                if number is None:
                    heading = columns[key].heading
                    problems.append(_number_fault(f'{label}, row {row}, column "{heading}"', cells[place], settings))
                    number = math.nan
                values[key].append(number)
        if not rows and not problems:
            problems.append(_no_rows(label, conditions))
        if problems:
            raise StudyError(_shortened(problems, label))
        return RawReadings({key: np.array(column) for key, column in values.items()}, np.array(rows, dtype=np.int64))


DELIMITED = Delimited()


def _lines(path: Path, label: str, settings: ReaderSettings) -> list[str]:
    size = path.stat().st_size
    if size > SIZE_LIMIT:
        raise StudyError([problem(label, f"{size} bytes", f"at most {SIZE_LIMIT} bytes", "Export fewer readings a second.")])
    encoding = "utf-8-sig" if settings.encoding.lower().replace("_", "-") in ("utf-8", "utf8") else settings.encoding
    raw = path.read_bytes()
    try:
        text = raw.decode(encoding)
    except (UnicodeError, LookupError) as error:
        row = raw[: error.start].count(b"\n") + 1 if isinstance(error, UnicodeDecodeError) else 1
        raise StudyError(
            [
                problem(
                    f"{label}, row {row}",
                    f"bytes that are not {settings.encoding}",
                    f"text in {settings.encoding}",
                    "Declare the encoding of the instrument in study.yaml, as cp1252.",
                )
            ]
        ) from None
    if "\x00" in text:
        raise StudyError([problem(label, "binary content", "text", "Export as text, or declare the encoding (utf-16).")])
    # only the ends of lines that editors count, so that row numbers are theirs
    lines = text.replace("\r\n", "\n").replace("\r", "\n").split("\n")
    if settings.stop_at is not None:
        for index, line in enumerate(lines):
            if line.startswith(settings.stop_at):
                return lines[:index]
    return lines


def _cells(line: str, settings: ReaderSettings) -> list[str]:
    if settings.separator == "whitespace":
        return line.split()
    if '"' not in line:
        return [cell.strip() for cell in line.split(settings.separator)]
    return [cell.strip() for cell in next(csv.reader([line], delimiter=settings.separator), [])]


def _find_header(lines: list[str], wanted: list[str], label: str, settings: ReaderSettings) -> tuple[int, list[str]]:
    """Line number and cells of the first line that holds all ``wanted`` headings."""
    best: tuple[int, list[str]] = (0, [])
    best_count = 0
    for row, line in enumerate(lines[:_HEADING_LINES], start=1):
        cells = _cells(line, settings)
        count = sum(heading in cells for heading in set(wanted))
        if count == len(set(wanted)):
            twice = [heading for heading in dict.fromkeys(wanted) if cells.count(heading) > 1]
            if twice:
                raise StudyError(
                    [
                        problem(
                            f"{label}, row {row}", f'the heading "{heading}" more than once', "once", "Export it under another heading."
                        )
                        for heading in twice
                    ]
                )
            return row, cells
        if count > best_count:
            best, best_count = (row, cells), count
    if best_count == 0:
        raise StudyError(
            [
                problem(
                    label,
                    "no line with any of the declared headings",
                    f"headings {', '.join(dict.fromkeys(wanted))}",
                    "Check separator, encoding and column headings of the instrument in study.yaml.",
                )
            ]
        )
    shown = ", ".join(cell for cell in best[1] if cell)
    raise StudyError(
        [
            problem(
                f"{label}, row {best[0]}", f'no heading "{heading}" among {shown}', "every declared heading", "Write it as the export does."
            )
            for heading in dict.fromkeys(wanted)
            if heading not in best[1]
        ]
    )


def _unit_faults(
    lines: list[str], header_row: int, header: list[str], columns: Mapping[str, Column], label: str, settings: ReaderSettings
) -> list[Problem]:
    """Units below the headings that contradict those declared. A unit that can't be read is no fault."""
    if header_row >= len(lines):
        return []
    cells = _cells(lines[header_row], settings)
    problems = []
    for column in columns.values():
        place = header.index(column.heading)
        shown = cells[place].strip("[]() ") if place < len(cells) else ""
        if _NUMBER.fullmatch(shown.replace(settings.decimal, ".")) and shown != "1":
            problems.append(
                problem(
                    f'{label}, row {header_row + 1}, column "{column.heading}"',
                    f'"{shown}" in the units row',
                    "a unit",
                    "Declare units row: false for this instrument.",
                )
            )
            continue
        try:
            found = unit_conversion(shown, column.dimension)
        except StudyError:
            continue
        if found != unit_conversion(column.unit, column.dimension):
            problems.append(
                problem(
                    f'{label}, row {header_row + 1}, column "{column.heading}"',
                    f'the unit "{shown}"',
                    f'"{column.unit}", as study.yaml declares',
                    "Correct the unit in study.yaml, or export in that unit.",
                )
            )
    return problems


def _number(cell: str, settings: ReaderSettings) -> float | None:
    """The number in ``cell``; NaN where it is blank, None where it is no number."""
    if not cell or cell in settings.missing_marks:
        return math.nan
    if settings.decimal == ",":
        if "." in cell:
            return None
        cell = cell.replace(",", ".")
    if not _NUMBER.fullmatch(cell):
        return None
    number = float(cell)
    return number if math.isfinite(number) else None


def _number_fault(where: str, cell: str, settings: ReaderSettings) -> Problem:
    if settings.decimal == "." and "," in cell:
        remedy = 'Declare decimal: "," for this instrument, or export without digit grouping.'
    elif settings.decimal == "," and "." in cell:
        remedy = 'Declare decimal: "." for this instrument, or export without digit grouping.'
    else:
        remedy = "If the word stands for a missing reading, declare it in missing marks; if it ends the readings, in stop at."
    return problem(where, f'"{cell[:60]}"', f'a number with the decimal sign "{settings.decimal}", or an empty cell', remedy)


def _same(cell: str, value: str, decimal: str) -> bool:
    """Equal as text, or as numbers."""
    if cell == value:
        return True
    plain = cell.replace(",", ".") if decimal == "," else cell
    return bool(_NUMBER.fullmatch(plain) and _NUMBER.fullmatch(value) and float(plain) == float(value))


def _no_rows(label: str, conditions: Sequence[tuple[str, str]]) -> Problem:
    if not conditions:
        return problem(label, "no reading below the headings", "readings", "Export the readings with the headings.")
    shown = "; ".join(f"{heading}={value}" for heading, value in conditions)
    return problem(label, f"no row with {shown}", "rows that meet the conditions of the register", 'Correct the column "where".')


def _shortened(problems: list[Problem], label: str) -> list[Problem]:
    if len(problems) <= _FAULTS_SHOWN:
        return problems
    more = problem(label, f"{len(problems) - _FAULTS_SHOWN} further problems of this kind", "none", "Mend those above first.")
    return [*problems[:_FAULTS_SHOWN], more]
