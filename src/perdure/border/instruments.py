"""Instruments as ``study.yaml`` declares them."""

from __future__ import annotations

from collections.abc import Mapping
from dataclasses import dataclass
from types import MappingProxyType
from typing import Literal

from perdure.border.study_models import ColumnSection, InstrumentSection, NoiseRangeSection
from perdure.border.units import Dimension, parse_quantity, unit_conversion
from perdure.border.yaml_file import YamlFile
from perdure.errors import Problem, StudyError, problem

ColumnKey = Literal["time", "force", "stress", "ratio", "percent lost", "strain", "displacement"]

COLUMN_DIMENSIONS: Mapping[str, Dimension] = MappingProxyType(
    {
        "time": Dimension.TIME,
        "force": Dimension.FORCE,
        "stress": Dimension.STRESS,
        "ratio": Dimension.RATIO,
        "percent lost": Dimension.RATIO,
        "strain": Dimension.RATIO,
        "displacement": Dimension.LENGTH,
    }
)
OBSERVED = ("force", "stress", "ratio", "percent lost")
NORMALISED = ("ratio", "percent lost")


@dataclass(frozen=True, slots=True)
class ReaderSettings:
    """How the text of an export is to be read.

    Attributes:
        encoding: as Python names it; "utf-8" also takes a byte order mark.
        separator: one character, or "whitespace".
        decimal: "." or ",".
        units_row: True where the line below the headings holds units.
        missing_marks: words that stand for a missing reading besides an empty cell.
        stop_at: reading ends before the first line that starts with this; None for no such line.
    """

    encoding: str = "utf-8"
    separator: str = ","
    decimal: str = "."
    units_row: bool = False
    missing_marks: tuple[str, ...] = ()
    stop_at: str | None = None


@dataclass(frozen=True, slots=True)
class Column:
    """One column of an export: its heading, its unit, and what it measures."""

    heading: str
    unit: str
    dimension: Dimension


@dataclass(frozen=True, slots=True)
class NoiseRange:
    """Range of a standard deviation in internal units of ``dimension`` (stress, force or ratio)."""

    low: float
    high: float
    dimension: Dimension


@dataclass(frozen=True, slots=True, eq=False)
class InstrumentDeclaration:
    """An instrument as declared.

    Attributes:
        name: key in ``study.yaml``.
        reader: key in ``perdure.border.readers.READERS``.
        settings: for the reader.
        columns: by our word for what the column holds.
        crosshead: True where the frame's compliance is to be subtracted.
        frame_compliance, u_frame_compliance: mm/N and its standard uncertainty; 0 without a crosshead.
        u_force, u_strain: relative standard uncertainties.
        u_temperature: K.
        noise_absolute, noise_relative: None where the handbook gives the range.
    """

    name: str
    reader: str
    settings: ReaderSettings
    columns: Mapping[str, Column]
    crosshead: bool
    frame_compliance: float
    u_frame_compliance: float
    u_force: float
    u_strain: float
    u_temperature: float
    noise_absolute: NoiseRange | None
    noise_relative: NoiseRange | None

    @property
    def observed(self) -> str:
        """Which of :data:`OBSERVED` the export holds."""
        return next(key for key in OBSERVED if key in self.columns)

    @property
    def normalised(self) -> bool:
        """True where the export holds a ratio or a share lost."""
        return self.observed in NORMALISED


def _columns(section: InstrumentSection, name: str, file: YamlFile) -> tuple[dict[str, Column], list[Problem]]:
    columns: dict[str, Column] = {}
    problems: list[Problem] = []
    headings: dict[str, str] = {}
    for key, dimension in COLUMN_DIMENSIONS.items():
        declared: ColumnSection | None = getattr(section.columns, key.replace(" ", "_"))
        if declared is None:
            continue
        where = file.where(("instruments", name, "columns", key, "unit"))
        try:
            unit_conversion(declared.unit, dimension, where)
        except StudyError as error:
            problems.extend(error.problems)
        if declared.column in headings:
            problems.append(
                problem(
                    file.where(("instruments", name, "columns", key, "column")),
                    f'the column "{declared.column}" for {headings[declared.column]} and {key}',
                    "a column of its own for each",
                    "Correct one of the two headings.",
                )
            )
        headings[declared.column] = key
        columns[key] = Column(declared.column, declared.unit, dimension)
    return columns, problems


def _noise(section: NoiseRangeSection | None, dimensions: tuple[Dimension, ...], where: str) -> tuple[NoiseRange | None, list[Problem]]:
    if section is None:
        return None, []
    for dimension in dimensions:
        try:
            low, high = (parse_quantity(text, dimension, where) for text in (section.low, section.high))
        except StudyError:
            continue
        if 0 < low < high:
            return NoiseRange(low, high, dimension), []
        return None, [problem(where, f"{section.low} to {section.high}", "0 < low < high", "Give the range of the standard deviation.")]
    expected = " or ".join(f"two numbers with a unit of {dimension.value}" for dimension in dimensions)
    return None, [problem(where, f"{section.low} to {section.high}", expected, "Write low and high with their units.")]


def declare(section: InstrumentSection, name: str, file: YamlFile, readers: tuple[str, ...]) -> tuple[InstrumentDeclaration, list[Problem]]:
    """The declaration of instrument ``name``, and everything that is wrong with it. ``readers`` are the known ones."""
    columns, problems = _columns(section, name, file)
    if section.reader not in readers:
        where = file.where(("instruments", name, "reader"))
        problems.append(problem(where, f'the reader "{section.reader}"', f"one of {', '.join(readers)}", "Name a reader that exists."))
    try:
        "".encode(section.encoding)
    except (LookupError, UnicodeError):
        where = file.where(("instruments", name, "encoding"))
        problems.append(problem(where, f'"{section.encoding}"', "a known encoding", "Write utf-8, cp1252 or utf-16."))
    observed = next((key for key in OBSERVED if key in columns), "stress")
    bases = {
        "force": (Dimension.STRESS, Dimension.FORCE),
        "stress": (Dimension.STRESS,),
        "ratio": (Dimension.RATIO,),
        "percent lost": (Dimension.RATIO,),
    }[observed]
    absolute, faults = _noise(section.noise.absolute, bases, file.where(("instruments", name, "noise", "absolute")))
    problems.extend(faults)
    relative, faults = _noise(section.noise.relative, (Dimension.RATIO,), file.where(("instruments", name, "noise", "relative")))
    problems.extend(faults)
    source = section.strain_source
    crosshead = source is not None and source.kind == "crosshead"
    compliance = source.frame_compliance if source is not None and crosshead else None
    u_compliance = source.standard_uncertainty if source is not None and crosshead else None
    separator = "\t" if section.separator == "tab" else section.separator
    declaration = InstrumentDeclaration(
        name=name,
        reader=section.reader,
        settings=ReaderSettings(section.encoding, separator, section.decimal, section.units_row, section.missing_marks, section.stop_at),
        columns=MappingProxyType(columns),
        crosshead=crosshead,
        frame_compliance=compliance or 0.0,
        u_frame_compliance=u_compliance or 0.0,
        u_force=section.standard_uncertainties.force,
        u_strain=section.standard_uncertainties.strain,
        u_temperature=section.standard_uncertainties.temperature,
        noise_absolute=absolute,
        noise_relative=relative,
    )
    return declaration, problems
