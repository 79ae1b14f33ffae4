"""CSV files that the user writes by hand: the register and service histories. Comma, UTF-8, one line a row."""

from __future__ import annotations

import csv
import io
import re
from dataclasses import dataclass
from pathlib import Path

from perdure.errors import StudyError, problem

SIZE_LIMIT = 10_000_000
# a heading is a few words: the pattern must not chew on anything longer
_HEADING_LENGTH = 200
_HEADING = re.compile(r"\s*([^\[\]]*?)\s*(?:\[\s*([^\[\]]*?)\s*\])?\s*")


@dataclass(frozen=True, slots=True)
class CsvFile:
    """Cells without surrounding blanks.

    Attributes:
        header: headings.
        header_row: line of the headings, 1 = first.
        rows: (line, cells) of every row that isn't empty; as many cells as headings.
    """

    header: tuple[str, ...]
    header_row: int
    rows: tuple[tuple[int, tuple[str, ...]], ...]


def split_heading(heading: str) -> tuple[str, str]:
    """``"time [h]"`` as ("time", "h"); no unit is "". A heading in another form is returned whole."""
    match = _HEADING.fullmatch(heading) if len(heading) <= _HEADING_LENGTH else None
    return (match[1].lower(), match[2] or "") if match is not None else (heading, "")


def _text(path: Path, name: str) -> str:
    if not path.is_file():
        raise StudyError([problem(name, "no such file", "a CSV file with headings", f"Write {name}.")])
    raw = path.read_bytes()
    if len(raw) > SIZE_LIMIT:
        raise StudyError([problem(name, f"{len(raw)} bytes", f"at most {SIZE_LIMIT} bytes", "Keep readings in records/.")])
    try:
        text = raw.decode("utf-8-sig")
    except UnicodeDecodeError as error:
        line = raw[: error.start].count(b"\n") + 1
        raise StudyError([problem(f"{name}, row {line}", "bytes that are not UTF-8", "UTF-8 text", "Save the file as UTF-8.")]) from None
    return text


def read_csv(path: Path, name: str) -> CsvFile:
    """Read ``path``, called ``name`` in messages.

    Raises:
        StudyError: missing, too large, not UTF-8, empty, or rows of another width than the headings.
    """
    text = _text(path, name)
    header: tuple[str, ...] | None = None
    header_row = 1
    rows = []
    problems = []
    reader = csv.reader(io.StringIO(text, newline=""))
    while True:
        line = reader.line_num + 1
        try:
            raw_cells = next(reader)
        except StopIteration:
            break
        except csv.Error as error:
            problems.append(problem(f"{name}, row {line}", str(error), "cells separated by commas", "Write the row anew."))
            continue
        cells = tuple(cell.strip() for cell in raw_cells)
        if not any(cells):
            continue
        if header is None:
            header, header_row = cells, line
            if len(cells) == 1 and ";" in cells[0]:
                problems.append(problem(f"{name}, row {line}", "semicolons", "commas between cells", "Save it with commas."))
        elif len(cells) != len(header):
            problems.append(
                problem(
                    f"{name}, row {line}",
                    f"{len(cells)} cells",
                    f"{len(header)} cells, one a heading",
                    "Add or remove commas; put text that holds a comma in double quotes.",
                )
            )
        else:
            rows.append((line, cells))
    if header is None:
        problems.append(problem(name, "an empty file", "a row of headings", "Write the headings and a row for each entry."))
    if problems or header is None:
        raise StudyError(problems)
    return CsvFile(header, header_row, tuple(rows))
