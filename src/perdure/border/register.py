"""The register of records: ``register.csv``, one row a record."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from pathlib import Path
from types import MappingProxyType

from perdure.border.csv_file import CsvFile, read_csv, split_heading
from perdure.border.model_problems import did_you_mean
from perdure.border.units import Dimension, parse_quantity, unit_conversion
from perdure.errors import Problem, StudyError, problem
from perdure.study.methods import METHODS
from perdure.study.records import SENSES, Uncertainty

REGISTER = "register.csv"


@dataclass(frozen=True, slots=True)
class RegisterColumn:
    """A column of the register.

    Attributes:
        heading: the word in the heading, without its unit.
        about: for the manual.
        dimension: what its numbers measure; None for text.
        required: True where the column must be there.
    """

    heading: str
    about: str
    dimension: Dimension | None = None
    required: bool = False


_COLUMNS = (
    RegisterColumn("record", "Name of the test run, unique.", required=True),
    RegisterColumn("specimen", "Name of the specimen; it belongs to one batch.", required=True),
    RegisterColumn("batch", "Name of the production batch.", required=True),
    RegisterColumn("method", f"Kind of test: {', '.join(METHODS)}.", required=True),
    RegisterColumn("instrument", "An instrument of study.yaml.", required=True),
    RegisterColumn("file", "The export, a path inside records/.", required=True),
    RegisterColumn("where", "Which rows of a shared file: unit=3, or several conditions as unit=3; temperature_C=65. Empty: all rows."),
    RegisterColumn("sense", f"{', '.join(SENSES)}.", required=True),
    RegisterColumn("temperature", "Temperature of the test.", Dimension.TEMPERATURE, required=True),
    RegisterColumn("area", "Initial loaded area; needed where the export holds a force.", Dimension.AREA),
    RegisterColumn("length", "Initial gauge length or height; needed where the export holds a displacement.", Dimension.LENGTH),
    RegisterColumn("state", "State of the specimen in your words: virgin, conditioned, dry, aged ….", required=True),
    RegisterColumn("use", "yes, or no with a reason.", required=True),
    RegisterColumn("from", "Readings before this time of the export are not fitted.", Dimension.TIME),
    RegisterColumn("until", "Readings after this time of the export are not fitted.", Dimension.TIME),
    RegisterColumn("reason", "Why the record is left out, or anything worth knowing."),
    RegisterColumn(
        "shape factor",
        "Bonded rubber pads: one loaded area by the force-free area, S. The stress is divided by 1 + 2 S² (Gent and Lindley, from memory).",
        Dimension.RATIO,
    ),
    RegisterColumn("zero", "Force that the export shows at no load; it is subtracted.", Dimension.FORCE),
    RegisterColumn(
        "preload",
        "Force at which the strain zero was set: time and strain start at the first reading at or above it, earlier ones are dropped.",
        Dimension.FORCE,
    ),
    RegisterColumn(
        "ramp",
        "Records that start after the ramp: its duration. The times of the export then count from the start of the ramp.",
        Dimension.TIME,
    ),
    RegisterColumn("strain", "Records that start after the ramp and have no strain column: the strain held.", Dimension.RATIO),
    RegisterColumn("reference", "Normalised responses: the time whose stress counts as 1, from the start of the record.", Dimension.TIME),
    RegisterColumn("area uncertainty", "Relative standard uncertainty of the area, one value a specimen.", Dimension.RATIO),
    RegisterColumn("length uncertainty", "Relative standard uncertainty of the length, one value a specimen.", Dimension.RATIO),
    RegisterColumn("mounting uncertainty", "Relative standard uncertainty of the response through mounting.", Dimension.RATIO),
    RegisterColumn("reference uncertainty", "Relative standard uncertainty of the reference reading.", Dimension.RATIO),
)
COLUMNS: Mapping[str, RegisterColumn] = MappingProxyType({column.heading: column for column in _COLUMNS})

_MAY_BE_NEGATIVE = ("zero", "strain", "from", "until")
_MAY_BE_ZERO = ("area uncertainty", "length uncertainty", "mounting uncertainty", "reference uncertainty", "preload", "shape factor")


@dataclass(frozen=True, slots=True)
class RegisterRow:
    """One row in internal units (mm, mm², N, s, K, ratios); None where the cell is empty.

    Attributes:
        row: line of the register, 1 = first.
        where: (column, value) conditions that select rows of the file.
        file: path inside ``records/``, with forward slashes.
        use: False where the user leaves the record out.
    """

    row: int
    record: str
    specimen: str
    batch: str
    method: str
    instrument: str
    file: str
    where: tuple[tuple[str, str], ...]
    sense: str
    temperature: float
    area: float | None
    length: float | None
    state: str
    use: bool
    start: float | None
    until: float | None
    reason: str
    shape_factor: float | None
    zero: float | None
    preload: float | None
    ramp: float | None
    strain: float | None
    reference: float | None
    uncertainty: Uncertainty

    def place(self, column: str) -> str:
        """For messages: file, row and column."""
        return f'{REGISTER}, row {self.row}, column "{column}"'


def _headings(table: CsvFile) -> tuple[dict[str, tuple[int, str]], list[Problem]]:
    """Position and unit of every known column."""
    found: dict[str, tuple[int, str]] = {}
    problems: list[Problem] = []
    for index, heading in enumerate(table.header):
        word, unit = split_heading(heading)
        place = f'{REGISTER}, row {table.header_row}, column "{heading}"'
        column = COLUMNS.get(word)
        if column is None:
            problems.append(problem(place, f'the heading "{heading}"', "a known heading", did_you_mean(word, list(COLUMNS))))
            continue
        if word in found:
            problems.append(problem(place, f'the heading "{word}" a second time', "every heading once", "Remove one of the columns."))
            continue
        if column.dimension is None and unit:
            problems.append(problem(place, f"the unit [{unit}]", "no unit: the column holds text", "Remove the brackets."))
        elif column.dimension is not None:
            try:
                unit_conversion(unit or ("1" if column.dimension is Dimension.RATIO else "none"), column.dimension, place)
            except StudyError as error:
                problems.extend(error.problems)
                unit = ""
        found[word] = (index, unit)
    for word, column in COLUMNS.items():
        if column.required and word not in found:
            problems.append(problem(f"{REGISTER}, row {table.header_row}", f'no column "{word}"', "that column", f"Add it: {column.about}"))
    return found, problems


class _Cells:
    """The cells of one row, read by heading; collects problems."""

    def __init__(self, row: int, cells: tuple[str, ...], headings: Mapping[str, tuple[int, str]]) -> None:
        self.row, self._cells, self._headings = row, cells, headings
        self.problems: list[Problem] = []

    def place(self, column: str) -> str:
        return f'{REGISTER}, row {self.row}, column "{column}"'

    def text(self, column: str) -> str:
        return self._cells[self._headings[column][0]] if column in self._headings else ""

    def refuse(self, column: str, got: str, expected: str, remedy: str) -> None:
        self.problems.append(problem(self.place(column), got, expected, remedy))

    def word(self, column: str) -> str:
        text = self.text(column)
        if not text and column in self._headings:
            self.refuse(column, "an empty cell", f"a {column}", f"Fill it in: {COLUMNS[column].about}")
        elif len(text) > 200 or not text.isprintable():
            self.refuse(column, "a text that is too long or not printable", "at most 200 printable characters", "Shorten it.")
        return text

    def choice(self, column: str, known: list[str]) -> str:
        text = self.word(column)
        if text and text not in known:
            self.refuse(
                column, f'"{text}"', f"one of {', '.join(known) or 'the instruments that study.yaml declares'}", did_you_mean(text, known)
            )
        return text

    def number(self, column: str) -> float | None:
        text, dimension = self.text(column), COLUMNS[column].dimension
        if not text or dimension is None:
            if column in self._headings and COLUMNS[column].required:
                self.refuse(column, "an empty cell", "a number", f"Fill it in: {COLUMNS[column].about}")
            return None
        unit = self._headings[column][1]
        if not unit and dimension is not Dimension.RATIO:
            return None  # the heading is already refused
        try:
            plain = float(text)
        except ValueError:
            hint = " Use a decimal point." if "," in text else ""
            self.refuse(column, f'"{text}"', "a number; its unit stands in the heading", f"Write the number alone.{hint}")
            return None
        try:
            value = parse_quantity(f"{plain!r} {unit}", dimension, self.place(column))
        except StudyError as error:
            self.problems.extend(error.problems)
            return None
        lowest_ok = value >= 0 if column in _MAY_BE_ZERO else value > 0
        if column not in _MAY_BE_NEGATIVE and not lowest_ok:
            expected = "zero or more" if column in _MAY_BE_ZERO else "a value above zero"
            self.refuse(column, f'"{text}"', expected, "Correct the value.")
            return None
        return value


def _conditions(cells: _Cells) -> tuple[tuple[str, str], ...]:
    text = cells.text("where")
    conditions: list[tuple[str, str]] = []
    for part in filter(None, (piece.strip() for piece in text.split(";"))):
        column, sign, value = (piece.strip() for piece in part.partition("="))
        if not (column and sign and value):
            cells.refuse("where", f'"{part}"', "column=value", "Write conditions as unit=3; temperature_C=65.")
        else:
            conditions.append((column, value))
    return tuple(conditions)


def _row(cells: _Cells, instruments: list[str]) -> RegisterRow:
    use = cells.text("use").lower()
    if use not in ("yes", "no"):
        cells.refuse("use", f'"{cells.text("use")}"', "yes or no", "Write yes, or no with a reason.")
    reason = cells.text("reason")
    if use == "no" and not reason:
        cells.refuse("reason", "an empty cell", "the reason for leaving the record out", "Say why; the report shows it.")
    start, until = cells.number("from"), cells.number("until")
    if start is not None and until is not None and until <= start:
        cells.refuse("until", f'"{cells.text("until")}"', "later than from", "Exchange or correct the two.")
    shares = {key: cells.number(f"{key} uncertainty") or 0.0 for key in ("area", "length", "mounting", "reference")}
    for key, share in shares.items():
        if share > 0.5:
            cells.refuse(f"{key} uncertainty", f"{share:.0%}", "at most 50 %", "Check the unit in the heading.")
    file = cells.word("file").replace("\\", "/").removeprefix("records/")
    return RegisterRow(
        row=cells.row,
        record=cells.word("record"),
        specimen=cells.word("specimen"),
        batch=cells.word("batch"),
        method=cells.choice("method", list(METHODS)),
        instrument=cells.choice("instrument", instruments),
        file=file,
        where=_conditions(cells),
        sense=cells.choice("sense", list(SENSES)),
        temperature=cells.number("temperature") or 0.0,
        area=cells.number("area"),
        length=cells.number("length"),
        state=cells.word("state"),
        use=use == "yes",
        start=start,
        until=until,
        reason=reason,
        shape_factor=cells.number("shape factor"),
        zero=cells.number("zero"),
        preload=cells.number("preload"),
        ramp=cells.number("ramp"),
        strain=cells.number("strain"),
        reference=cells.number("reference"),
        uncertainty=Uncertainty(**shares),
    )


def _between_rows(rows: list[RegisterRow]) -> list[tuple[RegisterRow, Problem]]:
    """Rows that contradict an earlier one."""
    found: list[tuple[RegisterRow, Problem]] = []
    first_record: dict[str, RegisterRow] = {}
    first_specimen: dict[str, RegisterRow] = {}
    for row in rows:
        same_name = first_record.setdefault(row.record, row)
        if same_name is not row and row.record:
            got = f'"{row.record}" again (first in row {same_name.row})'
            found.append((row, problem(row.place("record"), got, "a name of its own", "Rename one of the two.")))
        other = first_specimen.setdefault(row.specimen, row)
        if other is row or not row.specimen:
            continue
        if row.batch != other.batch:
            got = f'specimen "{row.specimen}" in batch "{row.batch}", in row {other.row} in batch "{other.batch}"'
            remedy = "Correct the batch, or give the specimens different names."
            found.append((row, problem(row.place("batch"), got, "one batch a specimen", remedy)))
        for key in ("area", "length"):
            here, there = getattr(row.uncertainty, key), getattr(other.uncertainty, key)
            if here != there:
                got = f'{here:g} for specimen "{row.specimen}", in row {other.row} {there:g}'
                remedy = "Write the same value in all its rows."
                where = row.place(f"{key} uncertainty")
                found.append((row, problem(where, got, "one value a specimen: it is the same piece", remedy)))
    return found


def _file_fault(row: RegisterRow, root: Path) -> Problem | None:
    """Why the file of ``row`` can't be used; only files inside ``records/`` are read, links out of it are not followed.

    A record that is left out may lack its file.
    """
    path = (root / row.file).resolve()
    remedy = "Copy the export into records/ and name it from there."
    if Path(row.file).is_absolute() or ".." in Path(row.file).parts or not path.is_relative_to(root.resolve()):
        return problem(row.place("file"), f'"{row.file}"', "a path inside records/", remedy)
    if row.use and not path.is_file():
        return problem(row.place("file"), f'"{row.file}", which is not there', "a file inside records/", remedy)
    return None


@dataclass(frozen=True, slots=True)
class Register:
    """What could be read of the register.

    Attributes:
        rows: rows that can be used or are left out.
        refused: rows that can't be used as they are, with the reason.
        problems: everything that is wrong.
    """

    rows: tuple[RegisterRow, ...]
    refused: tuple[tuple[RegisterRow, str], ...]
    problems: tuple[Problem, ...]


def read_register(folder: Path, instruments: list[str]) -> Register:
    """The register of the study in ``folder``, whose ``study.yaml`` declares ``instruments``; problems are returned, not raised."""
    try:
        table = read_csv(folder / REGISTER, REGISTER)
    except StudyError as error:
        return Register((), (), error.problems)
    headings, problems = _headings(table)
    rows: list[RegisterRow] = []
    faulty: dict[int, str] = {}
    for line, texts in table.rows:
        cells = _Cells(line, texts, headings)
        row = _row(cells, instruments)
        if row.file:
            fault = _file_fault(row, folder / "records")
            cells.problems.extend([fault] if fault is not None else [])
        problems.extend(cells.problems)
        rows.append(row)
        if cells.problems:
            faulty[line] = "; ".join(f"{item.got} ({item.where})" for item in cells.problems)
    if not table.rows:
        problems.append(problem(REGISTER, "no row", "a row for each record", "Add the records."))
    elif not any(row.use for row in rows):
        problems.append(problem(REGISTER, "use is no in every row", "at least one record in use", "Write yes where the record counts."))
    for row, fault in _between_rows(rows):
        problems.append(fault)
        faulty.setdefault(row.row, f"{fault.got} ({fault.where})")
    if any(column.required and word not in headings for word, column in COLUMNS.items()):
        faulty = {row.row: faulty.get(row.row, "a column of the register is missing") for row in rows}
    return Register(
        tuple(row for row in rows if row.row not in faulty),
        tuple((row, faulty[row.row]) for row in rows if row.row in faulty),
        tuple(problems),
    )
