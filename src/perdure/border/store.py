"""Files of results: atomic, plain, and the same bytes for the same content."""

from __future__ import annotations

import csv
import hashlib
import json
import math
import os
import tempfile
from collections.abc import Iterable, Iterator, Sequence
from contextlib import contextmanager
from dataclasses import asdict, fields
from pathlib import Path
from typing import Any

import numpy as np

from perdure.border.record_file import read_records_from, write_records_to
from perdure.errors import ResultError, problem
from perdure.study.finding import OUTCOMES, Finding
from perdure.study.records import RecordSet

# spreadsheets run a cell that starts with one of these as a formula
_FORMULA_SIGNS = ("=", "+", "-", "@", "\t", "\r")


@contextmanager
def atomic_path(path: Path) -> Iterator[Path]:
    """A temporary path in the folder of ``path`` that takes its place when the block ends well, and vanishes when it doesn't."""
    path.parent.mkdir(parents=True, exist_ok=True)
    handle, name = tempfile.mkstemp(dir=path.parent, prefix=f".{path.stem}.", suffix=path.suffix)
    os.close(handle)
    temporary = Path(name)
    try:
        yield temporary
        # mkstemp makes a file for its owner only; results are as readable as any other file
        umask = os.umask(0)
        os.umask(umask)
        temporary.chmod(0o666 & ~umask)
        temporary.replace(path)
    finally:
        temporary.unlink(missing_ok=True)


def sha256_of(path: Path) -> str:
    """SHA-256 of the file's bytes, in hexadecimal.

    Raises:
        ResultError: the file can't be read.
    """
    try:
        with path.open("rb") as file:
            return hashlib.file_digest(file, "sha256").hexdigest()
    except OSError as error:
        raise ResultError([problem(path.name, error.strerror or "an unreadable file", "a readable file", "Restore it.")]) from None


def write_records(path: Path, records: RecordSet) -> None:
    """Write all records to netCDF; see :mod:`perdure.border.record_file` for the layout."""
    with atomic_path(path) as temporary:
        write_records_to(temporary, records)


def read_records(path: Path) -> RecordSet:
    """Read what :func:`write_records` wrote, bit for bit.

    Raises:
        ResultError: missing, damaged or of another layout.
    """
    return read_records_from(path)


def _cell(value: object) -> str:
    """Text of one cell: numbers with ten significant digits, nothing for None and NaN, no formulas."""
    if value is None:
        return ""
    if isinstance(value, bool | np.bool_):
        return "yes" if value else "no"
    if isinstance(value, int | np.integer):
        return str(int(value))
    if isinstance(value, float | np.floating):
        number = float(value)
        if math.isnan(number):
            return ""
        return f"{number + 0.0:.10g}"
    text = str(value)
    return f"'{text}" if text.startswith(_FORMULA_SIGNS) else text


def write_table(path: Path, columns: Sequence[str], rows: Iterable[Sequence[object]]) -> None:
    """Write a CSV: UTF-8, comma, ``columns`` as headings; a row has one entry a column.

    Numbers get ten significant digits, None and NaN an empty cell, booleans yes and no; text that a spreadsheet would
    run as a formula gets a leading apostrophe.

    Raises:
        ResultError: a row of another width.
    """
    with atomic_path(path) as temporary, temporary.open("w", encoding="utf-8", newline="") as file:
        writer = csv.writer(file, lineterminator="\n")
        writer.writerow([_cell(column) for column in columns])
        for index, row in enumerate(rows, start=1):
            if len(row) != len(columns):
                raise ResultError(
                    [problem(f"{path.name}, row {index}", f"{len(row)} entries", f"{len(columns)}, one a column", "Mend the step.")]
                )
            writer.writerow([_cell(value) for value in row])


def read_table(path: Path) -> list[dict[str, str]]:
    """Rows of a CSV that :func:`write_table` wrote, by heading, as text; the apostrophe before formula signs is taken off.

    Raises:
        ResultError: missing, not UTF-8, or rows of another width than the headings.
    """
    try:
        with path.open(encoding="utf-8", newline="") as file:
            lines = list(csv.reader(file))
    except (OSError, UnicodeDecodeError, csv.Error) as error:
        raise ResultError([problem(path.name, str(error), "a table of results", "Run the study again.")]) from None
    if not lines:
        raise ResultError([problem(path.name, "an empty file", "a row of headings", "Run the study again.")])
    header, *rows = lines
    faulty = [index for index, row in enumerate(rows, start=2) if len(row) != len(header)]
    if faulty:
        raise ResultError([problem(f"{path.name}, row {faulty[0]}", "another number of cells", f"{len(header)}", "Run the study again.")])
    return [dict(zip(header, map(_plain, row), strict=True)) for row in rows]


def _plain(text: str) -> str:
    return text[1:] if text.startswith("'") and text[1:].startswith(_FORMULA_SIGNS) else text


def write_json(path: Path, content: object) -> None:
    """Write JSON with sorted keys; arrays become lists, numbers that are not finite become null."""
    text = json.dumps(_jsonable(content), indent=1, sort_keys=True, ensure_ascii=False, allow_nan=False)
    with atomic_path(path) as temporary:
        temporary.write_text(text + "\n", encoding="utf-8")


def _jsonable(value: object) -> object:
    if isinstance(value, np.ndarray):
        return _jsonable(value.tolist())
    if isinstance(value, np.generic):
        return _jsonable(value.item())
    if isinstance(value, float):
        return value if math.isfinite(value) else None
    if isinstance(value, dict):
        return {str(key): _jsonable(item) for key, item in value.items()}
    if isinstance(value, list | tuple):
        return [_jsonable(item) for item in value]
    return value


def read_json(path: Path) -> Any:
    """Content of a JSON file.

    Raises:
        ResultError: missing or damaged.
    """
    try:
        return json.loads(path.read_text(encoding="utf-8"))
    except (OSError, ValueError) as error:
        raise ResultError([problem(path.name, str(error), "a JSON file of results", "Run the study again.")]) from None


def write_findings(path: Path, findings: Iterable[Finding]) -> None:
    """Write findings as a JSON list."""
    write_json(path, [finding_to_json(finding) for finding in findings])


def read_findings(path: Path) -> tuple[Finding, ...]:
    """Findings that :func:`write_findings` wrote, or that stand under "findings" of a JSON mapping.

    Raises:
        ResultError: missing, damaged or no findings.
    """
    content = read_json(path)
    entries = content.get("findings") if isinstance(content, dict) else content
    if not isinstance(entries, list):
        raise ResultError([problem(path.name, "no list of findings", "a list of findings", "Run the study again.")])
    return tuple(finding_from_json(entry, path.name) for entry in entries)


def finding_to_json(finding: Finding) -> dict[str, object]:
    """The fields of a finding."""
    return asdict(finding)


def finding_from_json(entry: object, where: str) -> Finding:
    """A finding from its fields.

    Raises:
        ResultError: other fields, or an unknown outcome.
    """
    names = {field.name for field in fields(Finding)}
    if not isinstance(entry, dict) or set(entry) != names or entry["outcome"] not in OUTCOMES:
        raise ResultError([problem(where, "an entry that is no finding", f"the fields {', '.join(sorted(names))}", "Run the study again.")])
    return Finding(**entry)
